"""Looking ahead from one day on: which method did better so far, what it expects, and how wrong it has been."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import optimize

from bedplan.data.ahead.accuracy import seasonal_naive
from bedplan.data.ahead.lately import LevelChange, level_change
from bedplan.data.ahead.rhythm import LEAST_DAYS_FOR_SEASON, YEAR_DAYS
from bedplan.data.ahead.spectrum import singular_spectrum
from bedplan.data.ahead.trend import Trend, fit_trend

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    Array = NDArray[np.float64]

REGRESSION, SPECTRUM, NAIVE = (
    "trend, season and weekday regression",
    "singular spectrum analysis",
    "same week last year",
)
WEEKS_A_YEAR, YEAR_OF_WEEKS = 52, 364
BLOCK_DAYS = 28
LEAST_TRAINING_DAYS = 364
MOST_PAST_FORECASTS = 36
FEWEST_PAST_FORECASTS = 6
USUAL_DRIFT = 0.03  # SD ÷ mean of demand from year to year where the file is too short to tell
USUAL_SEASON = 0.10  # SD ÷ mean by which the seasons may lift a file too short to tell them; common practice, no source


@dataclass(frozen=True, slots=True, eq=False)
class DailyCounts:
    """What was counted on each day: ``first_day`` since 1 January 1970, ``counts`` (n,), ``counted`` (n,) which count."""

    first_day: int
    counts: Array
    counted: NDArray[np.bool_]

    @property
    def days(self) -> NDArray[np.int64]:
        """The number of each day."""
        return self.first_day + np.arange(self.counts.size)

    def before(self, place: int) -> DailyCounts:
        """Return the days before a place: all that was known then."""
        return DailyCounts(self.first_day, self.counts[:place], self.counted[:place])


@dataclass(frozen=True, slots=True, eq=False)
class PastForecast:
    """What each method would have said on an earlier day: ``origin`` is the place of the first day it did not know."""

    origin: int
    trend: Trend
    expected: dict[str, Array]


@dataclass(frozen=True, slots=True, eq=False)
class Choice:
    """Which method is used and why: mean absolute errors of weekly totals of past forecasts, by method.

    ``drift``: (at once, a year): variance ÷ square of the rate beyond chance in past forecasts, and its growth.
    """

    method: str
    errors: dict[str, float]
    forecasts: int
    drift: tuple[float, float]


@dataclass(frozen=True, slots=True, eq=False)
class Outlook:
    """What is expected on each day ahead (h,), how far the rate may be off (variance ÷ its square, (h,)), and why.

    ``change``: of the latest weeks, where the level may have changed.
    """

    expected: Array
    variance_of_rate: Array
    trend: Trend
    choice: Choice
    change: LevelChange | None


def forecast_from(series: DailyCounts, origin: int, steps: int) -> PastForecast:
    """What would each method have said about the next days, knowing only those before ``origin``?"""
    known = series.before(origin)
    trend = fit_trend(known.counts[known.counted], known.days[known.counted])
    ahead = series.first_day + np.arange(origin, origin + steps)
    expected = {REGRESSION: trend.expected(ahead)}
    filled = np.where(known.counted, known.counts, trend.expected(known.days))
    if origin >= YEAR_OF_WEEKS:
        expected[NAIVE] = seasonal_naive(filled, YEAR_OF_WEEKS, steps)
    if origin >= YEAR_OF_WEEKS:
        expected[SPECTRUM] = _by_spectrum(filled, trend, ahead)
    return PastForecast(origin, trend, expected)


def _by_spectrum(filled: Array, trend: Trend, ahead: NDArray[np.int64]) -> Array:
    """Carry weekly totals on for a year, spread them over weekdays; later years repeat it with the regression's growth."""
    weeks = filled[filled.size % 7 :].reshape(-1, 7).sum(axis=1)
    spectrum = singular_spectrum(weeks, min(WEEKS_A_YEAR, weeks.size // 2))
    steps = min(math.ceil(ahead.size / 7), WEEKS_A_YEAR)
    totals = np.maximum(spectrum.carried_on(spectrum.components_above_noise, steps), 0.0)
    first = np.repeat(totals / 7.0, 7)[: ahead.size]
    years = np.arange(ahead.size) // YEAR_OF_WEEKS
    level = np.resize(first, ahead.size) * (1.0 + trend.growth_per_year) ** years
    return level * trend.weekday_share(ahead)


def look_ahead(series: DailyCounts, origin: int, steps: int, past: Sequence[PastForecast]) -> Outlook:
    """What is expected from ``origin`` on, by the method that did better in ``past`` forecasts known by then?"""
    known = series.before(origin)
    own = forecast_from(series, origin, steps)
    choice = _choose(known, [one for one in past if one.origin < origin], own.trend.swing.clustering)
    ahead = series.first_day + np.arange(origin, origin + steps)
    years = (np.arange(steps) + 0.5) / YEAR_DAYS
    at_once, a_year = choice.drift
    variance = np.maximum(at_once + a_year * years, own.trend.variance_of_rate(ahead))
    if int(known.counted.sum()) < LEAST_DAYS_FOR_SEASON:
        variance = variance + USUAL_SEASON**2
    change = level_change(known.counts[known.counted], known.days[known.counted], own.trend)
    expected, unsure = _with_change(own.expected[choice.method], change, ahead)
    return Outlook(expected, variance + unsure, own.trend, choice, change)


def _with_change(expected: Array, change: LevelChange | None, ahead: NDArray[np.int64]) -> tuple[Array, float]:
    """Go part of the way to the latest level, and return by how much that may be off: variance ÷ square of the rate.

    A change of the latest weeks may be chance; if not, it lasts or it does not, and nothing in the records tells which.
    With even chances a clear change moves the mean half-way, with a standard deviation of half the gap, beside chance,
    so that the range holds both; one that may be chance moves it less and widens the range.
    """
    if change is None:
        return expected, 0.0
    soon, lasts = slice(0, BLOCK_DAYS), change.chance / 2.0
    gap = float(change.carried_on(ahead[soon]).sum()) / max(float(expected[soon].sum()), 1e-9) - 1.0
    moved = 1.0 + lasts * gap
    return expected * moved, lasts * (1.0 - lasts) * (gap / moved) ** 2 + 2.0 * lasts * change.error**2


def _choose(known: DailyCounts, past: Sequence[PastForecast], clustering: float) -> Choice:
    """Compare the methods on what was known; the spectrum is used only where it beat the regression."""
    errors = {method: _weekly_error(known, past, method) for method in (REGRESSION, SPECTRUM, NAIVE)}
    enough = len(past) >= FEWEST_PAST_FORECASTS
    method = SPECTRUM if enough and errors[SPECTRUM] < errors[REGRESSION] else REGRESSION
    drift = _drift(known, past, method, clustering) if enough else (USUAL_DRIFT**2, USUAL_DRIFT**2)
    return Choice(method, errors, len(past), drift)


def _blocks(known: DailyCounts, one: PastForecast, method: str, size: int) -> tuple[Array, Array]:
    """Return actual and expected totals of the blocks after a past forecast that were counted in full."""
    told = one.expected.get(method, np.zeros(0))
    number = min(told.size, known.counts.size - one.origin) // size
    part = slice(one.origin, one.origin + number * size)
    whole = known.counted[part].reshape(number, size).all(axis=1)
    actual = known.counts[part].reshape(number, size).sum(axis=1)
    expected = told[: number * size].reshape(number, size).sum(axis=1)
    return np.where(whole, actual, np.nan), np.where(whole, expected, np.nan)


def _weekly_error(known: DailyCounts, past: Sequence[PastForecast], method: str) -> float:
    """Return the mean absolute error of weekly totals over all past forecasts."""
    pairs = [_blocks(known, one, method, 7) for one in past if method in one.expected]
    wrong = np.concatenate([np.abs(actual - expected) for actual, expected in pairs] or [np.zeros(0)])
    wrong = wrong[np.isfinite(wrong)]
    return float(wrong.mean()) if wrong.size else math.inf


def _drift(known: DailyCounts, past: Sequence[PastForecast], method: str, clustering: float) -> tuple[float, float]:
    """How much more wrong than chance were past forecasts of four weeks, at once and with each year ahead?"""
    squares, years = [], []
    for one in past:
        actual, expected = _blocks(known, one, method, BLOCK_DAYS)
        fair = np.isfinite(expected) & (expected > 0)
        ratio = actual[fair] / expected[fair] - 1.0
        squares.append(ratio**2 - max(clustering, 0.0) / expected[fair])
        years.append((np.flatnonzero(fair) + 0.5) * BLOCK_DAYS / YEAR_DAYS)
    excess, ahead = np.concatenate(squares), np.concatenate(years)
    if excess.size < FEWEST_PAST_FORECASTS:
        return USUAL_DRIFT**2, USUAL_DRIFT**2
    (at_once, a_year), _ = optimize.nnls(np.column_stack([np.ones(ahead.size), ahead]), excess)
    return float(at_once), float(a_year)


def past_origins(series: DailyCounts) -> list[int]:
    """From which places are past forecasts made? Every four weeks back from the end, with a year of counted days before."""
    days, known = series.counts.size, np.cumsum(series.counted)
    places = range(days - BLOCK_DAYS, max(days - (MOST_PAST_FORECASTS + 1) * BLOCK_DAYS, 0), -BLOCK_DAYS)
    return [place for place in places if known[place - 1] >= LEAST_TRAINING_DAYS]
