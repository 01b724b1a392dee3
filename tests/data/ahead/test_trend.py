"""The regression on trend, season and weekday: exact rhythms come back, and its errors are as large as it says."""

from __future__ import annotations

import numpy as np
import pytest

from bedplan.data.ahead.trend import fit_trend

FIRST_DAY = 19_083  # 1 April 2022, a Friday
WEEK = np.array([1.10, 1.04, 1.02, 1.01, 1.03, 0.91, 0.89])


def rates(days: np.ndarray, per_day: float, growth: float) -> np.ndarray:
    """Return arrivals with one wave a year, a week and growth."""
    wave = np.exp(0.2 * np.cos(2 * np.pi * days / 365.25))
    return per_day * wave * WEEK[(days + 3) % 7] * (1 + growth) ** ((days - FIRST_DAY) / 365.25)


def test_an_exact_rhythm_is_told_on_exactly() -> None:
    """Counts that are exactly level × growth × wave × weekday give that growth and the year after."""
    days = FIRST_DAY + np.arange(1_461)
    trend = fit_trend(rates(days, 1e6, 0.03), days)
    ahead = days[-1] + np.arange(1, 366)

    assert trend.growth_per_year == pytest.approx(0.03, abs=1e-4)
    assert trend.expected(ahead) == pytest.approx(rates(ahead, 1e6, 0.03), rel=2e-3)
    assert trend.weekday_share(days[:7]) == pytest.approx((WEEK / WEEK.mean())[(days[:7] + 3) % 7], rel=1e-3)


def test_days_left_out_change_nothing_exact() -> None:
    """A quarter of the days missing, the rhythm of the others comes back all the same."""
    days = FIRST_DAY + np.arange(1_461)
    kept = days[(np.arange(days.size) < 400) | (np.arange(days.size) >= 765)]
    trend = fit_trend(rates(kept, 1e6, 0.03), kept)

    assert trend.expected(days) == pytest.approx(rates(days, 1e6, 0.03), rel=5e-3)


def test_errors_are_as_large_as_they_say() -> None:
    """Over 60 draws of two years, the level a half year ahead is off by what the variance says, give or take a third."""
    days = FIRST_DAY + np.arange(731)
    ahead = days[-1] + np.arange(150, 220)
    truth = rates(ahead, 6.0, 0.0).sum()
    off, said = [], []
    for seed in range(60):
        trend = fit_trend(np.random.default_rng(seed).poisson(rates(days, 6.0, 0.0)).astype(float), days)
        off.append(trend.expected(ahead).sum() / truth - 1)
        said.append(float(trend.variance_of_rate(ahead).mean()))

    # With 60 draws a standard deviation is known to 1/√120 = 9 %; drawing effects in makes errors smaller than said.
    assert 0.6 < np.std(off) / np.sqrt(np.mean(said)) < 1.3


def test_growth_is_drawn_towards_none() -> None:
    """Without growth, few patients suggest less of it than a plain slope would; much evidence is believed."""
    days = FIRST_DAY + np.arange(1_096)
    drawn = [
        fit_trend(np.random.default_rng(seed).poisson(rates(days, 0.5, 0.0)).astype(float), days) for seed in range(20)
    ]
    plain = [
        fit_trend(np.random.default_rng(seed).poisson(rates(days, 0.5, 0.0)).astype(float), days, growth_spread=10.0)
        for seed in range(20)
    ]

    mean_square = [np.mean([trend.growth_per_year**2 for trend in trends]) for trends in (drawn, plain)]
    assert mean_square[0] < 0.7 * mean_square[1]
    assert fit_trend(np.round(rates(days, 400.0, 0.08)), days).growth_per_year == pytest.approx(0.08, abs=0.005)


def test_a_weekday_without_patients_does_not_blur_the_level() -> None:
    """A ward that is closed at weekends is known as well as its patients tell: about 1 ÷ patients."""
    days = FIRST_DAY + np.arange(1_096)
    weekday = (days + 3) % 7
    counts = np.random.default_rng(0).poisson(np.where(weekday < 5, 5.0, 0.0)).astype(float)
    trend = fit_trend(counts, days)
    sunday = days[weekday == 6]

    assert trend.expected(sunday).max() < 0.1
    middle = days[500:600]
    # One level out of 3,900 patients, and a share of the season's and the growth's few effects.
    assert 1 / counts.sum() < trend.variance_of_rate(middle).mean() < 8 / counts.sum()


def test_short_series_tell_no_season_and_no_growth() -> None:
    """Under 330 days there is no wave, and under 548 no growth."""
    days = FIRST_DAY + np.arange(300)
    trend = fit_trend(rates(days, 50.0, 0.1), days)
    week = trend.expected(days[:7]).mean()

    assert trend.growth_per_year == 0.0
    assert trend.expected(days[150:157]).mean() == pytest.approx(week)
