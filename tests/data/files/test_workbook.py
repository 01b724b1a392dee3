"""Workbooks of several sheets: rows of every sheet are read, or the report says how many were not."""

from __future__ import annotations

import io

import openpyxl
import pandas as pd
import pytest

from bedplan.data import read_census, read_records
from tests.data.values.test_exchanged import HEADINGS, true_stays

STAYS = [(f"p{row}", "Heron", start, end) for row, (start, end) in enumerate(true_stays())]
MONTHS = {month: [row for row in STAYS if f"{row[2]:%B}" == month] for month in ("January", "February", "March")}
QUARTER = [row for rows in MONTHS.values() for row in rows]


def workbook(sheets: dict[str, list[tuple[object, ...]]]) -> bytes:
    """Return a workbook of these sheets."""
    book = openpyxl.Workbook()
    book.remove(book.active)
    for title, rows in sheets.items():
        sheet = book.create_sheet(title)
        for row in rows:
            sheet.append(row)
    content = io.BytesIO()
    book.save(content)
    return content.getvalue()


def by_month(**others: list[tuple[object, ...]]) -> dict[str, list[tuple[object, ...]]]:
    """Return a sheet a month, and others."""
    return {month: [HEADINGS, *rows] for month, rows in MONTHS.items()} | others


def test_a_sheet_a_month_is_one_table() -> None:
    """Every stay of every sheet is read, and the report names the sheets with their rows."""
    records = read_records(workbook(by_month()), name="quarter.xlsx")
    told = " ".join(records.report.notes)

    assert list(records.stays["start"]) == [row[2] for row in QUARTER]
    assert records.report.rows_in == len(QUARTER)
    assert all(f"“{month}” ({len(rows)} rows)" in told for month, rows in MONTHS.items())


def test_titles_and_other_columns_of_a_month_do_no_harm() -> None:
    """A title above one month's headings, other capitals, a column of remarks and another order of columns."""
    turned = [tuple(reversed(row)) for row in MONTHS["February"]]
    sheets = by_month(
        January=[("January 2024",), (), [*(heading.upper() for heading in HEADINGS), "remark"], *MONTHS["January"]],
        February=[tuple(reversed(HEADINGS)), *turned],
    )
    records = read_records(workbook(sheets), name="quarter.xlsx")

    assert list(records.stays["start"]) == [row[2] for row in QUARTER]


def test_months_beside_the_whole_are_not_read_twice() -> None:
    """Where a sheet of all stays is there too, each stay counts once, and the report says why."""
    records = read_records(workbook(by_month(All=[HEADINGS, *QUARTER])), name="quarter.xlsx")

    assert list(records.stays["start"]) == [row[2] for row in QUARTER]
    assert records.report.rows_in == len(QUARTER)
    assert any("stand in another sheet too: “January”" in note for note in records.report.notes)


@pytest.mark.parametrize(
    ("other", "rows"),
    [
        ([("Remarks",), ("Heron was painted",), ("Teal was not",)], "3 rows"),
        ([("ward", "from", "to", "beds"), ("Heron", 1, 2, 3)], "1 row"),
    ],
)
def test_other_sheets_are_left_out_and_counted(other: list[tuple[object, ...]], rows: str) -> None:
    """Remarks and beds are no stays: the report names the sheet and how many rows it holds."""
    records = read_records(workbook(by_month(Other=other)), name="quarter.xlsx")

    assert list(records.stays["start"]) == [row[2] for row in QUARTER]
    assert any(note.endswith(f"the headings are others: “Other” ({rows}).") for note in records.report.notes)


def test_a_census_of_two_rows_of_headings_with_a_sheet_a_month() -> None:
    """Wards above, what is counted below, a sheet a month: every day of every month is read."""
    days = pd.date_range("2024-01-01", "2024-03-31", freq="D")
    sheets = {
        month: [
            ("", "Heron", "", "Teal", ""),
            ("Date", "Occupied", "Beds", "Occupied", "Beds"),
            *((day.to_pydatetime(), 10 + day.day % 5, 20, 5, 8) for day in days if f"{day:%B}" == month),
        ]
        for month in MONTHS
    }
    census = read_census(workbook(sheets), name="census.xlsx")

    assert list(census.occupied("Heron")) == [10 + day.day % 5 for day in days]
