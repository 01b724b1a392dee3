"""Rules about one row at a time: missing and impossible dates, swapped days and months, zero stays."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.files.dates import DAY_SECONDS, MISSING, UNREADABLE
from bedplan.data.values.exchanged import exchanged, exchanged_early, question

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.data.values.rows import Rows

EARLIEST = 631_152_000  # 1 January 1990
# What systems write for "no date": 1 January of the years 1, 1753, 1900 and 1970, and a spreadsheet's day 0.
EMPTY_DAYS = np.array(
    ["0001-01-01", "1753-01-01", "1899-12-30", "1899-12-31", "1900-01-01", "1970-01-01"], dtype="datetime64[D]"
).astype(np.int64)
FEWEST_ALIKE = 3  # ends on one day before 1990: no such day comes so often by a slip
MERGED_SHARE = 0.5  # of the rows without a ward, from which merged cells are thought of
FEWEST_SWAPS = 3  # a file "shows swaps" from so many rows on
# Of stays that end before they start by a slip, 1 in 8 makes a believable one by chance once day and month are exchanged:
# the day is up to 12 (12 of 30.4) and the day found within 60 days of the other end (60 of 365), for either end. Where
# such slips are 1 row in 100 (common practice, no source), honest rows look exchanged 1 time in 800: 4 times that is none.
MOST_SWAPS = 1 / 200
LEAST_LONG_STAY_SECONDS = 60 * DAY_SECONDS


def check_dates(rows: Rows, now: int) -> None:
    """Set aside rows whose dates are missing, unreadable or impossible; an end yet to come is an unfinished stay."""
    name_wards_from_above(rows)
    rows.mark(rows.ward < 0, "no ward")
    rows.mark(rows.start == MISSING, "no start")
    rows.mark(rows.start == UNREADABLE, "start unreadable")
    rows.mark(rows.end == UNREADABLE, "end unreadable")
    early_end = ~rows.is_open & (rows.end < EARLIEST)
    none_yet = np.flatnonzero(early_end)
    days, found, often = np.unique(rows.end[none_yet] // DAY_SECONDS, return_inverse=True, return_counts=True)
    none_yet = none_yet[(np.isin(days, EMPTY_DAYS) | (often >= FEWEST_ALIKE))[found]]
    early_end[none_yet] = False
    rows.end[none_yet] = MISSING
    rows.mark(none_yet, "empty end")
    early = (rows.start < EARLIEST) | early_end
    rows.mark(early | (rows.start > now), "unlikely date")
    expected = np.flatnonzero(rows.end > now)
    rows.mark(expected, "end to come")
    rows.end[expected] = MISSING


def name_wards_from_above(rows: Rows) -> None:
    """Give rows without a ward the one named above them, where that is how the file is written: once for many rows.

    That is: half of the rows with a start or more name no ward, and none that does names the same as the one before.
    """
    blank = np.flatnonzero((rows.ward < 0) & (rows.start > UNREADABLE))
    if not blank.size or blank.size < MERGED_SHARE * int((rows.start > UNREADABLE).sum()):
        return
    named = np.flatnonzero((rows.ward >= 0) & ~rows.aside)
    if not named.size or (np.diff(rows.ward[named]) == 0).any():
        return
    blank = blank[blank > named[0]]
    rows.ward[blank] = rows.ward[named[np.searchsorted(named, blank) - 1]]
    rows.mark(blank, "ward above")


def backward(rows: Rows) -> NDArray[np.int64]:
    """Return the rows that end before they start."""
    return np.flatnonzero((rows.end < rows.start) & ~rows.is_open & rows.live)


def mend_clock_change(rows: Rows) -> None:
    """Add an hour to stays that end before they start in the night the clock goes back (between midnight and 03:00)."""
    which = backward(rows)
    which = which[rows.start[which] - rows.end[which] <= 3_600]
    days = (rows.start[which] // DAY_SECONDS).astype("datetime64[D]")
    month = days.astype("datetime64[M]").astype(np.int64) % 12 + 1
    sunday = (days.astype(np.int64) + 3) % 7 == 6  # 1 January 1970 was a Thursday
    night = rows.start[which] % DAY_SECONDS < 3 * 3_600
    mended = which[sunday & night & np.isin(month, (3, 4, 10, 11))]
    rows.end[mended] += 3_600
    rows.mark(mended, "clock change")


def mend_negative(rows: Rows, longest: NDArray[np.int64]) -> int:
    """Exchange day and month where that makes a stay of believable length and the file shows such swaps; else aside.

    Returns how many were exchanged.
    """
    negative = backward(rows)
    start, end, limit = rows.start[negative], rows.end[negative], longest[rows.ward[negative]]
    other_end, other_start = exchanged(end), exchanged(start)
    by_end = np.where(other_end > UNREADABLE, other_end - start, -1)
    by_start = np.where(other_start > UNREADABLE, end - other_start, -1)
    end_fits = (by_end > 0) & (by_end <= limit)
    start_fits = (by_start > 0) & (by_start <= limit)
    use_end = end_fits & (~start_fits | (by_end <= by_start))
    use_start = start_fits & ~use_end
    mended = int((use_end | use_start).sum())
    if mended >= FEWEST_SWAPS:
        rows.end[negative[use_end]] = other_end[use_end]
        rows.start[negative[use_start]] = other_start[use_start]
        rows.mark(negative[use_end | use_start], "swapped")
    rows.mark(backward(rows), "negative")
    return mended if mended >= FEWEST_SWAPS else 0


def note_of_swaps(rows: Rows, mended: int, name: str, *, is_asked: bool) -> list[str]:
    """Say what exchanged days and months mean for the others; stop and ask where they are too many for single slips.

    Raises:
        UnreadableRecords: more than :data:`MOST_SWAPS`, and ``is_asked``: both readings are in ``.question``.
    """
    if not mended:
        return []
    if is_asked and mended > MOST_SWAPS * rows.file_rows:
        stand = {"start": rows.first_start, "end": rows.first_end}
        told = (
            f"{mended:,} of {rows.file_rows:,} stays in {name} end before they start unless day and month are exchanged: "
            "too many for slips, so those that only read too long would be exchanged too"
        )
        raise question(told, stand, {key: exchanged_early(seconds) for key, seconds in stand.items()})
    told = f"Day and month were exchanged in {mended:,} stays that ended before they started"
    return [f"{told}. About as many again may be the wrong way round and read only too long, which nothing shows."]


def longest_stays(rows: Rows, wards: int) -> NDArray[np.int64]:
    """Return, for each ward, how long a stay may be and still be believed: the longest finished one, 60 days or more."""
    longest = np.full(wards, LEAST_LONG_STAY_SECONDS, dtype=np.int64)
    long = np.flatnonzero((rows.end > rows.start + LEAST_LONG_STAY_SECONDS) & rows.live)
    np.maximum.at(longest, rows.ward[long], rows.end[long] - rows.start[long])
    return longest


def drop_zero_stays(rows: Rows, which: NDArray[np.int64]) -> None:
    """Set aside those of ``which`` that end in the minute they start: mostly moves inside the system."""
    rows.mark(which[~rows.is_open[which] & (rows.end[which] - rows.start[which] < 60)], "zero stay")
