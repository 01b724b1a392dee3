"""Wards that share all their beds: against sums over both kinds of patient, published laws and printed figures."""

from __future__ import annotations

import heapq
import itertools
import math
import random
from typing import TYPE_CHECKING

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bedplan.decision import BedChanges, Closure, TurnAwayLimit, Ward, decide, pool_wards, pooling_effect
from bedplan.errors import ImpossibleFigure
from bedplan.models import BookedList, Demand, LengthOfStay, offered_load_by_hour
from tests.erlang_sum import share

if TYPE_CHECKING:
    from collections.abc import Sequence

STAY = LengthOfStay(4.0)
WINTER = tuple(1 + 0.35 * np.cos(2 * np.pi * (np.arange(12) - 0.5) / 12))
WEEK = (1.2097, 1.4713, 1.3779, 1.0, 0.6221, 0.5287, 0.7903)
DAY = (0.4,) * 7 + (1.3,) * 14 + (1.0,) * 3
MORNING = (0,) * 9 + (1,) + (0,) * 14
# a 365-day year without 31 December
MONTH_DAYS = np.array([31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 30])


def ward(name: str, beds: int, load: float, stay_days: float = 4.0, **figures: object) -> Ward:
    """Return a ward of steady demand."""
    return Ward(name, beds, Demand(load / stay_days, LengthOfStay(stay_days)), **figures)


def share_of_two_kinds(loads: tuple[float, float], beds: int) -> float:
    """Return the chance that all beds are taken, summed over every mix of two kinds of patient (product form)."""
    weight = {
        (one, two): loads[0] ** one / math.factorial(one) * loads[1] ** two / math.factorial(two)
        for one, two in itertools.product(range(beds + 1), repeat=2)
        if one + two <= beds
    }
    return sum(w for (one, two), w in weight.items() if one + two == beds) / sum(weight.values())


@pytest.mark.parametrize(("count", "share"), [(1, 0.1216611), (2, 0.0644109), (4, 0.0268384)])
def test_sharing_equal_wards_helps_as_published(count: int, share: float) -> None:
    """One, two and four wards of 10 beds, each offered 8.

    The law: Smith & Whitt 1981, Bell System Technical Journal 60:39-55 (from memory); figures are Erlang B re-computed.
    """
    effect = pooling_effect([ward(f"ward {n}", 10, 8.0) for n in range(count)], "erlang_loss")

    for one in effect.by_ward:
        assert one.share_before == pytest.approx(0.1216611, abs=5e-8)
        assert one.share_after == pytest.approx(share, abs=5e-8)


@pytest.mark.parametrize(("count", "beds"), [(1, 14), (2, 24), (4, 42)])
def test_shared_beds_for_the_same_limit_do_not_multiply(count: int, beds: int) -> None:
    """Loads of 8, 16 and 32 need 14, 24 and 42 beds for 2 %, not 14, 28 and 56 (Erlang B re-computed)."""
    pooled = pool_wards([ward(f"ward {n}", 10, 8.0) for n in range(count)])

    assert decide(pooled.curve("erlang_loss"), TurnAwayLimit(0.02)).beds == beds


@settings(max_examples=30)
@given(
    loads=st.tuples(st.floats(0.2, 9.0), st.floats(0.2, 9.0)),
    stays=st.tuples(st.floats(0.5, 20.0), st.floats(0.5, 20.0)),
    beds=st.tuples(st.integers(0, 10), st.integers(0, 10)),
)
def test_everyone_in_a_shared_ward_meets_the_same_chance(
    loads: tuple[float, float], stays: tuple[float, float], beds: tuple[int, int]
) -> None:
    """Two kinds of patient with unlike stays: both meet the chance that every mix filling the beds adds up to."""
    wards = [ward(name, *figures) for name, *figures in zip(("Plover", "Teal"), beds, loads, stays, strict=True)]
    effect = pooling_effect(wards, "erlang_loss")
    expected = share_of_two_kinds(loads, sum(beds))

    for one, refused in zip(wards, effect.by_ward, strict=True):
        assert refused.share_after == pytest.approx(expected, rel=1e-9)
        assert refused.after == pytest.approx(365 * one.demand.arrivals_per_day * expected, rel=1e-9)


def test_a_generously_bedded_ward_loses_by_sharing() -> None:
    """The well-off ward's patients are turned away more, the other's less, and together fewer: stays are alike."""
    effect = pooling_effect([ward("Plover", 20, 10.0), ward("Teal", 10, 12.0)])
    plover, teal = effect.by_ward

    assert plover.share_after > plover.share_before
    assert teal.share_after < teal.share_before
    assert plover.share_after == pytest.approx(teal.share_after)
    assert effect.patients.after < effect.patients.before


def test_sharing_with_long_stays_can_turn_more_away_in_total() -> None:
    """Twenty short stays a day on 20 beds and one fifty-day stay in five days on 6: sharing hurts the many, and all.

    The law needs stays alike: Smith & Whitt 1981. Worked apart: 20 × B(20, 10) + 0.2 × B(6, 10) patients a day; shared,
    20.2 × B(26, 20).
    """
    wards = [ward("Heron", 20, 10.0, 0.5), ward("Plover", 6, 10.0, 50.0)]
    effect = pooling_effect(wards, "erlang_loss")

    before = 365 * (20 * share(10.0, 20) + 0.2 * share(10.0, 6))
    after = 365 * 20.2 * share(20.0, 26)
    assert effect.patients.before == pytest.approx(before, rel=1e-9)
    assert effect.patients.after == pytest.approx(after, rel=1e-9)
    assert after > before
    assert [one.share_after > one.share_before for one in effect.by_ward] == [True, False]


@settings(max_examples=15)
@given(loads=st.tuples(*[st.floats(0.5, 20.0)] * 3), spare=st.tuples(*[st.integers(-3, 6)] * 3))
def test_sharing_never_hurts_wards_with_the_same_stays(loads: tuple[float, ...], spare: tuple[int, ...]) -> None:
    """With stays alike the total never rises, and the beds for the same access are at most today's."""
    wards = [
        ward(f"ward {n}", max(0, math.ceil(load) + more), load)
        for n, (load, more) in enumerate(zip(loads, spare, strict=True))
    ]
    effect = pooling_effect(wards, "erlang_loss")

    assert effect.patients.after <= effect.patients.before * (1 + 1e-9)
    assert effect.beds_for_same_access <= sum(one.beds for one in wards)
    at_fewer = effect.curve.turn_away_probability[max(effect.beds_for_same_access - 1, 0)]
    if effect.beds_for_same_access:
        assert at_fewer * sum(one.demand.arrivals_per_day for one in wards) * 365 > effect.patients.before


def test_unlike_seasons_share_each_others_slack() -> None:
    """A winter ward and a summer ward share better than two winter wards, and each keeps its own months' chance."""
    winter = 1 + 0.4 * np.cos(2 * np.pi * np.arange(12) / 12)
    summer = 2 - winter
    cold, warm = (Demand(3.0, STAY, month_factors=factors) for factors in (winter, summer))
    unlike = pooling_effect([Ward("Kestrel", 14, cold), Ward("Teal", 14, warm)])
    alike = pooling_effect([Ward("Kestrel", 14, cold), Ward("Teal", 14, cold)])

    assert unlike.patients.after < 0.8 * alike.patients.after
    assert unlike.pooled.demand.month_factors == pytest.approx([1.0] * 12, abs=2e-3)
    for effect in (unlike, alike):
        together = effect.pooled.demand.total_arrivals_per_day * 365
        share = effect.curve.at(effect.pooled.beds).turn_away_probability
        assert effect.patients.after == pytest.approx(together * share, rel=2e-3)


def test_one_ward_takes_over_every_figure() -> None:
    """Arrivals, beds, admissions, booked lists, closures and extra beds add up; drift and turnaround are means."""
    booked = BookedList((1, 1, 1, 1, 1, 0, 0), LengthOfStay(2.0))
    first = Demand(3.0, LengthOfStay(4.0), clustering=1.8, rate_variation=0.06, turnaround_hours=4.0)
    second = Demand(1.0, LengthOfStay(8.0), booked=(booked,))
    closure = Closure.expected(4, 2.0, 18.0)
    wards = [
        Ward("Plover", 14, first, "waits", 1_000.0, ("A note.",), BedChanges((closure,), unassignable=0.4)),
        Ward(
            "Teal",
            9,
            second,
            "waits",
            None,
            ("A note.",),
            BedChanges((), (2,) + (0,) * 11, extra_by_weekday=(0,) * 6 + (-1,)),
        ),
    ]
    pooled = pool_wards(wards)
    demand = pooled.demand

    assert (pooled.name, pooled.beds, pooled.when_full) == ("Plover and Teal", 23, "waits")
    assert demand.arrivals_per_day == 4.0
    assert demand.booked == (booked,)
    assert demand.offered_load == pytest.approx(first.offered_load + second.offered_load)
    assert demand.length_of_stay.mean_days == pytest.approx(5.0)
    assert demand.length_of_stay.survival(6.0) == pytest.approx(
        0.75 * first.length_of_stay.survival(6.0) + 0.25 * second.length_of_stay.survival(6.0)
    )
    # together, by load: (12 × 0.06 + 8 × 0) ÷ 20
    assert demand.rate_variation == pytest.approx(0.036)
    everyone = 3 + 1 + 5 / 7
    assert demand.turnaround_hours == pytest.approx(4.0 * 3 / everyone)
    assert pooled.admissions_per_year == pytest.approx(1_000 + 365 * (1 + 5 / 7))
    assert pooled.bed_changes == BedChanges(
        (closure,), (2,) + (0,) * 11, unassignable=0.4, extra_by_weekday=(0,) * 6 + (-1,)
    )
    assert pooled.notes[0] == "A note."
    assert len(pooled.notes) == 2


@pytest.mark.parametrize(
    ("demands", "worst_hour"),
    [
        ((Demand(20.0, LengthOfStay(1.0, 0.5)), Demand(1.0, LengthOfStay(20.0, 0.5), WINTER)), 0.03),
        ((Demand(20.0, LengthOfStay(1.0, 0.5), WINTER), Demand(1.0, LengthOfStay(20.0, 0.5))), 0.03),
        ((Demand(20.0, LengthOfStay(1.0)), Demand(0.1, LengthOfStay(200.0), WINTER)), 0.03),
        ((Demand(10.0, LengthOfStay(1.0, 0.5), weekday_factors=WEEK), Demand(10.0, STAY)), 0.03),
        ((Demand(6.0, LengthOfStay(1.0, 0.5), discharge_hours=MORNING), Demand(6.0, LengthOfStay(1.0, 0.5))), 0.03),
        (
            (
                Demand(6.0, STAY, WINTER, WEEK, booked=(BookedList((4,) * 5 + (0,) * 2, LengthOfStay(2.0)),)),
                Demand(1.0, LengthOfStay(20.0, 0.5), weekend_slip=(0.5, 0.5), turnaround_hours=3.0),
            ),
            0.03,
        ),
        ((Demand(10.0, LengthOfStay(0.5, 0.3), hour_factors=DAY), Demand(5.0, STAY, WINTER, WEEK)), 0.07),
    ],
    ids=["winter of few long", "winter of many short", "half a year", "week", "mornings", "booked", "day"],
)
def test_the_shared_ward_wants_the_beds_its_wards_want(demands: tuple[Demand, Demand], worst_hour: float) -> None:
    """Whatever rhythms and stays are mixed, every month wants the wards' beds, the busiest never fewer, hours nearly so.

    The wards' own beds wanted: Eick, Massey & Whitt 1993, Management Science 39(2), each alone.
    """
    apart = sum(offered_load_by_hour(one) for one in demands)
    shared = offered_load_by_hour(pool_wards(Ward(str(n), 20, one) for n, one in enumerate(demands)).demand)
    month = np.repeat(np.arange(12), 24 * MONTH_DAYS)
    months_apart, months_shared = (np.bincount(month, weights=load) / np.bincount(month) for load in (apart, shared))

    assert months_shared == pytest.approx(months_apart, rel=1e-3)
    assert months_shared.max() >= months_apart.max() * (1 - 2e-4)
    assert shared.mean() == pytest.approx(apart.mean(), rel=3e-4)
    assert np.abs(shared / apart - 1).max() < worst_hour
    assert shared.max() >= 0.99 * apart.max()


def two_streams_played_through(demands: Sequence[Demand], beds: int, years: int) -> np.ndarray:
    """Play a ward with several kinds of patient, each in its own months, in plain Python; share turned away by month.

    Stays are gamma with the mean and spread asked for (a ward that turns away hardly feels more than the mean).
    """
    chance, month_of_day = random.Random(5), np.repeat(np.arange(12), MONTH_DAYS)  # noqa: S311  chance, not secrets
    kinds = []
    for demand in demands:
        stay, factors = demand.length_of_stay, np.array(demand.month_factors)
        rates = demand.arrivals_per_day * factors[month_of_day] / factors[month_of_day].mean()
        kinds.append((rates, stay.variation**-2, stay.mean_days * stay.variation**2))
    came, lost, leaving = np.zeros(12), np.zeros(12), []
    for day in range(364 * years):
        month, today = month_of_day[day % 364], []
        for rates, order, scale in kinds:
            expected, at = rates[day % 364], 0.0
            while (at := at + chance.expovariate(expected)) < 1.0:
                today.append((day + at, order, scale))
        for now, order, scale in sorted(today):
            while leaving and leaving[0] <= now:
                heapq.heappop(leaving)
            came[month] += 1
            if len(leaving) < beds:
                heapq.heappush(leaving, now + chance.gammavariate(order, scale))
            else:
                lost[month] += 1
    return lost / came


@pytest.mark.parametrize("winter_of", ["few long stays", "many short stays"])
def test_a_winter_is_not_lost_among_other_patients(winter_of: str) -> None:
    """Twenty short stays a day and one of 20 days, one kind with a winter: each month as played through."""
    long = winter_of == "few long stays"
    demands = (
        Demand(20.0, LengthOfStay(1.0, 0.5), (1.0,) * 12 if long else WINTER),
        Demand(1.0, LengthOfStay(20.0, 0.5), WINTER if long else (1.0,) * 12),
    )
    pooled = pool_wards([Ward("Heron", 20, demands[0]), Ward("Teal", 30, demands[1])])
    found = pooled.curve().at(pooled.beds).by_month
    played = two_streams_played_through(demands, 50, 120)

    # 120 Januaries of 20-day stays: a standard error of some 0.4 points
    assert found == pytest.approx(played, abs=0.014)
    assert found.max() > 4 * found.mean() / 3


def test_clusters_of_long_stays_are_not_lost_among_short_ones() -> None:
    """Variances add up: the shared ward's beds wanted swing as much as the wards' own do together.

    Beds wanted vary by load × (1 + (clustering − 1)·∫S²/∫S) (Whitt 1984): ½ for exponential stays, 1 for equal ones.
    """
    short, long = LengthOfStay(1.0, 1.0, "gamma"), LengthOfStay(20.0, 0.0)
    pooled = pool_wards(
        [Ward("Heron", 20, Demand(20.0, short)), Ward("Teal", 30, Demand(1.0, long, clustering=2.0))]
    ).demand
    days = np.arange(0.0, 60.0, 0.001)
    left = 20 / 21 * np.exp(-days) + 1 / 21 * (days < 20.0)
    part = (left**2).sum() / left.sum()

    assert 40.0 * (1.0 + (pooled.clustering - 1.0) * part) == pytest.approx(20.0 + 20.0 * 2.0, rel=1e-3)


def test_wards_with_the_same_rhythm_keep_it() -> None:
    """Where month, weekday and hour factors are alike, they are the shared ward's too, and so is the clustering."""
    rhythm = {"month_factors": WINTER, "weekday_factors": WEEK, "hour_factors": DAY, "clustering": 1.8}
    demands = [Demand(3.0, STAY, **rhythm), Demand(1.0, STAY, **rhythm)]
    pooled = pool_wards([Ward(str(n), 9, one) for n, one in enumerate(demands)]).demand

    assert pooled.clustering == pytest.approx(1.8)
    assert pooled.with_changes(clustering=1.8) == Demand(4.0, STAY, **rhythm)


def test_three_wards_mix_their_stays_by_patients() -> None:
    """Stays of three wards are mixed one after the other, each with its own share of all patients."""
    rates, stays = (1.0, 2.0, 5.0), (LengthOfStay(2.0), LengthOfStay(9.0, 0.5), LengthOfStay(4.0, 1.5, "gamma"))
    demands = [Demand(rate, stay) for rate, stay in zip(rates, stays, strict=True)]
    pooled = pool_wards([Ward(f"ward {n}", 9, demand) for n, demand in enumerate(demands)])
    days = np.array([0.5, 3.0, 12.0])

    assert pooled.name == "ward 0, ward 1 and ward 2"
    assert pooled.demand.length_of_stay.survival(days) == pytest.approx(
        sum(rate / 8 * stay.survival(days) for rate, stay in zip(rates, stays, strict=True))
    )
    # the mean square of a stay is the mean of the mean squares
    square = sum(
        rate / 8 * stay.mean_days**2 * (1 + stay.variation**2) for rate, stay in zip(rates, stays, strict=True)
    )
    mixed = pooled.demand.length_of_stay
    assert mixed.mean_days**2 * (1 + mixed.variation**2) == pytest.approx(square)


def test_equal_stays_stay_as_they_are_and_empty_wards_add_nothing() -> None:
    """Wards with one and the same stay keep it, and a ward nobody comes to adds beds only."""
    pooled = pool_wards(
        [ward("Plover", 9, 8.0), ward("Teal", 9, 8.0), Ward("Empty", 3, Demand(0.0, LengthOfStay(1.0)))]
    )

    assert pooled.demand == Demand(4.0, STAY)
    assert pooled.beds == 21
    assert pooled.admissions_per_year is None
    nobody = pooling_effect([Ward(name, 3, Demand(0.0, STAY)) for name in ("Plover", "Teal")])
    assert (nobody.patients.before, nobody.patients.after) == (0.0, 0.0)
    assert nobody.beds_for_same_access == 0


def test_one_ward_alone_stays_itself() -> None:
    """Sharing with nobody changes nothing."""
    alone = ward("Plover", 9, 8.0)

    assert pool_wards([alone]) is alone


def test_wards_that_work_differently_are_not_read_as_one() -> None:
    """Wards whose patients leave and wards whose patients wait, or closed on different weekdays, are refused."""
    five_days = BedChanges(open_weekdays=(True,) * 5 + (False,) * 2)
    with pytest.raises(ImpossibleFigure, match="what their patients do when they are full"):
        pool_wards([ward("Plover", 9, 8.0), ward("Teal", 9, 8.0, when_full="waits")])
    with pytest.raises(ImpossibleFigure, match="weekdays on which they are open"):
        pool_wards([ward("Plover", 9, 8.0), ward("Teal", 9, 8.0, bed_changes=five_days)])
    with pytest.raises(ImpossibleFigure, match="Two wards are called 'Teal'"):
        pool_wards([ward("Teal", 9, 8.0), ward("Teal", 9, 8.0)])
    with pytest.raises(ImpossibleFigure, match="at least one ward"):
        pool_wards([])
    for pool in (pool_wards, pooling_effect):
        for bad in (None, 3, "Teal", [STAY]):
            with pytest.raises(ImpossibleFigure, match="are a list of Ward, but"):
                pool(bad)
