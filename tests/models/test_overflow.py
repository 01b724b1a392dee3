"""Overflow into other beds: published formulas and figures, and chains solved densely in this file."""

from __future__ import annotations

import itertools
import math
from typing import TYPE_CHECKING

import numpy as np
import pytest

from bedplan.errors import ImpossibleFigure
from bedplan.models import erlang_b
from bedplan.models.overflow import (
    OverflowLoad,
    equivalent_ward,
    overflow_load,
    overflow_pair,
    shared_overflow,
    together,
)

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator

State = tuple[int, ...]


def long_run(states: list[State], moves: Callable[[State], Iterator[tuple[State, float]]]) -> dict[State, float]:
    """Return the share of time in each state, by a dense solution of the balance equations."""
    number = {state: place for place, state in enumerate(states)}
    flow = np.zeros((len(states), len(states)))
    for state, place in number.items():
        for target, rate in moves(state):
            flow[number[target], place] += rate
            flow[place, place] -= rate
    flow[-1] = 1.0
    shares = np.linalg.solve(flow, np.eye(len(states))[-1])
    return dict(zip(states, shares, strict=True))


def pair_by_hand(
    loads: tuple[float, float], beds: tuple[int, int], stays: tuple[float, float]
) -> tuple[float, float, float, float]:
    """Return sent, lost, host lost and outliers of a home and a host ward, outliers always told apart."""
    states = [
        state
        for state in itertools.product(range(beds[0] + 1), range(beds[1] + 1), range(beds[1] + 1))
        if state[1] + state[2] <= beds[1]
    ]

    def moves(state: State) -> Iterator[tuple[State, float]]:
        home, sent, own = state
        if home < beds[0]:
            yield (home + 1, sent, own), loads[0] / stays[0]
        elif sent + own < beds[1]:
            yield (home, sent + 1, own), loads[0] / stays[0]
        if sent + own < beds[1]:
            yield (home, sent, own + 1), loads[1] / stays[1]
        if home:
            yield (home - 1, sent, own), home / stays[0]
        if sent:
            yield (home, sent - 1, own), sent / stays[0]
        if own:
            yield (home, sent, own - 1), own / stays[1]

    shares = long_run(states, moves)
    return (
        sum(share for (home, _, _), share in shares.items() if home == beds[0]),
        sum(share for (home, sent, own), share in shares.items() if home == beds[0] and sent + own == beds[1]),
        sum(share for (_, sent, own), share in shares.items() if sent + own == beds[1]),
        sum(sent * share for (_, sent, _), share in shares.items()),
    )


def shared_by_hand(loads: tuple[float, float], beds: tuple[int, int], shared: int) -> float:
    """Return the share of all patients who find no bed when two wards send their overflow to shared beds."""
    states = list(itertools.product(range(beds[0] + 1), range(beds[1] + 1), range(shared + 1)))

    def moves(state: State) -> Iterator[tuple[State, float]]:
        for ward in (0, 1):
            more = list(state)
            if state[ward] < beds[ward]:
                more[ward] += 1
                yield tuple(more), loads[ward]
            elif state[2] < shared:
                more[2] += 1
                yield tuple(more), loads[ward]
        for place in range(3):
            if state[place]:
                fewer = list(state)
                fewer[place] -= 1
                yield tuple(fewer), float(state[place])

    shares = long_run(states, moves)
    lost = sum(
        share * sum(load for load, count, own in zip(loads, state, beds, strict=False) if count == own)
        for state, share in shares.items()
        if state[2] == shared
    )
    return lost / sum(loads)


# Load, beds, then mean, variance and peakedness of the overflow: Riordan's formula in Wilkinson 1956, Bell System
# Technical Journal 35:421-514 (formula from memory, figures re-computed with an independent chain).
RIORDAN = [
    (8.0, 10, 0.973288514, 1.985661391, 2.040157016),
    (10.0, 10, 2.145823431, 4.362447281, 2.032994522),
    (20.0, 20, 3.177839231, 8.292013428, 2.609324395),
    (100.0, 100, 7.570045271, 38.59591007, 5.098504525),
]


@pytest.mark.parametrize(("load", "beds", "mean", "variance", "peakedness"), RIORDAN)
def test_overflow_has_the_published_mean_and_variance(
    load: float, beds: int, mean: float, variance: float, peakedness: float
) -> None:
    """Mean, variance and peakedness of the overflow are Riordan's."""
    stream = overflow_load(load, beds)

    assert (stream.mean, stream.variance, stream.peakedness) == pytest.approx((mean, variance, peakedness), rel=1e-8)


@pytest.mark.parametrize(("load", "beds"), [(3.0, 2), (4.0, 5), (1.0, 3)])
def test_overflow_swings_as_a_chain_says(load: float, beds: int) -> None:
    """Counting patients sent to plenty of other beds in a chain gives the same mean and variance."""
    plenty = 25

    def moves(state: State) -> Iterator[tuple[State, float]]:
        home, sent = state
        if home < beds:
            yield (home + 1, sent), load
        elif sent < plenty:
            yield (home, sent + 1), load
        if home:
            yield (home - 1, sent), float(home)
        if sent:
            yield (home, sent - 1), float(sent)

    shares = long_run(list(itertools.product(range(beds + 1), range(plenty + 1))), moves)
    mean = sum(sent * share for (_, sent), share in shares.items())
    variance = sum(sent**2 * share for (_, sent), share in shares.items()) - mean**2

    assert overflow_load(load, beds).mean == pytest.approx(mean, rel=1e-9)
    assert overflow_load(load, beds).variance == pytest.approx(variance, rel=1e-8)


@pytest.mark.parametrize("mean", np.geomspace(0.05, 300.0, 9))
@pytest.mark.parametrize("peakedness", [1.05, 1.5, 2.0, 4.0, 8.0])
def test_the_equivalent_ward_sends_on_the_same_stream(mean: float, peakedness: float) -> None:
    """The imagined ward's own overflow, by Riordan's formula, has the mean and variance it was found for."""
    load, beds = equivalent_ward(OverflowLoad(mean, mean * peakedness))

    assert load * erlang_b(load, beds) == pytest.approx(mean, rel=1e-8)
    assert mean * (1 - mean + load / (beds + 1 - load + mean)) == pytest.approx(mean * peakedness, rel=1e-7)


def test_independent_patients_need_no_imagined_ward() -> None:
    """A peakedness of 1 is a ward of no beds, nobody stays nobody, and smoother streams are refused."""
    assert equivalent_ward(OverflowLoad(5.0, 5.0)) == (5.0, 0.0)
    assert equivalent_ward(OverflowLoad(0.0, 0.0)) == (0.0, 0.0)
    with pytest.raises(ImpossibleFigure, match=r"peakedness of 0\.8 is not an overflow"):
        equivalent_ward(OverflowLoad(5.0, 4.0))


# Two wards' loads and beds, shared beds; mean, variance and peakedness of both overflows; share refused by an exact
# chain, by the equivalent random method, and by Hayward's formula. Methods: Wilkinson 1956; Fredericks 1980, Bell
# System Technical Journal 59:807-827 (from memory); figures re-computed independently.
REGIONAL = [
    ((4.0, 6.0), (5, 5), 4, (2.95867, 4.787686, 1.618189), 0.085026, 0.086310, 0.080573),
    ((8.0, 10.0), (10, 10), 5, (3.119112, 6.348109, 2.03523), 0.042971, 0.043791, 0.038597),
    ((5.0, 5.0), (8, 4), 3, (2.341954, 3.654911, 1.560625), 0.081543, 0.082410, 0.076997),
]


@pytest.mark.parametrize("case", REGIONAL)
def test_shared_overflow_beds_refuse_the_published_share(case: tuple) -> None:
    """The equivalent random method gives its known figures, within 3 % of the chain; Hayward's formula is lower."""
    loads, beds, shared, stream, exact, equivalent, hayward = case
    both = together(overflow_load(load, count) for load, count in zip(loads, beds, strict=True))
    found = shared_overflow(loads, beds, shared)

    assert (both.mean, both.variance, both.peakedness) == pytest.approx(stream, rel=1e-6)
    assert shared_by_hand(loads, beds, shared) == pytest.approx(exact, abs=1e-6)
    assert found == pytest.approx(equivalent, abs=1e-6)
    assert found == pytest.approx(exact, rel=0.03)
    by_hayward = both.mean * erlang_b(both.mean / both.peakedness, shared / both.peakedness) / sum(loads)
    assert by_hayward == pytest.approx(hayward, abs=1e-6)


@pytest.mark.parametrize("first", [(2.0, 1), (2.0, 3), (4.0, 6)])
@pytest.mark.parametrize("second", [(2.0, 2), (4.0, 4), (8.0, 10)])
@pytest.mark.parametrize("shared", [1, 3, 6])
def test_the_equivalent_random_method_errs_as_it_says(
    first: tuple[float, int], second: tuple[float, int], shared: int
) -> None:
    """From 1 in 50 refused on it is 3 % too low to 6 % too high; where rarer it is too low, by what is announced."""
    (loads, beds) = zip(first, second, strict=True)
    exact = shared_by_hand(loads, beds, shared)
    found = shared_overflow(loads, beds, shared)

    lowest = 0.965 if exact >= 0.02 else 0.89 if exact >= 0.01 else 2 / 3 if exact >= 1 / 300 else 0.1
    assert lowest * exact <= found <= 1.065 * exact


def test_taking_overflow_for_ordinary_patients_says_far_too_little() -> None:
    """The same mean without its bursts would promise a quarter to a half fewer refused: what the method is there for."""
    for case in REGIONAL:
        loads, _, shared, (mean, _, _), exact, *_ = case
        ordinary = mean * float(erlang_b(mean, shared)) / sum(loads)
        assert 0.45 * exact < ordinary < 0.76 * exact


# beds, load, peakedness, share: B(c/z, a/z), Fredericks 1980 (formula from memory, figures re-computed)
@pytest.mark.parametrize(
    ("beds", "load", "peakedness", "share"),
    [
        (30, 20.0, 2.0, 0.0364969),
        (30, 25.0, 1.5, 0.0784626),
        (30, 25.0, 0.7, 0.0346690),
        (30, 25.0, 1.0, 0.0526032),
        (40, 30.0, 2.0, 0.0455932),
    ],
)
def test_bursts_are_read_at_scaled_beds_and_load(beds: int, load: float, peakedness: float, share: float) -> None:
    """Hayward's formula, Erlang's at a fraction of the beds, gives its known figures for peakedness above and below 1."""
    assert erlang_b(load / peakedness, beds / peakedness) == pytest.approx(share, abs=6e-8)


PAIRS = [((4.0, 6.0), (5, 8)), ((6.0, 3.0), (5, 6)), ((2.0, 9.0), (6, 9)), ((5.0, 0.0), (4, 3)), ((0.0, 5.0), (4, 6))]


@pytest.mark.parametrize(("loads", "beds"), [*PAIRS, ((3.0, 2.0), (0, 4)), ((3.0, 2.0), (3, 0)), ((3.0, 2.0), (0, 0))])
@pytest.mark.parametrize("stays", [(1.0, 1.0), (4.0, 4.0), (1.0, 6.0), (9.0, 2.0)])
def test_two_wards_are_solved_exactly(
    loads: tuple[float, float], beds: tuple[int, int], stays: tuple[float, float]
) -> None:
    """Home and host, stays alike or not, give the shares and outliers of a dense solution."""
    found = overflow_pair(loads, beds, stays)

    assert (found.sent, found.lost, found.host_lost, found.outliers) == pytest.approx(
        pair_by_hand(loads, beds, stays), rel=1e-9, abs=1e-12
    )


def test_large_wards_keep_erlangs_share_at_home() -> None:
    """The home ward never feels its host: it is full for Erlang's share, at any size (Erlang 1917)."""
    for beds in (60, 100, 140):
        found = overflow_pair((0.9 * beds, 0.8 * beds), (beds, beds))
        terms = [n * math.log(0.9 * beds) - math.lgamma(n + 1) for n in range(beds + 1)]
        share = 1.0 / math.fsum(math.exp(one - terms[-1]) for one in terms)
        assert found.sent == pytest.approx(share, rel=1e-9)
        # the host's own patients suffer from outliers, and are never better off than without them
        assert found.host_lost > float(erlang_b(0.8 * beds, beds))


@pytest.mark.parametrize(
    ("make", "says"),
    [
        (lambda: overflow_pair((-1.0, 2.0), (3, 3)), "load of -1 beds"),
        (lambda: overflow_pair((1.0, math.nan), (3, 3)), "load of nan beds"),
        (lambda: overflow_pair((1.0, 2.0), (3, 3), (0.0, 1.0)), "stay of 0 days"),
        (lambda: overflow_pair((1.0, 2.0), (3, 1.5)), "1.5 beds is not possible"),
        (lambda: overflow_pair((1.0, 2.0), (300, 300)), "300 and 300 .* too large to be solved exactly"),
        (lambda: overflow_pair((1.0, 2.0), (60, 60), (1.0, 2.0)), "too large to be solved exactly"),
        (lambda: overflow_pair((1.0, 2.0), (20_000, 20_000)), "too large to be solved exactly"),
        (lambda: shared_overflow([1.0, 2.0], [3], 4), "2 loads and 1 bed counts"),
        (lambda: shared_overflow([1.0], [3], -4), "-4 beds is not possible"),
        (lambda: shared_overflow([-1.0], [3], 4), "load of -1 beds"),
    ],
)
def test_impossible_overflows_are_explained(make: Callable[[], object], says: str) -> None:
    """Each figure outside its meaning is quoted in a sentence, and wards too large to solve are said to be."""
    with pytest.raises(ImpossibleFigure, match=says):
        make()


def test_without_patients_nothing_overflows() -> None:
    """Nobody at home and nobody at the host leave both empty."""
    assert shared_overflow([0.0, 0.0], [3, 0], 2) == 0.0
    found = overflow_pair((0.0, 0.0), (3, 3))
    assert (found.sent, found.lost, found.host_lost, found.outliers) == pytest.approx((0.0, 0.0, 0.0, 0.0), abs=1e-12)
