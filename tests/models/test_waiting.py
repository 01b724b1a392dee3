"""Waiting for a bed, against published delay examples, simulation, and chains solved in this file."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import integrate, special, stats
from scipy.linalg import expm

from bedplan.errors import ImpossibleFigure
from bedplan.models import (
    BookedList,
    Demand,
    LengthOfStay,
    WardRun,
    erlang_a,
    erlang_b,
    erlang_c,
    simulate_ward,
    waiting,
)
from bedplan.models.formulas.clusters import more_if_groups_differ
from bedplan.models.queue.spread import spread_of, wait_ratio
from bedplan.models.queue.through_year import Pace, settled_queue, steady_wards
from bedplan.models.rhythm.year import unbooked_by_hour

WINTER = (1.3, 1.2, 1.1, 1.0, 0.9, 0.9, 0.8, 0.8, 0.9, 1.0, 1.0, 1.1)
EXPONENTIAL = LengthOfStay(4.0, 1.0, "gamma")


def steady(load: float, stay_hours: float = 96.0) -> Demand:
    """Return steady demand with exponential stays of some hours."""
    return Demand(load * 24.0 / stay_hours, LengthOfStay(stay_hours / 24.0, 1.0, "gamma"))


def test_steady_exponential_ward_is_the_delay_formula() -> None:
    """Shares, occupancy and waits of a steady ward with exponential stays are Erlang's, to ten digits."""
    curve = waiting(steady(24.0), range(61))
    beds = np.arange(25, 61)
    share = erlang_c(24.0, beds)

    assert curve.when_full == "waits"
    assert curve.turn_away_probability[25:] == pytest.approx(share, rel=1e-10)
    assert curve.by_month[3, 25:] == pytest.approx(share, rel=1e-10)
    assert curve.occupancy[25:] == pytest.approx(24.0 / beds, rel=1e-10)
    # mean wait C·m/(c − a), exponential for those who wait
    assert curve.waits.mean_hours[25:] == pytest.approx(share * 96.0 / (beds - 24.0), rel=1e-4)
    assert curve.waits.share_over(10.0)[25:] == pytest.approx(share * np.exp(-(beds - 24.0) * 10.0 / 96.0), rel=1e-4)
    assert curve.waits.share_over_by_month(10.0)[:, 30] == pytest.approx(curve.waits.share_over(10.0)[30], rel=1e-10)


def test_too_few_beds_for_ever() -> None:
    """With no more beds than load everyone waits without end, every bed is taken, and a note says so."""
    curve = waiting(steady(24.0), [0, 10, 24, 25])

    assert curve.turn_away_probability[:3].tolist() == [1.0, 1.0, 1.0]
    assert curve.occupancy[:3].tolist() == [0.0, 1.0, 1.0]
    assert np.isinf(curve.waits.mean_hours[:3]).all()
    assert curve.waits.share_over(1e4)[:3].tolist() == [1.0, 1.0, 1.0]
    assert any("Up to 24 beds the queue only grows" in note for note in curve.notes)
    assert not waiting(steady(24.0), [25, 30]).notes


def test_nobody_and_no_beds() -> None:
    """Where nobody comes nobody waits; without beds everyone does."""
    nobody = waiting(Demand(0.0, EXPONENTIAL), [0, 4])
    assert nobody.turn_away_probability.tolist() == nobody.occupancy.tolist() == [0.0, 0.0]
    assert nobody.waits.mean_hours.tolist() == nobody.waits.share_over(4.0).tolist() == [0.0, 0.0]
    none = waiting(steady(3.0), [0])
    assert (none.turn_away_probability[0], none.occupancy[0], none.waits.share_over(9.0)[0]) == (1.0, 0.0, 1.0)


def test_call_example() -> None:
    """100 calls in half an hour of 180 seconds each: 14 take 88.835 % within 20 seconds, 11 take 38.96138 %."""
    # Source: worked example of the delay formula, 100 contacts in 30 minutes, author unknown (read)
    waits = waiting(steady(10.0, stay_hours=180.0 / 3600.0), [11, 14]).waits
    within = 1.0 - waits.share_over(20.0 / 3600.0)
    assert within[1] == pytest.approx(0.88835, abs=5e-6)
    assert within[0] == pytest.approx(0.3896138, abs=5e-6)


def test_county_hospital() -> None:
    """An emergency room with 2 patients an hour and 20 minutes each, one doctor or two."""
    # Source: Hillier & Lieberman, Introduction to Operations Research, County Hospital (remembered, each recomputed):
    # mean wait 2/3 h and 1/24 h; waiting over half an hour with one 0.404, over one hour with two 0.003; two: 0.167 wait
    curve = waiting(steady(2.0 / 3.0, stay_hours=1.0 / 3.0), [1, 2])
    assert curve.waits.mean_hours == pytest.approx([2.0 / 3.0, 1.0 / 24.0], rel=1e-4)
    assert curve.waits.share_over(0.5)[0] == pytest.approx(0.404, abs=5e-4)
    assert curve.waits.share_over(1.0)[1] == pytest.approx(0.003, abs=5e-4)
    assert curve.turn_away_probability[1] == pytest.approx(0.167, abs=5e-4)
    # patients present: queue + in treatment = 2 with one doctor, 3/4 with two (Little 1961)
    present = 2.0 * curve.waits.mean_hours + curve.occupancy * curve.beds
    assert present == pytest.approx([2.0, 0.75], rel=1e-4)


def test_obstetrics() -> None:
    """An obstetrics unit at a load of 42.9: 66.6 % wait with 45 beds, 3.7 % with 56, 2.6 % with 57, and how full it is."""
    # Source: Green 2006, in Patient Flow: Reducing Delay in Healthcare Delivery (remembered, each recomputed)
    curve = waiting(steady(42.9, stay_hours=69.6), [45, 56, 57])
    assert curve.turn_away_probability == pytest.approx([0.666, 0.037, 0.026], abs=5e-4)
    assert curve.occupancy == pytest.approx([0.953, 0.766, 0.753], abs=5e-4)


def test_fifty_servers_without_giving_up() -> None:
    """48 a minute, one minute each, 50 servers: 17 wait on average, one in ten over 58.1 seconds; 3.1 % fewer: 8.8 s."""
    # Source: Mandelbaum & Zeltyn 2007, Service engineering in action: the Palm/Erlang-A queue (remembered, recomputed)
    waits = waiting(steady(48.0, stay_hours=1.0 / 60.0), [50]).waits
    assert 48.0 * 60.0 * waits.mean_hours[0] == pytest.approx(16.667, abs=5e-3)
    assert waits.share_over(58.1 / 3600.0)[0] == pytest.approx(0.10, abs=1e-3)
    fewer = waiting(steady(48.0 * (1.0 - 0.031), stay_hours=1.0 / 60.0), [50]).waits
    assert 3600.0 * fewer.mean_hours[0] == pytest.approx(8.8, abs=0.05)


@pytest.mark.parametrize("variation", [0.0, 0.4, 1.3, 2.5])
def test_one_bed_and_any_stay(variation: float) -> None:
    """With one bed the mean wait is ρ·m·(1 + variation²)/2/(1 − ρ), exactly."""
    # Source: Pollaczek 1930, Khinchine 1932
    curve = waiting(Demand(0.6, LengthOfStay(1.0, variation)), [1])
    assert curve.waits.mean_hours[0] == pytest.approx(24.0 * 0.6 * (1.0 + variation**2) / 2.0 / 0.4, rel=1e-3)
    assert curve.turn_away_probability[0] == pytest.approx(0.6, rel=1e-10)


@pytest.mark.parametrize("beds", [10, 30])
@pytest.mark.parametrize("shape", ["lognormal", "gamma"])
@pytest.mark.parametrize("variation", [0.3, 0.6, 1.0, 1.5, 2.0])
def test_mean_wait_within_a_tenth_of_simulation(variation: float, shape: str, beds: int) -> None:
    """From a variation of 0.3 to 2 the mean wait is within 10 % of simulation, the share who wait within a tenth."""
    demand = Demand(0.8 * beds / 4.0, LengthOfStay(4.0, variation, shape))
    curve = waiting(demand, [beds])
    run = WardRun(replications=500, days=364.0 * (4 if beds == 10 else 2))
    ward = simulate_ward(demand, beds, seed=1, when_full="waits", run=run)

    assert ward.arrivals > 1_400_000
    assert curve.waits.mean_hours[0] == pytest.approx(ward.mean_wait_hours, rel=0.10)
    assert curve.turn_away_probability[0] == pytest.approx(ward.turn_away_probability, rel=0.10)
    assert curve.waits.share_over(12.0)[0] == pytest.approx(ward.share_waiting_over(12.0), rel=0.15)


def test_why_the_whole_spread_does_not_act() -> None:
    """For widely spread stays on many beds (Ca² + Cs²)/2 alone would say nearly twice the wait that is seen."""
    demand = Demand(6.0, LengthOfStay(4.0, 2.0))
    ward = simulate_ward(demand, 30, seed=2, when_full="waits")
    alone = float(erlang_c(24.0, 30)) * 96.0 / 6.0 * (1.0 + 4.0) / 2.0
    assert alone > 1.4 * ward.mean_wait_hours
    # near saturation it does act in full
    spread = spread_of(demand)
    assert float(wait_ratio(spread, np.array([[30.0]]), np.array([[29.99]]))[0, 0]) == pytest.approx(2.5, rel=0.02)


def test_stays_that_end_within_a_while() -> None:
    """The variance of the stays that end on one bed within a time is the known one for three kinds of stay."""
    times = np.array([0.25, 0.5, 1.0, 1.5, 3.0, 10.0])
    steps = (times * 64).astype(int)
    # exponential: 1; fixed: f(1 − f)/t with f the part of a stay; gamma of order 2: 1/2 + (1 − e^(−4t))/(8t)
    # Source: Cox 1962, Renewal Theory, section 4.5
    part = times % 1.0
    for stay, expected in (
        (LengthOfStay(4.0, 1.0, "gamma"), np.ones(6)),
        (LengthOfStay(4.0, 0.0), part * (1.0 - part) / times),
        (LengthOfStay(4.0, math.sqrt(0.5), "gamma"), 0.5 + (1.0 - np.exp(-4.0 * times)) / 8.0 / times),
    ):
        assert spread_of(Demand(1.0, stay)).ended[steps] == pytest.approx(expected, abs=2e-3)


def waiting_in_groups(load: float, beds: int, sizes: np.ndarray) -> tuple[float, float]:
    """Return the share who wait and the mean wait in mean stays when groups of 1, 2, 3 … come so often, by a chain.

    Up from n patients as often as down from n + 1; each patient of a group is counted at its own place in it.
    """
    past = np.cumsum(sizes[::-1])[::-1]
    groups = load / (sizes @ np.arange(1, sizes.size + 1))
    share = np.zeros(30 * beds + 12 * sizes.size)
    share[0] = 1.0
    for n in range(share.size - 1):
        last = share[max(n + 1 - past.size, 0) : n + 1][::-1]
        share[n + 1] = groups * (last @ past[: last.size]) / min(n + 1, beds)
    share /= share.sum()
    # with n there, the k-th of a group waits if n + k > beds; groups that have a k-th come as often as past[k − 1]
    found_full = [share[max(beds - k + 1, 0) :].sum() for k in range(1, sizes.size + 1)]
    queue = np.maximum(np.arange(share.size) - beds, 0) @ share
    return float(groups / load * (past @ found_full)), float(queue / load)


@pytest.mark.parametrize("size", [2, 3])
@pytest.mark.parametrize(("beds", "use"), [(3, 0.6), (8, 0.8), (20, 0.7), (20, 0.9), (60, 0.85)])
def test_patients_who_come_together_wait_as_a_chain_says(size: int, beds: int, use: float) -> None:
    """Groups of equal size and exponential stays: the share who wait is exact, the mean wait up to an eighth too long."""
    share, stays = waiting_in_groups(use * beds, beds, np.eye(size)[-1])
    curve = waiting(Demand(use * beds / 4.0, EXPONENTIAL, clustering=float(size)), [beds])

    assert curve.turn_away_probability[0] == pytest.approx(share, rel=1e-6)
    assert 1.0 <= curve.waits.mean_hours[0] / (96.0 * stays) <= 1.0 + 1.0 / 8.0


@pytest.mark.parametrize("clustering", [1.3, 2.0, 3.0])
@pytest.mark.parametrize("beds", [4, 15, 50])
def test_groups_of_differing_sizes_wait_as_the_note_says(clustering: float, beds: int) -> None:
    """If sizes are geometric more wait, never more than the note says, and somewhere nearly as many."""
    stop = 2.0 / (clustering + 1.0)
    sizes = stop * (1.0 - stop) ** np.arange(80)
    load = 0.7 * beds
    demand = Demand(load / 4.0, EXPONENTIAL, clustering=clustering)
    counts = np.arange(math.ceil(1.1 * load), 2 * beds + 8)
    exact = np.array([waiting_in_groups(load, int(count), sizes)[0] for count in counts])
    more = (exact / waiting(demand, counts).turn_away_probability)[exact >= 0.01].max() - 1.0

    assert more == pytest.approx(more_if_groups_differ(demand, waits=True), rel=1e-4)
    notes = " ".join(waiting(demand, [beds]).notes)
    assert f"up to {math.ceil(100 * more)} % more wait" in notes or more > 1.0


@pytest.mark.parametrize(("clustering", "beds"), [(1.5, 20), (2.0, 40), (3.0, 40), (2.0, 8)])
def test_patients_who_come_together_are_simulated_alike(clustering: float, beds: int) -> None:
    """In groups more patients wait, as many as simulation says, whose group sizes differ widely."""
    demand = Demand(0.8 * beds / 4.0, EXPONENTIAL, clustering=clustering)
    curve = waiting(demand, [beds])
    ward = simulate_ward(demand, beds, seed=1, when_full="waits")
    below = 1.0 - curve.turn_away_probability[0] / ward.turn_away_probability

    assert curve.turn_away_probability[0] > float(erlang_c(0.8 * beds, beds))
    assert -0.02 < below < more_if_groups_differ(demand, waits=True) + 0.02


def test_drift_of_the_rate() -> None:
    """An uncertain rate lets the mean of the delay shares wait, weighed by patients; waits at hopeless rates are noted."""
    # E[G·C(aG)] for a gamma G with mean 1 and deviation 0.1, by quadrature
    rate = stats.gamma(100.0, scale=0.01)
    exact = integrate.quad(lambda g: g * rate.pdf(g) * float(erlang_c(24.0 * g, 32)), 0.5, 1.8, limit=200)[0]
    curve = waiting(Demand(6.0, EXPONENTIAL, rate_variation=0.1), [32])

    assert curve.turn_away_probability[0] == pytest.approx(exact, rel=0.02)
    assert curve.turn_away_probability[0] > float(erlang_c(24.0, 32))
    assert any("the queue only grows" in note for note in curve.notes)


def test_turnaround_makes_patients_wait() -> None:
    """Beds made ready for four hours leave a ward asked for 25 beds, 24 of them by patients."""
    curve = waiting(Demand(6.0, EXPONENTIAL, turnaround_hours=4.0), [25, 31])
    assert curve.turn_away_probability == pytest.approx([1.0, float(erlang_c(25.0, 31))], rel=1e-6)
    assert curve.occupancy == pytest.approx([24.0 / 25.0, 24.0 / 31.0], rel=1e-6)


@pytest.mark.parametrize("beds", [28, 30, 33, 36])
def test_seasons_against_simulation(beds: int) -> None:
    """Through a strong winter the year's share is within 5 % of simulation, the worst month's and the waits as noted."""
    demand = Demand(6.0, LengthOfStay(4.0), month_factors=WINTER)
    curve = waiting(demand, [beds])
    ward = simulate_ward(demand, beds, seed=1, when_full="waits")
    worst = int(np.argmax(ward.by_month))

    assert curve.turn_away_probability[0] == pytest.approx(ward.turn_away_probability, rel=0.05)
    assert curve.by_month[worst, 0] == pytest.approx(ward.by_month[worst], rel=0.125)
    assert 0.95 < curve.waits.mean_hours[0] / ward.mean_wait_hours < 1.3
    assert curve.waits.share_over(12.0)[0] == pytest.approx(ward.share_waiting_over(12.0), rel=0.08)


def test_a_queue_is_carried_into_the_next_month() -> None:
    """After a winter with more patients than beds those who come in spring still wait, though the beds are enough then."""
    demand = Demand(6.0, EXPONENTIAL, month_factors=(1.5, 1.4, 1.2, *(0.8777777777777778,) * 9))
    curve = waiting(demand, [27])
    april_alone = float(erlang_c(24.0 * 0.88, 27))
    ward = simulate_ward(demand, 27, seed=1, when_full="waits")

    assert ward.by_month[3] > 3.0 * april_alone
    assert curve.by_month[3, 0] > 3.0 * april_alone
    assert any("carried into the next" in note for note in curve.notes)


def exact_week(demand: Demand, beds: int, step_hours: int, over_hours: float) -> tuple[float, float, float]:
    """Solve the chain of patients present through a week, exponential stays, by full matrix exponentials.

    The share who wait, the mean hours over everybody, and the share who wait longer than some hours.
    """
    present, stay_hours = np.arange(beds + 130), 24.0 * demand.length_of_stay.mean_days
    # with n present a patient waits for n − beds + 1 stays to end, each after an exponential time
    longer = np.where(
        present >= beds, special.gammaincc(np.maximum(present - beds + 1, 1), beds * over_hours / stay_hours), 0.0
    )
    watched = np.stack([present >= beds, np.maximum(present - beds, 0), longer], axis=1)
    week = unbooked_by_hour(demand)[:168].reshape(-1, step_hours).mean(axis=1)
    known = {}
    for coming in np.unique(week):
        rates = np.zeros((present.size + 3, present.size + 3))
        up, down = np.full(present.size - 1, coming), np.minimum(present[1:], beds) / stay_hours
        rates[: present.size, : present.size] = np.diag(up, 1) + np.diag(down, -1)
        rates[present[:-1], present[:-1]] -= up
        rates[present[1:], present[1:]] -= down
        rates[: present.size, present.size :] = watched
        whole = expm(rates * step_hours)
        known[coming] = whole[: present.size, : present.size], whole[: present.size, present.size :]
    round_week = np.linalg.multi_dot([known[coming][0] for coming in week])
    balance = round_week.T - np.eye(present.size)
    balance[-1] = 1.0
    state = np.linalg.solve(balance, np.eye(present.size)[-1])
    total = np.zeros(3)
    for coming in week:
        move, seen = known[coming]
        total += state @ seen * np.array([coming, 1.0, coming])
        state = state @ move
    total /= week.sum() * step_hours
    return float(total[0]), float(total[1]), float(total[2])


STRONG = (1.2097, 1.4713, 1.3779, 1.0, 0.6221, 0.5287, 0.7903)
WILD = (1.9, 1.6, 1.3, 0.9, 0.6, 0.3, 0.4)
MILD = (1.10, 1.03, 1.02, 1.01, 1.03, 0.91, 0.90)
# kind of week: its factors, beds wanted, bed counts, and the share who wait, too low and too high at most
WEEKS = {
    "mild": (MILD, 40.0, (45, 53), 0.002, 0.003),
    "strong": (STRONG, 40.0, (45, 49, 53, 59), 0.015, 0.03),
    "strong, small ward": (STRONG, 8.0, (10, 12, 16), 0.015, 0.03),
    "wild": (WILD, 40.0, (45, 49, 59), 0.04, 0.04),
}


@pytest.mark.parametrize("kind", WEEKS)
def test_weekdays_against_the_exact_chain(kind: str) -> None:
    """From mild to wild weeks: who waits, how long and who waits over half a day, and which way each errs at most."""
    week, load, counts, low, high = WEEKS[kind]
    demand = Demand(load / 4.0, EXPONENTIAL, weekday_factors=week)
    curve = waiting(demand, counts)
    for place, beds in enumerate(counts):
        share, mean_hours, longer = exact_week(demand, beds, 24, 12.0)
        assert 1.0 - low < curve.turn_away_probability[place] / share < 1.0 + high
        assert 0.98 < curve.waits.mean_hours[place] / mean_hours < 1.3
        assert 0.95 < curve.waits.share_over(12.0)[place] / longer < 1.3
    assert any("rhythm of weekdays" in note for note in curve.notes) is (kind != "mild")


def test_short_stays_and_hours_against_the_exact_chain() -> None:
    """Stays of a day, a strong week and hours of the day: who waits within a tenth, the mean wait up to a half too long."""
    hours = (0.4,) * 8 + (1.6,) * 12 + (0.4,) * 4
    demand = Demand(40.0, LengthOfStay(1.0, 1.0, "gamma"), weekday_factors=STRONG, hour_factors=hours)
    curve = waiting(demand, (45, 59))
    for place, beds in enumerate((45, 59)):
        share, mean_hours, longer = exact_week(demand, beds, 4, 4.0)
        assert 0.90 < curve.turn_away_probability[place] / share < 1.10
        assert 0.98 < curve.waits.mean_hours[place] / mean_hours < 1.5
        assert curve.waits.share_over(4.0)[place] > 6.0 / 7.0 * longer


def test_booked_lists_wait_too() -> None:
    """Booked patients share the queue: the share who wait is near that of simulation, and so is the occupancy."""
    booked = (BookedList((4, 4, 4, 4, 4, 0, 0), LengthOfStay(2.0)),)
    demand = Demand(4.0, EXPONENTIAL, booked=booked)
    curve = waiting(demand, [25, 28])
    for place, beds in enumerate((25, 28)):
        ward = simulate_ward(demand, beds, seed=1, when_full="waits")
        assert -0.02 < curve.turn_away_probability[place] / ward.turn_away_probability - 1.0 < 0.3
        assert curve.occupancy[place] == pytest.approx(ward.occupancy, rel=0.01)


AFTERNOON = (0,) * 8 + (1, 2, 5, 8, 9, 10, 12, 13, 12, 10, 7, 5, 3, 2, 1, 0)
MORNING = (0,) * 9 + (1,) + (0,) * 14
DAY = tuple(1.0 - 0.7 * math.cos(2 * math.pi * (hour - 3) / 24) for hour in range(24))
# what leaves at set hours, its bed counts, the share who wait too low at most, and words of its note if it has one
ROUNDS = {
    "two days, all at nine": (Demand(10.0, LengthOfStay(2.0, 0.8), discharge_hours=MORNING), (23, 27, 30), 0.05, None),
    "four days, afternoons": (Demand(10.0, LengthOfStay(4.0, 0.8), discharge_hours=AFTERNOON), (47, 55), 0.05, None),
    "winter, afternoons": (
        Demand(5.0, LengthOfStay(4.0, 1.0), WINTER, MILD, DAY, discharge_hours=AFTERNOON, turnaround_hours=3.0),
        (28, 32),
        0.07,
        None,
    ),
    "a day, all at nine": (
        Demand(12.0, LengthOfStay(1.0, 0.8), discharge_hours=MORNING),
        (15, 18, 21),
        1.0 / 7.0,
        "a seventh too low",
    ),
    "a day, afternoons": (
        Demand(40.0, LengthOfStay(1.0, 0.8), discharge_hours=AFTERNOON),
        (53, 65),
        1.0 / 7.0,
        "a seventh too low",
    ),
    "half a day": (
        Demand(12.0, LengthOfStay(0.5, 0.0), hour_factors=DAY, discharge_hours=AFTERNOON),
        (12,),
        1.0 / 3.0,
        "under a day a third",
    ),
}


def fewer_runs(demand: Demand) -> WardRun:
    """Return a run of some 350,000 patients."""
    return WardRun(replications=max(round(1_000.0 / demand.total_arrivals_per_day), 25), days=364.0)


@pytest.mark.parametrize("kind", ROUNDS)
def test_beds_that_come_free_at_set_hours(kind: str) -> None:
    """Who waits before the ward round is counted: at most as much too low as said, and silently hardly at all."""
    demand, counts, most, words = ROUNDS[kind]
    curve = waiting(demand, counts)
    for share, beds in zip(curve.turn_away_probability, counts, strict=True):
        ward = simulate_ward(demand, beds, seed=5, when_full="waits", run=fewer_runs(demand))
        assert share > (1.0 - most) * ward.interval[0]

    assert words is None or any(words in note for note in curve.notes)


LISTS = {
    "day surgery beside long stays": (2.0, 8.0, 0.3, 7, (12,) * 5 + (0, 0), (25, 29, 33)),
    "a day beside ten": (2.0, 10.0, 1.0, 8, (8,) * 5 + (0, 0), (30, 35)),
    "all on Mondays": (3.0, 3.0, 3.0, 8, (20, 0, 0, 0, 0, 0, 0), (25, 29)),
    "alike": (2.0, 4.0, 4.0, 9, (4,) * 5 + (0, 0), (24, 28)),
    "longer than the others": (8.0, 2.0, 14.0, 9, (1,) * 5 + (0, 0), (29, 34)),
    "fifteen a day": (2.0, 2.0, 2.0, 13, (15,) * 7, (34, 38, 42)),
    "many for a few hours": (0.27, 15.0, 0.3, 7, (27,) * 7, (16, 20)),
    "alone": (0.0, 4.0, 3.0, 8, (5,) * 5 + (0, 0), (13, 15)),
}


@pytest.mark.parametrize("kind", LISTS)
def test_lists_make_patients_wait_as_their_note_says(kind: str) -> None:
    """With a booked list the share who wait is at most half too low, and at most twice too high; the note says so."""
    patients, stay, booked_stay, hour, slots, counts = LISTS[kind]
    booked = (BookedList(slots, LengthOfStay(booked_stay), hour),)
    demand = Demand(patients, LengthOfStay(stay), booked=booked)
    curve = waiting(demand, counts)
    for share, beds in zip(curve.turn_away_probability, counts, strict=True):
        low, high = simulate_ward(demand, beds, seed=5, when_full="waits", run=fewer_runs(demand)).interval
        assert 0.5 * low < share < 2.0 * high

    assert any("Booked lists" in note and "half too low" in note for note in curve.notes)


def test_a_list_swings_less_than_chance() -> None:
    """Beds wanted by a list swing as the sum over its patients says, less the fewer stay away; and within its hour."""
    # each slot's patient is there with a chance q: variance Σ q·(1 − q), mean Σ q; come within the hour by u: u·(1 − u)
    stay, attends = LengthOfStay(3.0, 0.5), 0.8
    demand = Demand(0.0, stay, booked=(BookedList((1,) * 7, stay, 9, attends),))
    moments = np.arange(24 * 400) / 24.0
    there = attends * stay.survival(moments)
    within_hour = attends * integrate.quad(lambda u: u * (1.0 - u), 0.0, 1.0)[0] / demand.offered_load
    swing = np.sum(there * (1.0 - there)) / np.sum(there) + within_hour

    assert spread_of(demand).peakedness == pytest.approx(swing, abs=0.005)
    everyone = demand.with_changes(booked=(BookedList((1,) * 7, stay, 9),))
    assert spread_of(everyone).peakedness < spread_of(demand).peakedness


def test_widely_differing_stays_and_kinds_together() -> None:
    """One in ten stays for weeks, seasons and weekdays: too low by no more than the note says, in the worst month too."""
    stay = LengthOfStay.two_streams(0.1, LengthOfStay(1.5, 0.5), LengthOfStay(25.0, 0.8))
    demand = Demand(6.0, stay, WINTER, STRONG, DAY)
    curve = waiting(demand, [34])
    ward = simulate_ward(demand, 34, seed=1, when_full="waits")

    assert curve.turn_away_probability[0] > 0.75 * ward.turn_away_probability
    assert curve.by_month[0, 0] > 2.0 / 3.0 * ward.by_month[0]
    assert any("up to an eighth too low" in note for note in curve.notes)
    together = waiting(demand.with_changes(clustering=2.0, rate_variation=0.2), [34]).notes
    assert any("together were not checked" in note for note in together)


def test_seasons_of_no_size_change_nothing() -> None:
    """A season that hardly swings gives the steady ward's answer, though it is worked out in another way."""
    flat = Demand(6.0, LengthOfStay(4.0, 1.4))
    ripple = flat.with_changes(month_factors=(1.0001, 0.9999) * 6)
    one, other = waiting(flat, [25, 28, 34, 40]), waiting(ripple, [25, 28, 34, 40])
    assert other.turn_away_probability == pytest.approx(one.turn_away_probability, rel=1e-2)
    assert other.waits.mean_hours == pytest.approx(one.waits.mean_hours, rel=1e-2)
    assert other.occupancy == pytest.approx(one.occupancy, rel=1e-6)


@pytest.mark.parametrize("use", [0.8, 0.97, 0.999, 0.99999])
def test_a_queue_that_takes_lifetimes_to_settle(use: float) -> None:
    """Carried through a year without seasons the queue comes to rest at Erlang's share and wait, however full the ward."""
    ward = steady_wards(spread_of(steady(24.0)), np.array([30]))
    wait, stays = settled_queue(ward, np.full(364, use * 30.0), Pace(1.0, 4.0), np.zeros(364))

    # wait of those who wait: m/(c − a)
    assert wait[:, 0] == pytest.approx(float(erlang_c(use * 30.0, 30)), rel=5e-3)
    assert stays[:, 0] == pytest.approx(1.0 / (30.0 * (1.0 - use)), rel=1e-2)


def test_stays_of_seconds_and_months_without_anybody() -> None:
    """Stays of seconds leave each hour's own delay share; half a year without patients lets nobody wait in it."""
    rates = (0.0,) * 8 + (2.4,) * 10 + (0.0,) * 6
    short = waiting(Demand(1000.0, LengthOfStay(1e-4, 1.0, "gamma"), hour_factors=rates), [1, 2])
    assert short.turn_away_probability == pytest.approx(erlang_c(0.24, [1, 2]), rel=0.01)

    half = waiting(Demand(3.0, EXPONENTIAL, month_factors=(0.0,) * 6 + (2.0,) * 6), [30, 35])
    assert not half.by_month[:6].any()
    # July to December have 183 of the 364 days
    load = 12.0 * 364 / 183
    assert half.by_month[8] == pytest.approx(erlang_c(load, [30, 35]), rel=0.01)


def test_a_very_quiet_ward() -> None:
    """A patient every three years, more in winter, uses a bed four thousandths of the time and seldom finds it taken."""
    curve = waiting(Demand(0.001, EXPONENTIAL, month_factors=WINTER), [1, 2])
    assert curve.occupancy == pytest.approx([0.004, 0.002], rel=1e-5)
    # one bed: the share who wait is the share of time it is used, a little more with the season
    assert 0.004 < curve.turn_away_probability[0] < 0.0043


def chain_with_patience(load: float, beds: int, patience: float) -> tuple[float, float, float]:
    """Solve the birth–death chain: the share who find no bed, the share who give up, the beds in use ÷ beds."""
    states = np.arange(1, 6000)
    leaving = np.minimum(states, beds) + np.maximum(states - beds, 0) / patience
    logs = np.concatenate([[0.0], np.cumsum(np.log(load) - np.log(leaving))])
    shares = np.exp(logs - logs.max())
    shares /= shares.sum()
    present = np.arange(6000)
    queue = float(np.maximum(present - beds, 0) @ shares)
    return float(shares[beds:].sum()), queue / patience / load, float(np.minimum(present, beds) @ shares) / beds


@pytest.mark.parametrize(
    ("load", "beds", "patience"),
    [
        (48.0, 50, 2.0),
        (24.0, 31, 0.1),
        (24.0, 20, 0.05),
        (24.0, 10, 1.0),
        (0.5, 1, 3.0),
        (5.0, 40, 0.1),
        (900.0, 800, 0.2),
    ],
)
def test_patience_against_the_chain(load: float, beds: int, patience: float) -> None:
    """Who waits, who gives up and how full the ward is agree with the chain solved state by state, at any load."""
    ours = erlang_a(load, beds, patience)
    full, give_up, in_use = chain_with_patience(load, beds, patience)
    assert float(ours.share_who_wait) == pytest.approx(full, rel=1e-9)
    assert float(ours.share_who_give_up) == pytest.approx(give_up, rel=1e-9, abs=1e-14)
    assert float(ours.occupancy) == pytest.approx(in_use, rel=1e-9)


def test_fifty_servers_with_patience() -> None:
    """48 a minute, one minute each, 50 servers, two minutes' patience: 3 wait on average, 93 % busy, 3.1 % give up."""
    # Source: Mandelbaum & Zeltyn 2007, Service engineering in action: the Palm/Erlang-A queue (remembered, recomputed);
    # fewer by 3.1 % without giving up: 7 wait
    ours = erlang_a(48.0, 50, 2.0)
    assert 48.0 * float(ours.mean_wait) == pytest.approx(2.968, abs=5e-4)
    assert float(ours.occupancy) == pytest.approx(0.9303, abs=5e-5)
    assert float(ours.share_who_give_up) == pytest.approx(0.031, abs=5e-4)
    fewer = waiting(steady(48.0 * (1.0 - 0.031), stay_hours=1.0 / 60.0), [50]).waits.mean_hours[0]
    assert 48.0 * (1.0 - 0.031) * 60.0 * fewer == pytest.approx(6.832, abs=0.01)


def test_patience_against_simulation() -> None:
    """Who waits lies in the simulated ward's 99 % interval; the waits, ended by a bed or by giving up, agree too."""
    run = WardRun(patience_days=0.5)
    ward = simulate_ward(Demand(6.0, EXPONENTIAL), 24, seed=3, when_full="waits", run=run)
    ours = erlang_a(24.0, 24, 0.5 / 4.0)
    low, high = ward.interval_at(0.99)

    assert low <= float(ours.share_who_wait) <= high
    assert ward.gave_up == pytest.approx(float(ours.share_who_give_up), rel=0.03)
    assert ward.mean_wait_hours == pytest.approx(float(ours.mean_wait) * 96.0, rel=0.03)
    for hours in (1.0, 4.0, 12.0):
        assert ward.share_waiting_over(hours) == pytest.approx(float(ours.share_waiting_over(hours / 96.0)), rel=0.04)


def test_patience_between_leaving_and_waiting() -> None:
    """With next to no patience the formula is Erlang's loss, with next to no end of it Erlang's delay."""
    beds = np.array([26, 30, 36])
    short, long = erlang_a(24.0, beds, 1e-6), erlang_a(24.0, beds, 1e5)
    assert short.share_who_give_up == pytest.approx(erlang_b(24.0, beds), rel=1e-4)
    assert long.share_who_wait == pytest.approx(erlang_c(24.0, beds), rel=1e-2)


def test_patience_at_the_edges() -> None:
    """No beds: everyone waits and gives up; no demand: nobody; far more beds than patients: no trouble with the digits."""
    edge = erlang_a([3.0, 0.0, 1.0, 740.0], [0, 5, 2000, 1], [1.0, 1.0, 5.0, 100.0])
    assert edge.share_who_wait == pytest.approx([1.0, 0.0, 0.0, 1.0])
    assert edge.share_who_give_up == pytest.approx([1.0, 0.0, 0.0, 739.0 / 740.0], rel=1e-9)
    assert edge.share_waiting_over(0.5)[0] == pytest.approx(math.exp(-0.5))
    for bad in (0.0, -1.0, math.nan, math.inf):
        with pytest.raises(ImpossibleFigure, match="patience of"):
            erlang_a(1.0, 2, bad)
