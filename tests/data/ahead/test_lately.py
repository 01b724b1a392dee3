"""Changes of the latest weeks: found where they are, not where there are none, and a range that holds both ways on."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from scipy import stats

from bedplan.data.ahead.forecasting import forecast_counts
from bedplan.data.ahead.lately import CHANGING, USUAL_CHANGE, LevelChange, level_change
from bedplan.data.ahead.trend import fit_trend

FIRST, KNOWN = pd.Timestamp("2022-04-01"), 1_096
DAYS = 19_083 + np.arange(KNOWN)  # 1 April 2022 is the 19,083rd day after 1 January 1970


def counts(seed: int, share: float, weeks: int, per_day: float = 8.0) -> np.ndarray:
    """Return four years of daily counts that change by a share so many weeks before the end of the third, for good."""
    days = np.arange(KNOWN + 365)
    rate = per_day * (1.0 + 0.15 * np.cos(2.0 * np.pi * days / 365.25))
    return (
        np.random.default_rng(seed).poisson(rate * np.where(days >= KNOWN - 7 * weeks, 1.0 + share, 1.0)).astype(float)
    )


@pytest.mark.parametrize(("share", "weeks"), [(0.4, 6), (-0.4, 8)])
def test_a_step_is_found_and_the_range_holds_it(share: float, weeks: int) -> None:
    """Forty percent more or fewer from some weeks ago: the 80 % range of next year holds what comes, in most wards.

    A forecast by trend and season alone misses every one of them.
    """
    held = 0
    for seed in range(10):
        ward = counts(seed, share, weeks)
        forecast = forecast_counts(ward[:KNOWN], FIRST)
        low, high = forecast.range_of(slice(0, 365), 0.80)
        held += low <= ward[KNOWN:].sum() <= high
        assert any("half-way" in note for note in forecast.notes)

    assert held >= 8


def test_the_forecast_goes_half_way_and_reaches_both_ways_on() -> None:
    """Where it clearly changed, the forecast lies midway between a year as before and one at the latest level."""
    ward = counts(1, 0.4, 8)[:KNOWN]
    forecast, change = forecast_counts(ward, FIRST), level_change(ward, DAYS)
    ahead = DAYS[-1] + 1 + np.arange(28)
    middle = (change.carried_on(ahead).sum() + fit_trend(ward, DAYS).expected(ahead).sum()) / 2.0
    low, high = forecast.range_of(slice(0, 28), 0.80)

    assert 49 <= change.days <= 63
    assert forecast.expected[:28].sum() == pytest.approx(middle, rel=0.01)
    assert low < fit_trend(ward, DAYS).expected(ahead).sum()
    assert high > change.carried_on(ahead).sum()


def test_the_trend_of_all_days_only_saves_looking() -> None:
    """A change is found the same with it and without it; in a steady ward nothing clear is found either way."""
    for seed in range(4):
        ward, steady = counts(seed, 0.3, 8)[:KNOWN], counts(seed, 0.0, 8)[:KNOWN]
        with_it, without = level_change(ward, DAYS, fit_trend(ward, DAYS)), level_change(ward, DAYS)
        assert (with_it.days, with_it.came) == (without.days, without.came)
        for found in (level_change(steady, DAYS, fit_trend(steady, DAYS)), level_change(steady, DAYS)):
            assert found is None or not found.is_clear


def test_a_change_that_may_be_chance_widens_the_range() -> None:
    """A fifth more for eight weeks at 3 patients a day is mostly not clear; still 95 of 100 ranges hold most years after it."""
    held = 0
    for seed in range(12):
        ward = counts(seed, 0.2, 8, per_day=3.0)
        low, high = forecast_counts(ward[:KNOWN], FIRST).range_of(slice(0, 365), 0.95)
        held += low <= ward[KNOWN:].sum() <= high

    assert held >= 9


@pytest.mark.parametrize("standard_errors", [0.5, 2.0, 3.5])
def test_the_chance_of_a_change_is_bayes_rule(standard_errors: float) -> None:
    """The odds are those of before times the ratio of two normal densities of what was seen, with a change and without."""
    trend = fit_trend(counts(1, 0.0, 8)[:KNOWN], DAYS)
    change = LevelChange(56, 480, 400.0, trend, standard_errors)
    own = 0.2 / standard_errors
    ratio = stats.norm.pdf(0.2, 0.0, np.hypot(own, USUAL_CHANGE)) / stats.norm.pdf(0.2, 0.0, own)

    assert change.chance / (1.0 - change.chance) == pytest.approx(CHANGING / (1.0 - CHANGING) * ratio, rel=1e-9)


def test_too_little_before_it_tells_nothing() -> None:
    """Ten weeks with a step, or a ward of one patient a week, are told no change."""
    assert level_change(counts(1, 1.0, 4)[KNOWN - 70 : KNOWN], DAYS[:70]) is None
    assert level_change(counts(1, 1.0, 8, per_day=0.14)[:KNOWN], DAYS) is None
