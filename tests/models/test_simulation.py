"""The simulated ward against exact formulas, exact chains, and a ward written a second time with SimPy."""

from __future__ import annotations

import heapq
import math
import random
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np
import pytest
import simpy
from scipy import integrate, stats

from bedplan.errors import ImpossibleFigure
from bedplan.models import BookedList, Closure, Demand, LengthOfStay, WardRun, erlang_b, erlang_c, simulate_ward
from bedplan.models.rhythm.year import offered_load_by_hour
from bedplan.models.simulation.beds import all_empty, pass_through, settle_leaving
from bedplan.models.simulation.events import BOOKED, NOBODY, Part, draw_comers

if TYPE_CHECKING:
    from collections.abc import Iterator

    from bedplan.models.simulation.events import Comers

EXPONENTIAL = LengthOfStay(4.0, 1.0, "gamma")
# factors of a busy week, Monday first, and the hours of an ordinary day
WEEK = (1.2097, 1.4713, 1.3779, 1.0, 0.6221, 0.5287, 0.7903)
UNTIL_NOON = (0.4, 0.3, 0.3, 0.2, 0.2, 0.3, 0.5, 0.8, 1.2, 1.6, 1.8, 1.8)
DAY = (*UNTIL_NOON, 1.7, 1.6, 1.5, 1.5, 1.4, 1.3, 1.2, 1.1, 1.0, 0.9, 0.8, 0.6)


def drawn(
    demand: Demand, run: WardRun | None = None, *, days: float = 364.0, waits: bool = False, replications: int = 40
) -> Comers:
    """Draw everyone who comes in some days."""
    part = Part(0.0, days, 0.0, replications, np.random.SeedSequence(11))
    return draw_comers(demand, run or WardRun(), part, np.ones(replications), waits=waits)


def grouped_loss(load: float, beds: int, size: int) -> float:
    """Solve the exact chain of a ward whose patients come in groups of one size: the share that finds no free bed."""
    rates = np.zeros((beds + 1, beds + 1))
    for present in range(beds + 1):
        rates[present, min(present + size, beds)] += load / size
        if present:
            rates[present, present - 1] += present
    rates -= np.diag(rates.sum(axis=1))
    balance = np.vstack([rates.T, np.ones(beds + 1)])
    shares = np.linalg.lstsq(balance, np.append(np.zeros(beds + 1), 1.0))[0]
    lost = np.maximum(np.arange(beds + 1) + size - beds, 0) / size
    return float(shares @ lost)


@pytest.mark.parametrize(
    ("stay", "beds"),
    [
        (EXPONENTIAL, 31),
        (LengthOfStay(4.0, 1.5), 24),
        (LengthOfStay(4.0, 0.0), 28),
        (LengthOfStay(4.0, 2.0, "gamma"), 15),
    ],
)
def test_loss_formula_at_a_million_patients(stay: LengthOfStay, beds: int) -> None:
    """With at least a million patients Erlang's loss lies inside the 99 % interval, whatever the spread of stay."""
    ward = simulate_ward(Demand(6.0, stay), beds, seed=2024)
    low, high = ward.interval_at(0.99)
    loss = float(erlang_b(24.0, beds))

    assert ward.arrivals >= 990_000
    assert low <= loss <= high
    assert high - low < 0.1 * loss
    # Little 1961: patients present = arrivals let in × mean stay
    assert ward.occupancy * beds == pytest.approx(24.0 * (1.0 - ward.turn_away_probability), rel=0.01)


@pytest.mark.parametrize(("load", "beds"), [(24.0, 31), (8.0, 10), (0.7, 1)])
def test_delay_formula_at_a_million_patients(load: float, beds: int) -> None:
    """With at least a million exponential stays Erlang's delay lies inside the 99 % interval, and so do the waits."""
    ward = simulate_ward(Demand(load / 4.0, EXPONENTIAL), beds, seed=2024, when_full="waits")
    low, high = ward.interval_at(0.99)
    share = float(erlang_c(load, beds))

    assert ward.arrivals >= 990_000
    assert low <= share <= high
    # M/M/c: mean wait C·m/(c − a), and the wait of those who wait is exponential (Erlang 1917)
    assert ward.mean_wait_hours == pytest.approx(share * 96.0 / (beds - load), rel=0.05)
    over = share * math.exp(-(beds - load) * 24.0 / 96.0)
    assert ward.share_waiting_over(24.0) == pytest.approx(over, rel=0.05)
    assert ward.share_waiting_over(0.0) == pytest.approx(ward.turn_away_probability, abs=1e-9)
    assert ward.occupancy == pytest.approx(load / beds, rel=0.01)


@pytest.mark.parametrize(("variation", "shape"), [(0.0, "gamma"), (0.5, "gamma"), (1.5, "gamma"), (0.8, "lognormal")])
def test_one_bed_with_any_stay(variation: float, shape: str) -> None:
    """One bed and any stay: the mean wait is ρ·m·(1 + variation²)/2/(1 − ρ)."""
    # Source: Pollaczek 1930, Khinchine 1932
    ward = simulate_ward(Demand(0.6, LengthOfStay(1.0, variation, shape)), 1, seed=7, when_full="waits")
    assert ward.mean_wait_hours == pytest.approx(24.0 * 0.6 * (1.0 + variation**2) / 2.0 / 0.4, rel=0.03)


def test_interval_covers_the_truth_as_often_as_it_says() -> None:
    """Of 100 runs, seeds 0 to 99, the 95 % interval holds the exact share in 92 to 98."""
    demand, loss = Demand(6.0, LengthOfStay(4.0)), float(erlang_b(24.0, 31))
    run = WardRun(replications=60, days=182)
    intervals = [simulate_ward(demand, 31, seed=seed, run=run).interval for seed in range(100)]

    assert 92 <= sum(low <= loss <= high for low, high in intervals) <= 98


@pytest.mark.parametrize(("load", "beds", "size"), [(25.0, 30, 2), (30.0, 40, 3), (4.0, 6, 2)])
def test_groups_against_the_exact_chain(load: float, beds: int, size: int) -> None:
    """Patients who come in pairs or threes are turned away as often as the exact chain says."""
    demand = Demand(load / 4.0, EXPONENTIAL, clustering=float(size))
    ward = simulate_ward(demand, beds, seed=5, run=WardRun(groups="fixed"))
    low, high = ward.interval_at(0.99)

    assert low <= grouped_loss(load, beds, size) <= high


def test_exact_chain_of_this_file() -> None:
    """The chain written above gives Erlang's loss for groups of one, and the known figures for pairs and threes."""
    assert grouped_loss(24.0, 31, 1) == pytest.approx(float(erlang_b(24.0, 31)), rel=1e-9)
    # exact chain, solved apart from this file: 8.234 % and 5.053 %
    assert grouped_loss(25.0, 30, 2) == pytest.approx(0.08234, abs=5e-6)
    assert grouped_loss(30.0, 40, 3) == pytest.approx(0.05053, abs=5e-6)


def test_weekly_rhythm_against_the_exact_chain() -> None:
    """A strong weekly rhythm turns away what the exact periodic chain says, not what a steady ward would."""
    # exact periodic Markov chain, solved apart from this file: 10 a day, 4-day exponential stays, 45 beds: 7.565 %
    ward = simulate_ward(Demand(10.0, EXPONENTIAL, weekday_factors=WEEK), 45, seed=3)
    low, high = ward.interval_at(0.99)
    assert low <= 0.07565 <= high
    assert float(erlang_b(40.0, 45)) < low


def test_drift_of_the_rate() -> None:
    """A rate that differs from run to run turns away the mean loss over that rate, weighed by patients."""
    # E[G·B(aG)] for a gamma G with mean 1 and deviation 0.15, by quadrature
    rate = stats.gamma(0.15**-2, scale=0.15**2)
    loss = integrate.quad(lambda g: g * rate.pdf(g) * float(erlang_b(24.0 * g, 31)), 0.2, 2.5, epsabs=1e-10)[0]
    ward = simulate_ward(Demand(6.0, EXPONENTIAL, rate_variation=0.15), 31, seed=9)
    low, high = ward.interval_at(0.99)
    assert low <= loss <= high
    assert float(erlang_b(24.0, 31)) < low


def test_turnaround_holds_the_bed_without_a_patient() -> None:
    """A bed made ready for four hours is lost to the next patient, but doesn't count as occupied."""
    ward = simulate_ward(Demand(6.0, EXPONENTIAL, turnaround_hours=4.0), 31, seed=4)
    low, high = ward.interval_at(0.99)
    assert low <= float(erlang_b(25.0, 31)) <= high
    assert ward.occupancy * 31 == pytest.approx(24.0 * (1.0 - ward.turn_away_probability), rel=0.01)


def simpy_ward(demand: Demand, beds: int, patience_days: float, days: float) -> tuple[float, float, float]:
    """Play the ward with SimPy, an hour's rate at a time; return the share who find it full, who leave, and the occupancy."""
    chance, env = random.Random(1), simpy.Environment()  # noqa: S311  chance, not secrets
    ward, counts, bed_days = simpy.Resource(env, beds), [0, 0, 0], [0.0]
    top = demand.arrivals_per_day * max(demand.weekday_factors) * max(demand.hour_factors)
    lists = [one for one in demand.booked for _ in range(max(one.per_weekday))]

    def patient(stay_days: float) -> Iterator[simpy.Event]:
        counts[0] += 1
        counts[1] += ward.count >= beds
        with ward.request() as bed:
            patience = chance.expovariate(1.0 / patience_days) if patience_days else 0.0
            got = yield bed | env.timeout(patience)
            if bed not in got:
                counts[2] += 1
                return
            yield env.timeout(stay_days)
            bed_days[0] += stay_days

    def unbooked() -> Iterator[simpy.Event]:
        while True:
            yield env.timeout(chance.expovariate(top))
            weekday, hour = int(env.now) % 7, int(env.now * 24) % 24
            factor = demand.weekday_factors[weekday] * demand.hour_factors[hour]
            if chance.random() < demand.arrivals_per_day * factor / top:
                env.process(patient(chance.gammavariate(1.0, demand.length_of_stay.mean_days)))

    def booked(one: BookedList, number: int) -> Iterator[simpy.Event]:
        for day in range(int(days)):
            yield env.timeout(day + (one.hour + chance.random()) / 24.0 - env.now)
            if number < one.per_weekday[day % 7] and chance.random() < one.attends:
                env.process(patient(chance.gammavariate(1.0, one.length_of_stay.mean_days)))

    env.process(unbooked())
    for number, one in enumerate(lists):
        env.process(booked(one, number))
    env.run(until=days)
    return counts[1] / counts[0], counts[2] / counts[0], bed_days[0] / days / beds


@pytest.mark.parametrize(("when_full", "patience_days"), [("leaves", 0.0), ("waits", 0.5)])
def test_ward_written_a_second_time(when_full: str, patience_days: float) -> None:
    """A ward with a week, a day, a booked list and patience sees what SimPy's ward sees, within their own noise."""
    booked = (BookedList((3, 3, 2, 2, 1, 0, 0), LengthOfStay(2.0, 1.0, "gamma"), hour=8, attends=0.9),)
    demand = Demand(4.0, EXPONENTIAL, weekday_factors=WEEK, hour_factors=np.array(DAY) / np.mean(DAY), booked=booked)
    run = WardRun(patience_days=patience_days or math.inf)
    ward = simulate_ward(demand, 20, seed=6, when_full=when_full, run=run)
    full, left, occupancy = simpy_ward(demand, 20, patience_days, days=14_000.0)

    # SimPy's run has some 75,000 patients: standard errors near 0.003 for the shares, as ours with a tenth of them
    assert ward.turn_away_probability == pytest.approx(full, abs=0.012)
    assert (ward.turn_away_probability if when_full == "leaves" else ward.gave_up) == pytest.approx(left, abs=0.008)
    assert ward.occupancy == pytest.approx(occupancy, abs=0.008)


def test_the_same_seed_gives_the_same_run() -> None:
    """A run can be had again from its seed, to the last digit; another seed gives another run."""
    demand, run = (
        Demand(6.0, LengthOfStay(4.0), weekday_factors=WEEK, clustering=1.4),
        WardRun(replications=20, days=91),
    )
    first, again, other = (simulate_ward(demand, 28, seed=seed, run=run) for seed in (8, 8, 9))

    assert (again.found_full == first.found_full).all()
    assert (again.occupancy, again.interval) == (first.occupancy, first.interval)
    assert not (other.found_full == first.found_full).all()


EVERYTHING = Demand(
    5.0,
    LengthOfStay(4.0, 1.4),
    weekday_factors=WEEK,
    clustering=1.8,
    rate_variation=0.1,
    booked=(BookedList((2, 2, 2, 1, 1, 0, 0), LengthOfStay(2.0)),),
    discharge_hours=(0,) * 9 + (1, 2, 3, 4, 4, 3, 2, 1) + (0,) * 7,
    weekend_slip=(0.2, 0.4),
    turnaround_hours=2.0,
)


@pytest.mark.parametrize("demand", [Demand(6.0, LengthOfStay(4.0, 2.0)), EVERYTHING])
def test_more_beds_never_turn_anyone_more_away(demand: Demand) -> None:
    """The same patients meet more beds: everyone let in before is let in again, one by one."""
    run = WardRun(booked_decided_at=7, closures=(Closure(2, 20.0, per_year=2.0),))
    comers = settle_leaving(drawn(demand, run, days=120.0), demand)
    let_in = [
        pass_through(all_empty(40, beds), comers, demand).bed_ready <= comers.latest_start for beds in (20, 21, 26, 33)
    ]

    assert let_in[0].sum() < let_in[-1].sum()
    for fewer, more in pairwise(let_in):
        assert not (fewer & ~more).any()


@pytest.mark.parametrize(
    "demand", [Demand(6.0, LengthOfStay(4.0, 2.0)), EVERYTHING.with_changes(weekend_slip=(0.0, 0.0))]
)
def test_more_beds_never_keep_anyone_waiting_longer(demand: Demand) -> None:
    """The same patients meet more beds: nobody who waits as long as it takes waits longer than before."""
    # Source: Kiefer & Wolfowitz 1955: the sorted times at which beds empty fall together
    comers = drawn(demand, days=120.0, waits=True)
    ready = [pass_through(all_empty(40, beds), comers, demand).bed_ready for beds in (24, 25, 30)]

    assert (ready[0] > comers.at).any()
    for fewer, more in pairwise(ready):
        assert (more <= fewer + 1e-9).all()


def test_the_same_patients_whatever_the_beds() -> None:
    """Two bed counts meet the same patients in the counted days, so that their difference isn't chance."""
    run = WardRun(replications=30, days=182)
    for when_full in ("leaves", "waits"):
        few, many = (simulate_ward(EVERYTHING, beds, seed=1, when_full=when_full, run=run) for beds in (28, 34))
        assert (few.came == many.came).all()
        assert few.turn_away_probability > many.turn_away_probability


def test_patients_come_in_their_rhythm() -> None:
    """Patients come by month, weekday and hour as the factors say, within five standard errors."""
    months = (1.3, 1.2, 1.0, 1.0, 0.9, 0.9, 0.8, 0.8, 0.9, 1.0, 1.1, 1.1)
    demand = Demand(
        10.0, LengthOfStay(2.0), month_factors=months, weekday_factors=WEEK, hour_factors=np.array(DAY) / np.mean(DAY)
    )
    comers = drawn(demand)
    at = comers.at[comers.at < 364.0]
    lengths = np.array([31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 30])
    month = np.repeat(np.arange(12), lengths)[np.floor(at).astype(int)]

    for counted, factors in (
        (np.bincount(month), np.array(months) * lengths),
        (np.bincount(np.floor(at).astype(int) % 7), WEEK),
        (np.bincount((at * 24).astype(int) % 24), DAY),
    ):
        expected = 10.0 * 364.0 * 40 * np.array(factors) / np.sum(factors)
        # months have unequal weeks, worth up to half a per cent
        assert (np.abs(counted - expected) < 5.0 * np.sqrt(expected) + 0.006 * expected).all()


@pytest.mark.parametrize("groups", ["geometric", "fixed"])
@pytest.mark.parametrize("clustering", [0.5, 1.0, 1.7, 2.0, 3.6])
def test_arrivals_come_together_as_much_as_asked(clustering: float, groups: str) -> None:
    """The variance of the patients of a 13-day stretch over their mean is the clustering; the mean stays what it was."""
    comers = drawn(Demand(8.0, LengthOfStay(2.0), clustering=clustering), WardRun(groups=groups), replications=200)
    counts = np.array([np.bincount((column[column < 364.0] // 13).astype(int), minlength=28) for column in comers.at.T])

    assert counts.mean() == pytest.approx(8.0 * 13, rel=0.01)
    # 5,600 stretches: the standard error of a variance is some 2 %; gamma gaps are a few per cent off over 13 days
    assert counts.var() / counts.mean() == pytest.approx(clustering, rel=0.1)


def test_patients_leave_at_the_hours_given() -> None:
    """Patients leave on the day their stay ends, at the hours given, and not before they came."""
    demand = Demand(6.0, LengthOfStay(3.0), discharge_hours=(0,) * 10 + (1, 3) + (0,) * 12)
    comers = drawn(demand)
    moved = settle_leaving(comers, demand)
    is_patient = comers.at < 364.0
    before, after = (comers.at + comers.stay_days)[is_patient], (moved.at + moved.stay_days)[is_patient]
    is_moved = before != after

    assert (np.floor(before) == np.floor(after)).all()
    assert (after > comers.at[is_patient]).all()
    hours = np.bincount((after[is_moved] * 24).astype(int) % 24, minlength=24)
    assert hours[10] + hours[11] == hours.sum()
    assert hours[11] / hours.sum() == pytest.approx(0.75, abs=0.02)
    # only who came after the hour drawn, on that very day, keeps the end of the stay
    assert (np.floor(before[~is_moved]) == np.floor(comers.at[is_patient][~is_moved])).all()


def test_weekend_discharges_slip_to_monday() -> None:
    """With a chance of 1 nobody leaves on that day; the others leave when they would have."""
    demand = Demand(6.0, LengthOfStay(3.0), weekend_slip=(1.0, 0.5))
    comers = drawn(demand)
    moved = settle_leaving(comers, demand)
    is_patient = comers.at < 364.0
    before, after = (comers.at + comers.stay_days)[is_patient], (moved.at + moved.stay_days)[is_patient]
    due, left = np.floor(before) % 7, np.floor(after) % 7

    assert not (left == 5).any()
    assert (left[due == 5] == 0).all()
    assert after[due == 5] == pytest.approx(before[due == 5] + 2.0)
    assert np.mean(left[due == 6] == 6) == pytest.approx(0.5, abs=0.02)
    assert (before[due < 5] == after[due < 5]).all()


@pytest.mark.parametrize(("hour", "cancelled", "days_used"), [(None, 0.4, 5), (6, 0.4, 5), (9, 0.4, 5), (20, 0.64, 3)])
def test_booked_patients_are_cancelled_where_the_list_is_longer_than_the_ward(
    hour: int | None, cancelled: float, days_used: int
) -> None:
    """Of five booked a weekday for half a day three get a bed; none on the day after, when decided while those are in."""
    booked = (BookedList((5, 5, 5, 5, 5, 0, 0), LengthOfStay(0.5, 0.0), hour=9),)
    run = WardRun(replications=3, days=364, booked_decided_at=hour)
    ward = simulate_ward(Demand(0.0, EXPONENTIAL, booked=booked), 3, seed=1, run=run)

    assert ward.booked_turn_away_probability == pytest.approx(cancelled, abs=0.01)
    assert ward.occupancy == pytest.approx(days_used / 7 * 0.5, abs=0.01)


def test_as_many_patients_present_as_the_year_says() -> None:
    """With beds enough the patients present on average are those of the hour-by-hour year, hours of leaving included."""
    ward = simulate_ward(EVERYTHING, 80, seed=2, run=WardRun(replications=300, days=364))
    wanted = offered_load_by_hour(EVERYTHING.with_changes(turnaround_hours=0.0)).mean()
    assert ward.occupancy * 80 == pytest.approx(wanted, rel=0.01)
    assert wanted > 1.02 * EVERYTHING.offered_load


def test_booked_patients_who_do_not_come() -> None:
    """Of ten booked a week four fifths come, and enough beds turn nobody away."""
    booked = (BookedList((10, 0, 0, 0, 0, 0, 0), LengthOfStay(1.0), attends=0.8),)
    ward = simulate_ward(Demand(0.0, EXPONENTIAL, booked=booked), 40, seed=1, run=WardRun(replications=200, days=364))
    assert ward.arrivals == pytest.approx(200 * 52 * 8, rel=0.01)
    assert ward.turn_away_probability == 0.0
    assert ward.interval == (0.0, pytest.approx(-math.log(0.025) / ward.arrivals, rel=0.01))


def test_deciding_ahead_keeps_beds_empty() -> None:
    """Beds kept from the evening before stand empty for the night: more are turned away than when nobody decides."""
    booked = (BookedList((4, 4, 4, 4, 4, 0, 0), LengthOfStay(2.0, 0.5)),)
    demand = Demand(4.0, EXPONENTIAL, booked=booked)
    at_once, ahead = (
        simulate_ward(demand, 26, seed=1, run=WardRun(replications=100, booked_decided_at=hour)) for hour in (None, 14)
    )
    assert ahead.turn_away_probability > at_once.turn_away_probability
    assert ahead.occupancy < at_once.occupancy


def test_closed_beds_are_not_there() -> None:
    """Four of 31 beds shut for the whole run leave a ward of 27; shut in January they cost only around January."""
    demand, run = Demand(6.0, EXPONENTIAL), WardRun(days=364, closures=(Closure(4, 500.0, from_day=0.0),))
    shut = simulate_ward(demand, 31, seed=1, run=run)
    # the first days, until four beds have emptied, turn away a little less
    assert shut.turn_away_probability == pytest.approx(float(erlang_b(24.0, 27)), rel=0.03)

    january = simulate_ward(demand, 31, seed=1, run=WardRun(closures=(Closure(8, 25.0, from_day=3.0),)))
    usual = float(erlang_b(24.0, 31))
    assert january.by_month[0] > 3.0 * usual
    assert january.by_month[6] == pytest.approx(usual, rel=0.15)


def test_closures_by_chance() -> None:
    """Closures that come three times a year turn away the mean of an open and a shut ward, roughly by their time."""
    demand, run = Demand(6.0, EXPONENTIAL), WardRun(closures=(Closure(6, 30.0, per_year=1.0),))
    ward = simulate_ward(demand, 31, seed=1, run=run)
    shut = 30.0 / 365.0
    mix = (1.0 - shut) * float(erlang_b(24.0, 31)) + shut * float(erlang_b(24.0, 25))
    assert ward.turn_away_probability == pytest.approx(mix, rel=0.05)


# a 364-day year: 20 beds in winter, 4 fewer in July and August, 6 fewer at weekends, half a week in May at none
DAY_OF_YEAR = np.arange(364)
MONTH_OF_DAY = np.repeat(np.arange(12), [31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 30])
OPEN_BY_DAY = (
    20 - 4 * np.isin(MONTH_OF_DAY, (6, 7)) - 6 * (DAY_OF_YEAR % 7 >= 5) - 30 * np.isin(DAY_OF_YEAR, (120, 121, 122))
)


def played_by_hand(arrivals: float, stay_days: float, open_by_day: np.ndarray, years: int) -> np.ndarray:
    """Play a ward that turns away patient by patient in plain Python; return the share turned away by month.

    A patient is let in while fewer patients are in than beds are open that day; whoever is in stays.
    """
    chance, now, leaving = random.Random(3), 0.0, []  # noqa: S311  chance, not secrets
    came, lost = np.zeros(12), np.zeros(12)
    while now < 364.0 * years:
        now += chance.expovariate(arrivals)
        while leaving and leaving[0] <= now:
            heapq.heappop(leaving)
        day = int(now) % 364
        came[MONTH_OF_DAY[day]] += 1
        if len(leaving) < open_by_day[day]:
            heapq.heappush(leaving, now + chance.expovariate(1.0 / stay_days))
        else:
            lost[MONTH_OF_DAY[day]] += 1
    return lost / came


@pytest.mark.parametrize("stay_days", [1.0, 9.0])
def test_beds_that_change_by_day_against_a_ward_played_by_hand(stay_days: float) -> None:
    """Beds by month and weekday, and days without any: each month turns away what a plain loop over patients says."""
    demand = Demand(18.0 / stay_days, LengthOfStay(stay_days, 1.0, "gamma"))
    run = WardRun(extra_by_day=OPEN_BY_DAY - 18, days=364, replications=150)
    ward = simulate_ward(demand, 18, seed=5, run=run)
    by_hand = played_by_hand(18.0 / stay_days, stay_days, np.maximum(OPEN_BY_DAY, 0), 60)

    # the loop sees some 32,000 or 3,600 patients a month: standard errors below 0.003 and 0.02 (they come in runs)
    assert ward.by_month == pytest.approx(by_hand, abs=0.012 if stay_days == 1.0 else 0.05)
    assert ward.by_month[6] > ward.by_month[5] + 0.05
    # Little 1961: patients present = arrivals let in × mean stay; beds are those open on the mean day
    open_beds = np.maximum(OPEN_BY_DAY, 0).mean()
    assert ward.occupancy == pytest.approx(18.0 * (1.0 - ward.turn_away_probability) / open_beds, rel=0.01)


def test_the_same_beds_every_day_are_the_same_beds() -> None:
    """Two beds more on each day of the year are two beds more, to the last digit."""
    demand, run = Demand(6.0, EXPONENTIAL), WardRun(replications=20, days=182)
    more = simulate_ward(demand, 27, seed=1, run=WardRun(replications=20, days=182, extra_by_day=(2,) * 364))

    assert more.turn_away_probability == simulate_ward(demand, 29, seed=1, run=run).turn_away_probability


@pytest.mark.parametrize("stay", [EXPONENTIAL, LengthOfStay(4.0, 0.0), LengthOfStay(4.0, 2.0)])
def test_everyone_placed_at_once_meets_a_poisson_number(stay: LengthOfStay) -> None:
    """Where patients stay anyway the number present is Poisson whatever the stay, and who comes sees just that.

    Source: Palm 1943; Khinchine 1955 (endless beds); Wolff 1982 (arrivals see time averages).
    """
    ward = simulate_ward(Demand(6.0, stay), 28, seed=3, when_full="stays anyway")
    low, high = ward.interval_at(0.99)

    assert low <= stats.poisson.sf(27, 24.0) <= high
    assert high - low < 0.1 * ward.turn_away_probability
    assert ward.occupancy == pytest.approx(24.0 / 28, rel=0.01)
    assert (ward.gave_up, ward.mean_wait_hours) == (0.0, 0.0)


def test_everyone_placed_at_once_where_beds_change() -> None:
    """Where patients stay anyway, beds shut and beds being made ready only change how many are as good as full."""
    demand = Demand(6.0, EXPONENTIAL, turnaround_hours=4.0)
    extra = np.where(MONTH_OF_DAY < 6, 0, -3)
    run = WardRun(days=364, extra_by_day=extra, closures=(Closure(2, 364.0, from_day=0.0),))
    ward = simulate_ward(demand, 32, seed=3, when_full="stays anyway", run=run)

    # 6 a day for 4 days and 4 hours; 30 beds open, then 27
    assert ward.by_month[:6].mean() == pytest.approx(stats.poisson.sf(29, 25.0), rel=0.05)
    assert ward.by_month[6:].mean() == pytest.approx(stats.poisson.sf(26, 25.0), rel=0.05)


def test_no_beds_and_no_demand() -> None:
    """Without beds everyone finds the ward full and waits for ever; without demand nobody comes."""
    none = simulate_ward(Demand(6.0, EXPONENTIAL), 0, seed=1, run=WardRun(replications=5, days=30))
    waiting = simulate_ward(EVERYTHING, 0, seed=1, when_full="waits", run=WardRun(replications=5, days=30))
    quiet = simulate_ward(Demand(0.0, EXPONENTIAL), 4, seed=1)

    assert (none.turn_away_probability, none.occupancy, none.interval[1]) == (1.0, 0.0, 1.0)
    assert (waiting.turn_away_probability, waiting.occupancy, waiting.share_waiting_over(1e6)) == (1.0, 0.0, 1.0)
    assert (quiet.arrivals, quiet.turn_away_probability, quiet.occupancy) == (0, 0.0, 0.0)


def test_months_keep_their_own_shares() -> None:
    """A winter twice as busy is the time of the full ward, and the year is the months weighed by their patients."""
    demand = Demand(5.0, EXPONENTIAL, month_factors=(1.5, 1.4, 1.1, 1, 0.9, 0.8, 0.8, 0.8, 0.9, 0.9, 0.9, 1.0))
    ward = simulate_ward(demand, 28, seed=1, when_full="waits", run=WardRun(replications=60, days=364))

    assert ward.by_month[0] > 5.0 * ward.by_month[6]
    assert ward.by_month @ ward.came_by_month / ward.arrivals == pytest.approx(ward.turn_away_probability)


def test_empty_cells_take_no_time() -> None:
    """Columns with fewer patients are filled up with nobody, who holds no bed."""
    comers = drawn(EVERYTHING, days=30.0)
    assert (comers.kind == NOBODY).any()
    assert (comers.kind == BOOKED).any()
    assert (comers.at[comers.kind == NOBODY] == 30.0).all()
    # in order, but for some microseconds
    assert (np.diff(comers.at, axis=0) >= -1e-9).all()


A_RUN = simulate_ward(Demand(6.0, EXPONENTIAL), 20, seed=1, run=WardRun(replications=5, days=30))


@pytest.mark.parametrize(
    ("build", "words"),
    [
        (lambda: simulate_ward(EVERYTHING, 3.5, seed=1), "3.5 beds"),
        (lambda: simulate_ward(EVERYTHING, -1, seed=1), "-1 beds"),
        (lambda: simulate_ward(EVERYTHING, 3, seed=-1), "seed -1"),
        (lambda: simulate_ward(EVERYTHING, 3, seed=1.5), "seed 1.5"),
        (lambda: simulate_ward(EVERYTHING, 3, seed=1, when_full="vanishes"), "'vanishes'"),
        (lambda: WardRun(replications=1), "1 replications"),
        (lambda: WardRun(days=0), "run of 0 days"),
        (lambda: WardRun(warm_up_days=-1), "warm-up of -1"),
        (lambda: WardRun(patience_days=0), "patience of 0"),
        (lambda: WardRun(groups="pairs"), "'pairs'"),
        (lambda: WardRun(booked_decided_at=24), "Hour 24"),
        (lambda: Closure(0, 3.0, from_day=1.0), "0 closed beds"),
        (lambda: Closure(2, 0.0, from_day=1.0), "closure of 0 days"),
        (lambda: Closure(2, 3.0), "first day"),
        (lambda: Closure(2, 3.0, from_day=1.0, per_year=2.0), "first day"),
        (lambda: Closure(2, 3.0, per_year=-1.0), "rate of -1"),
        (lambda: Closure(2, 3.0, per_year=math.inf), "rate of inf"),
        (lambda: Closure(2, 3.0, from_day=math.nan), "day nan"),
        (lambda: Closure(2, 3.0, from_day=-5), "day -5"),
        (
            lambda: simulate_ward(EVERYTHING, 3, seed=1, run=WardRun(closures=(Closure(2, 3.0, from_day=1e5),))),
            "day 100000",
        ),
        (lambda: Closure(math.nan, 3.0, from_day=1.0), "nan closed beds"),
        (lambda: Closure(math.inf, 3.0, from_day=1.0), "inf closed beds"),
        (lambda: Closure("2", 3.0, from_day=1.0), "'2' closed beds"),
        (lambda: WardRun(replications=math.nan), "nan replications"),
        (lambda: WardRun(replications=math.inf), "inf replications"),
        (lambda: WardRun(replications=[9]), r"\[9\] replications"),
        (lambda: WardRun(warm_up_days=math.inf), "warm-up of inf"),
        (lambda: WardRun(patience_days="long"), "patience of 'long'"),
        (lambda: WardRun(closures=3), "but 3 was given"),
        (lambda: WardRun(closures=(3,)), "but 3 was given"),
        (lambda: WardRun(extra_by_day=(1,) * 365), "364 whole numbers, but 365"),
        (lambda: WardRun(extra_by_day=(0.5,) * 364), "0.5 extra beds"),
        (lambda: simulate_ward(EVERYTHING, [5, 6], seed=1), r"\[5, 6\] beds"),
        (lambda: simulate_ward(EVERYTHING, None, seed=1), "None beds"),
        (lambda: simulate_ward(None, 5, seed=1), "demand of None"),
        (lambda: simulate_ward(EVERYTHING, 5, seed=1, run=3), "run of 3"),
        (lambda: A_RUN.interval_at(2), "confidence of 2"),
        (lambda: A_RUN.interval_at(math.nan), "confidence of nan"),
        (lambda: A_RUN.share_waiting_over(-1), "wait of -1 hours"),
        (lambda: A_RUN.share_waiting_over(math.nan), "wait of nan hours"),
    ],
)
def test_impossible_figures(build: object, words: str) -> None:
    """A figure outside its meaning is refused in a sentence that quotes it."""
    with pytest.raises(ImpossibleFigure, match=words):
        build()
