"""Drift against made-up wards whose drift is known, against normal densities written out, and against sums over days."""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
import pytest
from scipy import signal, stats

from bedplan.data.ahead.drift import LASTS_DAYS, SIZES, SPREAD, USUAL, Blocks, Drift, find_drift
from bedplan.data.ahead.rhythm import fit_rhythm, measure_swing

LASTS = (60, 150, 365)


def found(per_day: float, drift: float, lasts_days: float, seed: int) -> Drift:
    """Return what three years of a ward tell whose level fades back with time, season and noise on top."""
    rng, keeps = np.random.default_rng(seed), math.exp(-1.0 / lasts_days)
    calendar = pd.date_range("2022-04-01", periods=1_096)
    shocks = rng.normal(size=calendar.size) * math.sqrt(1.0 - keeps**2)
    shocks[0] = rng.normal()
    level = np.exp(drift * signal.lfilter([1.0], [1.0, -keeps], shocks) - drift**2 / 2.0)
    season = 1.0 + 0.1 * np.cos(2.0 * np.pi * calendar.day_of_year.to_numpy() / 365.25)
    counts = rng.poisson(per_day * season * level).astype(float)
    return measure_swing(
        counts, fit_rhythm(counts, calendar.month.to_numpy() - 1, calendar.day_of_week.to_numpy())
    ).drift


@pytest.mark.parametrize("true", [0.03, 0.05, 0.10])
def test_drift_is_found_as_large_as_it_is(true: float) -> None:
    """On average over wards whose drift lasts two months, five or a year, it is found within 15 %, and its range holds it.

    A range of 90 % holds fewer than 34 of 45 once in 1,000 times.
    """
    drifts = [found(25.0, true, lasts, seed) for lasts in LASTS for seed in range(15)]

    assert np.mean([drift.variation for drift in drifts]) == pytest.approx(true, rel=0.15)
    assert sum(drift.interval[0] < true < drift.interval[1] for drift in drifts) >= 34


def test_a_drift_of_a_year_is_found_too_low_but_by_no_more_than_a_third() -> None:
    """As the note says: in three years a drift that lasts one is partly taken for growth and season."""
    drifts = [found(25.0, 0.10, 365, 100 + seed).variation for seed in range(30)]

    assert 0.067 < np.mean(drifts) < 0.10


def test_a_small_ward_says_little() -> None:
    """One patient a day can't tell a drift of 5 %: the range reaches from under 2 % to more than 10 %."""
    drift = found(1.0, 0.05, 150, 3)

    assert drift.interval[0] < 0.02
    assert drift.interval[1] > 0.10


def test_what_the_fit_took_up_does_not_matter() -> None:
    """Any level, season or growth added to the blocks leaves the answer as it was: only what they can't explain decides."""
    rng = np.random.default_rng(4)
    design = np.column_stack([np.ones(30), np.linspace(-1, 1, 30)])
    off, chance = rng.normal(0, 0.06, 30), rng.uniform(0.001, 0.003, 30)
    number = np.delete(np.arange(32), [7, 8])
    one = find_drift(Blocks(off, chance, number, design))
    other = find_drift(Blocks(off + design @ [0.4, -0.7], chance, number, design))

    assert other.variation == pytest.approx(one.variation, rel=1e-9)
    assert other.effect_errors == pytest.approx(one.effect_errors, rel=1e-9)


def test_it_is_the_normal_density_of_differences() -> None:
    """With a level alone to take up, the weights are those of a normal density of neighbouring differences, written out."""
    rng = np.random.default_rng(9)
    off, chance = rng.normal(0, 0.08, 12), rng.uniform(0.001, 0.004, 12)
    drift = find_drift(Blocks(off, chance, np.arange(12), np.ones((12, 1))))
    steps = np.diff(np.eye(12), axis=0)
    weights = np.zeros((len(LASTS_DAYS), SIZES.size))
    for row, lasts in enumerate(LASTS_DAYS):
        together = np.eye(12) if math.isnan(lasts) else by_days(28, lasts, 12)
        for place, size in enumerate(SIZES):
            spread = steps @ (np.diag(chance) + size**2 * together) @ steps.T
            prior = stats.norm.pdf(math.log(size), math.log(USUAL), SPREAD)
            weights[row, place] = stats.multivariate_normal(cov=spread).pdf(steps @ off) * prior
    weights /= weights.sum()

    assert drift.variation == pytest.approx(float(weights.sum(axis=0) @ SIZES), rel=1e-3)
    assert sum(drift.squares) == pytest.approx(float(weights.sum(axis=0) @ SIZES**2), rel=1e-3)


def by_days(days: int, lasts: float, blocks: int) -> np.ndarray:
    """Return the covariance of the means of so many days, summed over quarters of an hour."""
    moments = (np.arange(days * blocks * 8) + 0.5) / 8.0
    same = np.exp(-np.abs(np.subtract.outer(moments[: days * 8], moments)) / lasts)
    by_lag = same.mean(axis=0).reshape(blocks, -1).mean(axis=1)
    return by_lag[np.abs(np.subtract.outer(np.arange(blocks), np.arange(blocks)))]


@pytest.mark.parametrize("days", [28, 182, 365])
def test_the_mean_of_days_wanders_less(days: int) -> None:
    """The variance of a mean is that of its days, summed pair by pair; a drift of each block's own averages out."""
    squares = (0.001, 0.0, 0.002, 0.0, 0.003, 0.0)
    told = Drift(0.0, (0.0, 0.0), np.zeros(1), squares).variance_of_mean(days)
    slow = sum(
        square * by_days(days, lasts, 1)[0, 0] for square, lasts in zip(squares[1:], LASTS_DAYS[1:], strict=True)
    )

    assert told == pytest.approx(0.001 * 28 / days + slow, rel=1e-3)
