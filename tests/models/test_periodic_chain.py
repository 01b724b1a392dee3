"""The chain of a ward through a period, against full matrix exponentials, published values and Erlang's formula."""

from __future__ import annotations

import math

import numpy as np
import pytest

from bedplan.models import LengthOfStay, erlang_b
from bedplan.models.chains.periodic import Group, Rhythm, fullness, leaving_rates, merged
from bedplan.models.rhythm.leaving import HOURS_A_WEEK, Leaving, beds_held, hours_held
from tests.models.exact_week import Arrivals, exponential, turned_away

WEEK = np.array([1.2097, 1.4713, 1.3779, 1.0, 0.6221, 0.5287, 0.7903])
WILD = np.array([1.9, 1.6, 1.3, 0.9, 0.6, 0.3, 0.4])
EVEN = np.ones(7)
DAY = 1.0 - 0.7 * np.cos(2 * np.pi * (np.arange(24) - 3) / 24)
OFFICE = np.where((np.arange(24) >= 8) & (np.arange(24) < 18), 2.16, 0.1 * 24 / 14)
HOURS = np.arange(HOURS_A_WEEK)


def stays(mean_days: float) -> LengthOfStay:
    """Return exponential stays."""
    return LengthOfStay(mean_days, 1.0, "gamma")


def rhythm_of(per_hour: np.ndarray, stay: LengthOfStay, booked: tuple[Group, ...] = ()) -> Rhythm:
    """Return the rhythm of a ward with one level of demand; booked patients stay like the others."""
    coming = per_hour.copy()
    for group in booked:
        coming[group.hour] += group.patients * group.attends
    at_end = beds_held(coming, hours_held(stay, Leaving(), per_hour.size, at_end=True))
    return Rhythm(per_hour[:, None], at_end[:, None], booked)


def share_full(rhythm: Rhythm, beds: list[int]) -> np.ndarray:
    """Return the share of unbooked patients who find each of these wards full."""
    shares = fullness(rhythm, [np.array(beds)]).unbooked[0]
    return rhythm.unbooked[:, 0] @ shares / rhythm.unbooked.sum()


# kind of rhythm: weekdays, hours, mean stay, load, bed counts; the worst error of the chain, relative
EXACT_CASES = {
    "weekdays, 4 days": (WEEK, np.ones(24), 4.0, 40.0, (35, 45, 55, 66), 3e-4),
    "weekdays and hours, 4 days": (WEEK, DAY, 4.0, 40.0, (35, 45, 55, 66), 5e-4),
    "wild week and hours, 4 days": (WILD, DAY, 4.0, 40.0, (45, 60, 72), 1e-3),
    "hours, 1 day": (EVEN, DAY, 1.0, 40.0, (45, 50, 60), 1e-3),
    "office hours, 1 day": (EVEN, OFFICE, 1.0, 40.0, (45, 55, 66), 5e-3),
    "office hours, half a day": (EVEN, OFFICE, 0.5, 40.0, (45, 60, 72), 6e-3),
    "office hours, six hours": (EVEN, OFFICE, 0.25, 20.0, (24, 30, 35), 1e-3),
    "wild week, small ward": (WILD, OFFICE, 1.0, 4.0, (2, 4, 8), 1e-3),
    "weekdays, 30 days": (WEEK, np.ones(24), 30.0, 40.0, (45, 55), 2e-3),
}


@pytest.mark.parametrize("case", EXACT_CASES)
def test_the_chain_is_exact_for_exponential_stays(case: str) -> None:
    """Shares turned away match full matrix exponentials of the week, to the error of one step an hour."""
    weekdays, hours, mean_days, load, beds, worst = EXACT_CASES[case]
    per_hour = load / mean_days / 24.0 * np.outer(weekdays / weekdays.mean(), hours / hours.mean()).ravel()

    found = share_full(rhythm_of(per_hour, stays(mean_days)), list(beds))

    for share, count in zip(found, beds, strict=True):
        assert share == pytest.approx(turned_away(count, exponential(mean_days), Arrivals(per_hour))[0], rel=worst)


def test_published_weekly_and_yearly_waves() -> None:
    """Sine waves of arrivals, exponential 4-day stays: patients turned away as two exact solvers found.

    Source: Massey & Whitt 1994, Annals of Applied Probability 4(4) for the question; figures recomputed by a periodic
    Markov chain with two solvers: weekly 10 + 5 sin at 45 and 55 beds 7.835 % and 1.103 %, yearly 10 + 2 sin at 45
    beds 7.276 %. Erlang's formula at each hour's own load says 6.293 % and 0.854 % for the weekly wave.
    """
    turn = 2 * np.pi * (HOURS + 0.5) / HOURS_A_WEEK
    weekly = share_full(rhythm_of((10 + 5 * np.sin(turn)) / 24, stays(4.0)), [45, 55])
    days = np.arange(364)
    coming = 10 + 2 * np.sin(2 * np.pi * (days + 0.5) / 364)
    # beds wanted at the end of each day, Eick, Massey & Whitt 1993
    speed = 2 * math.pi / 364
    reply = np.sin(speed * (days + 1)) - 4 * speed * np.cos(speed * (days + 1))
    at_end = 40 + 8 / (1 + (4 * speed) ** 2) * reply
    yearly = share_full(Rhythm(coming[:, None], at_end[:, None]), [45])

    wave = 10 + 5 * np.sin(turn)
    load = beds_held(wave / 24, hours_held(stays(4.0), Leaving(), HOURS_A_WEEK))
    own_load = [wave @ erlang_b(load, beds) / wave.sum() for beds in (45, 55)]
    assert own_load == pytest.approx([0.06293, 0.00854], abs=6e-6)
    assert weekly == pytest.approx([0.07835, 0.01103], abs=6e-6)
    assert yearly == pytest.approx([0.07276], abs=6e-6)


def test_exponential_stays_leave_at_one_rate() -> None:
    """With exponential stays a bed comes free at 1/mean in every hour, whatever the rhythm of arrivals."""
    rates = leaving_rates(rhythm_of(10 / 24 * np.outer(WILD, DAY).ravel(), stays(4.0)))

    assert rates == pytest.approx(1 / 96, rel=1e-8)


@pytest.mark.parametrize("stay", [stays(4.0), LengthOfStay(4.0, 0.0), LengthOfStay(0.5, 1.5), LengthOfStay(9.0, 0.5)])
def test_without_a_rhythm_the_chain_is_erlangs_formula(stay: LengthOfStay) -> None:
    """At a steady rate only the mean stay matters, and the chain gives Erlang's share."""
    beds = [5, 20, 25, 30]
    found = share_full(rhythm_of(np.full(HOURS_A_WEEK, 20 / stay.mean_days / 24), stay), beds)

    assert found == pytest.approx(erlang_b(20.0, beds), rel=2e-5)


def test_stays_of_a_week_turn_a_weekly_rhythm_into_a_steady_ward() -> None:
    """When everyone stays seven days the ward wants the same beds all week, and Erlang's share is turned away."""
    per_hour = 5 / 24 * np.outer(WEEK, DAY).ravel() / (WEEK.mean() * DAY.mean())

    assert share_full(rhythm_of(per_hour, LengthOfStay(7.0, 0.0)), [38]) == pytest.approx(
        erlang_b(35.0, [38]), rel=1e-6
    )


def test_longer_steps_keep_who_comes_and_the_beds_wanted() -> None:
    """A week in steps of two hours, the last day hourly: the same patients and beds, the share within 2 %."""
    group = Group(61, 3, 0.9)
    hourly = rhythm_of(10 / 24 * np.outer(WEEK, DAY).ravel() / (WEEK.mean() * DAY.mean()), stays(4.0), (group,))
    starts = np.append(np.arange(0, 144, 2), np.arange(144, 168))
    longer = merged(hourly, starts)

    assert longer.unbooked.sum() == pytest.approx(hourly.unbooked.sum())
    assert longer.load_at_end[[0, 71, 72]] == pytest.approx(hourly.load_at_end[[1, 143, 144]])
    assert longer.booked == (group._replace(hour=30),)
    assert share_full(longer, [45, 55]) == pytest.approx(share_full(hourly, [45, 55]), rel=0.02)


def test_patients_in_the_beds_are_those_let_in() -> None:
    """The chain's own mean of beds in use = load × (1 − share turned away) for exponential stays (Little 1961)."""
    rhythm = rhythm_of(10 / 24 * np.outer(WEEK, DAY).ravel() / (WEEK.mean() * DAY.mean()), stays(4.0))
    beds = np.array([20, 40, 50, 60])
    full = fullness(rhythm, [beds])
    share = rhythm.unbooked[:, 0] @ full.unbooked[0] / rhythm.unbooked.sum()

    # the mean at the ends of the hours stands for the mean over the hours, to second order of an hour
    assert full.mean_in_use[0].mean(axis=0) == pytest.approx(40.0 * (1 - share), rel=1e-4)


@pytest.mark.parametrize("mean_days", [1.0, 3.84])
@pytest.mark.parametrize(
    ("slots", "worst"),
    [
        ((4, 4, 4, 4, 4, 0, 0), 1e-3),  # each slot is followed on its own
        ((8, 7, 5, 1, 1, 0, 0), 0.03),  # up to two slots share a moment
    ],
)
def test_booked_patients_come_one_by_one_through_their_hour(
    mean_days: float, slots: tuple[int, ...], worst: float
) -> None:
    """Shares of both groups, with booked patients who stay like the others, match full matrix exponentials."""
    per_hour = np.full(HOURS_A_WEEK, 4.0 / mean_days / 24.0)
    groups = tuple(Group(24 * day + 13, count, 0.95) for day, count in enumerate(slots) if count)
    rhythm = rhythm_of(per_hour, stays(mean_days), groups)
    coming = np.zeros(HOURS_A_WEEK)
    for group in groups:
        coming[group.hour] = group.patients * group.attends
    load = float(rhythm.load_at_end.mean())

    for beds in (int(load) + 2, int(load) + 6):
        full = fullness(rhythm, [np.array([beds])])
        unbooked = per_hour @ full.unbooked[0][:, 0] / per_hour.sum()
        booked = coming @ full.booked[0][:, 0] / coming.sum()
        exact = turned_away(beds, exponential(mean_days), Arrivals(per_hour, booked=groups))
        assert (unbooked, booked) == pytest.approx(exact, rel=worst)


def test_a_day_unit_with_enough_beds_turns_nobody_away() -> None:
    """Ten booked patients who stay exactly six hours: with 9 beds one in ten is turned away, with 10 nobody."""
    groups = tuple(Group(24 * day + 8, 10, 1.0) for day in range(5))
    rhythm = rhythm_of(np.zeros(HOURS_A_WEEK), LengthOfStay(0.25, 0.0), groups)
    full = fullness(rhythm, [np.array([9, 10])])

    assert full.booked[0][8] == pytest.approx([0.1, 0.0], abs=1e-9)
