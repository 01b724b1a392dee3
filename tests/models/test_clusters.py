"""Patients who come together: published values and small exact chains that follow every group."""

from __future__ import annotations

import itertools
import math
from itertools import pairwise
from typing import TYPE_CHECKING

import mpmath
import numpy as np
import pytest
from scipy import sparse
from scipy.sparse import linalg

from bedplan.models import BookedList, Demand, LengthOfStay, erlang_b
from bedplan.models.formulas.clusters import (
    clustering_notes,
    group_sizes,
    hayward,
    loss_table,
    more_if_groups_differ,
    peakedness,
    swing_when_full,
    uneven_groups_loss,
)
from tests.models.exact_week import Arrivals, Phases, exponential, turned_away

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

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


def lost_in_phases(load: float, beds: int, sizes: Sequence[float], stay: Phases) -> float:
    """Return the share of patients turned away by a chain of the patients in each of two phases of stay.

    ``sizes``: how often groups of 1, 2, 3 … come; as many as fit get in.
    """
    states = [(first, second) for first in range(beds + 1) for second in range(beds + 1 - first)]
    number = {state: place for place, state in enumerate(states)}
    mean_size = sum(size * often for size, often in enumerate(sizes, 1))
    lost, moves = np.zeros(len(states)), []
    for state, place in number.items():
        for size, often in enumerate(sizes, 1):
            fitting = min(size, beds - sum(state))
            lost[place] += often * (size - fitting) / mean_size
            for first in range(fitting + 1):
                chance = math.comb(fitting, first) * stay.start[0] ** first * stay.start[1] ** (fitting - first)
                end = number[state[0] + first, state[1] + fitting - first]
                moves.append((place, end, load / mean_size * often * chance))
        for phase in (0, 1):
            if state[phase]:
                left = [count - (kind == phase) for kind, count in enumerate(state)]
                if stay.following[phase] is not None:
                    left[stay.following[phase]] += 1
                moves.append((place, number[tuple(left)], state[phase] * stay.per_day[phase]))
    start, end, rate = np.array(moves).T
    flow = sparse.csr_array((rate, (end.astype(int), start.astype(int))), shape=(len(states),) * 2)
    flow = (flow - sparse.diags_array(flow.sum(axis=0))).tocsr()[:-1]
    system = sparse.vstack([flow, np.ones((1, len(states)))], format="csc")
    return float(linalg.spsolve(system, np.eye(len(states))[-1]) @ lost)


# from so many beds on -> how far the figure with other than exponential stays may be too low, and too high
OTHER_STAYS_OFF = {1: (-0.08, 0.15), 15: (-0.03, 0.08)}


@pytest.mark.parametrize("fewest", OTHER_STAYS_OFF)
@pytest.mark.parametrize("size", [2, 3])
@pytest.mark.parametrize("stay", OTHER_STAYS)
def test_other_stays_act_through_their_overlap(stay: str, size: int, fewest: int) -> None:
    """With even stays groups turn more away, with uneven ones fewer; the model follows the exact chain this closely."""
    phases, spread = OTHER_STAYS[stay]
    one_size = [0.0] * (size - 1) + [1.0]
    errors = []
    for beds, use in itertools.product((4, 6, 9, 13) if fewest == 1 else (15, 20, 30), (0.45, 0.6, 0.75, 0.9, 1.1)):
        load = beds * use
        exact = lost_in_phases(load, beds, one_size, phases)
        swing = swing_when_full(Demand(load, spread, clustering=float(size)))
        if exact >= 0.01:
            errors.append(loss_table(np.array([load]), np.array([beds]), swing)[0, 0] / exact - 1.0)
            like = exact / loss_table(np.array([load]), np.array([beds]), (size + 1) / 2)[0, 0] - 1.0
            assert like > 0 if stay == "even" else like < 0

    assert len(errors) > 5
    assert OTHER_STAYS_OFF[fewest][0] <= min(errors)
    assert max(errors) <= OTHER_STAYS_OFF[fewest][1]


def geometric(clustering: float) -> list[float]:
    """Return how often groups of 1, 2, 3 … come if sizes are geometric with this variance ÷ mean of arrivals.

    E[X²]/E[X] = 2·E[X] − 1 for geometric sizes X, so E[X] = (clustering + 1)/2.
    """
    stop = 2.0 / (clustering + 1.0)
    return [stop * (1.0 - stop) ** size for size in range(100)]


@pytest.mark.parametrize("clustering", [1.2, 2.0, 5.0])
@pytest.mark.parametrize(("load", "beds"), [(0.5, 1), (3.0, 5), (9.0, 12)])
def test_groups_of_widely_differing_sizes_are_exact(clustering: float, load: float, beds: int) -> None:
    """Geometric sizes and exponential stays: the share of a chain that takes in every group patient by patient."""
    only = Phases((1.0, 0.0), (1.0, 1.0), (None, None))
    exact = lost_in_phases(load, beds, geometric(clustering), only)

    found = uneven_groups_loss(load, np.array([0, beds - 1, beds]), clustering)
    assert found[0] == 1.0
    assert found[-1] == pytest.approx(exact, rel=1e-8)
    assert found[-1] < found[-2]


# variance ÷ mean of arrivals -> how much more than the figure are turned away if sizes are geometric, where 1 in 100 or
# more are: on 5 to 14 beds, and from 15 on
UNEVEN_GROUPS = {1.2: (0.04, 0.012), 1.5: (0.3, 0.04), 2.0: (0.53, 0.18), 3.0: (0.83, 0.42)}


@pytest.mark.parametrize("clustering", UNEVEN_GROUPS)
def test_equal_groups_are_too_low_by_what_is_announced(clustering: float) -> None:
    """If sizes differ widely more are turned away than the figure says, most on small wards; the note says how many."""
    worst = [0.0, 0.0]
    for beds, use in itertools.product((5, 8, 12, 20, 40, 80, 150), (0.3, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9, 1.0, 1.2)):
        load = beds * use
        # exact for these sizes, as the test above shows
        differing = uneven_groups_loss(load, np.array([beds]), clustering)[0]
        if differing >= 0.01:
            equal = loss_table(np.array([load]), np.array([beds]), (clustering + 1.0) / 2.0)[0, 0]
            worst[beds >= 15] = max(worst[beds >= 15], differing / equal - 1.0)
            demand = Demand(load / 4.0, LengthOfStay(4.0, 1.0, "gamma"), clustering=clustering)
            assert differing / equal - 1.0 <= more_if_groups_differ(demand) + 1e-9

    small, large = UNEVEN_GROUPS[clustering]
    assert 0.6 * small <= worst[0] <= small
    assert 0.6 * large <= worst[1] <= large


def test_the_note_on_groups_quotes_the_figure() -> None:
    """The note says how many more, in whole percent upwards; independent patients have no note."""
    stay = LengthOfStay(4.0, 1.0, "gamma")
    pairs = Demand(5.0, stay, clustering=2.0)
    more = max(
        uneven_groups_loss(20.0, np.array([beds]), 2.0)[0] / loss_table(np.array([20.0]), np.array([beds]), 1.5)[0, 0]
        for beds in range(1, 60)
        if uneven_groups_loss(20.0, np.array([beds]), 2.0)[0] >= 0.01
    )

    assert f"up to {math.ceil(100 * (more - 1))} % more" in clustering_notes(pairs)[0]
    assert "more than twice as many" in clustering_notes(Demand(0.3, stay, clustering=3.0))[0]
    assert "towards more beds" in clustering_notes(Demand(5.0, stay, clustering=0.5))[0]
    assert clustering_notes(Demand(5.0, stay)) == ()
    # booked patients don't come in groups, so they thin the effect out
    booked = BookedList((30, 30, 30, 30, 30, 0, 0), stay)
    assert 0 < more_if_groups_differ(Demand(5.0, stay, clustering=2.0, booked=(booked,))) < more - 1
    assert more_if_groups_differ(Demand(0.0, stay, clustering=2.0)) == 0.0


def evenly_spread_loss(beds: int, transform: Callable[[int], mpmath.mpf]) -> float:
    """Return the share turned away when gaps between patients have this transform, stays exponential with mean 1.

    Source: Takács 1962, Introduction to the Theory of Queues, chapter 4: 1/Σ C(c, r)·Π (1 − φ(j))/φ(j).
    """
    total, product = mpmath.mpf(1), mpmath.mpf(1)
    for bed in range(1, beds + 1):
        product *= (1 - transform(bed)) / transform(bed)
        total += mpmath.binomial(beds, bed) * product
    return float(1 / total)


def gaps_of_stages(load: float, clustering: float) -> Callable[[int], mpmath.mpf]:
    """Return the transform of Erlang's gaps, 1/clustering stages each, between patients of this load."""
    stages = 1 / mpmath.mpf(clustering)
    return lambda pace: (load * stages / (load * stages + pace)) ** stages


def even_slots(load: float, clustering: float) -> Callable[[int], mpmath.mpf]:
    """Return the transform of gaps when a patient comes in each of evenly spaced slots with chance 1 − clustering."""
    comes = 1 - mpmath.mpf(clustering)
    return lambda pace: 1 / (1 + (mpmath.exp(pace * comes / load) - 1) / comes)


@pytest.mark.parametrize("gaps", [gaps_of_stages, even_slots])
@pytest.mark.parametrize("clustering", [0.1, 0.25, 0.5, 0.8])
def test_smooth_arrivals_err_towards_more_beds(gaps: Callable, clustering: float) -> None:
    """Hayward's approximation is never too low; from 15 beds on a fifth too high at most, on smaller wards more."""
    off = {True: [0.0], False: [0.0]}
    with mpmath.workdps(40):
        for beds, use in itertools.product(
            (1, 3, 5, 9, 15, 30, 60), (0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9, 1.0, 1.3)
        ):
            exact = evenly_spread_loss(beds, gaps(beds * use, clustering))
            found = loss_table(np.array([beds * use]), np.array([beds]), (1.0 + clustering) / 2.0)[0, 0]
            assert found > exact
            if exact >= 0.01:
                off[beds >= 15].append(found / exact - 1.0)

    assert max(off[True]) <= 0.2
    assert max(off[False]) > max(off[True])
    if gaps is even_slots and clustering <= 0.5:
        assert max(off[False]) > 0.5


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
