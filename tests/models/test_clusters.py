"""Patients who come together: published values and small exact chains that follow every group."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
import pytest

from bedplan.models import Demand, LengthOfStay, erlang_b
from bedplan.models.clusters import group_sizes, hayward, loss_table, peakedness, swing_when_full
from tests.models.exact_week import Arrivals, Phases, exponential, turned_away

STEADY_WEEK = 168


def exact_groups(load: float, beds: int, size: int, stay: Phases | None = None, mean_days: float = 1.0) -> float:
    """Return the share of patients turned away when groups of one size come at a steady rate; as many as fit get in."""
    per_hour = np.full(STEADY_WEEK, load / mean_days / 24.0)
    return turned_away(beds, stay or exponential(mean_days), Arrivals(per_hour, group_size=size))[0]


@pytest.mark.parametrize(
    ("swing", "load", "beds", "share"),
    [
        # Fredericks 1980, Bell System Technical Journal 59:807-827, B(N/z, A/z); values recomputed
        (2.0, 20.0, 30, 0.0364969),
        (1.5, 25.0, 30, 0.0784626),
        (0.7, 25.0, 30, 0.0346690),
        (1.0, 25.0, 30, 0.0526032),
    ],
)
def test_hayward_gives_the_published_values(swing: float, load: float, beds: int, share: float) -> None:
    """Hayward's approximation for peaked and for smooth demand."""
    assert hayward(np.array([load]), np.array([beds]), swing)[0, 0] == pytest.approx(share, abs=1e-7)


def test_hayward_far_below_the_load() -> None:
    """With far fewer beds than wanted the share still meets Erlang's formula at the scaled ward."""
    assert hayward(np.array([500.0]), np.array([30]), 0.5)[0, 0] == pytest.approx(float(erlang_b(1000.0, 60)), rel=1e-6)


@pytest.mark.parametrize(
    ("size", "load", "beds", "share"),
    [
        # exact chain of pairs and of threes, exponential stays: printed in the comparison of Fredericks' approximation
        (2, 25.0, 30, 0.0823399),
        (3, 30.0, 40, 0.0505266),
    ],
)
def test_groups_are_exact_for_exponential_stays(size: int, load: float, beds: int, share: float) -> None:
    """Pairs and threes: the model equals the exact chain, where Hayward's approximation is 5 to 10 % too low."""
    demand = Demand(load / 4.0, LengthOfStay(4.0, 1.0, "gamma"), clustering=float(size))
    found = loss_table(np.array([load]), np.array([beds]), swing_when_full(demand))[0, 0]

    assert found == pytest.approx(share, rel=1e-6)
    assert exact_groups(load, beds, size) == pytest.approx(share, rel=1e-5)
    assert 0.88 < hayward(np.array([load]), np.array([beds]), (size + 1) / 2)[0, 0] / share < 1.0


@pytest.mark.parametrize(("size", "load", "beds"), [(2, 3.0, 5), (2, 6.0, 9), (3, 3.0, 6), (3, 8.0, 9), (5, 6.0, 12)])
def test_small_wards_are_exact_where_hayward_is_too_low(size: int, load: float, beds: int) -> None:
    """Below 15 beds Hayward is 9 % and more too low; the chain of groups is used there, and everywhere."""
    exact = exact_groups(load, beds, size)

    assert loss_table(np.array([load]), np.array([beds]), (size + 1) / 2)[0, 0] == pytest.approx(exact, rel=1e-6)
    assert hayward(np.array([load]), np.array([beds]), (size + 1) / 2)[0, 0] < exact


def short_and_long(share: float, short: float, long: float) -> tuple[Phases, LengthOfStay]:
    """Return a mix of two exponential stays: its phases and the same as a length of stay."""
    streams = (LengthOfStay(mean, 1.0, "gamma") for mean in (short, long))
    return Phases((1 - share, share), (1 / short, 1 / long), (None, None)), LengthOfStay.two_streams(share, *streams)


# Stays with mean 1: even (variation 0.71), uneven (1.32) and very uneven (2.35).
OTHER_STAYS = {
    "even": (Phases((1.0, 0.0), (2.0, 2.0), (1, None)), LengthOfStay(1.0, math.sqrt(0.5), "gamma")),
    "uneven": short_and_long(0.3, 0.6, 1.0 / 0.3 - 0.6 * 0.7 / 0.3),
    "very uneven": short_and_long(0.1, 0.5, 5.5),
}


@pytest.mark.parametrize("stay", OTHER_STAYS)
@pytest.mark.parametrize(
    ("size", "load", "beds"), [(2, 6.0, 9), (2, 9.0, 12), (2, 9.0, 16), (3, 8.0, 12), (3, 8.0, 17)]
)
def test_other_stays_act_through_their_overlap(stay: str, size: int, load: float, beds: int) -> None:
    """With even stays groups turn more away, with uneven ones fewer; the model follows the exact chain to 6 %."""
    phases, spread = OTHER_STAYS[stay]
    exact = exact_groups(load, beds, size, phases)
    swing = swing_when_full(Demand(load, spread, clustering=float(size)))

    assert loss_table(np.array([load]), np.array([beds]), swing)[0, 0] == pytest.approx(exact, rel=0.06)
    exponential_stays = exact_groups(load, beds, size)
    assert (exact > exponential_stays * 1.01) if stay == "even" else (exact < exponential_stays * 0.99)


def test_the_peakedness_of_groups() -> None:
    """Exponential stays: z = 1 + E[X(X−1)]/(2E[X]); z = clustering when every stay is the same.

    Source: Whitt 1984; Eckberg 1983; for groups of geometric size with mean 2 (variance ÷ mean 3): z = 2.
    """
    assert peakedness(Demand(5.0, LengthOfStay(4.0, 1.0, "gamma"), clustering=3.0)) == pytest.approx(2.0)
    assert peakedness(Demand(5.0, LengthOfStay(4.0, 0.0), clustering=3.0)) == pytest.approx(3.0)
    assert peakedness(Demand(5.0, LengthOfStay(4.0, 1.2), clustering=1.0)) == 1.0


@pytest.mark.parametrize("clustering", [1.0, 1.3, 2.0, 2.75, 40.5])
def test_group_sizes_have_the_clustering_asked_for(clustering: float) -> None:
    """Shares of patients by size of their group: E[X²]/E[X] over groups = mean size of a patient's own group."""
    shares = group_sizes(clustering)

    assert shares.sum() == pytest.approx(1.0)
    assert shares @ np.arange(1, shares.size + 1) == pytest.approx(clustering)


def test_smoother_arrivals_turn_fewer_away() -> None:
    """At every count and load in use, smoother arrivals turn fewer away and clustered ones more."""
    loads, counts = np.array([3.0, 25.0, 100.0]), np.array([2, 10, 30, 110])
    tables = [loss_table(loads, counts, swing) for swing in (0.4, 0.8, 1.0, 1.2, 2.0)]

    for fewer, more in pairwise(tables):
        assert (fewer <= more + 1e-12).all()
    for swing in (0.4, 1.0, 1.7):
        assert loss_table(np.array([0.0]), np.array([0, 1, 4]), swing).ravel().tolist() == [1.0, 0.0, 0.0]
