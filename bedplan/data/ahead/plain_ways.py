"""What has to be beaten: the same week of the year before, and the average formula, each as a band and not one number."""

from __future__ import annotations

from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.ahead.chances import at_most

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    Whole = NDArray[np.int64]

SAME_WEEKDAY_DAYS = 364
FEWEST_ERRORS = 91  # days whose error is known; common practice, no source
TAIL = 10.0  # standard deviations


def same_week_chances(census: Whole, counted: NDArray[np.bool_], origins: Sequence[int]) -> Array:
    """How likely are at most 0, 1, … patients, if it comes again as 364 days before, give or take how far that was off?

    ``census`` and ``counted`` (days,); each stretch of days from one of ``origins`` to the next is told with the errors
    known when it began. Where fewer than 91 are, what one count tells of another: a negative binomial (Jeffreys' rule).
    Returns ``(days from the first origin, counts)``.

    Source: Tashman 2000 (naive forecasts by origin); Jeffreys 1946 (one count of another).
    Checked by: tests/data/ahead/test_plain_ways.py
    """
    counts = np.arange(_top(float(census.max())) + 1)
    both = counted & np.concatenate((np.zeros(SAME_WEEKDAY_DAYS, dtype=bool), counted[:-SAME_WEEKDAY_DAYS]))
    told = []
    for begin, end in pairwise([*origins, census.size]):
        earlier = np.flatnonzero(both[:begin])
        errors = np.sort(census[earlier] - census[earlier - SAME_WEEKDAY_DAYS])
        known = census[begin - SAME_WEEKDAY_DAYS : end - SAME_WEEKDAY_DAYS]
        if errors.size < FEWEST_ERRORS:
            told.append(at_most(known + 0.5, np.full(known.size, 2.0), counts[-1]))
        else:
            told.append(np.searchsorted(errors, counts - known[:, None], side="right") / errors.size)
    return np.vstack(told)


def average_chances(average: float, days: int, most: int) -> Array:
    """How likely are at most 0, 1, … patients on each day, if so many are in on average and chance does the rest?

    ``most``: the most patients ever in. Returns ``(days, counts)``, every day alike.

    Source: Poisson's law, as for patients present where nobody is turned away.
    Checked by: tests/data/ahead/test_plain_ways.py
    """
    told = at_most(np.array([average]), np.ones(1), _top(max(average, float(most))))
    return np.repeat(told, days, axis=0)


def ended_at(chances: Array, beds: Whole | None) -> Array:
    """What is left of these chances (days, counts) where a day's beds (days,) hold nobody more? As given without beds."""
    if beds is None:
        return chances
    return np.where(np.arange(chances.shape[1]) >= beds[:, None], 1.0, chances)


def _top(most: float) -> int:
    """Return a count that is as good as never passed."""
    return int(2.0 * most + TAIL * np.sqrt(most + 1.0)) + 1
