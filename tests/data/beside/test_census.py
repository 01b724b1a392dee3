"""Census tables, long and wide, with the dirt they come with."""

from __future__ import annotations

import io
from typing import TYPE_CHECKING

import numpy as np
import openpyxl
import pandas as pd
import pytest

from bedplan.data import IntakeChoices, read_census, read_records
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from pathlib import Path

DAYS = pd.date_range("2024-01-01", periods=30)
COUNTS = {"Heron": np.arange(30) % 5 + 22, "Teal": np.arange(30) % 3 + 9, "Merlin": np.arange(30) % 4 + 3}


def long_rows(extra: tuple[str, ...] = ()) -> bytes:
    """Return a long table."""
    rows = [f"{day:%Y-%m-%d},{ward},28,{counts[n]}" for n, day in enumerate(DAYS) for ward, counts in COUNTS.items()]
    return "\n".join(["date,ward,beds_available,beds_occupied", *rows, *extra]).encode()


def test_long_and_wide_tables_say_the_same() -> None:
    """A row for each date and ward, or a column for each ward: the same counts."""
    wide = [f"{day:%Y-%m-%d}," + ",".join(str(counts[n]) for counts in COUNTS.values()) for n, day in enumerate(DAYS)]
    tables = [read_census(long_rows()), read_census("\n".join(["Date,Heron,Teal,Merlin", *wide]).encode())]

    for ward, counts in COUNTS.items():
        for table in tables:
            assert table.occupied(ward).tolist() == counts.tolist()


def test_wide_tables_with_two_columns_a_ward() -> None:
    """Patients and beds side by side, told apart by the end of their headings."""
    census = read_census(
        b"Date,Heron occupied,Heron beds,Teal occupied,Teal beds\n2024-01-01,20,28,9,12\n2024-01-02,30,28,8,12\n"
    )

    assert census.table["available"].tolist() == [28, 12, 28, 12]
    assert census.over_full == 1


def test_totals_are_dropped_by_name_and_by_sum() -> None:
    """A row called Total, and a ward that is always the sum of the others, would double the hospital."""
    sums = tuple(f"{day:%Y-%m-%d},Whole site,84,{sum(c[n] for c in COUNTS.values())}" for n, day in enumerate(DAYS))
    census = read_census(long_rows((*sums, "2024-01-31,Total,84,40")))

    assert census.wards == ("Heron", "Merlin", "Teal")
    assert census.report.set_aside == 31
    assert census.report.rows_in == census.report.used + census.report.set_aside == 121


def test_extra_beds_in_a_cell_are_told_apart() -> None:
    """24 (+2) is 24 beds and 2 more; closed is none."""
    census = read_census(
        b"date,ward,available,occupied\n2024-01-01,Teal,24 (+2),25\n2024-01-02,Teal,closed,0\n2024-01-03,Teal,24,25\n"
    )

    assert census.table[["available", "extra"]].to_numpy().tolist() == [[24, 2], [0, 0], [24, 0]]
    assert census.over_full == 1
    assert census.report.repaired == 1


def test_a_zero_in_a_busy_ward_is_a_missing_count() -> None:
    """A ward of two dozen is not empty for one night; a person may say that it was."""
    rows = ("2024-01-31,Heron,28,0",)

    assert len(read_census(long_rows(rows)).occupied("Heron")) == 30
    assert read_census(long_rows(rows), zeros_are_real=True).occupied("Heron").iloc[-1] == 0


def test_a_zero_in_a_quiet_ward_is_real() -> None:
    """Merlin, with four patients on average, can be empty."""
    assert read_census(long_rows(("2024-01-31,Merlin,8,0",))).occupied("Merlin").iloc[-1] == 0


def test_every_ward_at_zero_at_once_is_missing() -> None:
    """A whole hospital is never empty."""
    rows = tuple(f"2024-01-31,{ward},8,0" for ward in COUNTS)

    assert len(read_census(long_rows(rows)).occupied("Merlin")) == 30


def test_swing_and_months_of_the_demo(demo_data: Path) -> None:
    """A census gives swing and season: Teal, always full, swings little; Kestrel's January is busier than its August."""
    census = read_census(demo_data / "census.csv")

    assert census.variance_over_mean("Teal") < 0.5 < census.variance_over_mean("Kestrel")
    months = census.month_index("Kestrel")
    assert months.loc[1] > 1.05
    assert months.loc[8] < 0.95
    assert census.variance_over_mean("Heron") == pytest.approx(
        census.occupied("Heron").var() / census.occupied("Heron").mean()
    )


def test_a_census_says_what_it_cannot_tell() -> None:
    """The length of stay is not in it."""
    assert any("length of stay" in sentence for sentence in read_census(long_rows()).cannot)


def test_times_of_the_day_are_read() -> None:
    """08:00, 0800 and 8 are one time."""
    census = read_census(
        b"date,time,ward,occupied\n2024-01-01,08:00,Teal,5\n2024-01-02,0800,Teal,6\n2024-01-03,8,Teal,7\n"
    )

    assert census.occupied("Teal", "08:00").tolist() == [5, 6, 7]


@pytest.mark.parametrize(
    "content",
    [
        b"date,ward\n2024-01-01,Teal\n",
        b"ward,occupied\nTeal,5\n",
        b"date,ward,occupied\nsoon,Teal,5\n",
        b"date\n2024-01-01\n",
    ],
)
def test_a_census_that_cannot_be_used_says_why(content: bytes) -> None:
    """One sentence names the file and what it lacks."""
    with pytest.raises(UnreadableRecords, match=r"census\.csv"):
        read_census(content, name="census.csv")


MERGED = (
    ("Report of wards", "", "", "", "", "", ""),
    ("", "Heron", "", "", "Teal", "", ""),
    ("Date", "Occupied", "Available", "Closed", "Occupied", "Available", "Closed"),
    ("2024-01-01", "20", "26", "2", "9", "12 (+2)", "0"),
    ("2024-01-02", "30", "28", "0", "8", "12", "0"),
)
DATE_ABOVE = (
    ("Date", "Heron", "", "", "Teal", "", ""),
    ("", "Occ", "Beds", "Closed", "Occ", "Beds", "Closed"),
    *MERGED[3:],
)


def as_workbook(rows: tuple[tuple[str, ...], ...]) -> bytes:
    """Return a workbook of these cells, blanks left empty as under merged headings."""
    book, packed = openpyxl.Workbook(), io.BytesIO()
    for row in rows:
        book.active.append([cell or None for cell in row])
    book.save(packed)
    return packed.getvalue()


@pytest.mark.parametrize("rows", [MERGED, DATE_ABOVE])
@pytest.mark.parametrize("kind", ["comma", "semicolon", "workbook"])
def test_two_rows_of_headings_are_read_as_one(rows: tuple[tuple[str, ...], ...], kind: str) -> None:
    """Wards in merged cells above, what is counted below: as if each ward had rows of its own."""
    sign = {"comma": ",", "semicolon": ";"}.get(kind, "")
    content = "\n".join(sign.join(row) for row in rows).encode() if sign else as_workbook(rows)
    census = read_census(content)

    assert census.wards == ("Heron", "Teal")
    columns = ["available", "extra", "closed", "occupied"]
    assert census.table[columns].to_numpy().tolist() == [[26, 0, 2, 20], [12, 2, 0, 9], [28, 0, 0, 30], [12, 0, 0, 8]]
    assert any("1 row names closed beds" in note for note in census.report.notes)


def test_counts_with_decimals_are_averages_and_told_so() -> None:
    """A mean over the day is used as it stands; the note says that it swings too little."""
    census = read_census(b"date;ward;occupied\n2024-01-01;Teal;9,5\n2024-01-02;Teal;8\n")

    assert census.occupied("Teal").tolist() == [9.5, 8.0]
    assert any("averages" in note for note in census.report.notes)


def test_two_numbers_for_the_patients_are_not_added() -> None:
    """20/24 may be 20 patients in 24 beds: it is set aside, and the reason says why."""
    census = read_census(b"date,ward,occupied\n2024-01-01,Teal,20/24\n2024-01-02,Teal,20 (+2)\n")

    assert census.occupied("Teal").tolist() == [22]
    assert list(census.report.reasons) == [
        "Two numbers stand for the patients, as in 20/24: which of them is meant can't be told"
    ]


@pytest.mark.parametrize("clock", ["\u00b2", "noon", "8 o'clock", "25:00"])
def test_a_time_nobody_can_read_is_set_aside(clock: str) -> None:
    """Whatever stands there, the row is counted, not the program stopped."""
    census = read_census(f"date,time,ward,occupied\n2024-01-01,{clock},Teal,5\n2024-01-02,08:00,Teal,6\n".encode())

    assert census.occupied("Teal", "08:00").tolist() == [6]
    assert dict(census.report.reasons) == {"The time of day can't be read": 1}


def test_times_may_hold_the_dates() -> None:
    """One column of moments is enough, whatever it is called."""
    census = read_census(b"time,ward,occupied\n2024-01-01 08:00,Teal,5\n2024-01-02 08:00,Teal,6\n")

    assert census.occupied("Teal", "08:00").tolist() == [5, 6]


def test_a_ward_whose_name_begins_like_a_total_is_kept() -> None:
    """Summerfield is no sum."""
    assert read_census(b"date,ward,occupied\n2024-01-01,Summerfield,5\n2024-01-01,Sum,6\n").wards == ("Summerfield",)


def test_census_dates_can_be_american() -> None:
    """Where no day shows the order it is asked for, and the answer holds."""
    content = b"date,ward,occupied\n03/04/2024,Teal,5\n"

    with pytest.raises(UnreadableRecords) as problem:
        read_census(content)
    assert problem.value.question.examples[0][1:] == ("03 April 2024", "04 March 2024")
    assert read_census(content, date_order="month first").table["time"].tolist() == [pd.Timestamp("2024-03-04")]


def test_census_columns_can_be_named_by_a_person() -> None:
    """Headings nobody knows are no obstacle, in a long table and in a wide one."""
    named = {"date": "Stichtag", "ward": "Fach", "occupied": "Belegung"}
    long = read_census(b"Stichtag;Fach;Belegung\n2024-01-01;Teal;5\n", columns=named)
    wide = read_census(b"Stichtag;Teal;Heron\n2024-01-01;5;6\n", columns={"date": "Stichtag"})

    assert long.occupied("Teal").tolist() == wide.occupied("Teal").tolist() == [5]


STAYS = b"patient_key,ward,start,end\na,W,2024-01-01 10:00,2024-01-04 10:00\n"


def test_census_wards_are_matched_to_the_stays() -> None:
    """Capitals don't matter, merged wards are added, a ward written two ways is not; the rest is named."""
    rows = ["w,5", "Ash,6", "Ward 7,9", "W07,9", "Owl,1"]
    census = read_census("\n".join(["date,ward,occupied", *(f"2024-01-01,{row}" for row in rows)]).encode())
    names = {"Ash": "W", "Ward 7": "Seven", "W07": "Seven"}
    linked = census.linked_to(read_records(STAYS, choices=IntakeChoices(ward_names=names)))

    assert linked.occupied("W").tolist() == [11]
    assert linked.occupied("Seven").tolist() == [9]
    assert linked.unknown_wards == ("Owl", "Seven")
