"""Dates in which a spreadsheet of another country has exchanged day and month: their signs, the question, the mending.

Where 05/03/2024 means 5 March, such a spreadsheet makes a date cell of 3 May of it, and leaves 25/03/2024 as text.
"""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, NamedTuple

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.compute as pc

from bedplan.data.files.blocks import each
from bedplan.data.files.dates import DAY_SECONDS, UNREADABLE, TimesRead
from bedplan.data.values.choices import AS_THEY_STAND, EXCHANGED, DateQuestion
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

LAST_MONTH = 12  # a day up to this one could be a month
# Days 1 to 12 are 12 of 30.4: of 8 honest dates all lie there once in 1,700 files, (12 / 30.4) ** 8.
FEWEST_CELLS = 8
MOSTLY = 0.9  # a few cells were typed in afterwards
CELL = r"^\s*(?:\d{4}-\d{2}-\d{2}|[2-6]\d{4}(?:[.,]\d+)?\s*$)"  # as date cells come, and as exports write them
SHOWN = 3
LIKELY = (631_152_000, 2_524_608_000)  # from 1990 to 2049


class Signs(NamedTuple):
    """Dates in date cells; those of them up to day 12; dates typed as text; those of them that both orders allow."""

    cells: int
    early_cells: int
    typed: int
    open_typed: int

    @property
    def are_there(self) -> bool:
        """Do nearly all date cells lie on days 1 to 12, and nearly all dates that stayed text on later ones?"""
        return (
            self.cells >= FEWEST_CELLS
            and self.early_cells >= MOSTLY * self.cells
            and self.typed > 0
            and self.open_typed <= (1 - MOSTLY) * self.typed
        )


def exchanged(seconds: NDArray[np.int64]) -> NDArray[np.int64]:
    """Return the times with day and month exchanged, UNREADABLE where that gives no date."""
    days = (seconds // DAY_SECONDS).astype("datetime64[D]")
    months = days.astype("datetime64[M]")
    day = (days - months).astype(np.int64) + 1
    year = months.astype("datetime64[Y]")
    month = (months - year.astype("datetime64[M]")).astype(np.int64) + 1
    possible = (day <= LAST_MONTH) & (seconds > UNREADABLE)
    other = (year.astype("datetime64[M]") + np.where(possible, day - 1, 0)).astype("datetime64[D]") + (month - 1)
    return np.where(possible, other.astype(np.int64) * DAY_SECONDS + seconds % DAY_SECONDS, UNREADABLE)


def ask_about_cells(
    name: str, columns: Mapping[str, pa.ChunkedArray], read: Mapping[str, TimesRead], *, are_stays: bool = True
) -> None:
    """Stop and ask where date cells and dates that stayed text show that a spreadsheet exchanged day and month.

    Raises:
        UnreadableRecords: they show it; both readings are in ``.question``.

    Checked by: tests/data/values/test_exchanged.py
    """
    typed = sum(int(np.count_nonzero(times.by_numbers)) for times in read.values())
    known = sum(int((times.seconds > UNREADABLE).sum()) for times in read.values()) if typed else 0
    if known - typed < FEWEST_CELLS:
        return
    cells = {key: are_cells(column) for key, column in columns.items()}
    of_cells = np.concatenate([times.seconds[cells[key] & _is_likely(times.seconds)] for key, times in read.items()])
    decided = sum(times.day_first_only + times.month_first_only for times in read.values())
    signs = Signs(of_cells.size, int((exchanged(of_cells) > UNREADABLE).sum()), typed, typed - decided)
    if not signs.are_there:
        return
    told = (
        f"Nearly all dates in {name} that are date cells, or written so, lie on days 1 to {LAST_MONTH} of a month, nearly all "
        "that are text on later days: a spreadsheet has probably exchanged day and month in the date cells"
    )
    stand = {key: times.seconds for key, times in read.items()}
    other = {key: np.where(cells[key], exchanged_early(times.seconds), times.seconds) for key, times in read.items()}
    raise question(told, stand, other, are_stays=are_stays)


def _is_likely(seconds: NDArray[np.int64]) -> NDArray[np.bool_]:
    """Which of these are dates of patients, and not what a system writes for none, such as 1 January 1900 or 31 December 2099?"""
    return (seconds > LIKELY[0]) & (seconds < LIKELY[1])


def question(
    told: str,
    stand: Mapping[str, NDArray[np.int64]],
    other: Mapping[str, NDArray[np.int64]],
    *,
    are_stays: bool = True,
) -> UnreadableRecords:
    """Build the question whether day and month were exchanged, from the times as they stand and exchanged, by column."""
    differ = [(stand[key][which], other[key][which]) for key in stand for which in [stand[key] != other[key]]]
    first, second = (np.concatenate(both) // DAY_SECONDS for both in zip(*differ, strict=True))
    rows = np.sort(np.unique(first, return_index=True)[1])[:SHOWN]
    examples = [
        (f"{_day(first[row]):%Y-%m-%d}", *(f"{_day(one[row]):%d %B %Y}" for one in (first, second))) for row in rows
    ]
    shown = "; ".join(f"“{written}” is {one} or {another}" for written, one, another in examples)
    told = f"{told} ({shown}). Say which it is"
    negative = {}
    if are_stays:
        negative = {
            answer: int(((both["end"] < both["start"]) & (both["end"] > UNREADABLE)).sum())
            for answer, both in ((AS_THEY_STAND, stand), (EXCHANGED, other))
        }
        counts = [f"{answer}, {count:,}" for answer, count in negative.items()]
        told += f": {counts[0]} stays would end before they start; {counts[1]}"
    problem = UnreadableRecords([f"{told}."])
    readings = ("as it stands", "with day and month exchanged")
    problem.question = DateQuestion(tuple(examples), negative, (AS_THEY_STAND, EXCHANGED), readings)
    return problem


def _day(days: np.int64) -> pd.Timestamp:
    """Return a day."""
    return pd.Timestamp(int(days), unit="D")


def put_right(columns: Mapping[str, pa.ChunkedArray], read: Mapping[str, TimesRead]) -> dict[str, TimesRead]:
    """Exchange day and month of dates up to day 12: of date cells where there are any beside dates as text, else of all."""
    cells = {key: are_cells(column) for key, column in columns.items()}
    only_cells = any(which.any() for which in cells.values()) and any(times.by_numbers.any() for times in read.values())
    return {
        key: replace(
            times, seconds=np.where(cells[key] | (not only_cells), exchanged_early(times.seconds), times.seconds)
        )
        for key, times in read.items()
    }


def exchanged_early(seconds: NDArray[np.int64]) -> NDArray[np.int64]:
    """Return the times with day and month exchanged where that gives a date, else as they are."""
    other = exchanged(seconds)
    return np.where(other > UNREADABLE, other, seconds)


def are_cells(column: pa.ChunkedArray) -> NDArray[np.bool_]:
    """Which of these dates are date cells, or day numbers, and not text?"""
    if pa.types.is_timestamp(column.type):
        return np.ones(len(column), dtype=bool)
    parts = each(lambda chunk: pc.fill_null(pc.match_substring_regex(chunk, CELL), False), column.chunks)
    return np.concatenate([np.zeros(0, dtype=bool), *(part.to_numpy(zero_copy_only=False) for part in parts)])
