"""Chances of counts against a reference library, Erlang's formula and their own definitions."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from bedplan.data.ahead.chances import (
    SWINGS,
    at_most,
    at_most_in_beds,
    count_at,
    ranked_score,
    share_above,
    share_within,
    variance_in_beds,
)
from bedplan.models import erlang_b

COUNTS = np.arange(61)


def told(mean: float, swing: float) -> np.ndarray:
    """Return the chances of at most 0 … 60."""
    return at_most(np.array([mean]), np.array([swing]), 60)[0]


def test_the_three_laws_of_counts() -> None:
    """Poisson, negative binomial and binomial, as a reference library has them."""
    assert told(7.3, 1.0) == pytest.approx(stats.poisson.cdf(COUNTS, 7.3), abs=1e-12)
    # Mean 12, variance 30: size 12/(2.5 − 1) = 8, chance 1/2.5.
    assert told(12.0, 2.5) == pytest.approx(stats.nbinom.cdf(COUNTS, 8, 0.4), abs=1e-12)
    # Twenty places, each taken with chance 0.7: mean 14, variance ÷ mean 0.3.
    assert told(14.0, 0.3) == pytest.approx(stats.binom.cdf(COUNTS, 20, 0.7), abs=1e-12)


def moments(chances: np.ndarray) -> tuple[float, float]:
    """Return mean and variance of chances of at most."""
    shares = np.diff(chances, prepend=0.0)
    counts = np.arange(shares.size)
    mean = float(shares @ counts)
    return mean, float(shares @ counts**2) - mean**2


@pytest.mark.parametrize("load", [6.0, 10.0, 14.0])
def test_patients_who_leave_are_erlangs(load: float) -> None:
    """Ten beds at a load carry load × (1 − B) and are full with chance B, found back from that mean alone."""
    lost = float(erlang_b(load, 10))
    mean, one = np.array([load * (1 - lost)]), np.array([1.0])
    place = np.abs(SWINGS - 1.0).argmin()
    chances = at_most_in_beds(mean, SWINGS[[place]], np.array([10]), 20, "leaves")[0]

    assert moments(chances)[0] == pytest.approx(mean[0], abs=1e-9)
    assert 1 - chances[9] == pytest.approx(lost, rel=0.05)  # swings are kept in steps of 8 %
    assert chances[10:] == pytest.approx(np.ones(11))
    exact = np.diff(stats.poisson.cdf(np.arange(11), load) / stats.poisson.cdf(10, load), prepend=0.0)
    square = exact @ np.arange(11) ** 2 - (exact @ np.arange(11)) ** 2
    assert variance_in_beds(mean, one, np.array([10]), "leaves")[0] == pytest.approx(square, rel=0.06)


@pytest.mark.parametrize("load", [6.0, 10.0, 16.0])
def test_patients_who_wait_fill_the_beds(load: float) -> None:
    """With those over the beds outside, ten beds hold min(wanting, 10): mean and chance of being full come back."""
    wanting = stats.poisson.pmf(np.arange(80), load)
    held = np.minimum(np.arange(80), 10)
    mean = float(wanting @ held)
    place = np.abs(SWINGS - 1.0).argmin()
    chances = at_most_in_beds(np.array([mean]), SWINGS[[place]], np.array([10]), 12, "waits")[0]

    assert moments(chances)[0] == pytest.approx(mean, abs=1e-9)
    assert 1 - chances[9] == pytest.approx(wanting[10:].sum(), rel=0.05)
    square = float(wanting @ held**2) - mean**2
    found = variance_in_beds(np.array([mean]), np.ones(1), np.array([10]), "waits")[0]
    assert found == pytest.approx(square, rel=0.08)


def test_beds_that_stop_nobody_change_nothing() -> None:
    """*Stays anyway* is the law without beds."""
    mean, swing, beds = np.array([8.0]), np.array([1.4]), np.array([5])

    assert at_most_in_beds(mean, swing, beds, 30, "stays anyway") == pytest.approx(at_most(mean, swing, 30))
    assert variance_in_beds(mean, swing, beds, "stays anyway") == pytest.approx([11.2])


@pytest.mark.parametrize("level", [0.5, 0.8, 0.95])
@pytest.mark.parametrize("mean", [0.4, 4.2, 27.0])
def test_right_chances_hold_exactly_their_level(level: float, mean: float) -> None:
    """Averaged over a Poisson count, the share inside the middle band is the level, however small the mean."""
    chances = at_most(np.full(61, mean), np.ones(61), 60)
    share = share_within(chances, COUNTS, level)

    assert share @ stats.poisson.pmf(COUNTS, mean) == pytest.approx(level, abs=1e-9)


@pytest.mark.parametrize("share", [0.6, 0.9, 0.975])
@pytest.mark.parametrize("mean", [0.4, 4.2, 27.0])
def test_right_chances_are_passed_exactly_as_often_as_said(share: float, mean: float) -> None:
    """Averaged over a Poisson count, the share above a mark is 1 − the mark; above, inside and below add up to 1."""
    chances = at_most(np.full(61, mean), np.ones(61), 60)
    weights = stats.poisson.pmf(COUNTS, mean)
    below = 1.0 - share_above(chances, COUNTS, 1.0 - share)

    assert share_above(chances, COUNTS, share) @ weights == pytest.approx(1.0 - share, abs=1e-7)
    told = share_above(chances, COUNTS, share) + share_within(chances, COUNTS, 2 * share - 1) + below
    assert told[COUNTS < 50] == pytest.approx(1.0, abs=1e-9)
    assert share_above(chances[:2], np.array([0, 99]), 0.9).tolist()[1] == 1.0


def test_counts_far_from_what_was_told_are_outside() -> None:
    """A count beyond every chance told is outside, also past the last one listed."""
    chances = at_most(np.array([5.0, 5.0]), np.ones(2), 20)

    assert share_within(chances, np.array([20, 99]), 0.95).tolist() == [0.0, 0.0]


def test_a_certain_number_scores_its_miss() -> None:
    """Told for certain, 7 against 10 scores 3; told rightly as a Poisson count, less than any certain number."""
    certain = (COUNTS >= 7).astype(float)[None, :]
    assert ranked_score(certain, np.array([10])) == pytest.approx(3.0)

    happened = np.random.default_rng(0).poisson(9.0, 4_000)
    right = ranked_score(at_most(np.full(4_000, 9.0), np.ones(4_000), 60), happened)
    assert right < np.abs(happened - 9).mean()
    # Half the mean distance between two such counts: the score's value when the chances are right (Gneiting & Raftery).
    shares = stats.poisson.pmf(COUNTS, 9.0)
    apart = np.abs(COUNTS[:, None] - COUNTS[None, :])
    assert right == pytest.approx(shares @ apart @ shares / 2, rel=0.04)


def test_counts_at_a_chance() -> None:
    """The count not passed with 90 % is the reference library's quantile."""
    chances = at_most(np.array([3.0, 30.0]), np.ones(2), 80)

    assert count_at(chances, 0.9).tolist() == [stats.poisson.ppf(0.9, 3.0), stats.poisson.ppf(0.9, 30.0)]
