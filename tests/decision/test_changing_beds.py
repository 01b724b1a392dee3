"""Closures, winter bays, five-day wards and beds nobody may be put in, against exact chains and simulated patients."""

from __future__ import annotations

import math
from datetime import date

import numpy as np
import pytest
from scipy import stats

from bedplan.decision import BedChanges, Closure, OverfullLimit, TurnAwayLimit, Ward, decide
from bedplan.decision.bed_mixture import with_changing_beds
from bedplan.decision.changing_beds import arrivals_by_month
from bedplan.errors import ImpossibleFigure
from bedplan.models import (
    BedCurve,
    BookedList,
    Demand,
    LengthOfStay,
    SimulatedWard,
    Waits,
    WardRun,
    erlang_b,
    simulate_ward,
)
from tests.erlang_sum import exact_share

STAY = LengthOfStay(4.0)
STEADY = Demand(2.0, STAY)
# a 365-day year without 31 December
MONTH_DAYS = np.array([31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 30])
MONTH_OF_DAY = np.repeat(np.arange(12), MONTH_DAYS)
WINTER = tuple(1 + 0.35 * np.cos(2 * np.pi * (np.arange(12) - 0.5) / 12))
WEEK = (1.2097, 1.4713, 1.3779, 1.0, 0.6221, 0.5287, 0.7903)
WEEKEND = (False,) * 5 + (True,) * 2
JULY = Closure.between(10, date(2025, 7, 1), date(2025, 7, 30))


def share(beds: int, load: int = 8) -> float:
    """Return Erlang's share in a ward of so many beds."""
    return float(exact_share(load, beds))


def curve_with(changes: BedChanges, demand: Demand = STEADY, model: str = "erlang_loss") -> BedCurve:
    """Return the curve of a 12-bed ward whose beds change."""
    return Ward("Teal", 12, demand, bed_changes=changes).curve(model)


def simulated(demand: Demand, beds: int, changes: BedChanges, when_full: str, **run: int) -> SimulatedWard:
    """Play the ward through patient by patient: day by day the beds that are open, closures at random by chance."""
    by_day = np.zeros(364, dtype=int)
    for day in range(364):
        month, weekday = MONTH_OF_DAY[day], day % 7
        by_day[day] = changes.extra_by_month[month] + changes.extra_by_weekday[weekday]
        for one in changes.closures:
            if one.from_day is not None and (day - one.from_day) % 364 < one.days:
                by_day[day] -= one.beds
        if not changes.open_weekdays[weekday]:
            by_day[day] = -beds
    closures = [one for one in changes.closures if one.from_day is None]
    if changes.unassignable:
        stay_days = demand.length_of_stay.mean_days
        closures.append(Closure.expected(1, changes.unassignable * 365 / stay_days, stay_days))
    plan = {"replications": 250, "days": 364, **run}
    played = WardRun(extra_by_day=by_day, closures=closures, **plan)
    return simulate_ward(demand, beds, seed=1, when_full=when_full, run=played)


def exact_share_with_closures(load: float, stay_days: float, beds: int, closure: Closure) -> float:
    """Solve the chain of (patients, closures in force) densely: all times exponential, nobody let in while full."""
    most = 8
    size, rate = (beds + 1) * (most + 1), closure.per_year / 365
    flow = np.zeros((size, size))
    for patients in range(beds + 1):
        for closed in range(most + 1):
            here = patients * (most + 1) + closed
            if patients < beds - closure.beds * closed:
                flow[here, here + most + 1] = load / stay_days
            if patients:
                flow[here, here - most - 1] = patients / stay_days
            if closed < most:
                flow[here, here + 1] = rate
            if closed:
                flow[here, here - 1] = closed / closure.days
    balance = (flow - np.diag(flow.sum(axis=1))).T
    balance[-1] = 1.0
    chance = np.linalg.solve(balance, np.eye(size)[-1]).reshape(beds + 1, most + 1)
    return sum(chance[max(beds - closure.beds * closed, 0) :, closed].sum() for closed in range(most + 1))


# load, mean stay, beds, beds a closure takes, times a year, days
AT_RANDOM = [(24.0, 4.0, 36, 6, 5.0, 25.0), (24.0, 4.0, 36, 6, 2.0, 150.0), (24.0, 4.0, 30, 15, 6.0, 3.0)]
AT_RANDOM += [(30.0, 200.0, 36, 10, 4.0, 7.0), (30.0, 60.0, 36, 18, 2.0, 14.0), (8.0, 4.0, 12, 4, 1.33, 7.9)]


@pytest.mark.parametrize(("load", "stay_days", "beds", "closed", "per_year", "days"), AT_RANDOM)
def test_closures_at_random_against_an_exact_chain(
    load: float, stay_days: float, beds: int, closed: int, per_year: float, days: float
) -> None:
    """Closures overlap, and patients in closed beds stay: each count turns away what the exact chain says, to 1 in 200.

    1.33 closures of 7.9 days: Lopman et al. 2004, Emerging Infectious Diseases 10(10).
    """
    closure = Closure.expected(closed, per_year, days)
    curve = curve_with(BedChanges((closure,)), Demand(load / stay_days, LengthOfStay(stay_days)))

    for count in (beds - 3, beds):
        exact = exact_share_with_closures(load, stay_days, count, closure)
        assert curve.at(count).turn_away_probability == pytest.approx(exact, rel=5e-3)
        assert curve.at(count).by_month == pytest.approx([exact] * 12, rel=5e-3)


@pytest.mark.parametrize(("load", "stay_days", "beds", "closed", "per_year", "days"), AT_RANDOM)
def test_closures_of_fixed_length_against_simulated_patients(
    load: float, stay_days: float, beds: int, closed: int, per_year: float, days: float
) -> None:
    """Closures that all last the same: at most 1 in 20 below what simulated patients see, beyond chance."""
    changes = BedChanges((Closure.expected(closed, per_year, days),))
    demand = Demand(load / stay_days, LengthOfStay(stay_days))
    ward = simulated(demand, beds, changes, "leaves", days=364 * 4)
    low, high = ward.interval_at(0.99)
    found = curve_with(changes, demand).at(beds).turn_away_probability

    assert 0.95 * low <= found <= 1.05 * high


# arrivals a day, stay, beds, changes -> how far the worst changed month may be off, and the year, each as a share
DATED = {
    "200-day stays": (Demand(0.15, LengthOfStay(200.0)), 36, BedChanges((JULY,)), 0.12),
    "30-day stays": (Demand(1.0, LengthOfStay(30.0)), 36, BedChanges((JULY,)), 0.12),
    "4-day stays": (Demand(6.0, STAY), 34, BedChanges((JULY,)), 0.12),
    "uneven stays": (Demand(1.0, LengthOfStay(30.0, 2.0)), 36, BedChanges((JULY,)), 0.15),
    "even stays": (Demand(1.0, LengthOfStay(30.0, 0.0)), 36, BedChanges((JULY,)), 0.4),
    "two in turn": (
        Demand(6.0, STAY),
        36,
        BedChanges(tuple(Closure.between(10, date(2025, 7, day), date(2025, 7, day + 13)) for day in (1, 15))),
        0.12,
    ),
    "over new year": (
        Demand(6.0, STAY, WINTER),
        40,
        BedChanges((Closure.between(10, date(2025, 12, 20), date(2026, 1, 20)),)),
        0.12,
    ),
    "winter bay": (
        Demand(1.0, LengthOfStay(30.0), WINTER),
        34,
        BedChanges(extra_by_month=(6, 6, 3, *(0,) * 7, 3, 6)),
        0.12,
    ),
    "five days": (Demand(6.0, STAY), 30, BedChanges(open_weekdays=tuple(not one for one in WEEKEND)), 0.05),
    "weekends": (
        Demand(10.0, LengthOfStay(2.0), weekday_factors=WEEK),
        24,
        BedChanges(extra_by_weekday=tuple(-8 * one for one in WEEKEND)),
        0.06,
    ),
    "beds for the week": (
        Demand(20.0, LengthOfStay(1.0), weekday_factors=WEEK),
        26,
        BedChanges(extra_by_weekday=(0, 6, 6, 0, -6, -6, -6)),
        0.08,
    ),
    "missing beds": (Demand(6.0, STAY), 32, BedChanges(unassignable=2.0), 0.12),
    "everything": (
        Demand(6.0, STAY, WINTER, WEEK),
        34,
        BedChanges(
            (JULY, Closure.expected(6, 5.0, 10.0)),
            (4, 4, *(0,) * 9, 4),
            unassignable=1.0,
            extra_by_weekday=tuple(-3 * one for one in WEEKEND),
        ),
        0.12,
    ),
}


@pytest.mark.parametrize("case", DATED)
def test_beds_by_date_against_simulated_patients(case: str) -> None:
    """Closures with patients in the beds, winter bays, weekends: the worst month as simulated, the year to 1 in 20."""
    demand, beds, changes, worst = DATED[case]
    ward = simulated(demand, beds, changes, "leaves", replications=500 if demand.arrivals_per_day < 5.0 else 250)
    point = Ward("Teal", beds, demand, bed_changes=changes).curve().at(beds)
    low, high = ward.interval_at(0.99)
    month = int(ward.by_month.argmax()) if case != "missing beds" else slice(None)

    assert 0.95 * low <= point.turn_away_probability <= (1.07 if case == "even stays" else 1.05) * high
    assert point.by_month[month] == pytest.approx(ward.by_month[month], rel=worst if case != "missing beds" else 0.3)


@pytest.mark.parametrize("case", ["4-day stays", "winter bay", "beds for the week", "five days", "missing beds"])
def test_everyone_placed_at_once_against_simulated_patients(case: str) -> None:
    """Where everyone is placed the number present doesn't hang on the beds: the mixture is what simulated patients see."""
    demand, beds, changes, _ = DATED[case]
    ward = simulated(demand, beds, changes, "stays anyway")
    point = Ward("Heron", beds, demand, "waits", bed_changes=changes).curve().at(beds)
    low, high = ward.interval_at(0.99)

    assert 0.99 * low <= point.turn_away_probability <= 1.01 * high
    if case != "missing beds":
        assert point.occupancy == pytest.approx(ward.occupancy, rel=0.02)


@pytest.mark.parametrize(
    ("stay_days", "beds", "changes"),
    [
        (4.0, 40, BedChanges((Closure.expected(20, 4.0, 15.0),))),
        (1.0, 36, BedChanges((Closure.expected(20, 2.0, 5.0),))),
        (4.0, 36, BedChanges((JULY,))),
        (4.0, 38, BedChanges(extra_by_weekday=tuple(-5 * one for one in WEEKEND))),
    ],
    ids=["half closed", "half closed, short stays", "July", "weekends"],
)
def test_patients_who_queue_are_never_read_as_fewer(stay_days: float, beds: int, changes: BedChanges) -> None:
    """A queue outlives the closure it came from: the share who wait isn't below what simulated patients see."""
    demand = Demand(30.0 / stay_days, LengthOfStay(stay_days))
    ward = simulated(demand, beds, changes, "waits", replications=90 if stay_days > 1.0 else 40, days=364 * 2)
    low, high = ward.interval_at(0.99)
    curve = Ward("Heron", beds, demand, "waits", bed_changes=changes).curve("waiting")
    place = list(curve.beds).index(beds)

    assert low <= curve.turn_away_probability[place] <= 1.5 * high
    assert 0.97 * ward.share_waiting_over(4.0) <= curve.waits.share_over(4.0)[place] <= 1.0
    assert any("up to a half too high" in note for note in curve.notes)


def test_shares_by_weekday_and_group_are_left_out() -> None:
    """A model's split by weekday and group is of fixed beds: where beds change it isn't passed on."""
    demand = Demand(2.0, STAY, booked=(BookedList((2,) * 7, STAY),))
    plain, changed = (curve_with(one, demand, "seasonal_loss") for one in (BedChanges(), BedChanges((JULY,))))

    assert plain.by_weekday is not None
    assert (changed.by_weekday, changed.unbooked_turn_away, changed.booked_turn_away) == (None, None, None)


def test_closures_in_force_vary_as_poisson_counts_do() -> None:
    """Twice a year for 150 days: 0.82 in force on average, two or more for a fifth of the time (Palm 1943)."""
    out, shares = BedChanges((Closure.expected(6, 2.0, 150.0),)).out_of_use()

    assert out.tolist() == [6 * count for count in range(out.size)]
    assert shares == pytest.approx(stats.poisson.pmf(np.arange(out.size), 300 / 365), abs=2e-6)
    assert shares.sum() == pytest.approx(1.0)


def test_patients_not_turned_away_fill_the_open_beds() -> None:
    """Occupancy beside a closure is patients let in × stay ÷ open beds, patients kept by the weekend included."""
    changes = BedChanges((Closure.expected(4, 1.33, 7.9),))
    for demand, stay_days in ((STEADY, 4.0), (Demand(2.0, STAY, weekend_slip=(1.0, 1.0)), 4 + 3 / 7)):
        point = curve_with(changes, demand).at(12)
        present, open_beds = 2 * stay_days * (1 - point.turn_away_probability), 12 - 4 * 1.33 * 7.9 / 365
        assert point.occupancy == pytest.approx(present / open_beds, rel=1e-3)


@pytest.mark.parametrize(
    ("first", "last", "expected"),
    [
        (date(2023, 1, 9), date(2023, 1, 16), {0: 8}),
        (date(2024, 2, 26), date(2024, 3, 2), {1: 3, 2: 2}),
        (date(2024, 12, 30), date(2025, 1, 1), {11: 1, 0: 1}),
        (date(2025, 1, 1), date(2025, 12, 31), dict(enumerate(MONTH_DAYS))),
    ],
    ids=["a week", "leap day", "new year", "a whole year"],
)
def test_a_dated_closure_counts_its_days_month_by_month(first: date, last: date, expected: dict[int, int]) -> None:
    """Both days count, a winter may run over New Year; 29 February and 31 December aren't in the year of 364 days."""
    closed = BedChanges((Closure.between(6, first, last),)).extra_by_day == -6

    assert np.bincount(MONTH_OF_DAY[closed], minlength=12).tolist() == [expected.get(month, 0) for month in range(12)]


def test_a_closure_all_year_is_a_smaller_ward() -> None:
    """Six of twelve beds closed from January to December: Erlang's share at six beds."""
    point = curve_with(BedChanges((Closure.between(6, date(2025, 1, 1), date(2025, 12, 31)),))).at(12)

    assert point.by_month == pytest.approx([share(6)] * 12, rel=1e-9)


def placed(changes: BedChanges) -> BedCurve:
    """Return the curve of a 12-bed ward where everyone is placed at once: eight there on average, whatever the beds."""
    return Ward("Heron", 12, STEADY, "waits", bed_changes=changes).curve()


def test_a_winter_bay_opens_in_its_months() -> None:
    """Four beds more from December to February: those months meet a Poisson number of patients four beds further on."""
    extra = (4, 4, 0, 0, 0, 0, 0, 0, 0, 0, 0, 4)
    curve = placed(BedChanges(extra_by_month=extra))

    for beds in (1, 12, int(curve.beds[-1])):
        expected = stats.poisson.sf(beds + np.array(extra) - 1, 8)
        assert curve.at(beds).by_month == pytest.approx(expected, rel=1e-5, abs=1e-9)
        assert curve.at(beds).turn_away_probability == pytest.approx(MONTH_DAYS @ expected / 364, rel=1e-5, abs=1e-9)


def test_a_summer_without_some_beds_ends_at_none() -> None:
    """Fewer beds in August: a count below the number closed reads as no beds that month."""
    curve = placed(BedChanges(extra_by_month=(0,) * 7 + (-5,) + (0,) * 4))

    assert curve.at(12).by_month[7] == pytest.approx(stats.poisson.sf(6, 8), rel=1e-5)
    assert curve.at(3).by_month[7] == 1.0


def test_a_winter_bay_lowers_the_beds_a_rule_needs() -> None:
    """With a winter peak, the count that meets 5 % in every month falls when a bay opens for it, never rises."""
    demand = Demand(2.0, STAY, month_factors=[1.3, 1.2, 1.1, 1, 0.9, 0.8, 0.8, 0.8, 0.9, 1.0, 1.0, 1.2])
    rule = TurnAwayLimit(0.05)
    plain = decide(curve_with(BedChanges(), demand, "seasonal_loss"), rule)
    bay = BedChanges(extra_by_month=(4, 4, 2, 0, 0, 0, 0, 0, 0, 0, 0, 4))
    helped = decide(curve_with(bay, demand, "seasonal_loss"), rule)

    assert helped.beds < plain.beds
    assert plain.worst_month in (0, 1)


@pytest.mark.parametrize("missing", [0.3, 1.0, 2.7])
def test_beds_nobody_may_be_put_in_are_taken_off_as_a_count_that_varies(missing: float) -> None:
    """The curve is averaged over a Poisson number of missing beds, never better than taking the mean number off."""
    changes = BedChanges(unassignable=missing)

    for beds in (12, 16):
        expected = sum(stats.poisson.pmf(k, missing) * stats.poisson.sf(max(beds - k, 0) - 1, 8) for k in range(60))
        assert placed(changes).at(beds).turn_away_probability == pytest.approx(expected, rel=1e-4)
        assert curve_with(changes).at(beds).turn_away_probability > erlang_b(8.0, beds - missing)


def test_patients_of_a_closed_day_find_no_bed() -> None:
    """Closed at the weekend, a ward that 2 of 7 patients come to then has no bed for those; the others as before."""
    point = placed(BedChanges(open_weekdays=(True,) * 5 + (False,) * 2)).at(12)

    assert point.turn_away_probability == pytest.approx(2 / 7 + 5 / 7 * stats.poisson.sf(11, 8), rel=1e-5)


def test_a_closed_day_on_which_nobody_comes_changes_no_share() -> None:
    """A ward whose patients all come from Monday to Friday reads the same closed at the weekend, with a note."""
    demand = Demand(2.0, STAY, weekday_factors=[1.4] * 5 + [0.0] * 2)
    closed = curve_with(BedChanges(open_weekdays=(True,) * 5 + (False,) * 2), demand)
    plain = curve_with(BedChanges(), demand)

    assert closed.turn_away_probability == pytest.approx(plain.turn_away_probability)
    assert any("Closed on some weekdays" in note for note in closed.notes)


def test_hours_over_full_are_mixed_over_hours() -> None:
    """Where nobody is turned away a closure adds hours over-full, and occupancy may pass one."""
    closure = Closure.between(6, date(2025, 1, 1), date(2025, 1, 15))
    ward = Ward("Heron", 12, STEADY, "waits", bed_changes=BedChanges((closure,)))
    curve = ward.curve()
    # more patients than beds: Poisson about the load of 8
    january = (16 * stats.poisson.sf(12, 8) + 15 * stats.poisson.sf(6, 8)) / 31
    point = list(curve.beds).index(12)

    assert curve.overfull_by_month[0, point] == pytest.approx(january, rel=1e-5)
    assert curve.overfull_share_of_hours[point] == pytest.approx(
        (31 * january + 333 * stats.poisson.sf(12, 8)) / 364, rel=1e-5
    )
    assert curve.occupancy[1] > 1
    assert (
        decide(curve, OverfullLimit(0.05)).beds
        > decide(Ward("Heron", 12, STEADY, "waits").curve(), OverfullLimit(0.05)).beds
    )


def test_waits_are_mixed_too() -> None:
    """The share waiting and the mean wait are mixed over open counts; a closed day adds at most the hours closed."""
    beds = np.arange(4)
    full = np.array([1.0, 0.6, 0.3, 0.1])

    def over(hours: float) -> np.ndarray:
        return full * math.exp(-hours)

    waits = Waits(np.array([np.inf, 9.0, 3.0, 1.0]), over, lambda hours: np.tile(over(hours), (12, 1)))
    quiet = Demand(0.02, STAY)
    raw = BedCurve("hand made", "waits", quiet, beds, full, full, np.tile(full, (12, 1)), waits=waits)
    january = Closure.between(1, date(2025, 1, 1), date(2025, 1, 31))
    mixed = with_changing_beds(raw, BedChanges((january,), open_weekdays=(True,) * 6 + (False,)), beds)
    sundays = np.bincount(MONTH_OF_DAY[6::7], minlength=12) / MONTH_DAYS

    for month, place in ((0, 2), (5, 3)):
        expected = sundays[month] + (1 - sundays[month]) * over(2.0)[place]
        assert mixed.waits.share_over_by_month(2.0)[month, 3] == pytest.approx(expected)
    assert mixed.waits.mean_hours[3] == pytest.approx((31 * 3.0 + 333 * 1.0) / 364 + 24 / 7)
    assert mixed.waits.mean_hours[1] == np.inf


@pytest.mark.parametrize("demand", [STEADY, Demand(2.0, STAY, hour_factors=[0.5] * 12 + [1.5] * 12)])
def test_months_without_a_season_hold_their_days(demand: Demand) -> None:
    """Without a season patients come to each month by its days; with nobody coming the days stand in."""
    assert arrivals_by_month(demand) == pytest.approx(MONTH_DAYS / 364, rel=1e-9)
    assert arrivals_by_month(Demand(0.0, STAY)) == pytest.approx(MONTH_DAYS / 364)


def test_booked_patients_count_in_their_month() -> None:
    """A season of emergencies and an even booked list: each month's share follows both."""
    factors = np.array([1.5, 0.5] + [1.0] * 10)
    demand = Demand(2.0, STAY, month_factors=factors, booked=(BookedList((2,) * 7, STAY, attends=0.5),))
    # two a day with the season, brought to a mean of 2 over the days, and one a day without
    patients = MONTH_DAYS * (2 * factors / (factors @ MONTH_DAYS / 364) + 1)

    assert arrivals_by_month(demand) == pytest.approx(patients / patients.sum(), rel=1e-9)


def test_a_ward_whose_beds_never_change_keeps_its_curve() -> None:
    """Without changes the model's own curve comes back as it is."""
    curve = curve_with(BedChanges())

    assert with_changing_beds(curve, BedChanges(), curve.beds) is curve
    assert curve.at(12).turn_away_probability == pytest.approx(share(12), rel=1e-12)


@pytest.mark.parametrize(
    ("make", "says"),
    [
        (lambda: Closure.expected(0, 4.0, 10.0), "0 closed beds is not possible"),
        (lambda: Closure.expected(1.5, 4.0, 10.0), "1.5 closed beds is not possible"),
        (lambda: Closure.expected(4, -1.0, 10.0), "rate of -1 a year"),
        (lambda: Closure.expected(4, math.nan, 10.0), "rate of nan a year"),
        (lambda: Closure.expected(4, 1.0, None), "closure of None days"),
        (lambda: Closure.between(4, date(2025, 2, 1), date(2025, 1, 1)), "lasts 1 to 365 days"),
        (lambda: Closure.between(4, date(2025, 1, 1), date(2026, 2, 1)), "lasts 1 to 365 days"),
        (lambda: Closure.between(4, "2025-01-01", date(2026, 2, 1)), "from 2025-01-01 to"),
        (lambda: BedChanges((Closure.expected(4, 800.0, 10.0),)), "800 closures a year of 10 days"),
        (lambda: BedChanges((Closure(4, 10.0, from_day=364.0),)), "from day 364 for 10 days"),
        (lambda: BedChanges((3,)), "tuple of Closure, but 3"),
        (lambda: BedChanges(extra_by_month=None), "12 months, January first, but None"),
        (lambda: BedChanges(extra_by_weekday=(1,) * 6), "7 weekdays, Monday first, but 6"),
        (lambda: BedChanges(extra_by_weekday=("1",) * 7), "'1' extra beds"),
        (lambda: BedChanges(open_weekdays="MTWTFSS"), "'MTWTFSS' was given"),
        (lambda: BedChanges(unassignable=None), "None beds nobody may be put in"),
        (lambda: BedChanges(extra_by_month=(1,) * 11), "12 months, January first, but 11"),
        (lambda: BedChanges(extra_by_month=(0.5,) * 12), "0.5 extra beds"),
        (lambda: BedChanges(extra_by_month=(math.nan,) * 12), "nan extra beds"),
        (lambda: BedChanges(open_weekdays=(False,) * 7), "open on one of them at least"),
        (lambda: BedChanges(open_weekdays=(True,) * 6), "7 weekdays"),
        (lambda: BedChanges(unassignable=-0.1), "-0.1 beds nobody may be put in"),
        (lambda: BedChanges(unassignable=math.nan), "nan beds nobody may be put in"),
    ],
)
def test_changes_say_what_is_wrong(make: object, says: str) -> None:
    """Each impossible change of beds is quoted in a sentence that says what is allowed."""
    with pytest.raises(ImpossibleFigure, match=says):
        make()
