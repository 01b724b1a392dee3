"""From when to when is a file complete? Found from the rows, because exports seldom say."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.dates import DAY_SECONDS, MISSING

if TYPE_CHECKING:
    from numpy.typing import NDArray

THIN = 0.5  # fewer than this share of the usual starts a day: patients already in, not a window of admissions
MOST_QUIET_ARRIVALS = 20.0  # usual gaps between starts after which a silence means that the file stopped


def find_window(start: NDArray[np.int64], end: NDArray[np.int64], until: int) -> tuple[int, int]:
    """Between which two midnights does the file hold every stay? Seconds since 1970.

    A file of *all stays that touch the window* shows a few early starts (patients already in) and no end before the
    window: it begins on the day of the first end. A file chosen by admission date begins with its first start.
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
    usual_gap = (last_start - int(np.median(start))) / max(start.size / 2, 1)
    if until - last_start > max(MOST_QUIET_ARRIVALS * usual_gap, 3 * DAY_SECONDS):
        return -(-(last_start + 1) // DAY_SECONDS) * DAY_SECONDS
    return until
