"""The first method of looking ahead: trend, season and weekday by one regression, freed from chance."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.ahead.rhythm import (
    LEAST_DAYS_FOR_GROWTH,
    LEAST_DAYS_FOR_SEASON,
    YEAR_DAYS,
    Rhythm,
    Swing,
    measure_swing,
)

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    Days = NDArray[np.int64]

HARMONICS = 3  # waves a year: enough for a winter peak and a summer dip, too few to follow chance
LEVEL, SEASON, WEEK, GROWTH = 0, slice(1, 1 + 2 * HARMONICS), slice(1 + 2 * HARMONICS, 7 + 2 * HARMONICS), -1
# Seven weekdays as six differences at right angles, none of which touches the level.
CONTRASTS = np.linalg.svd(np.eye(7) - 1.0 / 7.0)[0][:, :6]
LEAST_ARRIVALS_FOR_GROWTH = 200
USUAL_GROWTH = 0.05  # growth a year beyond this, either way, is rare: what few data say is drawn towards none
HARDLY = 1e-3  # the least pull towards no effect: it keeps an empty weekday finite
ROUNDS = 40
LEAST_DISPERSION = 0.1


@dataclass(frozen=True, slots=True)
class Trend:
    """Counts a day as level × growth × season × weekday, and how far each may be off.

    ``effects`` (k,) are logs, ``covariance`` (k, k) theirs; growth is counted from ``origin``, a day number since
    1 January 1970. ``swing`` says how far counts swing around it.
    """

    effects: Array
    covariance: Array
    origin: int
    swing: Swing

    @property
    def growth_per_year(self) -> float:
        """By which share do counts grow each year?"""
        return math.expm1(float(self.effects[GROWTH]))

    @property
    def growth_error(self) -> float:
        """How far may that be off? Its standard error."""
        return math.sqrt(float(self.covariance[GROWTH, GROWTH])) * math.exp(float(self.effects[GROWTH]))

    def expected(self, days: Days) -> Array:
        """How many are expected on each of these days?"""
        return np.exp(np.clip(_design(days, self.origin) @ self.effects, -30.0, 30.0))

    def variance_of_rate(self, days: Days) -> Array:
        """How far may the level of a week around each day be off? Variance ÷ its square, chance left out."""
        design = _design(days, self.origin)
        busy = np.exp(CONTRASTS @ self.effects[WEEK])
        design[:, WEEK] = busy / busy.sum() @ CONTRASTS  # a weekday on which hardly anyone comes hardly matters
        return np.einsum("ij,jk,ik->i", design, self.covariance, design)

    def weekday_share(self, days: Days) -> Array:
        """How busy is each day's weekday against the mean of a week?"""
        week = np.exp(CONTRASTS @ self.effects[WEEK])
        return (week / week.mean())[(days + 3) % 7]


def fit_trend(counts: Array, days: Days, *, usual_growth: float = 0.0, growth_spread: float = USUAL_GROWTH) -> Trend:
    """What do these counts (n,) on these days (n,), numbered since 1 January 1970, follow?

    A Poisson regression on growth, three waves a year and weekdays at once. Each group of effects is drawn towards no
    effect by what chance alone explains; growth towards ``usual_growth`` as if that were known to ``growth_spread``.
    Days may be missing. Under 330 days no season is told, under 548 no growth.

    Source: Nelder & Wedderburn 1972 (regression); Efron & Morris 1975 (drawing in).
    Checked by: tests/data/ahead/test_trend.py
    """
    origin = int(days[-1]) + 1
    design = _design(days, origin)
    if days.size < LEAST_DAYS_FOR_SEASON:
        design[:, SEASON] = 0.0
    growing = days.size >= LEAST_DAYS_FOR_GROWTH and counts.sum() >= LEAST_ARRIVALS_FOR_GROWTH
    if not growing:
        design[:, GROWTH] = 0.0
    pull, towards = np.full(design.shape[1], HARDLY), np.zeros(design.shape[1])
    pull[LEVEL], towards[GROWTH] = 1e-9, math.log1p(usual_growth)
    effects, covariance, expected = _regression(design, counts, pull, towards)
    slow = np.delete(design, WEEK, axis=1)
    swing = measure_swing(counts, Rhythm((), (), 0.0, 0.0, expected, days.size >= LEAST_DAYS_FOR_SEASON, slow))
    worth = max(swing.dispersion, LEAST_DISPERSION)  # as many counts tell as much as one of chance alone
    pull[SEASON] = worth / _between_waves(effects[SEASON], np.diag(covariance)[SEASON] * worth)
    pull[WEEK] = worth / _between_weekdays(effects[WEEK], counts, days, worth)
    pull[GROWTH] = worth / growth_spread**2
    effects, covariance, _ = _regression(design, counts, pull, towards)
    return Trend(effects, covariance * worth, origin, swing)


def _design(days: Days, origin: int) -> Array:
    """Return level, waves, weekdays (Monday first) and years from the origin, a row a day."""
    angles = np.outer(2.0 * np.pi * days / YEAR_DAYS, np.arange(1, HARMONICS + 1))
    weekdays = CONTRASTS[(days + 3) % 7]  # 1 January 1970 was a Thursday
    years = (days - origin)[:, None] / YEAR_DAYS
    return np.hstack([np.ones((days.size, 1)), np.cos(angles), np.sin(angles), weekdays, years])


def _regression(design: Array, counts: Array, pull: Array, towards: Array) -> tuple[Array, Array, Array]:
    """Fit log-linear effects by Newton's method; return effects, their covariance and the expected counts."""
    effects = towards.copy()
    effects[LEVEL] = math.log(max(float(counts.mean()), 1e-6))
    for _ in range(ROUNDS):
        expected = np.exp(np.clip(design @ effects, -30.0, 30.0))
        curvature = (design * expected[:, None]).T @ design + np.diag(pull)
        step = np.linalg.solve(curvature, design.T @ (counts - expected) - pull * (effects - towards))
        effects = effects + np.clip(step, -2.0, 2.0)
        if np.abs(step).max() < 1e-8:
            break
    return effects, np.linalg.inv(curvature), np.exp(np.clip(design @ effects, -30.0, 30.0))


def _between_waves(effects: Array, error_squares: Array) -> float:
    """Return how large waves truly are, as a variance: what their errors don't explain."""
    return max(float((effects**2 / error_squares - 1.0).sum() / (1.0 / error_squares).sum()), 1e-6)


def _between_weekdays(effects: Array, counts: Array, days: Days, worth: float) -> float:
    """Return how far weekdays truly differ, as a variance of their shares: logs would be lost on a day without anyone."""
    busy = np.exp(CONTRASTS @ effects)
    busy = busy / busy.mean()
    chance = worth * busy**2 / np.maximum(np.bincount((days + 3) % 7, weights=counts, minlength=7), 1.0)
    return max(float(((busy - 1.0) ** 2 - chance).sum()) / 6.0, 1e-6)
