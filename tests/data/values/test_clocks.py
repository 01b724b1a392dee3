"""Times of day beside a date, as people and spreadsheets write them."""

from __future__ import annotations

import datetime as dt
import io

import openpyxl
import pandas as pd
import pytest

from bedplan.data import read_census, read_records, read_refusals
from bedplan.data.values.clocks import clocks_of, minutes_of


@pytest.mark.parametrize(
    ("clock", "minutes"),
    [
        ("08:00", 480),
        ("0800", 480),
        ("800", 480),
        ("8", 480),
        ("08", 480),
        ("8.05", 485),
        ("8h05", 485),
        ("08:05:59", 485),
        ("14:05 Uhr", 845),
        ("2:05 pm", 845),
        ("12:30 AM", 30),
        ("1899-12-30 08:00:00", 480),
        ("24:00", 1_440),
        ("24:01", None),
        ("13:00 pm", None),
        ("08:60", None),
        ("²", None),
        ("noon", None),
        ("-3", None),
    ],
)
def test_times_of_day_in_many_spellings(clock: str, minutes: int | None) -> None:
    """A time is read, or it is said that it can't be; nothing stops the reading."""
    assert minutes_of(clock) == minutes


@pytest.mark.parametrize(
    ("cells", "clocks"),
    [
        (["0.604166666666667", "0.25", "0"], ["14:30", "06:00", "00:00"]),
        (["0,604", "0.5"], ["14:30", "12:00"]),
        ([".75"], ["18:00"]),
        (["6.94444444444444E-04", "14:30"], ["00:01", "14:30"]),
        (["0.9999"], ["24:00"]),
        (["0.30", "8.05"], ["0.30", "8.05"]),
        (["8", "23"], ["08:00", "23:00"]),
        (["8", "23", "0805", "14:00"], ["08:00", "23:00", "0805", "14:00"]),
        (["5", "45", "805", "1405"], ["00:05", "00:45", "805", "1405"]),
        (["0.30", "0.75"], ["07:12", "18:00"]),
        (["0.25", "14:30:00"], ["06:00", "14:30:00"]),
    ],
)
def test_parts_of_a_day_are_clocks(cells: list[str], clocks: list[str]) -> None:
    """A spreadsheet's 0.604 is half past two; 0.30 alone is half past midnight, beside what no clock shows it is not."""
    assert list(clocks_of(cells).values()) == clocks


START, END = pd.Timestamp("2024-03-31 14:30"), pd.Timestamp("2024-04-02 06:00")


@pytest.mark.parametrize(
    "rows",
    [
        ("2024-03-31", "0.604166666666667", "2024-04-02", "0.25"),
        ("31/03/2024", "0,6041667", "02/04/2024", "0,25"),
        ("45382", "0.6041666666666666", "45384", "0.25"),
        ("45382", "14:30", "45384", "6:00"),
        ("2024-03-31 00:00:00", "0.6041666666666666", "2024-04-02 00:00:00", "0.25"),
    ],
)
def test_stays_with_a_column_of_parts_of_a_day(rows: tuple[str, ...]) -> None:
    """Day and part of a day make the moment, whether the day is a date or a spreadsheet's number."""
    blank = (rows[0], "", rows[2], "0.5" if rows[1][0] == "0" else "12:00")
    lines = ["patient;ward;ward start date;ward start time;ward end date;ward end time"]
    lines += [";".join((key, "W", *cells)) for key, cells in (("a", rows), ("b", blank))]
    found = read_records("\n".join(lines).encode(), date_order="day first").stays

    assert found["start"].tolist() == [START.normalize(), START]
    assert found["end"].tolist() == [END.normalize() + pd.Timedelta(hours=12), END]


def test_an_event_with_a_part_of_a_day() -> None:
    """Lists and counts beside the stays have their times so, too; a day's end is the next midnight."""
    log = read_refusals(b"date,time,ward\n2024-03-31,0.6041666,W\n45382,0.5,W\n2024-03-31,0.99999,W\n")
    census = read_census(b"date,time,ward,occupied\n2024-03-31,0.5,W,7\n2024-04-01,0.5,W,8\n")

    days = [pd.Timestamp("2024-03-31 12:00"), START, pd.Timestamp("2024-04-01")]
    assert log.table["time"].tolist() == days
    assert census.occupied("W", "12:00").tolist() == [7, 8]


def test_a_workbook_with_unformatted_times() -> None:
    """Dates as dates and times as bare numbers, as a sheet with a lost format has them."""
    book = openpyxl.Workbook()
    book.active.append(["patient", "ward", "ward start date", "ward start time", "ward end date", "ward end time"])
    book.active.append(
        ["a", "W", START.normalize().to_pydatetime(), 0.6041666666666666, END.normalize(), dt.time(6, 0)]
    )
    book.active.append(["b", "W", START.normalize().to_pydatetime(), 0, END.normalize().to_pydatetime(), 0.25])
    held = io.BytesIO()
    book.save(held)
    found = read_records(held.getvalue(), name="stays.xlsx").stays

    assert found["start"].tolist() == [START.normalize(), START]
    assert found["end"].tolist() == [END, END]
