"""Overflow into other beds: published formulas and figures, and chains solved densely in this file."""

from __future__ import annotations

import itertools
import math
from typing import TYPE_CHECKING

import numpy as np
import pytest
from scipy import sparse
from scipy.sparse import linalg

from bedplan.errors import ImpossibleFigure
from bedplan.models import erlang_b
from bedplan.models.sharing.overflow import overflow_pair, shared_overflow

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Sequence

State = tuple[int, ...]


def long_run(states: list[State], moves: Callable[[State], Iterator[tuple[State, float]]]) -> dict[State, float]:
    """Return the share of time in each state, by a direct solution of the balance equations."""
    number = {state: place for place, state in enumerate(states)}
    moved = [(place, number[target], rate) for state, place in number.items() for target, rate in moves(state)]
    start, end, rate = np.array(moved).reshape(-1, 3).T
    size = len(states)
    flow = sparse.csr_array((rate, (end.astype(int), start.astype(int))), shape=(size, size))
    flow = flow - sparse.diags_array(flow.sum(axis=0))
    system = sparse.vstack([flow.tocsr()[:-1], np.ones((1, size))], format="csc")
    shares = linalg.spsolve(system, np.eye(size)[-1])
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


def shared_by_hand(
    loads: Sequence[float], beds: Sequence[int], shared: int, stays: Sequence[float] | None = None
) -> np.ndarray:
    """Return the share of each ward's patients who find no bed when full wards send them to shared beds.

    With ``stays`` the bay's patients are told apart by their ward.
    """
    wards = range(len(loads))
    kinds = 1 if stays is None else len(loads)
    stays = [1.0] * len(loads) if stays is None else stays
    bay = [one for one in itertools.product(range(shared + 1), repeat=kinds) if sum(one) <= shared]
    states = [own + one for own in itertools.product(*(range(count + 1) for count in beds)) for one in bay]

    def moves(state: State) -> Iterator[tuple[State, float]]:
        for ward in wards:
            place = ward if state[ward] < beds[ward] else len(beds) + ward % kinds
            if place == ward or sum(state[len(beds) :]) < shared:
                yield tuple(count + (n == place) for n, count in enumerate(state)), loads[ward] / stays[ward]
        for place, count in enumerate(state):
            if count:
                days = stays[place if place < len(beds) else place - len(beds)]
                yield tuple(n - (at == place) for at, n in enumerate(state)), count / days

    shares = long_run(states, moves)
    full = [(state, share) for state, share in shares.items() if sum(state[len(beds) :]) == shared]
    return np.array([sum(share for state, share in full if state[ward] == beds[ward]) for ward in wards])


# Two wards' loads and beds, shared beds; mean of both overflows; share refused by an exact chain. Method: Wilkinson
# 1956, Bell System Technical Journal 35:421-514 (from memory); figures re-computed independently.
REGIONAL = [
    ((4.0, 6.0), (5, 5), 4, 2.95867, 0.085026),
    ((8.0, 10.0), (10, 10), 5, 3.119112, 0.042971),
    ((5.0, 5.0), (8, 4), 3, 2.341954, 0.081543),
]


@pytest.mark.parametrize("case", REGIONAL)
def test_shared_overflow_beds_refuse_the_known_share(case: tuple) -> None:
    """The share of all patients is the known one; ordinary patients with the same mean would promise far fewer refused."""
    loads, beds, shared, mean, exact = case
    found = shared_overflow(loads, beds, shared) @ loads / sum(loads)

    assert sum(load * erlang_b(load, count) for load, count in zip(loads, beds, strict=True)) == pytest.approx(mean)
    assert shared_by_hand(loads, beds, shared) @ loads / sum(loads) == pytest.approx(exact, abs=1e-6)
    assert found == pytest.approx(exact, abs=1e-6)
    assert 0.45 * exact < mean * float(erlang_b(mean, shared)) / sum(loads) < 0.76 * exact


# how many wards -> some of such a load and beds
WARDS = {2: [(0.6, 1), (2.5, 3), (2.5, 6), (6.0, 6), (5.0, 10), (11.0, 10)], 3: [(0.6, 2), (2.4, 4), (4.5, 4)]}
# bays that leave from 1 in 5 to fewer than 1 in 10,000 without a bed
BAYS = {2: (1, 4, 9), 3: (2, 7)}


def shared_cases(count: int) -> Iterator[tuple[tuple[float, ...], tuple[int, ...], int, np.ndarray]]:
    """Return loads, beds, shared beds and exact shares of so many wards, every mix of them."""
    for wards in itertools.combinations_with_replacement(WARDS[count], count):
        loads, beds = zip(*wards, strict=True)
        for shared in BAYS[count]:
            yield loads, beds, shared, shared_by_hand(loads, beds, shared)


@pytest.mark.parametrize("count", [2, 3])
def test_shared_beds_follow_the_exact_chain(count: int) -> None:
    """Two and three wards of many sizes and loads: each ward's share is at most 1 in 1,000 of it too low, rare or not."""
    rarest = 1.0
    for loads, beds, shared, exact in shared_cases(count):
        found = shared_overflow(loads, beds, shared)

        assert (found >= exact * (1 - 1e-3)).all()
        assert (found <= exact * (1 + 1e-4)).all()
        rarest = min(rarest, float(exact @ loads / sum(loads)))
    assert rarest < 1e-4


def interrupted(load: float, beds: int) -> tuple[float, float, float]:
    """Return the rates of Kuczura's process: of sending patients on while on, of going on, and of going off.

    From the ratios of its overflow's first factorial moments; Kuczura 1973, Bell System Technical Journal 52.
    """
    ratios = np.ones(3)
    for bed in range(1, beds + 1):
        ratios[0] = 1.0 / (1.0 + bed / load / ratios[0])
        for order in (1, 2):
            ratios[order] = 1.0 / (1.0 + (1.0 - ratios[order - 1]) / ratios[order])
    first, second, third = load * ratios
    sends = (third * (second - first) - first * (third - second)) / ((second - first) - (third - second))
    starts = first / sends * (sends - second) / (second - first)
    return sends, starts, starts * (sends / first - 1.0)


def test_two_states_a_ward_would_say_too_little() -> None:
    """Kuczura's process, two states a ward, is up to a tenth low where few are refused: why there are four here."""
    worst = 0.0
    for loads, beds, shared, exact in shared_cases(2):
        if min(exact @ loads / sum(loads), shared - 1) < 1e-5:
            continue
        wards = [interrupted(load, count) for load, count in zip(loads, beds, strict=True)]

        def moves(state: State, wards: list = wards, shared: int = shared) -> Iterator[tuple[State, float]]:
            for ward, (sends, starts, stops) in enumerate(wards):
                turned = tuple(1 - on if place == ward else on for place, on in enumerate(state))
                yield turned, stops if state[ward] else starts
                if state[ward] and state[2] < shared:
                    yield (*state[:2], state[2] + 1), sends
            if state[2]:
                yield (*state[:2], state[2] - 1), float(state[2])

        shares = long_run(list(itertools.product((0, 1), (0, 1), range(shared + 1))), moves)
        refused = sum(
            share * state[ward] * wards[ward][0]
            for state, share in shares.items()
            for ward in (0, 1)
            if state[2] == shared
        )
        worst = min(worst, refused / (exact @ loads) - 1.0)
    assert -0.15 < worst < -0.05


@pytest.mark.parametrize(("wards", "shared"), [(6, 3), (9, 6), (12, 4)])
@pytest.mark.parametrize("load", [0.4, 1.5])
def test_many_wards_are_merged_with_little_loss(wards: int, shared: int, load: float) -> None:
    """Up to a dozen wards of two beds, whose exact chain counts the wards by their patients: within 1 in 300."""
    states = [
        (none, one, bay) for none in range(wards + 1) for one in range(wards + 1 - none) for bay in range(shared + 1)
    ]

    def moves(state: State) -> Iterator[tuple[State, float]]:
        none, one, bay = state
        full = wards - none - one
        if none:
            yield (none - 1, one + 1, bay), none * load
        if one:
            yield (none, one - 1, bay), one * load
            yield (none + 1, one - 1, bay), float(one)
        if full:
            yield (none, one + 1, bay), 2.0 * full
            if bay < shared:
                yield (none, one, bay + 1), full * load
        if bay:
            yield (none, one, bay - 1), float(bay)

    shares = long_run(states, moves)
    exact = sum(share * (wards - none - one) / wards for (none, one, bay), share in shares.items() if bay == shared)

    assert shared_overflow([load] * wards, [2] * wards, shared) == pytest.approx([exact] * wards, rel=1 / 300)


# ratio of the two mean stays -> how far all patients' share, the short stays' and the long stays' may be off
UNLIKE = {2.0: ((-1 / 80, 0.01), (-1 / 20, 0.0), (0.0, 1 / 18)), 5.0: ((-1 / 25, 0.01), (-1 / 10, 0.0), (0.0, 1 / 7))}


@pytest.mark.parametrize("ratio", UNLIKE)
def test_unlike_stays_are_off_by_what_is_announced(ratio: float) -> None:
    """With bay patients told apart by their stay, short stays fare worse than is said, long ones better, all a little worse."""
    errors = []
    for first, second in itertools.product([(0.6, 1), (2.0, 3), (4.8, 6), (1.5, 6), (6.6, 6)], repeat=2):
        loads, beds = zip(first, second, strict=True)
        for shared in (1, 4):
            exact, found = shared_by_hand(loads, beds, shared, (1.0, ratio)), shared_overflow(loads, beds, shared)
            patients = np.array([loads[0], loads[1] / ratio])
            errors.append((found @ patients / (exact @ patients) - 1, *(found / exact - 1)))

    for (lowest, highest), found in zip(UNLIKE[ratio], np.array(errors).T, strict=True):
        assert lowest <= found.min()
        assert found.max() <= highest + 1e-4
    # the announcement is not empty: stays do matter
    assert np.abs(errors).max() > 0.03


# stays of mean 1 in two phases: share that starts in the first, rate of leaving each, whether the first leads to the
# second; then how far all patients' share may be off
OTHER_STAYS = {"even": ((1.0, (2.0, 2.0), True), (-0.02, 0.0)), "uneven": ((0.9, (2.0, 2 / 11), False), (0.0, 0.04))}


@pytest.mark.parametrize("spread", OTHER_STAYS)
def test_the_spread_of_stay_hardly_matters_to_shared_beds(spread: str) -> None:
    """Even stays (SD ÷ mean 0.7) are refused up to 2 % oftener than is said, very uneven ones (2.3) up to 4 % less."""
    (first, leave, goes_on), (lowest, highest) = OTHER_STAYS[spread]
    errors = []
    for wards, shared in itertools.product([((1.2, 2), (4.0, 4)), ((2.2, 2), (2.4, 4)), ((4.0, 4), (4.0, 4))], (1, 3)):
        loads, beds = zip(*wards, strict=True)
        places = [
            [pair for pair in itertools.product(range(most + 1), repeat=2) if sum(pair) <= most]
            for most in (*beds, shared)
        ]

        def moves(state: State, loads: tuple = loads, room: tuple = (*beds, shared)) -> Iterator[tuple[State, float]]:
            taken = [state[0] + state[1], state[2] + state[3], state[4] + state[5]]
            for ward, load in enumerate(loads):
                place = ward if taken[ward] < room[ward] else 2
                if taken[place] < room[place]:
                    for phase, chance in ((0, first), (1, 1.0 - first)):
                        yield tuple(n + (at == 2 * place + phase) for at, n in enumerate(state)), load * chance
            for at, count in enumerate(state):
                if count:
                    left = [n - (place == at) for place, n in enumerate(state)]
                    left[at + 1 if goes_on and at % 2 == 0 else at] += goes_on and at % 2 == 0
                    yield tuple(left), count * leave[at % 2]

        shares = long_run([sum(parts, ()) for parts in itertools.product(*places)], moves)
        exact = sum(
            share * load
            for state, share in shares.items()
            for ward, load in enumerate(loads)
            if state[4] + state[5] == shared and state[2 * ward] + state[2 * ward + 1] == beds[ward]
        )
        errors.append(float(shared_overflow(loads, beds, shared) @ loads) / exact - 1.0)

    assert lowest <= min(errors)
    assert max(errors) <= highest
    assert max(map(abs, errors)) > 0.003


@pytest.mark.parametrize(("load", "beds", "shared"), [(8.0, 10, 4), (100.0, 120, 15), (900.0, 880, 30), (5.0, 0, 6)])
def test_one_ward_with_shared_beds_is_a_larger_ward(load: float, beds: int, shared: int) -> None:
    """A bay of its own makes a ward larger, at any size: Erlang's share of all the beds (Erlang 1917)."""
    share = float(erlang_b(load, beds + shared))

    assert shared_overflow([load], [beds], shared)[0] == pytest.approx(share, rel=1e-4)


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
    assert shared_overflow([0.0, 0.0], [3, 0], 2).tolist() == [0.0, 0.0]
    assert shared_overflow([0.0, 2.0], [3, 0], 0).tolist() == [0.0, 1.0]
    found = overflow_pair((0.0, 0.0), (3, 3))
    assert (found.sent, found.lost, found.host_lost, found.outliers) == pytest.approx((0.0, 0.0, 0.0, 0.0), abs=1e-12)
