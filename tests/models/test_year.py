"""The hour-by-hour year against closed forms, printed values and stays followed one by one."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import integrate

from bedplan.models import BookedList, Demand, LengthOfStay, erlang_b, offered_load_by_hour
from bedplan.models.formulas.erlang import erlang_b_table
from bedplan.models.rhythm.leaving import HOURS_A_WEEK, HOURS_A_YEAR, Leaving, beds_held, hours_held
from bedplan.models.rhythm.load_grid import load_grid
from bedplan.models.rhythm.year import (
    arrivals_by_hour,
    beds_wanted,
    booked_load_in_week,
    mean_week,
    month_of_hour,
    patients_wanted,
    weekday_of_hour,
)

EXPONENTIAL = {"variation": 1.0, "shape": "gamma"}
WEEK = (1.2097, 1.4713, 1.3779, 1.0, 0.6221, 0.5287, 0.7903)
DAY = tuple(1.0 - 0.7 * math.cos(2 * math.pi * (hour - 3) / 24) for hour in range(24))
SEASON = tuple(1.0 + 0.3 * math.cos(2 * math.pi * month / 12) for month in range(12))
# Share of discharges in each hour from midnight on: an invented afternoon peak.
AFTERNOON = (0,) * 8 + (1, 2, 5, 8, 9, 10, 12, 13, 12, 10, 7, 5, 3, 2, 1, 0)


def exponential_load(arrivals: np.ndarray, mean_days: float) -> np.ndarray:
    """Return hour averages of beds wanted for exponential stays, solved step by step from a' = λ − a/m in closed form."""
    rate = 1.0 / (24.0 * mean_days)
    left = math.exp(-rate)
    at_start = np.zeros(arrivals.size)
    beds = 0.0
    for turn in range(2):
        if turn:  # what the first year leaves at its end decides where a year that repeats must start
            beds /= 1.0 - left**arrivals.size
        for hour, coming in enumerate(arrivals):
            at_start[hour] = beds
            beds = beds * left + coming / rate * (1.0 - left)
    steady = arrivals / rate
    return steady + (at_start - steady) * (1.0 - left) / rate


@pytest.mark.parametrize("mean_days", [0.1, 1.0, 4.0, 40.0])
def test_load_follows_the_closed_form_for_hourly_steps(mean_days: float) -> None:
    """Months, weekdays and hours together, exponential stays: every hour within a millionth of the closed form."""
    demand = Demand(10.0, LengthOfStay(mean_days, **EXPONENTIAL), SEASON, WEEK, DAY)

    expected = exponential_load(arrivals_by_hour(demand), mean_days)

    assert offered_load_by_hour(demand) == pytest.approx(expected, rel=1e-6)


@pytest.mark.parametrize(
    ("period_hours", "mean_days", "damping", "lag_days"),
    [
        # Eick, Massey & Whitt 1993, Management Science 39(2): damping 1/√(1 + (γm)²), lag atan(γm)/γ; values recomputed.
        (168, 1.0, 0.744182, 0.814938),
        (168, 2.0, 0.486635, 1.183784),
        (168, 4.0, 0.268309, 1.447374),
        (168, 5.0, 0.217484, 1.505753),
        (168, 7.0, 0.157177, 1.574163),
        (24, 4.0, 0.0397573, 0.243671),
    ],
)
def test_a_wave_of_arrivals_is_damped_and_delayed(
    period_hours: int, mean_days: float, damping: float, lag_days: float
) -> None:
    """A sine wave of arrivals comes out as a damped, later sine wave of beds, as the infinite-server theory says."""
    turn = 2 * np.pi * (np.arange(HOURS_A_WEEK) + 0.5) / period_hours
    held = hours_held(LengthOfStay(mean_days, **EXPONENTIAL), Leaving(), HOURS_A_WEEK)
    beds = beds_held(10.0 + 3.0 * np.sin(turn), held)
    wave = 2.0j * np.mean((beds - beds.mean()) * np.exp(-1j * turn))
    # A rate that is steady within each hour, and the average over an hour, take sin(x)/x each off a smooth wave.
    step = math.pi / period_hours
    stepped = (math.sin(step) / step) ** 2

    assert beds.mean() == pytest.approx(240.0 * mean_days)
    assert abs(wave) / (72.0 * mean_days * stepped) == pytest.approx(damping, rel=step**2 / 3)
    assert -np.angle(wave) / (2 * np.pi) * period_hours / 24.0 == pytest.approx(lag_days, abs=2e-3)


def test_a_stay_of_seven_days_cancels_a_weekly_rhythm() -> None:
    """When everyone stays exactly a week, as many leave as come: the same beds are wanted in every hour."""
    load = offered_load_by_hour(Demand(10.0, LengthOfStay(7.0, 0.0), weekday_factors=WEEK, hour_factors=DAY))

    assert load == pytest.approx(70.0, rel=1e-9)


@pytest.mark.parametrize(
    "stay",
    [
        LengthOfStay(4.0, 1.1),
        LengthOfStay(0.3, 0.6),
        LengthOfStay(2.0, 0.0),
        LengthOfStay(30.0, 1.4, "gamma"),
        LengthOfStay.measured([0, 1, 2, 5, 10], [1, 0.8, 0.5, 0.1, 0]),
        LengthOfStay.two_streams(0.3, LengthOfStay(1.0, 0.5), LengthOfStay(12.0, 0.9)),
    ],
)
def test_beds_held_k_hours_on_match_slow_integration(stay: LengthOfStay) -> None:
    """Averaged over the hour of coming and the hour of looking, for any shape of stay, by numerical integration."""
    turnaround_hours = 2.5
    held = hours_held(stay, Leaving(turnaround_hours=turnaround_hours), HOURS_A_YEAR)[0]

    def bed_kept(hours: float) -> float:
        return float(stay.survival(max(hours - turnaround_hours, 0.0) / 24.0)) if hours > turnaround_hours else 1.0

    for k in (1, 3, 20, 60, 200):
        # two uniform moments within hours k apart: their difference is spread like a tent
        corners = [turnaround_hours, turnaround_hours + 24 * stay.mean_days]
        expected = sum(
            integrate.quad(
                lambda hours, k=k: (1 - abs(hours - k)) * bed_kept(hours),
                *ends,
                points=[one for one in corners if ends[0] < one < ends[1]] or None,
                epsabs=1e-10,
            )[0]
            for ends in ((k - 1, k), (k, k + 1))
        )
        # stays of more than a year meet themselves again
        expected += sum(bed_kept(k + HOURS_A_YEAR * years) for years in range(1, 12))
        assert held[k] == pytest.approx(expected, abs=1e-7)
    assert held.sum() == pytest.approx(24 * stay.mean_days + turnaround_hours, rel=1e-9)


@pytest.mark.parametrize("mean_days", [0.02, 5.0, 400.0, 3650.0])
@pytest.mark.parametrize("variation", [0.0, 1.0, 3.0])
def test_the_years_mean_is_arrivals_times_stay(mean_days: float, variation: float) -> None:
    """However long and uneven the stays, the year's mean load is arrivals × mean stay; stays of years wrap around."""
    booked = BookedList((3, 1, 4, 1, 5, 0, 0), LengthOfStay(2.5, 0.7), 9, 0.9)
    demand = Demand(2.0, LengthOfStay(mean_days, variation), SEASON, WEEK, DAY, booked=(booked,))

    load = offered_load_by_hour(demand)

    assert load.shape == (HOURS_A_YEAR,)
    assert load.mean() == pytest.approx(2.0 * mean_days + 2.0 * 0.9 * 2.5, rel=1e-9)


def test_the_year_starts_on_a_monday_in_january_and_keeps_its_rates() -> None:
    """Hour 0 is Monday 00:00 in January; the mean is exactly the daily rate, booked patients come in their hour."""
    booked = BookedList((8, 7, 5, 1, 1, 0, 0), LengthOfStay(3.5, 0.5), 13, 0.95)
    demand = Demand(6.0, LengthOfStay(4.0), SEASON, WEEK, DAY, booked=(booked,))
    arrivals = arrivals_by_hour(demand)

    assert (weekday_of_hour[0], month_of_hour[0], month_of_hour[-1]) == (0, 0, 11)
    # days of each month in a 365-day year, 31 December left out
    assert np.bincount(month_of_hour).tolist() == [24 * d for d in (31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 30)]
    assert arrivals.mean() * 24 == pytest.approx(6.0 + 22 * 0.95 / 7, rel=1e-12)
    assert arrivals[13] - 8 * 0.95 == pytest.approx(arrivals[12] * DAY[13] / DAY[12], rel=1e-9)
    assert arrivals[24 * 1 + 5] / arrivals[5] == pytest.approx(WEEK[1] / WEEK[0], rel=1e-9)
    # the first Monday of January against the last Monday of June (day 175): July is half a year from January
    assert arrivals[0] / arrivals[24 * 7 * 26] == pytest.approx(SEASON[0] / SEASON[6], rel=1e-9)


def test_turnaround_holds_beds_but_not_patients() -> None:
    """Cleaning for 6 hours after each of 10 stays a day holds 2.5 more beds; patients present stay the same."""
    demand = Demand(10.0, LengthOfStay(4.0, 1.1), weekday_factors=WEEK, turnaround_hours=6.0)

    assert offered_load_by_hour(demand).mean() == pytest.approx(42.5, rel=1e-9)
    assert (beds_wanted(demand), patients_wanted(demand)) == pytest.approx((42.5, 40.0), rel=1e-9)
    by_the_clock = demand.with_changes(discharge_hours=AFTERNOON)
    alone = offered_load_by_hour(by_the_clock.with_changes(turnaround_hours=0.0)).mean()
    assert patients_wanted(by_the_clock) == pytest.approx(alone, rel=1e-5)


def followed_one_by_one(demand: Demand, hours_of_week: np.ndarray) -> tuple[np.ndarray, float]:
    """Return patients present in the middle of some hours of the week, and mean days stayed, one stay at a time.

    Every hour of arrival × 400 stays. Chances (minute of arrival, stay, hour and minute of discharge, slip) are spread
    evenly by multiples of square roots of primes, so nothing is drawn.
    """
    number = np.arange(HOURS_A_WEEK * 400)
    minute, stay, clock, later, slip = (np.sqrt(prime) * number % 1.0 for prime in (2, 3, 5, 7, 11))
    coming = number // 400
    start = (coming + minute) / 24.0
    end = start + demand.length_of_stay.quantile(stay)
    if demand.discharge_hours:
        hour = np.searchsorted(np.cumsum(demand.discharge_hours), clock * 0.999999)
        moved = np.floor(end) + (hour + later) / 24.0
        end = np.where(moved > start, moved, end)
    weekday = np.floor(end) % 7
    chance = np.where(weekday == 5, demand.weekend_slip[0], np.where(weekday == 6, demand.weekend_slip[1], 0.0))
    end = np.where(slip < chance, end + 7 - weekday, end)
    patients = mean_week(demand).unbooked[coming] / 400
    here = (hours_of_week + 0.5) / 24.0 + 7 * np.arange(int(end.max() // 7) + 2)[:, None]
    first_come = np.argsort(start)
    came = np.interp(here, start[first_come], np.cumsum(patients[first_come]), left=0.0)
    first_left = np.argsort(end)
    left = np.interp(here, end[first_left], np.cumsum(patients[first_left]), left=0.0)
    return (came - left).sum(axis=0), float(patients @ (end - start)) / patients.sum()


LEAVING_RHYTHMS = {
    "discharge hours": {"discharge_hours": AFTERNOON},
    "weekend slip": {"weekend_slip": (0.35, 0.45)},
    "both": {"discharge_hours": AFTERNOON, "weekend_slip": (0.35, 0.45)},
    "mornings, all slip": {"discharge_hours": (0,) * 9 + (1,) + (0,) * 14, "weekend_slip": (1.0, 1.0)},
}


@pytest.mark.parametrize("stay", [LengthOfStay(4.0, 1.0), LengthOfStay(0.6, 0.8)])
@pytest.mark.parametrize("rhythm", LEAVING_RHYTHMS)
def test_hours_of_leaving_match_stays_followed_one_by_one(rhythm: str, stay: LengthOfStay) -> None:
    """Patients present through the week and the mean stay, against 67,200 stays each moved by the rule on its own."""
    demand = Demand(10.0, stay, weekday_factors=WEEK, hour_factors=DAY, **LEAVING_RHYTHMS[rhythm])
    hours = np.arange(1, HOURS_A_WEEK, 5)

    present, mean_days = followed_one_by_one(demand, hours)

    assert mean_week(demand).unbooked_load[hours] == pytest.approx(present, rel=0.02, abs=0.05)
    assert patients_wanted(demand) == pytest.approx(10.0 * mean_days, rel=2e-3)
    # without seasons each week of the year is the mean week
    assert offered_load_by_hour(demand)[168:336] == pytest.approx(mean_week(demand).unbooked_load, rel=1e-4)


def test_discharge_rounds_make_a_midday_peak_and_slips_a_monday_peak() -> None:
    """Between midnight and the first discharges at 8 nobody leaves, so the ward fills; after a weekend, most of all."""
    rounds = Demand(10.0, LengthOfStay(4.0, 1.0), hour_factors=DAY, discharge_hours=AFTERNOON)
    through_day = mean_week(rounds).unbooked_load_at_end.reshape(7, 24).mean(axis=0)
    slips = mean_week(rounds.with_changes(weekend_slip=(0.35, 0.45))).unbooked_load

    came_by_eight = 10.0 * sum(rounds.hour_factors[:8]) / 24.0
    # hour 23 ends at midnight; a stay that ends before its round may still end by night
    assert through_day[7] - through_day[23] == pytest.approx(came_by_eight, rel=0.03)
    assert through_day.argmax() in range(9, 15)
    assert slips.argmax() in range(8, 15)


def test_discharging_two_hours_earlier_saves_an_hour_sum_of_beds() -> None:
    """Ten discharges a day, two hours earlier, is worth 20/24 of a bed on average (Little 1961)."""
    late = Demand(10.0, LengthOfStay(6.0, 0.4), discharge_hours=AFTERNOON)
    early = late.with_changes(discharge_hours=AFTERNOON[2:] + AFTERNOON[:2])

    # a stay may not end before it starts, which takes a little off the shortest stays' gain
    assert patients_wanted(late) - patients_wanted(early) == pytest.approx(20.0 / 24.0, rel=5e-3)


def test_booked_beds_follow_the_list_through_the_week() -> None:
    """Beds of a booked list: each week's slots × chance to attend × chance to still be there, added up one by one."""
    stay = LengthOfStay(3.5, 0.5)
    booked = BookedList((8, 7, 5, 1, 1, 0, 0), stay, 13, 0.95)
    load = booked_load_in_week(Demand(0.0, LengthOfStay(4.0), booked=(booked,)))

    # in the middle of Thursday 20:00-21:00, for someone who came in the middle of the 13th hour of each earlier day
    since = (3 * 24 + 20 - (np.arange(-60, 4) * 24 + 13)) / 24.0
    patients = 0.95 * np.array([booked.per_weekday[day % 7] for day in range(-60, 4)])
    assert load[3 * 24 + 20] == pytest.approx(float(patients @ stay.survival(since)), rel=1e-4)


@pytest.mark.parametrize("load", [0.3, 8.0, 45.0, 300.0])
def test_the_grid_of_loads_stands_for_every_hour(load: float) -> None:
    """Erlang's share averaged over each month on the grid is within a millionth of averaging all 8,736 hours."""
    demand = Demand(load / 2.0, LengthOfStay(2.0, 0.8), SEASON, WEEK, DAY)
    loads, arrivals = offered_load_by_hour(demand), arrivals_by_hour(demand)
    counts = np.unique(np.round(load * np.array([0.0, 0.5, 0.9, 1.0, 1.2, 1.6]) + np.array([0, 0, 1, 2, 4, 9]))).astype(
        int
    )

    grid = load_grid(loads, arrivals, month_of_hour, 12)
    found = grid.weights @ erlang_b_table(grid.loads, counts).T / grid.weights.sum(axis=1)[:, None]

    for column, count in enumerate(counts):
        every_hour = erlang_b(loads, count)
        slow = np.bincount(month_of_hour, weights=arrivals * every_hour) / np.bincount(month_of_hour, weights=arrivals)
        assert found[:, column] == pytest.approx(slow, abs=1e-6)
