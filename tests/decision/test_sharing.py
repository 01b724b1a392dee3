"""The same beds re-dealt between wards: every split is tried, and the one found is the best of them."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bedplan.decision import BedChanges, Closure, Ward, share_beds
from bedplan.errors import ImpossibleFigure
from bedplan.models import Demand, LengthOfStay
from tests.erlang_sum import share

NAMES = ("Plover", "Teal", "Curlew")


def ward(name: str, beds: int, load: float, stay_days: float = 4.0, **figures: object) -> Ward:
    """Return a ward of steady demand."""
    return Ward(name, beds, Demand(load / stay_days, LengthOfStay(stay_days)), **figures)


def patients(one: Ward, beds: int) -> float:
    """Return patients a year turned away by a ward of steady demand."""
    return 365 * one.demand.arrivals_per_day * share(one.demand.offered_load, beds)


@settings(max_examples=40)
@given(data=st.data())
def test_no_split_at_all_does_better(data: st.DataObject) -> None:
    """Whatever the floors, bay sizes and weights, no allowed split of the total turns fewer weighted patients away."""
    wards = [
        ward(name, data.draw(st.integers(0, 9)), data.draw(st.floats(0.1, 9.0)), data.draw(st.floats(0.5, 9.0)))
        for name in NAMES
    ]
    floors = {name: data.draw(st.integers(0, 2)) for name in NAMES}
    steps = {name: data.draw(st.integers(1, 3)) for name in NAMES}
    weights = {name: data.draw(st.floats(0.0, 5.0)) for name in NAMES}
    # six beds hold every floor, two more every first step above it
    total = data.draw(st.integers(12, 20))

    shared = share_beds(wards, total, floors=floors, steps=steps, weights=weights)

    allowed = [
        [n for n in range(total + 1) if n >= floors[one.name] and (n - one.beds) % steps[one.name] == 0]
        for one in wards
    ]
    cost = {one.name: [weights[one.name] * patients(one, n) for n in range(total + 1)] for one in wards}
    best = min(
        sum(cost[one.name][n] for one, n in zip(wards, split, strict=True))
        for split in itertools.product(*allowed)
        if sum(split) <= total
    )
    found = [shared.beds[name] for name in NAMES]
    assert all(n in choice for n, choice in zip(found, allowed, strict=True))
    assert sum(found) + shared.left_over == total
    assert sum(cost[name][shared.beds[name]] for name in NAMES) == pytest.approx(best, rel=1e-5, abs=1e-6)


@settings(max_examples=20)
@given(loads=st.tuples(*[st.floats(0.1, 30.0)] * 3), beds=st.tuples(*[st.integers(0, 30)] * 3))
def test_without_steps_the_largest_gain_first_is_as_good(loads: tuple[float, ...], beds: tuple[int, ...]) -> None:
    """For loss wards each next bed to the largest gain reaches the same total: what is lost is convex in beds.

    Source: Fox 1966, Operations Research 14(5), on convex costs.
    """
    wards = [ward(name, n, load) for name, n, load in zip(NAMES, beds, loads, strict=True)]
    dealt = dict.fromkeys(NAMES, 0)
    for _ in range(sum(beds)):
        gain = {one.name: patients(one, dealt[one.name]) - patients(one, dealt[one.name] + 1) for one in wards}
        dealt[max(gain, key=gain.get)] += 1

    shared = share_beds(wards)

    assert sum(shared.beds.values()) == sum(beds)
    assert shared.left_over == 0
    assert shared.turned_away_after == pytest.approx(
        sum(patients(one, dealt[one.name]) for one in wards), rel=1e-5, abs=1e-6
    )


def test_before_and_after_count_patients_a_year() -> None:
    """Today's and the new figure are patients a year, each ward's and all together; the new one is not larger."""
    wards = [ward("Plover", 30, 20.0, 10.0), ward("Teal", 12, 16.0, 9.0)]
    shared = share_beds(wards)

    assert shared.beds_before == {"Plover": 30, "Teal": 12}
    for one in wards:
        assert shared.patients_before[one.name] == pytest.approx(patients(one, one.beds), rel=1e-6)
        assert shared.patients[one.name] == pytest.approx(patients(one, shared.beds[one.name]), rel=1e-6)
    assert shared.turned_away_before == pytest.approx(sum(patients(one, one.beds) for one in wards), rel=1e-6)
    assert shared.turned_away_after < shared.turned_away_before
    assert shared.moves["Plover"] == -shared.moves["Teal"] < 0


def test_it_can_say_that_no_move_helps() -> None:
    """Beds already where they spare most stay there, and equal wards don't swap for nothing."""
    first = share_beds([ward("Plover", 30, 20.0), ward("Teal", 12, 16.0)])
    again = share_beds([ward("Plover", first.beds["Plover"], 20.0), ward("Teal", first.beds["Teal"], 16.0)])
    nobody = share_beds([Ward(name, n, Demand(0.0, LengthOfStay(4.0))) for name, n in (("Plover", 3), ("Teal", 7))])

    assert dict(first.moves)
    assert dict(again.moves) == {}
    assert again.turned_away_after == again.turned_away_before
    assert dict(nobody.moves) == {}


def test_a_weight_draws_beds_to_its_ward() -> None:
    """Two equal wards: the one whose patients count ten times as much gets more beds, and real patients are reported."""
    wards = [ward("Plover", 10, 10.0), ward("Teal", 10, 10.0)]
    shared = share_beds(wards, weights={"Teal": 10.0})

    assert shared.beds["Teal"] > 10
    assert dict(shared.weights) == {"Plover": 1.0, "Teal": 10.0}
    assert shared.turned_away_after == pytest.approx(
        sum(patients(one, shared.beds[one.name]) for one in wards), rel=1e-6
    )
    assert shared.turned_away_after > shared.turned_away_before


def test_a_bay_that_fits_nowhere_is_left_over() -> None:
    """When every ward takes beds in fours, three of nineteen stay undealt and are reported."""
    shared = share_beds([ward("Plover", 8, 9.0), ward("Teal", 8, 9.0)], 19, steps={"Plover": 4, "Teal": 4})

    assert dict(shared.moves) == {}
    assert shared.left_over == 3


def test_more_beds_than_anyone_wants_are_still_dealt_out() -> None:
    """Past the end of every curve beds have a ward, and moving them costs nobody anything."""
    shared = share_beds([ward("Plover", 3, 1.0), ward("Teal", 4, 1.0)], 300)

    assert sum(shared.beds.values()) == 300
    assert shared.turned_away_after == pytest.approx(0.0, abs=1e-6)


def test_each_ward_is_read_on_its_own_curve() -> None:
    """A ward with four beds closed all year is read so: each of its counts stands for four fewer."""
    closures = BedChanges((Closure(4, 364.0, from_day=0.0),))
    wards = [ward("Plover", 10, 6.0), ward("Teal", 10, 6.0, bed_changes=closures)]
    shared = share_beds(wards)

    def with_fewer(beds: int) -> float:
        return patients(wards[1], max(beds - 4, 0))

    best = min(range(21), key=lambda n: patients(wards[0], n) + with_fewer(20 - n))
    assert shared.beds == {"Plover": best, "Teal": 20 - best}
    assert shared.patients["Teal"] == pytest.approx(with_fewer(20 - best), rel=1e-6)


def test_eight_wards_of_a_hospital_are_dealt_out_at_once() -> None:
    """Eight wards and 240 beds: no exchange of one to three beds between any two wards helps further."""
    rng = np.random.default_rng(1917)
    wards = [ward(f"ward {n}", 30, load) for n, load in enumerate(rng.uniform(10.0, 40.0, 8))]
    shared = share_beds(wards)

    assert sum(shared.beds.values()) == 240
    for giver, taker, beds in itertools.product(wards, wards, (1, 2, 3)):
        if giver is not taker and shared.beds[giver.name] >= beds:
            lost = patients(giver, shared.beds[giver.name] - beds) - patients(giver, shared.beds[giver.name])
            won = patients(taker, shared.beds[taker.name]) - patients(taker, shared.beds[taker.name] + beds)
            assert won <= lost * (1 + 1e-5) + 1e-6


@pytest.mark.parametrize(
    ("figures", "says"),
    [
        ({"total": -1}, "-1 as beds to share"),
        ({"total": 10.5}, "10.5 as beds to share"),
        ({"total": math.nan}, "nan as beds to share"),
        ({"total": 5, "floors": {"Plover": 4, "Teal": 2}}, "5 beds to share .* add up to 6"),
        ({"floors": {"Kestrel": 4}}, "No ward is called 'Kestrel'; the wards are Plover, Teal"),
        ({"floors": {"Teal": -1}}, "-1 as fewest beds"),
        ({"steps": {"Teal": 0}}, "0 as bay size .* from 1"),
        ({"weights": {"Teal": -1.0}}, "weight of -1"),
        ({"weights": {"Teal": math.inf}}, "weight of inf"),
    ],
)
def test_impossible_shares_are_explained(figures: dict[str, object], says: str) -> None:
    """A total, floor, bay size, weight or name outside its meaning is quoted."""
    with pytest.raises(ImpossibleFigure, match=says):
        share_beds([ward("Plover", 3, 1.0), ward("Teal", 4, 1.0)], **figures)


def test_wards_need_names_of_their_own() -> None:
    """None at all, and two wards of one name, are refused."""
    with pytest.raises(ImpossibleFigure, match="at least one ward"):
        share_beds([])
    with pytest.raises(ImpossibleFigure, match="Two wards are called 'Teal'"):
        share_beds([ward("Teal", 3, 1.0), ward("Teal", 4, 1.0)])
