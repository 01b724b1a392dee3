"""Closures, winter bays, closed weekdays and beds nobody may be put in, against sums and chains worked out apart."""

from __future__ import annotations

import math
from datetime import date
from fractions import Fraction

import numpy as np
import pytest
from scipy import stats

from bedplan.decision import BedChanges, Closure, OverfullLimit, TurnAwayLimit, Ward, decide
from bedplan.decision.changing_beds import arrivals_by_month, with_changing_beds
from bedplan.errors import ImpossibleFigure
from bedplan.models import BedCurve, BookedList, Demand, LengthOfStay, Waits, erlang_b

STAY = LengthOfStay(4.0)
STEADY = Demand(2.0, STAY)
# a 365-day year without 31 December
MONTH_DAYS = np.array([31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 30])


def share(beds: int, load: int = 8) -> float:
    """Return Erlang's share from its defining sum, in exact fractions (Erlang 1917)."""
    term, total = Fraction(1), Fraction(1)
    for bed in range(1, beds + 1):
        term = term * load / bed
        total += term
    return float(term / total)


def curve_with(changes: BedChanges, demand: Demand = STEADY, model: str = "erlang_loss") -> BedCurve:
    """Return the curve of a 12-bed ward whose beds change."""
    return Ward("Teal", 12, demand, bed_changes=changes).curve(model)


def test_one_closure_mixes_two_bed_counts() -> None:
    """1.33 closures a year of 7.9 days close a unit 2.9 % of the time: (1 − p)·B(c) + p·B(c − k) in every month.

    Closures a year and their length: Lopman et al. 2004, Emerging Infectious Diseases 10(10).
    """
    closure = Closure.expected(4, 1.33, 7.9)
    closed = 1.33 * 7.9 / 365
    assert closure.share_of_month == pytest.approx([closed] * 12)
    assert round(100 * closed, 1) == 2.9

    point = curve_with(BedChanges((closure,))).at(12)

    assert point.turn_away_probability == pytest.approx((1 - closed) * share(12) + closed * share(8), rel=1e-9)
    assert point.by_month == pytest.approx([point.turn_away_probability] * 12)
    # patients not turned away are in the beds; open beds are 12 less four for 2.9 % of the time
    present, open_beds = 8 * (1 - point.turn_away_probability), 12 - 4 * closed
    assert point.occupancy == pytest.approx(present / open_beds, rel=1e-9)


def test_patients_whom_the_weekend_keeps_fill_the_open_beds() -> None:
    """Where weekend discharges wait for Monday, 4 days become 4 + 3/7, and occupancy beside a closure counts them."""
    kept = Demand(2.0, LengthOfStay(4.0), weekend_slip=(1.0, 1.0))
    point = curve_with(BedChanges((Closure.expected(4, 1.33, 7.9),)), kept).at(12)

    present, open_beds = 2 * (4 + 3 / 7) * (1 - point.turn_away_probability), 12 - 4 * 1.33 * 7.9 / 365
    assert point.occupancy == pytest.approx(present / open_beds, rel=1e-3)


def test_two_closures_come_and_go_independently() -> None:
    """Both at once happens for the product of their shares, and never leaves fewer than no beds."""
    curve = curve_with(BedChanges((Closure(4, (0.1,) * 12), Closure(6, (0.2,) * 12))))

    for beds in (12, 5):
        expected = sum(p * share(max(beds - k, 0)) for p, k in ((0.72, 0), (0.08, 4), (0.18, 6), (0.02, 10)))
        assert curve.at(beds).turn_away_probability == pytest.approx(expected, rel=1e-9)


@pytest.mark.parametrize(
    ("first", "last", "expected"),
    [
        (date(2023, 1, 9), date(2023, 1, 16), {0: 8 / 31}),
        (date(2024, 2, 26), date(2024, 3, 2), {1: 4 / 29, 2: 2 / 31}),
        (date(2024, 12, 30), date(2025, 1, 1), {11: 2 / 31, 0: 1 / 31}),
        (date(2025, 1, 1), date(2025, 12, 31), dict.fromkeys(range(12), 1.0)),
    ],
    ids=["a week", "leap day", "new year", "a whole year"],
)
def test_a_dated_closure_counts_its_days_month_by_month(first: date, last: date, expected: dict[int, float]) -> None:
    """Both days count, months keep their own length, and a winter may run over New Year."""
    shares = Closure.between(6, first, last).share_of_month

    assert shares == pytest.approx([expected.get(month, 0.0) for month in range(12)])


def test_a_dated_closure_hurts_its_own_month_only() -> None:
    """Six beds closed for eight days of January change January, and the year by January's share of the patients."""
    point = curve_with(BedChanges((Closure.between(6, date(2023, 1, 9), date(2023, 1, 16)),))).at(12)
    january = share(12) * 23 / 31 + share(6) * 8 / 31

    assert point.by_month == pytest.approx([january] + [share(12)] * 11, rel=1e-9)
    assert point.turn_away_probability == pytest.approx((31 * january + 333 * share(12)) / 364, rel=1e-9)


def test_a_winter_bay_opens_in_its_months() -> None:
    """Four beds more from December to February: those months read the curve four beds further on."""
    extra = (4, 4, 0, 0, 0, 0, 0, 0, 0, 0, 0, 4)
    curve = curve_with(BedChanges(extra_by_month=extra))

    for beds in (0, 12, int(curve.beds[-1])):
        expected = np.array([share(beds + more) for more in extra])
        assert curve.at(beds).by_month == pytest.approx(expected, rel=1e-9, abs=1e-15)
        assert curve.at(beds).turn_away_probability == pytest.approx(MONTH_DAYS @ expected / 364, rel=1e-9)


def test_a_summer_without_some_beds_ends_at_none() -> None:
    """Fewer beds in August: a count below the number closed reads as no beds that month."""
    curve = curve_with(BedChanges(extra_by_month=(0,) * 7 + (-5,) + (0,) * 4))

    assert curve.at(12).by_month[7] == pytest.approx(share(7), rel=1e-9)
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
    curve = curve_with(BedChanges(unassignable=missing))

    for beds in (12, 16):
        expected = sum(stats.poisson.pmf(k, missing) * share(max(beds - k, 0)) for k in range(60))
        assert curve.at(beds).turn_away_probability == pytest.approx(expected, rel=1e-9)
        assert expected > erlang_b(8.0, beds - missing)


def test_patients_of_a_closed_day_find_no_bed() -> None:
    """Closed at the weekend, a ward that 2 of 7 patients come to then turns those away, and the others as before."""
    weekdays = (True,) * 5 + (False,) * 2
    point = curve_with(BedChanges(open_weekdays=weekdays)).at(12)

    assert point.turn_away_probability == pytest.approx(2 / 7 + 5 / 7 * share(12), rel=1e-9)


def test_a_closed_day_on_which_nobody_comes_changes_no_share() -> None:
    """A ward whose patients all come from Monday to Friday reads the same closed at the weekend, with a note."""
    demand = Demand(2.0, STAY, weekday_factors=[1.4] * 5 + [0.0] * 2)
    closed = curve_with(BedChanges(open_weekdays=(True,) * 5 + (False,) * 2), demand)
    plain = curve_with(BedChanges(), demand)

    assert closed.turn_away_probability == pytest.approx(plain.turn_away_probability)
    assert any("Closed on some weekdays" in note for note in closed.notes)


def test_hours_over_full_are_mixed_over_hours() -> None:
    """Where nobody is turned away a closure adds hours over-full, and occupancy may pass one."""
    closure = Closure(6, (0.5,) + (0.0,) * 11)
    ward = Ward("Heron", 12, STEADY, "waits", bed_changes=BedChanges((closure,)))
    curve = ward.curve()
    # more patients than beds: Poisson about the load of 8
    january = (stats.poisson.sf(12, 8) + stats.poisson.sf(6, 8)) / 2
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
    raw = BedCurve("hand made", "waits", STEADY, beds, full, full, np.tile(full, (12, 1)), waits=waits)
    changes = BedChanges((Closure(1, (0.25,) * 12),), open_weekdays=(True,) * 6 + (False,))
    mixed = with_changing_beds(raw, changes, beds)

    expected = over(2.0)[3] * 0.75 + over(2.0)[2] * 0.25
    expected = 1 / 7 + 6 / 7 * expected
    assert mixed.waits.share_over(2.0)[3] == pytest.approx(expected)
    assert mixed.waits.share_over_by_month(2.0)[5, 3] == pytest.approx(expected)
    assert mixed.waits.mean_hours[3] == pytest.approx(0.75 * 1.0 + 0.25 * 3.0 + 24 / 7)
    assert mixed.waits.mean_hours[1] == np.inf


@pytest.mark.parametrize("stay_days", [1.0, 4.0, 10.0])
@pytest.mark.parametrize(("beds", "load"), [(30, 25.0), (12, 8.0)])
@pytest.mark.parametrize("closed_days", [4.0, 30.0])
def test_closures_are_a_little_too_low_as_the_note_says(
    stay_days: float, beds: int, load: float, closed_days: float
) -> None:
    """Two closures of six beds a year against an exact chain in which those already there stay on: 0–8 % too low."""
    open_days = 365 / 2 - closed_days
    exact = _exact_share_with_closures(load / stay_days, 1 / stay_days, (beds, beds - 6), (open_days, closed_days))
    changes = BedChanges((Closure.expected(6, 2.0, closed_days),))
    curve = curve_with(changes, Demand(load / stay_days, LengthOfStay(stay_days)))
    found = curve.at(beds).turn_away_probability

    assert 0.92 * exact <= found <= exact
    assert any("up to a twelfth more" in note for note in curve.notes)


def _exact_share_with_closures(
    arrivals: float, leaving: float, open_beds: tuple[int, int], days: tuple[float, float]
) -> float:
    """Solve the chain of (patients, closed or not): all times exponential, nobody admitted while as many as open beds."""
    size = open_beds[0] + 1
    flow = np.zeros((2 * size, 2 * size))
    for closed in (0, 1):
        for patients in range(size):
            here = closed * size + patients
            if patients < open_beds[closed]:
                flow[here, here + 1] = arrivals
            if patients:
                flow[here, here - 1] = patients * leaving
            flow[here, (1 - closed) * size + patients] = 1 / days[closed]
    balance = (flow - np.diag(flow.sum(axis=1))).T
    balance[-1] = 1.0
    chance = np.linalg.solve(balance, np.eye(2 * size)[-1]).reshape(2, size)
    return sum(chance[closed, open_beds[closed] :].sum() for closed in (0, 1))


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
        (lambda: Closure(0, (0.1,) * 12), "0 beds is not possible"),
        (lambda: Closure(1.5, (0.1,) * 12), "1.5 beds is not possible"),
        (lambda: Closure(4, (0.1,) * 11), "12 months, January first, not 11"),
        (lambda: Closure(4, (1.1,) + (0.0,) * 11), "1.1 of a month"),
        (lambda: Closure.expected(4, 40.0, 10.0), "40 closures a year of 10 days"),
        (lambda: Closure.expected(4, -1.0, 10.0), "-1 closures a year"),
        (lambda: Closure.expected(4, math.nan, 10.0), "nan closures a year"),
        (lambda: Closure.between(4, date(2025, 2, 1), date(2025, 1, 1)), "lasts 1 to 365 days"),
        (lambda: Closure.between(4, date(2025, 1, 1), date(2026, 2, 1)), "lasts 1 to 365 days"),
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
