"""Beds wanted when nobody is turned away: published values, brute force and reference distributions."""

from __future__ import annotations

from itertools import product

import numpy as np
import pytest
from scipy import stats

from bedplan.models import BookedList, Demand, LengthOfStay, offered_load_by_hour, unlimited_beds
from bedplan.models.census import Watch, ahead_in_group, at_least, booked_present, chance_of, number_present
from bedplan.models.leaving import HOURS_A_WEEK, HOURS_A_YEAR
from bedplan.models.unlimited import busy_levels
from bedplan.models.year import arrivals_by_hour, leaving_of, month_of_hour, weekday_of_hour

WEEK = (1.2097, 1.4713, 1.3779, 1.0, 0.6221, 0.5287, 0.7903)
SEASON = (1.3, 1.18, 1.06, 0.97, 0.9, 0.84, 0.8, 0.8, 0.88, 1.0, 1.1, 1.24)
EXPONENTIAL = LengthOfStay(4.0, 1.0, "gamma")
LIST = BookedList((4, 3, 3, 2, 1, 0, 0), LengthOfStay(2.5, 0.6), 8, 0.95)


def test_poisson_binomial_published_values() -> None:
    """Chances of each number present, for patients who are each there with their own chance.

    Source: Hong 2013, Computational Statistics & Data Analysis 59:41-51 (method); values recomputed.
    """
    assert number_present(np.array([0.1, 0.2, 0.3])) == pytest.approx([0.504, 0.398, 0.092, 0.006], abs=1e-12)
    six = number_present(np.array([0.05, 0.2, 0.5, 0.8, 0.95, 0.3]))
    assert six == pytest.approx([0.00266, 0.065785, 0.3104, 0.40385, 0.1858, 0.030365, 0.00114], abs=1e-12)
    assert six @ np.arange(7) == pytest.approx(2.8, abs=1e-12)
    assert six @ np.arange(7) ** 2 - 2.8**2 == pytest.approx(0.875, abs=1e-12)


def test_poisson_binomial_matches_every_combination() -> None:
    """Ten patients: the chances equal the sum over all 1,024 ways of being there or not."""
    chances = np.array([0.03, 0.11, 0.27, 0.42, 0.5, 0.58, 0.66, 0.74, 0.89, 0.97])
    expected = np.zeros(11)
    for there in product((0, 1), repeat=10):
        expected[sum(there)] += np.prod(np.where(there, chances, 1 - chances))

    assert number_present(chances) == pytest.approx(expected, abs=1e-14)


def booked_by_hand(hour_of_week: int) -> np.ndarray:
    """Return the chances of each number of booked patients of ``LIST`` in the middle of an hour, patient by patient."""
    likely = np.ones(1)
    for day in range(-70, 7):
        since = hour_of_week - (24 * day + 8)
        chance = 0.0
        if since >= 0:
            # averaged over the minute of coming and of looking, 40 × 40 of them
            minutes = (np.arange(40) + 0.5) / 40
            lag = since + minutes[:, None] - minutes
            came = np.heaviside(lag, 0.5)
            chance = 0.95 * float((came * LIST.length_of_stay.survival(np.maximum(lag, 0.0) / 24.0)).mean())
        for _ in range(LIST.per_weekday[day % 7]):
            likely = np.convolve(likely, [1 - chance, chance])
    return likely


@pytest.mark.parametrize("hour_of_week", [7, 8, 30, 100, 167])
def test_booked_patients_present_are_followed_one_by_one(hour_of_week: int) -> None:
    """Booked patients of ten weeks, each with the chance to have come and still be there."""
    found = booked_present((LIST,), leaving_of(Demand(0.0, EXPONENTIAL)))[hour_of_week]
    expected = booked_by_hand(hour_of_week)

    size = min(found.size, expected.size)
    assert found[:size] == pytest.approx(expected[:size], abs=2e-4)
    assert np.arange(found.size) @ found == pytest.approx(np.arange(expected.size) @ expected, rel=1e-3)
    # booked patients swing less than chance: variance below the mean (Gallivan & Utley 2005)
    mean = np.arange(found.size) @ found
    assert np.arange(found.size) ** 2 @ found - mean**2 < mean


@pytest.mark.parametrize("hour_of_week", [0, 33, 130])
def test_unbooked_and_booked_are_convolved_exactly(hour_of_week: int) -> None:
    """Chance of at least c beds wanted in one hour = Poisson convolved with the booked numbers, to 1e-12."""
    demand = Demand(3.0, EXPONENTIAL, booked=(LIST,))
    counts = np.arange(45)
    weights = (np.arange(HOURS_A_YEAR) % HOURS_A_WEEK == hour_of_week).astype(float)
    found = chance_of(demand, counts, Watch(weights, np.zeros(HOURS_A_YEAR, dtype=np.int64)))[0]

    booked = booked_present((LIST,), leaving_of(demand))[hour_of_week]
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


def test_groups_swing_like_the_exact_sum_of_poissons() -> None:
    """Groups of three, exponential stays: mean 6 and variance 12; more than 10 present with chance 0.106040.

    Source: Daw & Pender 2019, arXiv 1805.02117 (N = Σ j·Poisson(λ/(jμ))); moments and chance recomputed. A negative
    binomial with these moments stands for it, and is 2 % above there where Poisson is 60 % below.
    """
    demand = Demand(6.0, LengthOfStay(1.0, 1.0, "gamma"), clustering=3.0)
    chance = unlimited_beds(demand, [10]).overfull_share_of_hours[0]

    assert chance == pytest.approx(0.106040, rel=0.03)
    assert chance > 0.106040 * 0.99


def test_who_comes_in_a_group_finds_the_group_there() -> None:
    """In pairs every second patient meets one more bed taken; in groups of three nobody, one or two."""
    assert ahead_in_group(Demand(5.0, EXPONENTIAL, clustering=2.0)) == pytest.approx([0.5, 0.5])
    assert ahead_in_group(Demand(5.0, EXPONENTIAL, clustering=3.0)) == pytest.approx([1 / 3] * 3)
    assert ahead_in_group(Demand(5.0, EXPONENTIAL)).tolist() == [1.0]
    alone, pairs = (
        unlimited_beds(Demand(5.0, EXPONENTIAL, clustering=size), [20]).turn_away_probability[0] for size in (1.0, 2.0)
    )
    swing = 1.5
    by_hand = [stats.nbinom.sf(count - 1, 20 / (swing - 1), 1 / swing) for count in (20, 19)]
    assert pairs == pytest.approx(np.mean(by_hand), rel=1e-6)
    assert alone == pytest.approx(stats.poisson.sf(19, 20), rel=1e-6)


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
