"""How a rhythm of arrivals reaches the beds: the closed forms for waves of arrivals and exponential stays.

A wave of arrivals a day, λ + β·sin(γt), with stays of mean S, becomes a wave of beds of size β·S/√(1 + (γS)²) that lags
behind by atan(γS)/γ. Source: Eick, Massey & Whitt 1993, Management Science 39(2):241-252.

Here arrivals keep one rate within an hour and loads are averages over an hour; each of the two flattens a wave of n
hours by sin(π/n)/(π/n), which is allowed for exactly.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

from bedplan.models import Demand, LengthOfStay, offered_load_by_hour, seasonal_loss

WEEKS = 52


def by_day(size: float) -> tuple[float, ...]:
    """Return seven day factors whose weekly wave, taken over the hours of the week, is exactly of this size."""
    days = np.sin(2 * np.pi * (np.arange(7) + 0.5) / 7)
    wave = 2 * np.abs(np.fft.rfft(np.repeat(days, 24))[1]) / 168
    return tuple(1 + size / wave * days)


def wave_of(figures: np.ndarray, waves: int) -> complex:
    """Return the size and phase of the wave that comes this many times in the whole."""
    return 2 * np.fft.rfft(figures)[waves] / figures.size


def flattened(hours: int) -> float:
    """Return how far hourly steps and hourly averages flatten a wave of this many hours."""
    return float(np.sinc(1 / hours)) ** 2


@pytest.mark.parametrize(
    ("stay_days", "damping", "lag_days"),
    [
        (1, 0.744182, 0.814938),
        (2, 0.486635, 1.183784),
        (4, 0.268309, 1.447374),
        (5, 0.217484, 1.505753),
        (7, 0.157177, 1.574163),
    ],
)
def test_a_weekly_wave(stay_days: int, damping: float, lag_days: float) -> None:
    """The longer patients stay, the less a weekly rhythm is felt in the beds, and the later."""
    demand = Demand(10.0, LengthOfStay(stay_days, 1.0, "gamma"), weekday_factors=by_day(0.3))
    arrivals = np.tile(np.repeat(demand.weekday_factors, 24) * 10.0, WEEKS)
    ratio = wave_of(offered_load_by_hour(demand), WEEKS) / wave_of(arrivals, WEEKS) / stay_days
    assert abs(ratio) / flattened(168) == pytest.approx(damping, abs=1e-6)
    assert -np.angle(ratio) * 7 / (2 * math.pi) == pytest.approx(lag_days, abs=1e-6)


def test_a_wave_of_three_patients_a_day() -> None:
    """Ten patients a day, give or take 3 through the week, who stay 4 days, are 40 beds, give or take 3.22."""
    demand = Demand(10.0, LengthOfStay(4.0, 1.0, "gamma"), weekday_factors=by_day(0.3))
    load = offered_load_by_hour(demand)
    assert load.mean() == pytest.approx(40.0, rel=1e-12)
    assert abs(wave_of(load, WEEKS)) / flattened(168) == pytest.approx(3.219703, abs=5e-6)


def test_a_daily_wave() -> None:
    """A ward where patients stay 4 days hardly feels the hour at which they come: 4 % of the wave is left."""
    hours = tuple(1 + 0.5 * np.sin(2 * np.pi * (np.arange(24) + 0.5) / 24))
    demand = Demand(10.0, LengthOfStay(4.0, 1.0, "gamma"), hour_factors=hours)
    days = WEEKS * 7
    arrivals = np.tile(np.array(demand.hour_factors) * 10.0, days)
    ratio = wave_of(offered_load_by_hour(demand), days) / wave_of(arrivals, days) / 4.0
    assert abs(ratio) / flattened(24) == pytest.approx(0.0397573, abs=2e-6)
    assert -np.angle(ratio) / (2 * math.pi) == pytest.approx(0.243671, abs=1e-6)


def by_month(size: float) -> tuple[float, ...]:
    """Return twelve month factors whose yearly wave is of this size, were all months alike."""
    steps = np.sin(2 * np.pi * (np.arange(12) + 0.5) / 12)
    return tuple(1 + size / float(np.sinc(1 / 12)) * steps)


def test_a_wave_through_the_year() -> None:
    """Ten patients a day, give or take 2 through the year, who stay 4 days, in 45 beds: 7.28 % are turned away."""
    # Source: the exact periodic Markov chain of a smooth wave, 7.276 % (5.430 % at the mean rate alone), worked out apart
    # from this program by two solvers; question of Massey & Whitt 1994, Annals of Applied Probability 4(4):1145-1160
    curve = seasonal_loss(Demand(10.0, LengthOfStay(4.0, 1.0, "gamma"), month_factors=by_month(0.2)), [45])
    assert float(curve.turn_away_probability[0]) == pytest.approx(0.07276, rel=0.01)


def test_a_wave_through_the_week() -> None:
    """Ten patients a day, give or take 5 through the week, who stay 4 days: 7.84 % turned away by 45 beds, 1.10 % by 55."""
    # Source: as above; the same question of a smooth weekly wave, on which Erlang's formula at each hour's own load is a
    # fifth too low (6.293 % and 0.854 %)
    curve = seasonal_loss(Demand(10.0, LengthOfStay(4.0, 1.0, "gamma"), weekday_factors=by_day(0.5)), [45, 55])
    assert curve.turn_away_probability.tolist() == pytest.approx([0.07835, 0.01103], rel=0.01)
