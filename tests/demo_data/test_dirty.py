"""The dirty edition has exactly the faults its truth file counts, and the same rows in every form."""

from __future__ import annotations

import csv
import json
from collections import Counter
from datetime import datetime, timedelta
from itertools import pairwise
from pathlib import Path
from typing import TYPE_CHECKING

import openpyxl
import pytest

from demo_data import dirty

if TYPE_CHECKING:
    from collections.abc import Callable

DEMO = Path(__file__).parents[2] / "demo_data"
EXTRACT_END = datetime(2025, 4, 1)  # noqa: DTZ001 - the hospital's own clock

# How many rows carry each fault in the order for the dirty edition.
ORDERED = {
    "no end: left in the last four days, not entered yet": 20,
    "no end: forgotten, the patient's next stay follows": 25,
    "no end: forgotten, long ago and no later stay": 15,
    "ends before it starts: day and month of the end swapped": 15,
    "ends before it starts: no swap mends it": 10,
    "exact duplicate": 180,
    "sent again later with another end": 40,
    "overlaps the patient's next stay": 30,
    "dates as a spreadsheet's day numbers": 12,
    "virtual ward": 400,
    "well-baby cot": 900,
    "regular day attender": 1500,
}

Row = dict[str, str]


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder with the dirty edition, without its Excel copy."""
    folder = tmp_path_factory.mktemp("dirty")
    dirty.write_dirty(folder, workbook=False)
    return folder


@pytest.fixture(scope="module")
def truth(folder: Path) -> dict:
    """The truth file."""
    return json.loads((folder / "dirty_truth.json").read_text(encoding="utf-8"))


@pytest.fixture(scope="module")
def lines(folder: Path) -> list[list[str]]:
    """The lines of the dirty stays, titles and footer included."""
    with (folder / "dirty_stays.csv").open(encoding="utf-8", newline="") as file:
        return list(csv.reader(file))


@pytest.fixture(scope="module")
def rows(lines: list[list[str]]) -> list[Row]:
    """The rows between headings and total."""
    return [dict(zip(lines[3], line, strict=True)) for line in lines[4:-2]]


def clock(text: str) -> datetime | None:
    """Read one time of the dirty file as a careful person would; None when blank."""
    if not text:
        return None
    if "/" in text:
        return datetime.strptime(text, "%m/%d/%Y %H:%M")  # noqa: DTZ007
    if text.endswith("Z"):
        return datetime.strptime(text, "%Y-%m-%dT%H:%MZ") + timedelta(hours=1)  # noqa: DTZ007
    if "-" not in text:
        return datetime(1899, 12, 30) + timedelta(minutes=round(float(text) * 1440))  # noqa: DTZ001
    return datetime.fromisoformat(text)


def count(rows: list[Row], has: Callable[[Row], bool]) -> int:
    """Count the rows that have something."""
    return sum(map(has, rows))


def by_patient(rows: list[Row]) -> dict[str, list[Row]]:
    """Return each patient's rows by start."""
    patients: dict[str, list[Row]] = {}
    for row in sorted(rows, key=lambda row: clock(row["start"])):
        patients.setdefault(row["patient_key"], []).append(row)
    return patients


def test_truth_is_the_order(truth: dict) -> None:
    """The truth file promises the faults that were asked for, 60 missing ends and 220 pass-throughs among them."""
    faults = truth["rows by fault"]
    assert {name: faults[name] for name in ORDERED} == ORDERED
    assert sum(rows for name, rows in faults.items() if name.startswith("under 30 minutes")) == 220
    assert sum(rows for name, rows in faults.items() if name.startswith("test patient")) == 6
    # 15 forgotten ends and 10 negative stays are beyond mending
    assert truth["rows of the clean file"] - truth["ward stays left after mending"] == 15 + 10


def test_rows_add_up(lines: list[list[str]], rows: list[Row], truth: dict) -> None:
    """The file has the clean rows, those sent again, the pass-throughs and the strangers, and its furniture."""
    added = 180 + 40 + 220 + 400 + 900 + 1500 + 6
    assert len(rows) == truth["rows"] == truth["rows of the clean file"] + added
    assert [len(line) for line in lines[:3]] == [1, 1, 1]
    assert lines[-2][:2] == ["Total", str(len(rows))]
    assert lines[-1] == ["Page 1 of 1"]
    assert len(lines) == len(rows) + 1 + sum(truth["lines that are no rows"].values())


def test_missing_ends_are_counted(rows: list[Row], truth: dict) -> None:
    """Rows without an end: still in, just gone, followed by a later stay, or long ago on a short-stay ward."""
    faults = truth["rows by fault"]
    found: Counter[str] = Counter()
    for stays in by_patient(rows).values():
        for place, row in enumerate(stays):
            if row["end"]:
                continue
            later = stays[place + 1 :]
            same_start = [other for other in stays if other is not row and other["start"] == row["start"]]
            assert not same_start
            old = clock(row["start"]) < EXTRACT_END - timedelta(days=600)
            found["followed" if later else "long ago" if old else "still in"] += 1
    assert found["followed"] == faults["no end: forgotten, the patient's next stay follows"]
    assert found["long ago"] == faults["no end: forgotten, long ago and no later stay"]
    still_in = faults["no end: still in"] + faults["no end: left in the last four days, not entered yet"]
    assert found["still in"] == still_in


def test_negative_stays_are_counted(rows: list[Row], truth: dict) -> None:
    """Stays that end before they start: those whose end has a swapped day and month, and those beyond mending."""
    mended = beyond = 0
    for row in rows:
        start, end = clock(row["start"]), clock(row["end"])
        if end is None or end >= start:
            continue
        swapped = None if end.day > 12 else end.replace(day=end.month, month=end.day)
        assert start.day > 12  # so that only the end can be the swapped one
        mended += swapped is not None and timedelta(0) < swapped - start < timedelta(days=200)
        beyond += swapped is None
    assert mended == truth["rows by fault"]["ends before it starts: day and month of the end swapped"]
    assert beyond == truth["rows by fault"]["ends before it starts: no swap mends it"]


def test_repeats_are_counted(rows: list[Row], truth: dict) -> None:
    """Rows that are there twice, and rows sent again with another end, which stand later and are the right ones."""
    whole = Counter(tuple(row.values()) for row in rows)
    assert sum(times - 1 for times in whole.values()) == truth["rows by fault"]["exact duplicate"]
    keys = Counter((patient, spell, ward, start) for patient, spell, ward, start, *_ in whole)
    again = [key for key, times in keys.items() if times > 1]
    assert len(again) == truth["rows by fault"]["sent again later with another end"]
    right = {(row["patient_key"], row["start"]): row["end"] for row in dirty.read_rows(DEMO / "stays.csv")}
    last = {(row["patient_key"], row["start"]): row["end"] for row in rows}
    for patient, _, _, start in again:
        assert last[patient, start] == right[patient, start]


def test_overlaps_and_pass_throughs_are_counted(rows: list[Row], truth: dict) -> None:
    """Stays that run into the patient's next, and stays under 30 minutes, all in the lounge or theatre."""
    faults = truth["rows by fault"]
    overlaps, distinct = 0, [dict(values) for values in {tuple(row.items()) for row in rows}]
    for stays in by_patient(distinct).values():
        for row, following in pairwise(stays):
            end = clock(row["end"])
            different = row["start"] != following["start"]
            overlaps += different and end is not None and end > clock(following["start"])
    assert overlaps == faults["overlaps the patient's next stay"]
    short = Counter(
        row["ward"]
        for row in rows
        if row["end"] and timedelta(0) <= clock(row["end"]) - clock(row["start"]) < timedelta(minutes=30)
    )
    lounge, theatre = faults["under 30 minutes: discharge lounge"], faults["under 30 minutes: theatre"]
    assert short == {"Discharge lounge": lounge, "Theatre": theatre}


def test_ways_of_writing_are_counted(rows: list[Row], truth: dict) -> None:
    """Day numbers, month first, UTC, the old ward name and the spaces in Teal's name."""
    faults = truth["rows by fault"]
    assert count(rows, lambda row: "-" not in row["start"] and "/" not in row["start"]) == 12
    month_first = [row for row in rows if "/" in row["start"]]
    assert len(month_first) == faults["month first: patients first seen in November 2023"]
    assert max(int(row["start"][3:5]) for row in month_first) > 12
    assert max(int(row["start"][:2]) for row in month_first) <= 12
    utc = count(rows, lambda row: row["start"].endswith("Z"))
    assert utc == faults["in UTC: patients first seen in July 2023"]
    wards = Counter(row["ward"] for row in rows)
    assert wards["Ward 7"] == faults["ward under its old name, Ward 7"]
    assert wards["Teal "] == faults["ward name with a trailing space"] == 60
    assert wards["Teal\u00a0"] == faults["ward name with a non-breaking space"] == 40
    assert all(clock(row["start"]).year == 2022 for row in rows if row["ward"] == "Ward 7")


def test_strangers_are_counted(rows: list[Row], truth: dict) -> None:
    """Virtual ward, cots, day attenders and test patients."""
    faults, wards = truth["rows by fault"], Counter(row["ward"] for row in rows)
    assert wards["Virtual ward"] == faults["virtual ward"]
    assert wards["Well-baby cots"] == faults["well-baby cot"]
    assert count(rows, lambda row: row["class"] == "regular day") == faults["regular day attender"]
    assert count(rows, lambda row: row["patient_key"].startswith("TEST")) == faults["test patient: by the key"]
    assert count(rows, lambda row: row["age_band"] == "130-139") == faults["test patient: by an impossible age"]


def test_all_that_is_left_is_the_clean_file(rows: list[Row]) -> None:
    """A careful person who mends every fault has the clean stays again, but for 25 beyond mending."""
    names = {"Ward 7": "Kestrel"}
    seen = {
        (row["patient_key"], names.get(row["ward"], row["ward"].strip()), clock(row["start"]), clock(row["end"]))
        for row in rows
    }
    clean = dirty.read_rows(DEMO / "stays.csv")
    lost = [
        row for row in clean if (row["patient_key"], row["ward"], clock(row["start"]), clock(row["end"])) not in seen
    ]
    assert len(lost) == 60 + 25 + 30  # missing ends, negative stays, overlaps; those sent again are right in the end


def test_every_form_holds_the_same_lines(folder: Path, lines: list[list[str]]) -> None:
    """The semicolon and the UTF-16 copies hold the same cells; semicolons go with decimal commas."""
    assert (folder / "dirty_stays_utf16.txt").read_bytes()[:2] in (b"\xff\xfe", b"\xfe\xff")
    with (folder / "dirty_stays_utf16.txt").open(encoding="utf-16", newline="") as file:
        assert list(csv.reader(file, delimiter="\t")) == lines
    with (folder / "dirty_stays_semicolon.csv").open(encoding="utf-8", newline="") as file:
        semicolon = list(csv.reader(file, delimiter=";"))
    differ = [pair for pair in zip(lines, semicolon, strict=True) if pair[0] != pair[1]]
    assert len(differ) == 12
    assert all([cell.replace(".", ",") for cell in one] == other for one, other in differ)


def test_the_workbook_holds_the_same_lines(tmp_path: Path, lines: list[list[str]]) -> None:
    """The Excel copy holds the cells as text, and day numbers as numbers."""
    number = next(line for line in lines if len(line) > 3 and line[3][:5].isdigit())
    some = [*lines[:20], number, *lines[-2:]]
    dirty._write_workbook(some, tmp_path / "some.xlsx")
    sheet = openpyxl.load_workbook(tmp_path / "some.xlsx").active
    read = [["" if cell is None else cell for cell in row] for row in sheet.iter_rows(values_only=True)]
    padded = [[*line, *[""] * (len(lines[3]) - len(line))] for line in some]
    padded[20][3:5] = [float(number[3]), float(number[4])]
    assert read == padded


def test_census_faults_are_counted(folder: Path, truth: dict) -> None:
    """Winter-bay cells say 28 (+4), and on two days every ward shows a zero that means missing."""
    census = dirty.read_rows(folder / "dirty_census.csv")
    assert count(census, lambda row: row["beds_available"] == "28 (+4)") == truth["census"]["cells such as 28 (+4)"]
    assert count(census, lambda row: not row["beds_available"].isdigit()) == truth["census"]["cells such as 28 (+4)"]
    zeros = Counter(row["date"] for row in census if row["beds_occupied"] == "0")
    all_zero = sorted(day for day, times in zeros.items() if times == 16)
    assert all_zero == truth["census"]["days of zeros that are missing"]


def test_the_dirt_is_the_same_every_time(folder: Path, tmp_path: Path) -> None:
    """The same seed gives the same dirt, byte for byte."""
    dirty.write_dirty(tmp_path, workbook=False)
    for name in ("dirty_stays.csv", "dirty_census.csv", "dirty_truth.json"):
        assert (tmp_path / name).read_bytes() == (folder / name).read_bytes()
