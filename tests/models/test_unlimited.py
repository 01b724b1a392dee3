"""Beds wanted when nobody is turned away: published values, brute force and reference distributions."""

from __future__ import annotations

from itertools import product

import numpy as np
import pytest
from scipy import stats

from bedplan.models import BookedList, Demand, LengthOfStay, offered_load_by_hour, simulate_ward, unlimited_beds
from bedplan.models.census.booked import booked_census, number_present
from bedplan.models.census.everyone import Watch, at_least, chance_of
from bedplan.models.rhythm.leaving import HOURS_A_WEEK, HOURS_A_YEAR, Leaving, hours_held
from bedplan.models.rhythm.within_hour import held_at, looks
from bedplan.models.rhythm.year import arrivals_by_hour, leaving_of, month_of_hour, weekday_of_hour
from bedplan.models.unlimited import busy_levels

WEEK = (1.2097, 1.4713, 1.3779, 1.0, 0.6221, 0.5287, 0.7903)
SEASON = (1.3, 1.18, 1.06, 0.97, 0.9, 0.84, 0.8, 0.8, 0.88, 1.0, 1.1, 1.24)
EXPONENTIAL = LengthOfStay(4.0, 1.0, "gamma")
LIST = BookedList((4, 3, 3, 2, 1, 0, 0), LengthOfStay(2.5, 0.6), 8, 0.95)


def present(chances: np.ndarray, patients: np.ndarray | None = None) -> np.ndarray:
    """Return the chances of each number of patients present, one law for one moment."""
    alike = np.ones(chances.size, dtype=np.int64) if patients is None else patients
    return number_present(chances[None], alike, np.ones(1), np.zeros(1, dtype=np.int64))[0]


def test_poisson_binomial_published_values() -> None:
    """Chances of each number present, for patients who are each there with their own chance.

    Source: Hong 2013, Computational Statistics & Data Analysis 59:41-51 (method); values recomputed.
    """
    assert present(np.array([0.1, 0.2, 0.3])) == pytest.approx([0.504, 0.398, 0.092, 0.006], abs=1e-12)
    six = present(np.array([0.05, 0.2, 0.5, 0.8, 0.95, 0.3]))
    assert six == pytest.approx([0.00266, 0.065785, 0.3104, 0.40385, 0.1858, 0.030365, 0.00114], abs=1e-12)
    assert six @ np.arange(7) == pytest.approx(2.8, abs=1e-12)
    assert six @ np.arange(7) ** 2 - 2.8**2 == pytest.approx(0.875, abs=1e-12)


def test_poisson_binomial_matches_every_combination() -> None:
    """Ten patients: the chances equal the sum over all 1,024 ways of being there or not."""
    chances = np.array([0.03, 0.11, 0.27, 0.42, 0.5, 0.58, 0.66, 0.74, 0.89, 0.97])
    expected = np.zeros(11)
    for there in product((0, 1), repeat=10):
        expected[sum(there)] += np.prod(np.where(there, chances, 1 - chances))

    assert present(chances) == pytest.approx(expected, abs=1e-14)


@pytest.mark.parametrize("patients", [1, 7, 40, 3_000])
def test_patients_alike_are_a_binomial_number(patients: int) -> None:
    """Any number of patients with one chance: scipy's binomial, large lists cut to the numbers that happen."""
    found = present(np.array([0.3]), np.array([patients]))

    assert found == pytest.approx(stats.binom.pmf(np.arange(found.size), patients, 0.3), abs=1e-13)
    assert found.sum() == pytest.approx(1.0, abs=1e-12)


def booked_by_hand(hour_of_week: int, *, without: int = 0) -> np.ndarray:
    """Return the chances of each number of booked patients of ``LIST`` in an hour, minute by minute looked at.

    ``without`` so many of those who come in that very hour.
    """
    minutes, laws = (np.arange(40) + 0.5) / 40, []
    for look in minutes:
        likely = np.ones(1)
        for day in range(-70, 7):
            since = hour_of_week - (24 * day + 8)
            if since < 0:
                continue
            lag = since + look - minutes
            came = np.heaviside(lag, 0.5)
            chance = 0.95 * float((came * LIST.length_of_stay.survival(np.maximum(lag, 0.0) / 24.0)).mean())
            for _ in range(LIST.per_weekday[day % 7] - without * (since == 0)):
                likely = np.convolve(likely, [1 - chance, chance])
        laws.append(likely)
    return np.mean(laws, axis=0)


@pytest.mark.parametrize("hour_of_week", [7, 8, 30, 100, 167])
def test_booked_patients_present_are_followed_one_by_one(hour_of_week: int) -> None:
    """Booked patients of ten weeks, each with the chance to have come and still be there."""
    found = booked_census((LIST,), Leaving()).at_any_moment[hour_of_week]
    expected = booked_by_hand(hour_of_week)

    size = min(found.size, expected.size)
    assert found[:size] == pytest.approx(expected[:size], abs=2e-4)
    assert np.arange(found.size) @ found == pytest.approx(np.arange(expected.size) @ expected, rel=1e-3)
    if hour_of_week != 8:
        # booked patients swing less than chance: variance below the mean (Gallivan & Utley 2005)
        mean = np.arange(found.size) @ found
        assert np.arange(found.size) ** 2 @ found - mean**2 < mean


@pytest.mark.parametrize("hour_of_week", [8, 56])
def test_a_booked_patient_meets_the_others_of_the_list(hour_of_week: int) -> None:
    """Who comes with the list finds everyone else's chances, without a bed for oneself."""
    found = booked_census((LIST,), Leaving()).when_booked_come[hour_of_week]
    expected = booked_by_hand(hour_of_week, without=1)

    size = min(found.size, expected.size)
    assert found[:size] == pytest.approx(expected[:size], abs=2e-4)


@pytest.mark.parametrize("patients", [1, 5, 12, 20])
@pytest.mark.parametrize("attends", [1.0, 0.7])
def test_the_list_fills_up_evenly(patients: int, attends: float) -> None:
    """Of a list of n a patient finds 0 … n − 1 placed before, evenly, each of them there if they attend."""
    once = BookedList((patients, *(0,) * 6), LengthOfStay(0.3, 0.0), 8, attends)
    found = booked_census((once,), Leaving()).when_booked_come[8]
    before = np.mean([stats.binom.pmf(np.arange(found.size), placed, attends) for placed in range(patients)], axis=0)

    assert found == pytest.approx(before, abs=1e-12)


def test_two_lists_of_one_hour_meet_each_other() -> None:
    """Three of one list and five of another at one hour: each patient finds 0 … 7 of the eight, evenly."""
    lists = tuple(BookedList((n, *(0,) * 6), LengthOfStay(days, 0.0), 8) for n, days in ((3, 0.3), (5, 0.4)))
    found = booked_census(lists, Leaving()).when_booked_come[8]

    assert found == pytest.approx([1 / 8] * 8 + [0], abs=1e-12)


MORNING = (0.0,) * 9 + (1.0,) + (0.0,) * 14


@pytest.mark.parametrize(
    ("lists", "arrivals", "beds", "leaving"),
    [
        ((BookedList((5, *(0,) * 6), LengthOfStay(4.0)),), 3.0, 22, ()),
        ((BookedList((12,) * 5 + (0, 0), LengthOfStay(4.0)),), 0.0, 47, ()),
        ((BookedList((20, *(0,) * 6), LengthOfStay(4.0)),), 3.0, 37, ()),
        ((BookedList((8,) * 5 + (0, 0), LengthOfStay(2.0), 8),), 5.0, 34, MORNING),
        (
            (BookedList((6,) * 5 + (0, 0), LengthOfStay(0.3, 0.3), 9, 0.8), BookedList((4,) * 7, LengthOfStay(2.0))),
            1.0,
            22,
            (),
        ),
    ],
    ids=["five on Mondays", "twelve a weekday", "twenty on Mondays", "morning discharges", "two lists"],
)
def test_lists_of_one_hour_follow_the_simulation(
    lists: tuple[BookedList, ...], arrivals: float, beds: int, leaving: tuple[float, ...]
) -> None:
    """Several booked at one hour, with and without unbooked patients: inside the simulation's 99.9 % interval."""
    demand = Demand(arrivals, LengthOfStay(4.0), booked=lists, discharge_hours=leaving)
    ward = simulate_ward(demand, beds, seed=1, when_full="stays anyway")
    low, high = ward.interval_at(0.999)
    curve = unlimited_beds(demand, [beds])

    assert low <= curve.turn_away_probability[0] <= high
    assert high - low < 0.16 * ward.turn_away_probability
    assert curve.booked_turn_away[0] == pytest.approx(ward.booked_turn_away_probability, rel=0.08)


@pytest.mark.parametrize("nobody", [BookedList((0,) * 7, EXPONENTIAL), BookedList((3,) * 7, EXPONENTIAL, 9, 0.0)])
@pytest.mark.parametrize("arrivals", [0.0, 5.0])
def test_a_list_of_nobody_changes_nothing(nobody: BookedList, arrivals: float) -> None:
    """A booked list without patients, or of patients who never come, is no list."""
    counts = np.arange(40)
    alone, beside = (unlimited_beds(Demand(arrivals, EXPONENTIAL, booked=booked), counts) for booked in ((), (nobody,)))

    assert beside.turn_away_probability == pytest.approx(alone.turn_away_probability, abs=1e-15)
    assert beside.overfull_by_month == pytest.approx(alone.overfull_by_month, abs=1e-15)
    assert beside.booked_turn_away == pytest.approx(np.zeros(40))


def sharp(first: int, hours: int) -> tuple[float, ...]:
    """Return hour factors of a ward whose patients all come within these hours."""
    return tuple(24.0 / hours if first <= hour < first + hours else 0.0 for hour in range(24))


@pytest.mark.parametrize(
    ("stay", "hours", "beds"),
    [
        (LengthOfStay(0.05), sharp(10, 1), [33, 40, 46]),
        (LengthOfStay(0.05), sharp(9, 8), [9, 12, 14]),
        (LengthOfStay(0.02, 0.5), sharp(10, 4), [8, 12, 15]),
        (LengthOfStay(1.0), sharp(10, 2), [66, 78, 86]),
    ],
    ids=["one hour", "office day", "half an hour each", "two hours, one day each"],
)
def test_sharp_hours_are_followed_minute_by_minute(
    stay: LengthOfStay, hours: tuple[float, ...], beds: list[int]
) -> None:
    """Everyone in one or two hours, stays of an hour or a day: Poisson about the load of every ninth second.

    Source: Eick, Massey & Whitt 1993 (load of each moment), summed here step by step.
    """
    steps = 400
    comers = np.repeat(np.array(hours) / 24.0 * 50.0 / steps, steps)
    left = stay.survival((np.arange(24 * steps * 40) + 0.5) / steps / 24.0).reshape(40, -1).sum(axis=0)
    load = np.fft.irfft(np.fft.rfft(comers) * np.fft.rfft(left), comers.size)
    middle = np.maximum((load + np.roll(load, 1)) / 2.0, 0.0)
    expected = [float(comers @ stats.poisson.sf(count - 1, middle)) / comers.sum() for count in beds]

    found = unlimited_beds(Demand(50.0, stay, hour_factors=hours), beds).turn_away_probability
    assert found == pytest.approx(expected, rel=2e-3)


@pytest.mark.parametrize("leaving", [Leaving(), Leaving((), (0.0, 0.0), 5.5), Leaving(MORNING, (0.5, 0.5), 2.5)])
@pytest.mark.parametrize("stay", [LengthOfStay(0.05), LengthOfStay(3.0, 0.6), LengthOfStay(700.0, 0.3)])
def test_parts_of_an_hour_make_up_the_hour(leaving: Leaving, stay: LengthOfStay) -> None:
    """Averaged over the parts of an hour, the share still in a bed is that of the hour, whole years ago included."""
    held = hours_held(stay, leaving, HOURS_A_YEAR)
    places, weights = looks(20)
    for since in (0, 1, 2, 20, 500, 5_000):
        if since < held.shape[1]:
            came = np.array([100])
            share = weights @ held_at(stay, leaving, came, since + places)
            assert share == pytest.approx(held[100 % held.shape[0], since], rel=1e-3, abs=2e-6)


@pytest.mark.parametrize("hour_of_week", [0, 33, 130])
def test_unbooked_and_booked_are_convolved_exactly(hour_of_week: int) -> None:
    """Chance of at least c beds wanted in one hour = Poisson convolved with the booked numbers, to 1e-12."""
    demand = Demand(3.0, EXPONENTIAL, booked=(LIST,))
    counts = np.arange(45)
    weights = (np.arange(HOURS_A_YEAR) % HOURS_A_WEEK == hour_of_week).astype(float)
    found = chance_of(demand, counts, Watch(weights, np.zeros(HOURS_A_YEAR, dtype=np.int64)))[0]

    booked = booked_census((LIST,), leaving_of(demand)).at_any_moment[hour_of_week]
    together = np.convolve(stats.poisson.pmf(np.arange(200), 12.0), booked)
    expected = 1.0 - np.concatenate([[0.0], np.cumsum(together)])[: counts.size]
    assert found == pytest.approx(expected, abs=1e-12)


@pytest.mark.parametrize("swing", [0.3, 0.8, 1.0, 1.4, 3.0])
def test_the_distribution_has_the_mean_and_swing_asked_for(swing: float) -> None:
    """Σ P(N ≥ n) is the mean, and the variance is swing × mean; against scipy's Poisson and negative binomial."""
    counts = np.arange(1, 400)
    chance = at_least(counts, np.array([24.5]), swing)[:, 0]
    mean = chance.sum()

    assert mean == pytest.approx(24.5, rel=3e-3 if swing < 1 else 1e-9)
    assert 2 * (counts @ chance) - mean - mean**2 == pytest.approx(24.5 * swing, rel=2e-2 if swing < 1 else 1e-8)
    if swing == 1.0:
        assert chance == pytest.approx(stats.poisson.sf(counts - 1, 24.5), abs=1e-14)
    if swing > 1.0:
        assert chance == pytest.approx(stats.nbinom.sf(counts - 1, 24.5 / (swing - 1), 1 / swing), abs=1e-12)


def test_published_chances_at_an_uncertain_rate() -> None:
    """Mean 20, rate variation 0.2: more than 25 with chance 0.175314, more than 30 with 0.050612.

    Source: Greenwood & Yule 1920 (negative binomial); Poisson would say 0.112185 and 0.013475.
    """
    uncertain = unlimited_beds(Demand(5.0, EXPONENTIAL, rate_variation=0.2), [25, 30])
    certain = unlimited_beds(Demand(5.0, EXPONENTIAL), [25, 30])

    assert uncertain.overfull_share_of_hours == pytest.approx([0.175314, 0.050612], abs=1e-6)
    assert certain.overfull_share_of_hours == pytest.approx([0.112185, 0.013475], abs=1e-6)


def test_patients_meet_an_uncertain_rate_at_its_busiest() -> None:
    """Averaged over patients, the chance to find the ward full is E[r·P(N ≥ c | r)], by slow integration over r."""
    demand = Demand(5.0, EXPONENTIAL, rate_variation=0.3)
    rates = stats.gamma(1 / 0.09, scale=0.09).ppf((np.arange(40_000) + 0.5) / 40_000)

    for beds in (20, 30, 40):
        slow = float(np.mean(rates * stats.poisson.sf(beds - 1, 20.0 * rates)))
        assert unlimited_beds(demand, [beds]).turn_away_probability[0] == pytest.approx(slow, rel=2e-3)


def test_shares_follow_every_hour_of_the_year() -> None:
    """Found full by month and weekday, and hours over-full, against Poisson in each of the 8,736 hours."""
    demand = Demand(10.0, EXPONENTIAL, SEASON, WEEK, tuple(1.0 + 0.5 * (-1.0) ** (hour // 12) for hour in range(24)))
    loads, arrivals = offered_load_by_hour(demand), arrivals_by_hour(demand)
    curve = unlimited_beds(demand, [30, 45, 60])

    for column, beds in enumerate((30, 45, 60)):
        full, over = stats.poisson.sf(beds - 1, loads), stats.poisson.sf(beds, loads)
        by_month = np.bincount(month_of_hour, arrivals * full) / np.bincount(month_of_hour, arrivals)
        by_weekday = np.bincount(weekday_of_hour, arrivals * full) / np.bincount(weekday_of_hour, arrivals)
        assert curve.by_month[:, column] == pytest.approx(by_month, abs=1e-6)
        assert curve.by_weekday[:, column] == pytest.approx(by_weekday, abs=1e-6)
        assert curve.overfull_by_month[:, column] == pytest.approx(
            np.bincount(month_of_hour, over) / np.bincount(month_of_hour), abs=1e-6
        )
        assert curve.overfull_share_of_hours[column] == pytest.approx(over.mean(), abs=1e-6)


def test_occupancy_is_the_load_over_the_beds() -> None:
    """Everyone has a bed, so mean patients ÷ beds is load ÷ beds, above 1 where beds are few; turnaround isn't counted."""
    curve = unlimited_beds(Demand(5.0, EXPONENTIAL, turnaround_hours=12.0), [0, 10, 40])

    assert curve.occupancy == pytest.approx([0.0, 2.0, 0.5])


def test_busy_levels_of_a_steady_ward_are_poissons() -> None:
    """Without a rhythm the 1-in-20 level is Poisson's 95 % point in every hour, weekday and month."""
    levels = busy_levels(Demand(5.0, EXPONENTIAL))

    for kind, groups in (
        (levels.by_hour, 24),
        (levels.by_weekday, 7),
        (levels.by_hour_of_week, 168),
        (levels.by_month, 12),
    ):
        assert kind.mean == pytest.approx(np.full(groups, 20.0))
        assert set(kind.busy.tolist()) == {int(stats.poisson.ppf(0.95, 20.0))}
        for beds in (5, 24, 60, 500):
            assert kind.overfull(beds) == pytest.approx(np.full(groups, stats.poisson.sf(beds, 20.0)), abs=1e-9)


def test_busy_levels_follow_each_kind_of_hour() -> None:
    """By weekday, hour and month: mean, 1-in-20 level and chance of too many, from Poisson in each hour of the year."""
    demand = Demand(10.0, EXPONENTIAL, SEASON, WEEK, tuple(1.0 + 0.5 * (-1.0) ** (hour // 12) for hour in range(24)))
    loads, levels = offered_load_by_hour(demand), busy_levels(demand)
    hour_of_day = np.arange(HOURS_A_YEAR) % 24

    for kind, group in (
        (levels.by_weekday, weekday_of_hour),
        (levels.by_month, month_of_hour),
        (levels.by_hour, hour_of_day),
    ):
        for one in (0, kind.mean.size // 2, kind.mean.size - 1):
            hours = loads[group == one]
            assert kind.mean[one] == pytest.approx(hours.mean(), rel=1e-9)
            enough = int(kind.busy[one])
            assert stats.poisson.sf(enough, hours).mean() <= 0.05 < stats.poisson.sf(enough - 1, hours).mean()
            assert kind.overfull(50)[one] == pytest.approx(stats.poisson.sf(50, hours).mean(), abs=1e-6)


def test_seen_at_a_random_hour_the_census_swings_more() -> None:
    """Variance ÷ mean of the beds wanted, over all hours: 1 + variance of the load over time ÷ its mean.

    Source: Whitt 2014, Operations Research Letters 42:311-318.
    """
    demand = Demand(10.0, EXPONENTIAL, weekday_factors=WEEK)
    load = offered_load_by_hour(demand)
    counts = np.arange(1, 140)
    chance = chance_of(demand, counts, Watch(np.ones(HOURS_A_YEAR), np.zeros(HOURS_A_YEAR, dtype=np.int64)))[0]
    mean = chance.sum()

    assert mean == pytest.approx(40.0, rel=1e-6)
    assert (2 * counts - 1) @ chance / mean - mean == pytest.approx(1 + load.var() / 40.0, rel=1e-5)


def test_busy_levels_of_a_very_large_ward() -> None:
    """Fifteen thousand beds wanted: read between counts, the 1-in-20 level is still Poisson's to a bed or two."""
    levels = busy_levels(Demand(3_750.0, EXPONENTIAL))

    assert levels.by_month.busy == pytest.approx(stats.poisson.ppf(0.95, 15_000.0), abs=3)
