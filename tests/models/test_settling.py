"""Wards whose beds close and open: followed day by day, and in the long run, against matrix exponentials and sums."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import linalg

from bedplan.models import Demand, LengthOfStay
from bedplan.models.chains.settling import (
    AtRandom,
    days_of,
    share_full_as_if_settled,
    share_full_at_random,
    share_full_by_day,
    shares_in_force,
)
from tests.erlang_sum import share


def test_beds_that_never_change_are_erlangs() -> None:
    """With the same beds every day each day turns away Erlang's share, from one bed to many."""
    counts = np.array([0, 1, 5, 8, 12, 30])
    found = share_full_by_day(days_of(Demand(2.0, LengthOfStay(4.0))), np.tile(counts, (364, 1)))

    assert found == pytest.approx(np.tile([share(8, int(beds)) for beds in counts], (364, 1)), rel=1e-6)


@pytest.mark.parametrize("stay_days", [0.5, 4.0, 60.0])
@pytest.mark.parametrize("week", [False, True])
def test_closing_and_opening_against_a_matrix_exponential(stay_days: float, *, week: bool) -> None:
    """Half of twelve beds closed for fifty days, or every weekend: each day's share full as the exact transient says."""
    beds = np.full(364, 12)
    beds[np.arange(364) % 7 >= 5 if week else slice(100, 150)] = 6
    found = share_full_by_day(days_of(Demand(8.0 / stay_days, LengthOfStay(stay_days, 1.0, "gamma"))), beds[:, None])

    parts, patients = 48, np.arange(13)
    moves = {}
    for open_beds in (6, 12):
        up = np.where(patients < open_beds, 8.0 / stay_days, 0.0)
        flow = np.diag(up[:-1], -1) + np.diag(patients[1:] / stay_days, 1)
        moves[open_beds] = linalg.expm((flow - np.diag(flow.sum(axis=0))) / parts)
    state, exact = np.full(13, 1 / 13), np.zeros(364)
    for day in [*range(364)] * 3:
        shares = []
        for _ in range(parts):
            after = moves[beds[day]] @ state
            shares.append((state[beds[day] :].sum() + after[beds[day] :].sum()) / 2)
            state = after
        exact[day] = np.mean(shares)

    assert found[:, 0] == pytest.approx(exact, rel=0.02, abs=2e-3)
    assert found.mean() == pytest.approx(exact.mean(), rel=0.01)


def test_closures_in_force_are_a_poisson_count() -> None:
    """The chances of 0, 1, 2 … closures are e^−m·m^k/k!, and add up to 1; without closures none is in force."""
    shares = shares_in_force(0.8)

    assert shares[:-1] == pytest.approx([math.exp(-0.8) * 0.8**k / math.factorial(k) for k in range(shares.size - 1)])
    assert shares.sum() == pytest.approx(1.0, abs=1e-12)
    assert shares_in_force(0.0).tolist() == [1.0, 0.0]


def test_settled_at_once_is_the_mixture_of_erlangs_shares() -> None:
    """Erlang's share at each count of open beds, by its chance; never fewer than no beds."""
    closures = AtRandom(5, 0.6, 20.0)
    expected = sum(math.exp(-0.6) * 0.6**k / math.factorial(k) * share(8, max(12 - 5 * k, 0)) for k in range(12))

    assert share_full_as_if_settled(8.0, 12, closures) == pytest.approx(expected, rel=1e-5)


def test_at_random_settles_where_stays_are_short_and_never_where_they_are_long() -> None:
    """Stays short beside the closures: the mixture. Closures gone in a moment: the mean beds, all patients staying."""
    closures = AtRandom(5, 0.6, 500.0)
    assert share_full_at_random(8.0, 0.01, 12, closures) == pytest.approx(
        share_full_as_if_settled(8.0, 12, closures), rel=1e-3
    )
    # a closure of seconds: who comes meets it or not, whatever is in the beds, and the ward thins out accordingly
    for mean in (0.0, 0.3):
        quick = share_full_at_random(8.0, 400.0, 12, AtRandom(12, mean, 1e-4))
        let_in = 8.0 * math.exp(-mean)
        weights = np.cumprod([1.0, *(let_in / bed for bed in range(1, 13))])
        full = weights[-1] / weights.sum()
        assert quick == pytest.approx(1 - math.exp(-mean) * (1 - full), rel=1e-3)
