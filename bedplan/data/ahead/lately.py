"""Did the level of arrivals change in the latest weeks, beyond what trend, season, drift and chance lead one to expect?"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

from bedplan.data.ahead.trend import Trend, fit_trend

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    Days = NDArray[np.int64]

LATELY_DAYS = (28, 56, 112, 182)  # looked at for a change of level
CLEAR_CHANGE = 2.75  # standard errors: the most that chance gives to about one steady ward in a hundred
FEWEST_ARRIVALS, FEWEST_DAYS = 200, 90  # before the change
# Of wards, so many see a lasting or passing change of level in half a year; its usual size (SD). Common practice, no source.
CHANGING, USUAL_CHANGE = 0.1, 0.25
FEWEST_WEEKS = 2  # that a level must have lasted
MOST_EVIDENCE = 500.0  # beyond it a chance is 1 in any arithmetic
WORTH_A_LOOK = 1.0  # standard errors of chance off a trend of all days: nearer, nothing before can be clearly off


@dataclass(frozen=True, slots=True, eq=False)
class LevelChange:
    """How many came in the last ``days`` that count, and how many those ``before`` would have led one to expect.

    ``standard_errors``: by how many the two are apart.
    """

    days: int
    came: int
    expected: float
    before: Trend
    standard_errors: float

    @property
    def is_clear(self) -> bool:
        """Is it so large that chance gives it to about one steady ward in a hundred?"""
        return self.standard_errors > CLEAR_CHANGE

    @property
    def chance(self) -> float:
        """How likely is it that the level changed, rather than chance gave this?

        Source: Bayes' rule for a normal change of unknown size; Jeffreys 1961, Theory of Probability, chapter 5.
        """
        own = (self.share / self.standard_errors) ** 2
        told = USUAL_CHANGE**2 / (own + USUAL_CHANGE**2)
        odds = CHANGING / (1.0 - CHANGING) * math.sqrt(1.0 - told)
        return 1.0 / (1.0 + math.exp(-min(0.5 * self.standard_errors**2 * told, MOST_EVIDENCE)) / odds)

    @property
    def share(self) -> float:
        """By which share did arrivals change?"""
        return self.came / self.expected - 1.0

    @property
    def error(self) -> float:
        """How far may the latest level be off by chance? Its standard error, as a share of it."""
        return math.sqrt(max(self.before.swing.clustering, 1.0) / max(self.came, 1))

    def carried_on(self, days: Days) -> Array:
        """How many come on each of these days if the change lasts?"""
        return self.before.expected(days) * (1.0 + self.share)


def level_change(counts: Array, days: Days, whole: Trend | None = None) -> LevelChange | None:
    """Did more or fewer come in the last 4 to 26 weeks of these counts (n,) than those before gave?

    ``days`` (n,): the number of each. The clearest change counts, by standard errors of what was to be expected: its chance, its drift, and how far trend and
    season were known; it counts from the week on that fits best. None where there is hardly any, or too little before it
    to tell. ``whole``: the
    trend of all these counts, where it is known already; it saves looking where nothing can be found.

    Checked by: tests/data/ahead/test_lately.py
    """
    clearest, found = WORTH_A_LOOK, None
    for lately in LATELY_DAYS:
        if counts.size - lately < FEWEST_DAYS or counts[:-lately].sum() < FEWEST_ARRIVALS:
            break
        came = float(counts[-lately:].sum())
        if whole and abs(came - whole.expected(days[-lately:]).sum()) < WORTH_A_LOOK * math.sqrt(came):
            continue
        before = fit_trend(counts[:-lately], days[:-lately])
        told = before.expected(days[-lately:])
        expected = float(told.sum())
        unsure = float(before.variance_of_rate(days[-lately:]) @ told) / expected
        if before.swing.drift is not None:
            unsure += before.swing.drift.variance_of_mean(lately)
        off = abs(came - expected) / math.sqrt(expected * max(before.swing.clustering, 1.0) + expected**2 * unsure)
        if off > clearest:
            clearest, found = off, _since_when(counts[-lately:], told, before, off)
    return found


def _since_when(counts: Array, told: Array, before: Trend, off: float) -> LevelChange:
    """Return the change from the week on that makes these counts (d,) likeliest, if two levels meet there."""
    weeks = np.arange(FEWEST_WEEKS, counts.size // 7 + 1) * 7
    came, expected = (np.cumsum(part[::-1])[weeks - 1] for part in (counts, told))
    likely = special.xlogy(came, came / expected) - came + expected
    best = int(likely.argmax())
    return LevelChange(int(weeks[best]), int(came[best]), float(expected[best]), before, off)
