"""Lonely dates: a mistyped year must not stretch the period of a file, nor a stay by a year."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.cleaning.single_rows import longest_stays
from bedplan.data.files.blocks import in_blocks
from bedplan.data.files.dates import DAY_SECONDS, MISSING

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.data.values.rows import Rows

FEWEST_STAYS = 50  # below, nobody can say what is far from all others
FEWEST_LONELY, MOST_LONELY_SHARE = 2, 1 / 1_000  # so many may be lonely; more are a quiet time, not mistypes
LONELY_DAYS = 28
LONELY_GAPS = 20.0  # usual gaps between starts
YEAR_DAYS = 365
YEAR_SECONDS = 31_557_600
NEARLY_A_YEAR_DAYS = 330  # a year less the time that the latest stays last
UNBELIEVED_YEARS = 3  # in one stay, of somebody in already when all others begin to come
FAR_LONGER = 3  # times as long as any other stay on the ward; common practice, no source


def set_mistyped_aside(rows: Rows, wards: int) -> list[str]:
    """Set aside the few stays dated far from all others, where only a mistyped year explains it; say which.

    Far: after (or before) a gap without any start of more than 28 days and 20 usual gaps, beyond which lie at most 2 or
    1 in 1,000 of the stays. Aside go stays that start after it, or end well before everybody else's start. A stay of
    which only one end lies so far out may be real (in for long when the file begins; admitted in the period and in for
    long after it): it goes where it is a year or more long, more than three times as long as any other on its ward
    and of ordinary length but for whole years (and, where it is the start that lies far out, three years), or where its end comes nearly a year after everything else.

    Checked by: tests/data/cleaning/test_mistyped.py
    """
    usable = rows.live & (rows.is_open | (rows.end >= rows.start))
    size = int(usable.sum())
    if size < FEWEST_STAYS:
        return []
    first = int(rows.start.min(where=usable, initial=np.iinfo(np.int64).max)) // DAY_SECONDS
    counts = _starts_by_day(rows, usable, first)
    low, high = (first + day for day in _core(counts, size))
    late = usable & (rows.start >= (high + 1) * DAY_SECONDS) if high < first + counts.size - 1 else np.zeros(0, bool)
    early = usable & (rows.start < low * DAY_SECONDS) if low > first else np.zeros(0, bool)
    found = [
        np.flatnonzero(late),
        *_early(rows, np.flatnonzero(early), low, wards),
        *_late_ends(rows, usable, high, wards, size),
    ]
    which = np.unique(np.concatenate(found))
    if not which.size:
        return []
    rows.mark(which, "mistyped year")
    usable[which] = False
    return _told(rows, which, usable)


def _starts_by_day(rows: Rows, usable: NDArray[np.bool_], first: int) -> NDArray[np.int64]:
    """Return how many stays start on each day from ``first`` on."""

    def count(block: slice) -> NDArray[np.int64]:
        """Count one block."""
        return np.bincount(rows.start[block][usable[block]] // DAY_SECONDS - first)

    parts = in_blocks(rows.start.size, count)
    counts = np.zeros(max(part.size for part in parts), dtype=np.int64)
    for part in parts:
        counts[: part.size] += part
    return counts


def _core(counts: NDArray[np.int64], size: int) -> tuple[int, int]:
    """Return the first and the last day of all starts but the lonely ones."""
    days, reach = np.flatnonzero(counts), np.cumsum(counts)
    middle = np.searchsorted(reach, [size / 4, 3 * size / 4])
    gap = max(LONELY_DAYS, LONELY_GAPS * (middle[1] - middle[0] + 1) / (size / 2))
    few = max(FEWEST_LONELY, size * MOST_LONELY_SHARE)
    wide = np.flatnonzero(np.diff(days) > gap)
    before = wide[reach[days[wide]] <= few]
    after = wide[size - reach[days[wide]] <= few]
    return int(days[before[-1] + 1]) if before.size else int(days[0]), (
        int(days[after[0]]) if after.size else int(days[-1])
    )


def _early(rows: Rows, which: NDArray[np.int64], low: int, wards: int) -> list[NDArray[np.int64]]:
    """Return those early starters who left long before everybody else came, or stayed for unbelievable years."""
    if not which.size:
        return []
    gone = ~rows.is_open[which] & (rows.end[which] < (low - LONELY_DAYS) * DAY_SECONDS)
    stayed = _years_too_long(rows, which[~gone], wards)
    return [which[gone], stayed[rows.end[stayed] - rows.start[stayed] > UNBELIEVED_YEARS * YEAR_SECONDS]]


def _late_ends(rows: Rows, usable: NDArray[np.bool_], high: int, wards: int, size: int) -> list[NDArray[np.int64]]:
    """Return stays that end far after everything else though they start among the others."""
    limit = (high + 1 + LONELY_DAYS) * DAY_SECONDS
    parts = in_blocks(rows.end.size, lambda block: block.start + np.flatnonzero(rows.end[block] > limit))
    which = np.concatenate(parts)
    which = which[usable[which] & (rows.start[which] < (high + 1) * DAY_SECONDS)]
    if not which.size:
        return []
    which = which[np.argsort(rows.end[which], kind="stable")]
    ends = np.concatenate(([limit - LONELY_DAYS * DAY_SECONDS], rows.end[which]))
    years = np.flatnonzero(np.diff(ends) > NEARLY_A_YEAR_DAYS * DAY_SECONDS)
    few = max(FEWEST_LONELY, size * MOST_LONELY_SHARE)
    lonely = [which[gap:] for gap in years if which.size - gap <= few][:1]
    return [*lonely, _years_too_long(rows, which[-int(few) :], wards)]


def _years_too_long(rows: Rows, which: NDArray[np.int64], wards: int) -> NDArray[np.int64]:
    """Return stays far longer than any other on their ward that would be ordinary but for whole years."""
    which = which[~rows.is_open[which]]
    stay = rows.end[which] - rows.start[which]
    ends = rows.end[which].copy()
    rows.end[which] = rows.start[which]  # so that the longest of the others shows
    longest = longest_stays(rows, wards)[rows.ward[which]]
    rows.end[which] = ends
    ordinary = stay - np.round(stay / YEAR_SECONDS) * YEAR_SECONDS
    ordinary = np.where(ordinary < -DAY_SECONDS, ordinary + YEAR_SECONDS, ordinary)
    far = (stay >= (YEAR_DAYS - 1) * DAY_SECONDS) & (stay > FAR_LONGER * longest) & (ordinary <= longest)
    return which[far]


def _told(rows: Rows, which: NDArray[np.int64], others: NDArray[np.bool_]) -> list[str]:
    """Quote the dates of the worst of these stays, and of the others."""
    first = int(rows.start.min(where=others, initial=np.iinfo(np.int64).max))
    last = max(int(rows.start.max(where=others, initial=0)), int(rows.end.max(where=others, initial=0)))
    start, end = rows.start[which], rows.end[which]
    out = np.maximum(first - start, np.maximum(start, end) - last)
    worst = int(out.argmax())
    months = max(round(int(out[worst]) / YEAR_SECONDS * 12), 1)
    away = "1 month" if months == 1 else f"{months:,} months"
    side = "before the first other start" if first - start[worst] == out[worst] else "after the last other event"
    until = "without an end" if end[worst] == MISSING else f"to {_day(end[worst])}"
    one = which.size == 1
    told = "1 stay is" if one else f"{which.size:,} stays are dated far from all others, one of them"
    told += (
        f" dated {away} {side} ({_day(start[worst])} {until}; all others lie between {_day(first)} and {_day(last)})"
    )
    return [f"{told}: a mistyped year? {'It is' if one else 'They are'} set aside."]


def _day(seconds: int) -> str:
    """Return a day in words."""
    return f"{pd.Timestamp(int(seconds), unit='s'):%d %B %Y}"
