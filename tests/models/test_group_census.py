"""Patients present who came in groups: sums of Poisson numbers, slow integration, and a simulation."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
import pytest
from scipy import integrate, stats

from bedplan.models import Demand, LengthOfStay, simulate_ward, unlimited_beds
from bedplan.models.census.groups import (
    ahead_in_group,
    at_least_in_groups,
    loads_by_number,
    loads_by_number_if_groups_differ,
    more_find_full_if_groups_differ,
)
from bedplan.models.simulation.run import WardRun

WEEK = (1.2097, 1.4713, 1.3779, 1.0, 0.6221, 0.5287, 0.7903)
DAY = tuple(1.0 + 0.6 * math.sin(2.0 * math.pi * (hour - 8) / 24) for hour in range(24))
EXPONENTIAL = LengthOfStay(4.0, 1.0, "gamma")


def sum_of_poissons(load: float, rates: np.ndarray, size: int) -> np.ndarray:
    """Return how likely each number below ``size`` is, for Σ j·Poisson(load × rate(j)), by convolution."""
    likely = np.eye(1, size)[0]
    for number, rate in enumerate(rates, start=1):
        whole = stats.poisson.pmf(np.arange(size // number + 1), load * rate)
        spread = np.zeros(size)
        spread[::number] = whole[: spread[::number].size]
        likely = np.convolve(likely, spread)[:size]
    return likely


def at_least_by_hand(likely: np.ndarray) -> np.ndarray:
    """Return the chance of 0, 1, 2 … or more."""
    return 1.0 - np.concatenate([[0.0], np.cumsum(likely)])[:-1]


@pytest.mark.parametrize(("size", "load"), [(2, 24.0), (2, 6.0), (3, 24.0), (3, 6.0)])
def test_groups_with_equal_stays_are_a_multiple_of_a_poisson_number(size: int, load: float) -> None:
    """Pairs and threes who leave together: the number present is 2 or 3 times Poisson, at every bed count.

    Source: Palm 1943 (endless beds: the number of groups is Poisson).
    """
    counts = np.arange(1, 60)
    found = unlimited_beds(Demand(load / 4.0, LengthOfStay(4.0, 0.0), clustering=size), counts).overfull_share_of_hours

    assert found == pytest.approx(stats.poisson.sf(counts // size, load / size), abs=1e-9)


def test_groups_of_exponential_stays_are_a_sum_of_poissons() -> None:
    """Groups of three, exponential stays: more than 10 present with chance 0.106040; mean 6, variance 12.

    Source: Daw & Pender 2019, arXiv 1805.02117 (N = Σ j·Poisson(λ/(jμ))); chance recomputed.
    """
    demand = Demand(6.0, LengthOfStay(1.0, 1.0, "gamma"), clustering=3.0)

    assert loads_by_number(demand) == pytest.approx([1 / 3, 1 / 6, 1 / 9], rel=1e-6)
    assert unlimited_beds(demand, [10]).overfull_share_of_hours[0] == pytest.approx(0.106040, abs=1e-6)


@pytest.mark.parametrize(
    ("stay", "clustering", "turnaround_hours"),
    [
        (LengthOfStay(4.0, 0.8), 2.4, 0.0),
        (LengthOfStay(3.0, 2.0), 4.0, 12.0),
        (LengthOfStay.measured([0, 1, 2, 8], [1, 0.6, 0.3, 0]), 3.0, 0.0),
    ],
    ids=["lognormal", "wide, with turnaround", "measured"],
)
def test_members_still_there_by_slow_integration(
    stay: LengthOfStay, clustering: float, turnaround_hours: float
) -> None:
    """Of a group j are there for ∫ binomial(j; k, S(u)) du: groups of two whole sizes, and of geometric size."""
    demand = Demand(5.0, stay, clustering=clustering, turnaround_hours=turnaround_hours)
    smaller, whole = math.floor(clustering), stay.mean_days + turnaround_hours / 24.0
    shares = {smaller: 1.0 - (clustering - smaller), smaller + 1: clustering - smaller}
    ends = 2.0 / (clustering + 1.0)
    sizes = np.arange(1, 200)
    geometric = ends * (1.0 - ends) ** (sizes - 1)

    def days(number: int, size: np.ndarray) -> np.ndarray:
        """Return for how many days so many of a group of this size are there."""
        edges = [0.0, 0.5, 1.0, 2.0, 4.0, 8.0, 20.0, 80.0, 400.0, 2e3, 2e4]
        return turnaround_hours / 24.0 * (size == number) + sum(
            integrate.quad_vec(lambda day: stats.binom.pmf(number, size, stay.survival(day)), *pair, epsrel=1e-7)[0]
            for pair in pairwise(edges)
        )

    for number in (1, 2, 3):
        equal = sum(share / size / whole * float(days(number, np.array(size))) for size, share in shares.items())
        differing = float(geometric @ days(number, sizes)) * ends / whole
        assert loads_by_number(demand)[number - 1 : number].sum() == pytest.approx(equal, rel=2e-4)
        assert loads_by_number_if_groups_differ(demand)[number - 1] == pytest.approx(differing, rel=2e-4)


@pytest.mark.parametrize("load", [0.0, 0.3, 24.0, 900.0, 10_000.0])
def test_large_and_small_wards_are_inverted_alike(load: float) -> None:
    """Exponential pairs at any load, far below and far above the mean: by convolution of two Poisson laws."""
    rates = np.array([0.5, 0.25])
    reach = math.ceil(8.0 * math.sqrt(1.5 * load)) + 12
    counts = np.unique(np.arange(max(0, int(load) - reach), int(load) + reach, 1 + reach // 40))
    expected = at_least_by_hand(sum_of_poissons(load, rates, int(load) + reach + 1))[counts]
    found = at_least_in_groups(counts, np.array([load, load + 5.0]), rates)

    assert found[:, 0] == pytest.approx(expected, abs=1e-9)
    assert (np.diff(found, axis=0) <= 0).all()


def test_few_beds_in_a_very_large_ward() -> None:
    """Nine thousand beds where ten thousand are wanted are never enough, nor is one."""
    rates = np.array([0.5, 0.25])

    assert at_least_in_groups(np.array([1]), np.array([10_000.0]), rates)[0, 0] == 1.0
    assert at_least_in_groups(np.array([8_990, 9_000]), np.array([10_000.0]), rates)[:, 0] == pytest.approx([1, 1])


def test_groups_at_an_uncertain_rate() -> None:
    """Pairs whose rate is gamma-distributed: the mean over many rates, and weighed by the rate as patients see it."""
    rates = loads_by_number(Demand(5.0, EXPONENTIAL, clustering=2.0))
    some = stats.gamma(1 / 0.09, scale=0.09).ppf((np.arange(2_000) + 0.5) / 2_000)
    slow = np.array([at_least_by_hand(sum_of_poissons(20.0 * one, rates, 61)) for one in some])
    counts, load = np.arange(61), np.array([20.0])

    assert at_least_in_groups(counts, load, rates, (0.09, False))[:, 0] == pytest.approx(slow.mean(axis=0), abs=2e-4)
    weighed = (some[:, None] * slow).mean(axis=0)
    assert at_least_in_groups(counts, load, rates, (0.09, True))[:, 0] == pytest.approx(weighed, abs=1e-3)


def test_who_comes_in_a_group_finds_the_group_there() -> None:
    """In pairs every second patient meets one more bed taken; in groups of three nobody, one or two."""
    assert ahead_in_group(Demand(5.0, EXPONENTIAL, clustering=2.0)) == pytest.approx([0.5, 0.5])
    assert ahead_in_group(Demand(5.0, EXPONENTIAL, clustering=3.0)) == pytest.approx([1 / 3] * 3)
    assert ahead_in_group(Demand(5.0, EXPONENTIAL)).tolist() == [1.0]
    alone, pairs = (
        unlimited_beds(Demand(5.0, EXPONENTIAL, clustering=size), [20]).turn_away_probability[0] for size in (1.0, 2.0)
    )
    there = at_least_by_hand(sum_of_poissons(20.0, np.array([0.5, 0.25]), 30))
    assert pairs == pytest.approx((there[20] + there[19]) / 2.0, rel=1e-8)
    assert alone == pytest.approx(stats.poisson.sf(19, 20), rel=1e-6)


@pytest.mark.parametrize("beds", [36, 41])
def test_the_note_says_what_groups_of_differing_size_would_do(beds: int) -> None:
    """Groups of geometric size: more find the ward full, by the simulation, and no more than the note's figure."""
    demand = Demand(6.0, LengthOfStay(4.0, 0.5), clustering=2.0)
    curve, more = unlimited_beds(demand, [beds]), more_find_full_if_groups_differ(demand)
    low, high = simulate_ward(demand, beds, seed=1, when_full="stays anyway").interval_at(0.999)
    found = float(curve.turn_away_probability[0])

    assert low <= found * (1.0 + more)
    assert found < high
    assert f"up to {math.ceil(100 * more)} % more find the ward full" in curve.notes[0]
    assert "rhythm" not in curve.notes[0]


@pytest.mark.parametrize(
    ("demand", "beds"),
    [
        (Demand(1.5, LengthOfStay(4.0, 0.0), clustering=3.0), 15),
        (Demand(6.0, LengthOfStay(4.0, 0.5), clustering=2.0), 36),
    ],
    ids=["threes", "pairs"],
)
def test_groups_of_one_size_follow_the_simulation(demand: Demand, beds: int) -> None:
    """Groups of equal size at a steady rate: inside the simulation's 99.9 % interval."""
    ward = simulate_ward(demand, beds, seed=1, when_full="stays anyway", run=WardRun(groups="fixed"))
    low, high = ward.interval_at(0.999)

    assert low <= unlimited_beds(demand, [beds]).turn_away_probability[0] <= high
    assert high - low < 0.16 * ward.turn_away_probability


@pytest.mark.parametrize("load", [6.0, 24.0])
@pytest.mark.parametrize("size", [2, 3, 6])
@pytest.mark.parametrize(
    "stay", [LengthOfStay(1.0, 1.0, "gamma"), LengthOfStay(4.0, 0.5)], ids=["one day", "four days"]
)
def test_groups_are_wholer_after_busy_hours(stay: LengthOfStay, load: float, size: int) -> None:
    """A weekly and daily rhythm: in each hour of the week the exact law of its own groups, 1 to 20 % of hours over-full.

    Source: Eick, Massey & Whitt 1993 (groups of each number still there are Poisson about a load of their own).
    """
    demand = Demand(load / stay.mean_days, stay, (1.0,) * 12, WEEK, DAY, clustering=float(size))
    steps = 4
    rhythm = np.outer(demand.weekday_factors, demand.hour_factors).ravel()
    groups = np.repeat(rhythm * demand.arrivals_per_day / 24.0 / steps, steps) / size
    left = stay.survival((np.arange(168 * steps * 8) + 0.5) / steps / 24.0)
    there = [
        np.fft.irfft(
            np.fft.rfft(groups) * np.fft.rfft(stats.binom.pmf(number, size, left).reshape(8, -1).sum(axis=0)),
            groups.size,
        )
        for number in range(1, size + 1)
    ]
    by_hour = np.array(there).reshape(size, 168, steps).mean(axis=2)
    laws = [at_least_by_hand(sum_of_poissons(1.0, np.maximum(rates, 0.0), 150)) for rates in by_hour.T]
    expected = np.mean(laws, axis=0)[1:]
    counts = np.flatnonzero((expected > 0.01) & (expected < 0.2))

    found = unlimited_beds(demand, counts).overfull_share_of_hours
    error = found / expected[counts] - 1.0
    # what the note says
    assert error.min() >= -0.01
    assert error.max() <= 0.03
    assert "at most 1 % too low and 3 % too high" in unlimited_beds(demand, [9]).notes[0]


def test_notes_where_nothing_is_assumed() -> None:
    """No note for patients who come one by one, however uncertain their rate, nor for clusters of nobody."""
    booked_only = Demand(0.0, EXPONENTIAL, clustering=2.0)

    assert unlimited_beds(Demand(5.0, EXPONENTIAL, rate_variation=0.2), [20]).notes == ()
    assert unlimited_beds(booked_only, [20]).notes == ()
    assert "too high" in unlimited_beds(Demand(5.0, EXPONENTIAL, clustering=0.5), [20]).notes[0]
