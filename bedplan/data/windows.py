"""From when to when is a file complete? Found from the rows, because exports seldom say."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.dates import DAY_SECONDS, MISSING
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    import datetime as dt

    from numpy.typing import NDArray

    from bedplan.data.rows import Rows

THIN = 0.5  # fewer than this share of the usual starts a day: patients already in, not a window of admissions
FEWEST_STARTS = 50  # to know what the usual gap is
MOST_QUIET_ARRIVALS = 20.0  # usual gaps between starts after which a silence means that the file stopped


def seen_until(rows: Rows, has_times: bool) -> int:
    """Up to when was the file watched? The midnight after the last thing that happened; 0 where nothing did."""
    live = rows.live
    if not live.any():
        return 0
    last = max(int(rows.start[live].max()), int(rows.end[live].max()))
    return -(-(last + (0 if has_times else 1)) // DAY_SECONDS) * DAY_SECONDS


def chosen_window(window: tuple[dt.date, dt.date] | None) -> tuple[int, int] | None:
    """Return a window somebody chose, first and last day included, in seconds."""
    if window is None:
        return None
    first, last = (int(pd.Timestamp(day).normalize().timestamp()) for day in window)
    if last < first:
        raise UnreadableRecords([f"A window from {window[0]} to {window[1]} ends before it starts: swap the two days."])
    return first, last + DAY_SECONDS


def find_window(start: NDArray[np.int64], end: NDArray[np.int64], until: int) -> tuple[int, int]:
    """Between which two midnights does the file hold every stay? Seconds since 1970.

    A file of *all stays that touch the window* shows a few early starts (patients already in) and no end before the
    window: it begins on the day of the first end. A file chosen by admission date begins with its first start.

    Checked by: tests/data/test_windows.py
    """
    first_start = int(start.min()) // DAY_SECONDS * DAY_SECONDS
    last = _last_moment(start, until)
    finished = end != MISSING
    if not finished.any():
        return first_start, max(last, first_start + DAY_SECONDS)
    first_end = int(end[finished].min()) // DAY_SECONDS * DAY_SECONDS
    first = first_start
    if first_end > first_start and last > first_end:
        before = float((start < first_end).sum()) / ((first_end - first_start) / DAY_SECONDS)
        usual = float((start >= first_end).sum()) / ((last - first_end) / DAY_SECONDS)
        first = first_end if before < THIN * usual else first_start
    return first, max(last, first + DAY_SECONDS)


def _last_moment(start: NDArray[np.int64], until: int) -> int:
    """Return the end of the window: the last event, or the day of the last start where starts stop long before."""
    last_start = int(start.max())
    if start.size < FEWEST_STARTS:
        return until
    usual_gap = (last_start - int(np.median(start))) / max(start.size / 2, 1)
    if until - last_start > max(MOST_QUIET_ARRIVALS * usual_gap, 3 * DAY_SECONDS):
        return -(-(last_start + 1) // DAY_SECONDS) * DAY_SECONDS
    return until
