"""The rhythm of arrivals: growth, months, weekdays and hours, told apart and freed from chance."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.ahead.drift import BLOCK_DAYS, Blocks, Drift, find_drift

if TYPE_CHECKING:
    from numpy.typing import NDArray

ROUNDS = 30
YEAR_DAYS = 365.25
FEWEST_FOR_GROWTH = 200
LEAST_DAYS_A_MONTH = 20  # a month seen for fewer days has no factor of its own
LEAST_DAYS_FOR_SEASON = 330
LEAST_DAYS_FOR_GROWTH = 548
MOVING_LEVEL_DAYS = 28
FEWEST_ARRIVALS = 100  # to measure swing at all
FEWEST_FREE_BLOCKS = 8
LEAST_CLUSTERING = 0.02  # booked patients come more evenly than chance, never without any


@dataclass(frozen=True, slots=True)
class Rhythm:
    """Arrivals a day as level × growth × month × weekday; every set of factors has mean 1.

    ``growth_per_year`` is a share (0.02 = 2 % more each year), ``growth_error`` its standard error; both 0 where the
    file is too short to tell. ``expected`` (days,) is what the rhythm expects each day, growth included. ``slow``
    (days, k): the columns of level, season and growth that it was fitted by, growth last.
    """

    month_factors: tuple[float, ...]
    weekday_factors: tuple[float, ...]
    growth_per_year: float
    growth_error: float
    expected: NDArray[np.float64]
    has_season: bool
    slow: NDArray[np.float64]


def fit_rhythm(
    counts: NDArray[np.float64],
    months: NDArray[np.int64],
    weekdays: NDArray[np.int64],
    used: NDArray[np.bool_] | None = None,
) -> Rhythm:
    """When do patients come? Daily ``counts`` (n,) with ``months`` 0–11 and ``weekdays`` 0–6 (Monday 0) of each day.

    ``used`` (n,) leaves out days that don't count, such as an excluded period.

    A Poisson regression on growth, months and weekdays at once, so that growth is not taken for season. Factors are
    then drawn towards 1 by as much as chance alone would have spread them (empirical Bayes).

    Source: Nelder & Wedderburn 1972 (regression); Efron & Morris 1975 (shrinkage).
    Checked by: tests/data/ahead/test_rhythm.py
    """
    use = np.ones(counts.size, dtype=bool) if used is None or not used.any() else used
    seen = counts * use
    days = int(use.sum())
    season = days >= LEAST_DAYS_FOR_SEASON and np.bincount(months[use], minlength=12).min() >= LEAST_DAYS_A_MONTH
    growing = days >= LEAST_DAYS_FOR_GROWTH and seen.sum() >= FEWEST_FOR_GROWTH
    weekly = days >= 28
    years = (np.arange(counts.size) - (counts.size - 1) / 2) / YEAR_DAYS
    parts = [np.eye(12)[months][:, 1:] * season, np.eye(7)[weekdays][:, 1:] * weekly, years[:, None] * growing]
    design = np.hstack([np.ones((counts.size, 1)), *parts])
    effects, errors, expected = poisson_regression(design, counts, use)
    return Rhythm(
        month_factors=shrink_factors(effects[1:12], np.bincount(months, weights=seen, minlength=12)),
        weekday_factors=shrink_factors(effects[12:18], np.bincount(weekdays, weights=seen, minlength=7)),
        growth_per_year=math.expm1(effects[18]),
        growth_error=float(errors[18]) * math.exp(effects[18]) if growing else 0.0,
        expected=expected,
        has_season=season,
        slow=design[:, [*range(12), 18]],
    )


def poisson_regression(
    design: NDArray[np.float64], counts: NDArray[np.float64], use: NDArray[np.bool_] | None = None
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """Fit log-linear effects to the counts in use; return effects, their standard errors and all expected counts."""
    weight = np.ones(counts.size) if use is None else use.astype(float)
    effects = np.zeros(design.shape[1])
    effects[0] = math.log(max(float((counts * weight).sum()) / max(float(weight.sum()), 1.0), 1e-6))
    ridge = 1e-6 * np.eye(design.shape[1])  # keeps an empty month or weekday finite
    expected = np.exp(design @ effects)
    for _ in range(ROUNDS):
        weighted = design * (expected * weight)[:, None]
        step = np.linalg.solve(weighted.T @ design + ridge, design.T @ ((counts - expected) * weight))
        effects = effects + np.clip(step, -2.0, 2.0)
        expected = np.exp(np.clip(design @ effects, -30.0, 30.0))
        if np.abs(step).max() < 1e-9:
            break
    covariance = np.linalg.inv((design * (expected * weight)[:, None]).T @ design + ridge)
    return effects, np.sqrt(np.diag(covariance)), expected


def shrink_factors(effects: NDArray[np.float64], arrivals: NDArray[np.float64]) -> tuple[float, ...]:
    """Return factors of effects against the first group, drawn towards 1 by what chance alone explains; their mean is 1."""
    factors = np.exp(np.concatenate(([0.0], effects)))
    factors /= factors.mean()
    chance = factors**2 / np.maximum(arrivals, 1.0)
    between = max(float(((factors - 1.0) ** 2 - chance).sum()) / (factors.size - 1), 0.0)
    weights = between / (between + chance) if between > 0 else np.zeros(factors.size)
    drawn = 1.0 + weights * (factors - 1.0)
    return tuple((drawn / drawn.mean()).tolist())


@dataclass(frozen=True, slots=True)
class Swing:
    """How far arrivals swing around their rhythm, fast and slow.

    ``clustering``: variance ÷ mean of daily arrivals after a 28-day moving level is taken out, and its standard
    error. ``drift``: how the level itself wanders beyond chance; None where it can't be measured. ``dispersion``:
    variance ÷ mean of 28-day totals.
    """

    clustering: float
    clustering_error: float
    drift: Drift | None
    dispersion: float

    @property
    def rate_variation(self) -> float | None:
        """How far does the level drift, SD ÷ mean? None where it can't be measured."""
        return None if self.drift is None else self.drift.variation

    @property
    def clear_clustering(self) -> float:
        """Return the clustering where it is clearly above 1; else 1.

        Below 1, a full ward has spaced its admissions out; those who came were no more even than chance.
        """
        clear = self.clustering - 1.0 > 1.96 * self.clustering_error
        return min(self.clustering, 50.0) if clear else 1.0


def measure_swing(
    counts: NDArray[np.float64],
    rhythm: Rhythm,
    used: NDArray[np.bool_] | None = None,
    by_chance: tuple[float, float] = (1.0, 1.0),
) -> Swing:
    """Do patients come together more, or drift more, than chance alone would have it?

    Days that are not ``used`` (n,) stand in at what the rhythm expects, and count for nothing. ``by_chance``: variance ÷
    mean that chance alone gives these counts, from day to day and over weeks, where they are no plain counts.

    Source: Pearson's index of dispersion; moments of a mixed Poisson count (Greenwood & Yule 1920).
    Checked by: tests/data/ahead/test_rhythm.py
    """
    use = np.ones(counts.size, dtype=bool) if used is None or not used.any() else used
    counts = np.where(use, counts, rhythm.expected)
    window = np.ones(min(MOVING_LEVEL_DAYS, counts.size))
    level = np.convolve(counts, window, "same") / np.maximum(np.convolve(rhythm.expected, window, "same"), 1e-12)
    middle = rhythm.expected * level
    total = float(middle[use].sum())
    if total < FEWEST_ARRIVALS or int(use.sum()) < 2 * MOVING_LEVEL_DAYS:
        return Swing(1.0, 0.0, None, 1.0)
    # The moving level follows each day's own count by 1 part in 28; the weekdays fitted take 6 more.
    freedom = int(use.sum()) * (1.0 - 1.0 / window.size) - 6.0
    clustering = float(((counts - middle)[use] ** 2).sum()) / total * int(use.sum()) / freedom
    error = clustering * math.sqrt(2.0 / freedom + 1.0 / total)
    clustering = max(clustering - by_chance[0] + 1.0, LEAST_CLUSTERING)
    drift, block = _drift(counts, rhythm, use, max(clustering + by_chance[1] - 1.0, LEAST_CLUSTERING))
    slow = 0.0 if drift is None else drift.variation**2 * block
    return Swing(clustering, error, drift, clustering + slow)


def _drift(
    counts: NDArray[np.float64], rhythm: Rhythm, use: NDArray[np.bool_], clustering: float
) -> tuple[Drift | None, float]:
    """Return the drift of the level, None where too few whole blocks are left, and the arrivals of a block."""
    last = counts.size % BLOCK_DAYS
    whole = use[last:].reshape(-1, BLOCK_DAYS).all(axis=1)
    sums, wanted = (days[last:].reshape(-1, BLOCK_DAYS).sum(axis=1) for days in (counts, rhythm.expected))
    whole &= wanted > 0
    taken = int((np.ptp(rhythm.slow, axis=0) > 0).sum()) + 1
    if whole.sum() - taken < FEWEST_FREE_BLOCKS or sums[whole].sum() < FEWEST_FOR_GROWTH:
        return None, float(wanted.mean())
    slow = (rhythm.slow * rhythm.expected[:, None])[last:].reshape(wanted.size, BLOCK_DAYS, -1).sum(axis=1)
    told = wanted[whole]
    blocks = Blocks(sums[whole] / told - 1.0, clustering / told, np.flatnonzero(whole), slow[whole] / told[:, None])
    return find_drift(blocks), float(told.mean())
