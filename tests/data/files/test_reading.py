"""Encodings, separators, Excel and Parquet: one table, however it was saved."""

from __future__ import annotations

import datetime as dt
import io
from typing import TYPE_CHECKING

import numpy as np
import openpyxl
import pandas as pd
import pytest
from openpyxl.utils.datetime import CALENDAR_MAC_1904

from bedplan.data import IntakeChoices, read_records
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from pathlib import Path

TEXT = (
    "patient_key,ward,start,end,destination\n"
    "a,Sandpiper – day,2024-01-01 10:00,2024-01-04 10:00,home\n"
    "b,Teal,2024-01-02 10:00,,\n"
)
PLAIN = read_records(TEXT.encode()).stays.drop(columns="patient_key")


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "utf-16-le", "utf-16-be", "cp1252"])
def test_every_common_encoding_is_read(encoding: str) -> None:
    """A dash in a ward's name survives UTF-8, UTF-16 and Windows-1252."""
    records = read_records(TEXT.encode(encoding))

    assert records.wards == ("Sandpiper – day", "Teal")


@pytest.mark.parametrize("separator", [",", ";", "\t", "|"])
def test_every_common_separator_is_read(separator: str) -> None:
    """Comma, semicolon, tab and bar give the same stays."""
    records = read_records(TEXT.replace(",", separator).encode())

    pd.testing.assert_frame_equal(records.stays.drop(columns="patient_key"), PLAIN)


@pytest.mark.parametrize("ending", ["\n", "\r\n", "\r"])
def test_every_line_ending_is_read(ending: str) -> None:
    """Unix, Windows and old Macintosh line ends give the same stays."""
    records = read_records(TEXT.replace("\n", ending).encode())

    pd.testing.assert_frame_equal(records.stays.drop(columns="patient_key"), PLAIN)


def test_quoted_cells_may_hold_separators_and_line_ends() -> None:
    """A comma or a line break inside quotes belongs to the cell."""
    content = 'patient_key,ward,start,end\na,"Teal, level 2",2024-01-01 10:00,2024-01-04 10:00\n'
    content += 'b,"Teal,\nlevel 2",2024-01-02 10:00,2024-01-04 10:00\n'

    assert read_records(content.encode()).wards == ("Teal, level 2",)


def workbook(rows: list[list[object]], *, titles: int = 0, second_sheet: bool = False) -> bytes:
    """Return a workbook with titles above the headings."""
    book = openpyxl.Workbook()
    sheet = book.active
    if second_sheet:
        sheet.append(["Notes on this export"])
        sheet = book.create_sheet("Stays")
    for number in range(titles):
        sheet.append([f"Title {number}"])
    for row in rows:
        sheet.append(row)
    packed = io.BytesIO()
    book.save(packed)
    return packed.getvalue()


ROWS = [
    ["patient_key", "ward", "start", "end", "destination"],
    [
        "a",
        "Sandpiper – day",
        dt.datetime.fromisoformat("2024-01-01 10:00"),
        dt.datetime.fromisoformat("2024-01-04 10:00"),
        "home",
    ],
    ["b", "Teal", dt.datetime.fromisoformat("2024-01-02 10:00"), None, None],
]


@pytest.mark.parametrize("titles", [0, 3])
@pytest.mark.parametrize("second_sheet", [False, True])
def test_excel_gives_the_same_stays(titles: int, second_sheet: bool) -> None:
    """Titles above the headings and a sheet of notes before the table don't matter."""
    records = read_records(workbook(ROWS, titles=titles, second_sheet=second_sheet))

    pd.testing.assert_frame_equal(records.stays.drop(columns="patient_key"), PLAIN)


def test_excel_cells_that_hold_text_dates_and_bare_numbers_are_read() -> None:
    """A text date and an unformatted day number in a sheet are dates too (day 45294 is 3 January 2024)."""
    rows = [
        ROWS[0],
        ["a", 7, "2024-01-01 10:00", 45294.5, None],
        ["b", 7, "2024-01-02 10:00", "2024-01-04 10:00", None],
    ]
    records = read_records(workbook(rows))

    assert records.wards == ("7",)
    assert records.stays["end"].iloc[0] == pd.Timestamp("2024-01-03 12:00")


@pytest.mark.parametrize("unit", ["s", "ms", "ns"])
def test_parquet_gives_the_same_stays(unit: str) -> None:
    """Typed columns of a Parquet file are read by meaning."""
    frame = pd.DataFrame(ROWS[1:], columns=ROWS[0]).astype(
        {"start": f"datetime64[{unit}]", "end": f"datetime64[{unit}]"}
    )
    packed = io.BytesIO()
    frame.astype({"ward": "category"}).to_parquet(packed)
    records = read_records(packed.getvalue())

    pd.testing.assert_frame_equal(records.stays.drop(columns="patient_key"), PLAIN)


def with_zone(zone: str, form: str) -> tuple[bytes, bytes]:
    """Return stays through a year, once as Parquet with a time zone, once as CSV with the offset written; one is still in."""
    starts = pd.date_range("2024-01-01 09:30", periods=400, freq="22h", tz=zone)
    frame = pd.DataFrame({"patient_key": [f"p{row}" for row in range(400)], "ward": "Teal", "start": starts})
    frame["end"] = (frame["start"] + pd.Timedelta(hours=51)).where(frame.index != 399)
    packed = io.BytesIO()
    frame.to_parquet(packed)
    for name in ("start", "end"):
        shown = frame[name].map(lambda moment: "" if pd.isna(moment) else f"{moment:{form}}")
        frame[name] = shown.str.replace(r"(\d\d)$", r":\1", regex=True) if form.endswith("%z") else shown
    return packed.getvalue(), frame.to_csv(index=False).encode()


@pytest.mark.parametrize(
    ("zone", "form"),
    [("UTC", "%Y-%m-%dT%H:%M:%S%z"), ("UTC", "%Y-%m-%d %H:%MZ"), ("Europe/Berlin", "%Y-%m-%dT%H:%M:%S%z")],
)
@pytest.mark.parametrize("home", [None, "Europe/London"])
def test_times_with_a_zone_read_alike_in_parquet_and_csv(zone: str, form: str, home: str | None) -> None:
    """The same stays and the same sentence, brought to the hospital's clock where that is said (pandas' zones, independent)."""
    packed, text = with_zone(zone, form)
    choices = IntakeChoices(time_zone=home)
    parquet, csv = (read_records(content, name="stays", choices=choices) for content in (packed, text))
    wanted = (
        pd.date_range("2024-01-01 09:30", periods=400, freq="22h", tz=zone).tz_convert(home or zone).tz_localize(None)
    )
    told = [[note for note in one.report.notes if "offset" in note] for one in (parquet, csv)]

    assert list(parquet.stays["start"]) == list(wanted)
    pd.testing.assert_frame_equal(*(one.stays.drop(columns="patient_key") for one in (parquet, csv)))
    assert told[0] == told[1]
    assert "in 400 rows" in told[0][0]


@pytest.mark.parametrize("last", ["2024-01-05 10:00", "5 Jan 2024 10:00", '"2024-01-05 10:00"'])
def test_a_large_file_is_read_alike_however_its_last_time_is_written(tmp_path: Path, last: str) -> None:
    """Times are read straight away where the head of a file allows it; one odd cell, or one quote, far below changes nothing."""
    rows = [f"p{number},Teal,2024-01-0{number % 3 + 1} 10:00,2024-01-04 10:00" for number in range(30_000)]
    content = "\n".join(["patient_key,ward,start,end", *rows, f"last,Teal,2024-01-02 10:00,{last}\n"]).encode()
    path = tmp_path / "stays.csv"
    path.write_bytes(content)
    at_path, in_memory = (read_records(source).stays.drop(columns="patient_key") for source in (path, content))

    assert len(at_path) == 30_001
    assert at_path["end"].max() == pd.Timestamp("2024-01-05 10:00")
    pd.testing.assert_frame_equal(at_path, in_memory)


@pytest.mark.parametrize("times", [("14:05", "09:05"), ("1405", "905"), ("14.05", "9.05"), ("14:05:00", "09:05 Uhr")])
@pytest.mark.parametrize("midnight", ["", " 00:00:00", " 00:00"])
def test_date_cells_beside_time_cells(times: tuple[str, str], midnight: str) -> None:
    """A spreadsheet's date cell comes with a midnight that its time cell takes the place of."""
    rows = [
        f"p{n},Heron,2024-01-{n:02d}{midnight},{times[0]},2024-01-{n + 2:02d}{midnight},{times[1]}"
        for n in range(1, 20)
    ]
    text = "\n".join(["patient_key,ward,start date,start time,end date,end time", *rows])
    stays = read_records(text.encode(), name="stays.csv").stays

    assert set(stays["start"].dt.strftime("%H:%M")) == {"14:05"}
    assert set(stays["end"].dt.strftime("%H:%M")) == {"09:05"}


def test_day_numbers_of_a_workbook_that_counts_from_1904() -> None:
    """Numbers that were never formatted as dates are read by the workbook's own first day: 44,927 is 1 January 2027 there."""
    book = openpyxl.Workbook()
    book.epoch = CALENDAR_MAC_1904
    book.active.append(["patient_key", "ward", "start", "end"])
    for place in range(60):
        book.active.append([f"p{place}", "Heron", 43_465.5 + place, 43_468.25 + place])
    packed = io.BytesIO()
    book.save(packed)
    stays = read_records(packed.getvalue(), name="stays.xlsx").stays

    # 1 January 1904 + 43,465 days, by the standard library.
    first = dt.datetime(1904, 1, 1, 12) + dt.timedelta(days=43_465)  # noqa: DTZ001  the ward's clock has no zone
    assert stays["start"].iloc[0] == first
    assert stays["end"].iloc[0] == first + dt.timedelta(days=2, hours=18)


@pytest.mark.parametrize("seed", range(6))
def test_a_damaged_parquet_file_says_so(seed: int) -> None:
    """With one byte changed anywhere, the file is read or refused in a sentence, and rows still add up."""
    frame = pd.DataFrame(
        {
            "patient_key": [f"p{n}" for n in range(200)],
            "ward": ["Heron", "Teal"] * 100,
            "start": [f"2024-{n % 12 + 1:02d}-01 10:{n % 60:02d}" for n in range(200)],
            "end": [f"2024-{n % 12 + 1:02d}-04 10:{n % 60:02d}" for n in range(200)],
        }
    )
    packed = io.BytesIO()
    frame.to_parquet(packed)
    rng = np.random.default_rng(seed)
    for place, value in zip(rng.integers(4, len(packed.getvalue()), 50), rng.integers(0, 256, 50), strict=True):
        content = bytearray(packed.getvalue())
        content[place] = value
        try:
            report = read_records(bytes(content), name="stays.parquet").report
        except UnreadableRecords as problem:
            assert problem.problems  # noqa: PT017  whether it is refused depends on the byte
            continue
        assert report.rows_in == report.used + report.repaired + report.set_aside
