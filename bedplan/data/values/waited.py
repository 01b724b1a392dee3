"""Waits as lists of requests write them: two times, or hours; what nobody can read is not known, never a short wait."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.files.dates import BLANK_WORDS, DAY_SECONDS, MISSING, UNREADABLE

if TYPE_CHECKING:
    import pandas as pd
    from numpy.typing import NDArray

    from bedplan.data.files.texttable import TextTable

WAITS = ("wait_hours", "wait_minutes")
HOUR_SECONDS = 3_600
MINUTES_WORD = r"m|mins?|minutes?|minuten"
DECIMAL = re.compile(
    rf"(?P<figure>[-−]?\d+(?:[.,]\d+)?)\s*(?:(?P<minutes>{MINUTES_WORD})|h|hrs?|hours?|std|stunden|uur)?\.?",
    re.IGNORECASE | re.ASCII,
)
CLOCKED = re.compile(r"(?:(?P<days>-?\d+) days?,? )?(?P<sign>[-−]?)(?P<hours>\d+):(?P<minutes>[0-5]\d)(?::[0-5]\d.*)?")


def hours_of(cell: str) -> float | None:
    """How many hours does a cell such as 6.5, 6,5 h, 06:30 or 390 min name? None where it names none.

    Checked by: tests/data/values/test_waited.py
    """
    fits = DECIMAL.fullmatch(cell)
    if fits:
        figure = float(fits["figure"].replace(",", ".").replace("−", "-"))
        return figure / 60 if fits["minutes"] else figure
    fits = CLOCKED.fullmatch(cell)
    if fits is None:
        return None
    hours = int(fits["hours"]) + int(fits["minutes"]) / 60
    return 24 * int(fits["days"] or 0) + (-hours if fits["sign"] else hours)


def read_waits(
    text: TextTable,
    asked: NDArray[np.int64],
    placed: NDArray[np.int64] | None,
    day_only: NDArray[np.bool_],
    outcome_given: NDArray[np.bool_] | None,
) -> dict[str, NDArray]:
    """How many hours did each request wait (not a number = not known, below 0 = impossible), and was a bed never given?

    From two times, where both have a time of day, else from the column of hours. ``outcome_given``: which outcomes say
    that a bed was given, None without outcomes. No bed was given where the outcome says otherwise and no time is told,
    or where the time is blank and there is no outcome.
    """
    hours = np.array([_nan(hours_of(cell)) for cell in text.strings("wait_hours")])
    if "wait_minutes" in text.columns:
        minutes = np.array([_nan(hours_of(cell)) for cell in text.strings("wait_minutes")]) / 60
        hours = np.where(np.isnan(hours), minutes, hours)
    told = np.array([cell.lower() not in BLANK_WORDS for cell in text.strings("outcome")])
    if placed is not None:
        hours = np.where((asked > UNREADABLE) & (placed > UNREADABLE), _apart(asked, placed, day_only), hours)
    blank = np.isnan(hours) if placed is None else placed == MISSING
    if outcome_given is None:
        never = blank & np.isnan(hours) & (placed is not None)
    else:
        never = blank & np.where(told, ~outcome_given, placed is not None)
    return {"wait_hours": np.where(never, np.nan, hours), "never_given": never}


def unknown_note(table: pd.DataFrame) -> list[str]:
    """Say of how many of these requests nobody knows the wait."""
    if "wait_hours" not in table:
        return []
    unknown = int((table["wait_hours"].isna() & ~table["never_given"]).sum())
    told = "Of 1 request" if unknown == 1 else f"Of {unknown:,} requests"
    return [f"{told} the wait is not known: it is not taken for a short one."] if unknown else []


def _nan(hours: float | None) -> float:
    """Return hours, not a number where none are told."""
    return np.nan if hours is None else hours


def _apart(asked: NDArray[np.int64], placed: NDArray[np.int64], day_only: NDArray[np.bool_]) -> NDArray[np.float64]:
    """Return the hours between two times; between days without a time of day only that the second comes first."""
    seconds = np.where(placed > UNREADABLE, placed, 0) - np.where(asked > UNREADABLE, asked, 0)
    bare = day_only | (not (_has_clock(asked) and _has_clock(placed)))
    days = placed // DAY_SECONDS - asked // DAY_SECONDS
    return np.where(bare, np.where(days < 0, 24.0 * days, np.nan), seconds / HOUR_SECONDS)


def _has_clock(seconds: NDArray[np.int64]) -> bool:
    """Does any of these times have a time of day?"""
    return bool(((seconds > UNREADABLE) & (seconds % DAY_SECONDS != 0)).any())
