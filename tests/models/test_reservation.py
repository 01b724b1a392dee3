"""Beds held back, and patients who take more than one bed: read examples and chains solved densely in this file."""

from __future__ import annotations

import itertools
import math
from typing import TYPE_CHECKING

import numpy as np
import pytest

from bedplan.errors import ImpossibleFigure
from bedplan.models.sharing.reservation import beds_each, beds_held_back

if TYPE_CHECKING:
    from collections.abc import Callable

# Examples of two kinds, load 2 taking one bed and load 1 taking two, and of one kind alone: Moscholios & Logothetis
# 2019, Efficient Multirate Teletraffic Loss Models Beyond Erlang (read), after Kaufman 1981 and Roberts 1981.


def by_hand(
    loads: tuple[float, float],
    beds: int,
    held_back: tuple[int, int],
    needs: tuple[int, int] = (1, 1),
    stays: tuple[float, float] = (1.0, 1.0),
) -> tuple[float, float]:
    """Return the share of each kind refused, by a dense solution of the chain of both kinds' patients."""
    states = [
        state
        for state in itertools.product(range(beds + 1), repeat=2)
        if needs[0] * state[0] + needs[1] * state[1] <= beds
    ]
    number = {state: place for place, state in enumerate(states)}
    flow, refused = np.zeros((len(states), len(states))), np.zeros((2, len(states)))
    for state, place in number.items():
        free = beds - needs[0] * state[0] - needs[1] * state[1]
        for kind in (0, 1):
            for step, rate in ((1, loads[kind] / stays[kind]), (-1, state[kind] / stays[kind])):
                if step == 1 and free < needs[kind] + held_back[kind]:
                    refused[kind, place] = 1.0
                    continue
                target = tuple(count + step * (one == kind) for one, count in enumerate(state))
                if target in number and rate:
                    flow[number[target], place] += rate
                    flow[place, place] -= rate
    flow[-1] = 1.0
    first, second = refused @ np.linalg.solve(flow, np.eye(len(states))[-1])
    return float(first), float(second)


def test_two_kinds_in_five_beds_are_refused_as_printed() -> None:
    """Five beds refuse 0.1721854 of those who take one bed and 0.3818984 of those who take two."""
    refused, _ = beds_each([2.0, 1.0], [1, 2], 5)

    # the second is printed as the sum of two rounded figures
    assert refused == pytest.approx([0.1721854, 0.3818984], abs=1e-6)
    assert refused == pytest.approx(by_hand((2.0, 1.0), 5, (0, 0), (1, 2)), rel=1e-9)


def test_time_with_each_bed_in_use_is_as_printed() -> None:
    """Times with 0 to 4 of 4 beds in use stand as 1, 2, 3, 3.3333333, 3.1666667."""
    _, time = beds_each([2.0, 1.0], [1, 2], 4)

    assert time / time[0] == pytest.approx([1.0, 2.0, 3.0, 3.3333333, 3.1666667], abs=5e-8)


@pytest.mark.parametrize(
    ("load", "need", "beds", "refused", "within"), [(2.0, 2, 5, 0.4, 1e-9), (1.0, 1, 10, 0.0000001, 5e-8)]
)
def test_one_kind_alone_is_erlangs(load: float, need: int, beds: int, refused: float, within: float) -> None:
    """Load 2 taking two of five beds: B(2, 2) = 0.4; load 1 on ten beds: 0.0000001 as printed."""
    assert beds_each([load], [need], beds)[0] == pytest.approx([refused], abs=within)


def test_beds_held_back_give_the_printed_times() -> None:
    """One bed of four kept from those who take one: times with 0 to 4 in use as printed for the recursion."""
    refused, time = beds_each([2.0, 1.0], [1, 2], 4, held_back=[1, 0])

    assert time == pytest.approx([0.0923077, 0.1846154, 0.2769231, 0.3076923, 0.1384615], abs=5e-8)
    assert refused == pytest.approx([0.3076923 + 0.1384615] * 2, abs=1e-7)


def test_the_recursion_with_beds_held_back_is_a_little_low() -> None:
    """One bed of five held back: 0.3253012 by the printed recursion, 3 % under the chain, as it says of itself."""
    refused, _ = beds_each([2.0, 1.0], [1, 2], 5, held_back=[1, 0])
    exact = by_hand((2.0, 1.0), 5, (1, 0), (1, 2))

    assert refused == pytest.approx([0.3253012] * 2, abs=5e-8)
    # both kinds are turned away with fewer than two beds free
    assert exact[0] == pytest.approx(exact[1])
    assert 0.965 * exact[0] < refused[0] < exact[0]


@pytest.mark.parametrize("loads", [(2.0, 6.0), (9.0, 3.0), (0.0, 5.0), (5.0, 0.0)])
@pytest.mark.parametrize("held_back", [0, 1, 3, 9])
@pytest.mark.parametrize("stays", [(1.0, 1.0), (5.0, 5.0), (1.0, 6.0), (8.0, 2.0)])
def test_held_back_beds_are_solved_exactly(
    loads: tuple[float, float], held_back: int, stays: tuple[float, float]
) -> None:
    """Nine beds, the last few for emergencies, stays alike or not: the shares of a dense solution."""
    assert beds_held_back(loads, 9, held_back, stays) == pytest.approx(
        by_hand(loads, 9, (0, held_back), stays=stays), rel=1e-9, abs=1e-12
    )


def test_holding_nothing_back_is_one_ward_for_all() -> None:
    """With nothing held back both meet Erlang's share of the joint load, even at 200 beds (Erlang 1917)."""
    terms = [n * math.log(190.0) - math.lgamma(n + 1) for n in range(201)]
    share = 1.0 / math.fsum(math.exp(one - terms[-1]) for one in terms)

    assert beds_held_back((120.0, 70.0), 200, 0) == pytest.approx((share, share), rel=1e-9)


def test_each_bed_held_back_helps_emergencies_and_costs_the_others() -> None:
    """Emergencies are refused less with every bed held back, and all others more."""
    refused = [beds_held_back((12.0, 8.0), 22, beds, (2.0, 5.0)) for beds in range(6)]
    first, second = (np.array(one) for one in zip(*refused, strict=True))

    assert (np.diff(first) < 0).all()
    assert (np.diff(second) > 0).all()


def test_everything_held_back_shuts_the_others_out() -> None:
    """Holding back every bed refuses all others and leaves emergencies the ward to themselves."""
    first, second = beds_held_back((2.0, 6.0), 2, 2)

    # load 2 on 2 beds: (4/2) ÷ (1 + 2 + 2) = 0.4 (Erlang 1917)
    assert (first, second) == pytest.approx((0.4, 1.0))


def test_no_beds_refuse_everyone() -> None:
    """A ward of no beds refuses both kinds, and nobody wanting a bed is refused none."""
    assert beds_held_back((2.0, 6.0), 0, 0) == (1.0, 1.0)
    assert beds_held_back((0.0, 0.0), 5, 1) == pytest.approx((0.0, 0.0), abs=1e-12)


@pytest.mark.parametrize(
    ("make", "says"),
    [
        (lambda: beds_held_back((1.0, 1.0), 5, 6), "6 beds held back of 5"),
        (lambda: beds_held_back((1.0, 1.0), 5, 0.5), "0.5 beds held back of 5"),
        (lambda: beds_held_back((1.0, 1.0), 5, -1), "-1 beds held back"),
        (lambda: beds_held_back((-1.0, 1.0), 5, 1), "load of -1 beds"),
        (lambda: beds_held_back((1.0, 1.0), 5, 1, (1.0, math.inf)), "stay of inf days"),
        (lambda: beds_held_back((1.0, 1.0), 250, 1, (1.0, 2.0)), "too large to be solved exactly"),
        (lambda: beds_each([1.0], [1, 2], 5), "one for each kind"),
        (lambda: beds_each([1.0], [0], 5), "0 beds a patient"),
        (lambda: beds_each([1.0], [1], 5, [-1]), "-1 beds held back"),
        (lambda: beds_each([math.nan], [1], 5), "load of nan beds"),
        (lambda: beds_each(None, [1], 5), "None was given"),
        (lambda: beds_each([1.0], ["1"], 5), "'1' beds a patient"),
        (lambda: beds_held_back((1.0,), 5, 1), "Two loads"),
        (lambda: beds_held_back((1.0, None), 5, 1), "load of None beds"),
    ],
)
def test_impossible_reservations_are_explained(make: Callable[[], object], says: str) -> None:
    """Each figure outside its meaning is quoted in a sentence that says what is allowed."""
    with pytest.raises(ImpossibleFigure, match=says):
        make()


def test_a_ward_of_thousands_of_beds_has_shares() -> None:
    """Weights too large for a float are rescaled: 9,000 beds at loads of 5,000 give what their logarithms give."""
    weight = np.full(9_001, -np.inf)
    weight[0] = 0.0
    for used in range(1, 9_001):
        # Kaufman 1981: used · weight(used) = Σ load · need · weight(used − need), in logarithms
        one = math.log(5e3) + weight[used - 1]
        two = math.log(1e4) + weight[used - 2] if used > 1 else -np.inf
        weight[used] = np.logaddexp(one, two) - math.log(used)
    shares = np.exp(weight - np.logaddexp.reduce(weight))

    assert beds_each((5e3, 5e3), (1.0, 2.0), 9_000)[0] == pytest.approx([shares[-1], shares[-2:].sum()], rel=1e-9)
