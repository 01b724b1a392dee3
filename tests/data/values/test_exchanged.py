"""Dates in which a spreadsheet of another country exchanged day and month: asked about, never guessed."""

from __future__ import annotations

import datetime as dt
import io
from typing import TYPE_CHECKING

import numpy as np
import openpyxl
import pandas as pd
import pytest

from bedplan.data import read_records, read_refusals
from bedplan.data.values.exchanged import exchanged
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Iterable

HEADINGS = ["patient_key", "ward", "start", "end"]
STAND, OTHER = "as they stand", "day and month exchanged up to day 12"


def true_stays(rows: int = 600) -> list[tuple[dt.datetime, dt.datetime]]:
    """Return stays of two to five days, one every 14 hours, through a year."""
    first = dt.datetime(2024, 1, 1, 9, 30)  # noqa: DTZ001  the ward's clock has no zone
    starts = [first + dt.timedelta(hours=14 * row) for row in range(rows)]
    return [(start, start + dt.timedelta(days=2 + row % 4, hours=row % 5)) for row, start in enumerate(starts)]


def spoilt(moment: dt.datetime, text: str = "%d/%m/%Y %H:%M") -> dt.datetime | str:
    """Return a day-first date as a month-first spreadsheet takes it: a date where it can, the text where it can't."""
    return moment.strftime(text) if moment.day > 12 else moment.replace(day=moment.month, month=moment.day)


def workbook(rows: Iterable[tuple[object, ...]]) -> bytes:
    """Return a workbook with these rows under the headings."""
    book = openpyxl.Workbook()
    for row in (HEADINGS, *rows):
        book.active.append(row)
    content = io.BytesIO()
    book.save(content)
    return content.getvalue()


def spoilt_workbook(text: str = "%d/%m/%Y %H:%M") -> bytes:
    """Return the true stays as such a spreadsheet keeps them."""
    return workbook(
        (f"p{row}", "Heron", spoilt(start, text), spoilt(end, text)) for row, (start, end) in enumerate(true_stays())
    )


@pytest.mark.parametrize("text", ["%d/%m/%Y %H:%M", "%m/%d/%Y %H:%M"])
def test_a_spreadsheet_of_another_country_is_asked_about(text: str) -> None:
    """Date cells up to day 12 beside text on later days: both readings are shown, with the stays each makes impossible."""
    stays = [list(both) for both in true_stays()]
    swapped = [[spoilt(moment) if moment.day <= 12 else moment for moment in both] for both in stays]
    with pytest.raises(UnreadableRecords, match="exchanged day and month") as problem:
        read_records(spoilt_workbook(text), name="stays.xlsx")
    question = problem.value.question

    assert question.answers == (STAND, OTHER)
    assert question.ends_before_start == {STAND: sum(end < start for start, end in swapped), OTHER: 0}
    assert question.ends_before_start[STAND] > 50
    assert question.examples[0] == ("2024-02-01", "01 February 2024", "02 January 2024")  # of 2 January, by hand
    assert len(set(question.examples)) == 3


@pytest.mark.parametrize("text", ["%d/%m/%Y %H:%M", "%m/%d/%Y %H:%M"])
def test_the_answer_brings_the_true_stays_back(text: str) -> None:
    """Exchanged, every stay has the start and end it had before the spreadsheet, and the report says what was done."""
    records = read_records(spoilt_workbook(text), name="stays.xlsx", date_order=OTHER)

    assert list(zip(records.stays["start"], records.stays["end"], strict=True)) == true_stays()
    assert records.report.used == 600
    assert any("exchanged" in note and "as you said" in note for note in records.report.notes)


def test_as_they_stand_is_an_answer_too() -> None:
    """Said to be right, the cells are read as they are, single slips mended."""
    records = read_records(spoilt_workbook(), name="stays.xlsx", date_order=STAND)
    (start, _), *_ = [both for both in true_stays() if both[0].day == 2]

    assert dt.datetime(2024, 2, 1, start.hour, start.minute) in set(records.stays["start"])  # noqa: DTZ001


def test_day_first_does_not_answer_for_the_cells() -> None:
    """Which way round the text is says nothing of the cells."""
    with pytest.raises(UnreadableRecords, match="exchanged day and month"):
        read_records(spoilt_workbook(), name="stays.xlsx", date_order="day first")


@pytest.mark.parametrize("cells_until", [31, 0])
def test_honest_files_of_two_forms_are_not_asked_about(cells_until: int) -> None:
    """Date cells and text in turn, on any day, or text alone: read without a question, every stay right."""
    rows = [
        (
            f"p{row}",
            "Heron",
            start if row % 2 and cells_until else start.strftime("%d/%m/%Y %H:%M"),
            end if row % 3 and cells_until else end.strftime("%d/%m/%Y %H:%M"),
        )
        for row, (start, end) in enumerate(true_stays())
    ]
    records = read_records(workbook(rows), name="stays.xlsx")

    assert list(zip(records.stays["start"], records.stays["end"], strict=True)) == true_stays()


@pytest.mark.parametrize(("cells", "is_asked"), [(7, False), (8, True)])
def test_a_few_early_cells_may_be_chance(cells: int, is_asked: bool) -> None:
    """Eight honest dates all lie on days 1 to 12 of a month once in 1,700 files, (12 / 30.4) ** 8; of fewer nothing is made."""
    early = [moment for both in true_stays() for moment in both if moment.day <= 12][: 2 * cells : 2]
    late = [start for start, end in true_stays() if 12 < start.day < 24]
    ends = [start + dt.timedelta(days=2) for start in late]
    rows = [
        (f"p{row}", "Heron", f"{start:%d/%m/%Y %H:%M}", f"{end:%d/%m/%Y %H:%M}")
        for row, (start, end) in enumerate(zip(late, ends, strict=True))
    ]
    rows += [(f"q{row}", "Heron", start, None) for row, start in enumerate(early)]
    if is_asked:
        with pytest.raises(UnreadableRecords, match="exchanged day and month"):
            read_records(workbook(rows), name="stays.xlsx")
    else:
        assert read_records(workbook(rows), name="stays.xlsx").report.rows_in == len(rows)


def all_as_dates(exchange: int) -> bytes:
    """Return a CSV file all of whose dates are ISO, day and month of the first ``exchange`` rows exchanged up to day 12."""
    lines = [",".join(HEADINGS)]
    for row, both in enumerate(true_stays()):
        start, end = (
            moment.replace(day=moment.month, month=moment.day) if row < exchange and moment.day <= 12 else moment
            for moment in both
        )
        lines.append(f"p{row},Heron,{start:%Y-%m-%d %H:%M},{end:%Y-%m-%d %H:%M}")
    return "\n".join(lines).encode()


def test_too_many_swaps_for_slips_are_asked_about() -> None:
    """Where all dates became dates, only stays that end before they start show it: at 1 row in 200 it is no chance."""
    with pytest.raises(UnreadableRecords, match="too many for slips") as problem:
        read_records(all_as_dates(600), name="stays.csv")
    assert problem.value.question.ends_before_start[OTHER] == 0

    mended = read_records(all_as_dates(600), name="stays.csv", date_order=OTHER)
    assert list(zip(mended.stays["start"], mended.stays["end"], strict=True)) == true_stays()


def few_slips(slips: int) -> bytes:
    """Return a CSV file of 1,000 stays, the end of some of which, 2 or 3 March, is written 3 February or March."""
    lines = [",".join(HEADINGS)]
    for row in range(1000):
        start, end = pd.Timestamp("2024-02-28 10:00"), pd.Timestamp("2024-03-02 10:00")
        shown = exchanged(np.array([int(end.timestamp())]))[0] if row < slips else int(end.timestamp())
        lines.append(
            f"p{row},Heron,{start + pd.Timedelta(minutes=row):%Y-%m-%d %H:%M},{pd.Timestamp(shown, unit='s'):%Y-%m-%d %H:%M}"
        )
    return "\n".join(lines).encode()


@pytest.mark.parametrize(("slips", "repaired", "aside"), [(2, 0, 2), (3, 3, 0), (5, 5, 0)])
def test_single_slips_are_mended_from_three_on_and_told(slips: int, repaired: int, aside: int) -> None:
    """Two swapped ends in a file are no pattern; three to one row in 200 are mended, with a warning of unseen ones."""
    report = read_records(few_slips(slips), name="stays.csv").report

    assert (report.repaired, report.set_aside) == (repaired, aside)
    assert any("wrong way round" in note for note in report.notes) == bool(repaired)


def test_more_than_one_in_two_hundred_is_asked_about() -> None:
    """Six of 1,000 rows are more than five."""
    with pytest.raises(UnreadableRecords, match="6 of 1,000 stays"):
        read_records(few_slips(6), name="stays.csv")


def test_files_beside_the_stays_are_asked_about_too() -> None:
    """A list of refusals that went through such a spreadsheet stops and asks; the answer gives the true days."""
    days = [start for start, _ in true_stays()]
    lines = ["date,ward"]
    for day in days:
        shown = spoilt(day, "%d/%m/%Y")
        lines.append(f"{shown if isinstance(shown, str) else f'{shown:%Y-%m-%d}'},Heron")
    content = "\n".join(lines).encode()
    with pytest.raises(UnreadableRecords, match="exchanged day and month") as problem:
        read_refusals(content, name="refusals.csv")

    assert problem.value.question.ends_before_start == {}
    assert "stays" not in str(problem.value)
    read = read_refusals(content, name="refusals.csv", date_order=OTHER).table["time"]
    assert sorted(read.dt.normalize()) == [pd.Timestamp(day.date()) for day in days]
