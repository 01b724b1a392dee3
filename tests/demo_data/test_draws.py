"""The demo's own chance: its inverse functions against scipy, its uniform numbers against numpy."""

from __future__ import annotations

import math
from itertools import islice

import numpy as np
import pytest
from scipy import stats

from demo_data import draws

CHANCES = [1e-300, 1e-16, 1e-9, 1e-5, 0.01, 0.0749, 0.0751, 0.3, 0.5, 0.77, 0.9249, 0.9251, 0.999, 1 - 1e-12]
MANY_CHANCES = np.random.default_rng(7).random(2000).tolist()


def test_uniform_numbers_are_the_top_bits_of_pcg64() -> None:
    """The chances are numpy's own raw stream, centred in 2^52 equal steps, past the first chunk too."""
    raw = np.random.PCG64(20220401).random_raw(draws.CHUNK + 10)
    expected = [((int(bits) >> 12) + 0.5) / 2**52 for bits in raw]
    assert list(islice(draws.uniforms(20220401), draws.CHUNK + 10)) == expected


def test_uniform_numbers_are_even() -> None:
    """Chances fill 0 to 1 evenly: Kolmogorov-Smirnov distance below its 1 in 10,000 limit, 2.23 over root n."""
    chances = list(islice(draws.uniforms(3), 20_000))
    assert 0.0 < min(chances) < max(chances) < 1.0
    assert stats.kstest(chances, "uniform").statistic < 2.23 / math.sqrt(len(chances))


@pytest.mark.parametrize("value", [1e-300, 1e-5, 0.5, 0.7071, 0.70711, 1.0, 1.0000001, 2.0, 43.2, 1e300])
def test_natural_log_agrees_with_the_mathematics_library(value: float) -> None:
    """The logarithm made of plain arithmetic is right to the last digits."""
    assert draws.natural_log(value) == pytest.approx(math.log(value), rel=1e-14, abs=1e-15)


@pytest.mark.parametrize("value", [-300.0, -20.3, -1.0, -1e-9, 0.0, 0.3465, 0.34658, 1.0, 5.2, 300.0])
def test_exponential_agrees_with_the_mathematics_library(value: float) -> None:
    """The exponential made of plain arithmetic is right to thirteen digits, far beyond a minute of a stay."""
    assert draws.exponential(value) == pytest.approx(math.exp(value), rel=1e-13)


@pytest.mark.parametrize("chance", CHANCES)
def test_normal_quantile_agrees_with_scipy(chance: float) -> None:
    """The normal quantile is right to 1e-9 in the middle and in both tails."""
    assert draws.normal_quantile(chance) == pytest.approx(stats.norm.ppf(chance), abs=1e-9)


def test_lognormal_quantile_agrees_with_scipy() -> None:
    """The lognormal quantile, given by mean and variation, is scipy's with the same mean and variation."""
    for mean, variation in ((1.45, 0.85), (37.0, 0.6), (4.0, 1.35)):
        sigma = math.sqrt(math.log1p(variation**2))
        curve = stats.lognorm(sigma, scale=mean * math.exp(-(sigma**2) / 2))
        assert curve.mean() == pytest.approx(mean)
        assert curve.std() / curve.mean() == pytest.approx(variation)
        quantiles = [draws.lognormal_quantile(chance, mean, variation) for chance in MANY_CHANCES]
        assert quantiles == pytest.approx(curve.ppf(MANY_CHANCES), rel=1e-9)


@pytest.mark.parametrize("mean", [0.0, 0.2, 1.22, 14.3, 120.0])
def test_poisson_quantile_agrees_with_scipy(mean: float) -> None:
    """The Poisson count at a chance is scipy's."""
    counts = [draws.poisson_quantile(chance, mean) for chance in MANY_CHANCES]
    assert counts == stats.poisson.ppf(MANY_CHANCES, mean).tolist()


def test_picking_follows_the_shares() -> None:
    """A chance falls on the share it lies in, and never on an empty one."""
    ends = draws.running_shares((0, 1, 3, 0, 4))
    assert [draws.pick(chance, ends) for chance in (0.0, 0.124, 0.126, 0.49, 0.51, 0.999)] == [1, 1, 2, 2, 4, 4]


def test_minutes_of_the_day_follow_the_hours() -> None:
    """Chances laid evenly give each hour its share of minutes, evenly within the hour."""
    shares = (0,) * 7 + (1, 2) + (0,) * 14 + (1,)
    ends = draws.running_shares(shares)
    minutes = [draws.minute_of_day((number + 0.5) / 2400, ends) for number in range(2400)]
    expected = [10] * 60 + [20] * 60 + [10] * 60
    counted = np.bincount(minutes, minlength=1440)
    assert counted[[*range(420, 540), *range(1380, 1440)]] == pytest.approx(expected, abs=1)
    assert counted.sum() == sum(expected) == 2400
