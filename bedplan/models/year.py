"""The hour-by-hour year: who comes in each hour, and how many beds they want.

The year has 52 weeks: it starts Monday 00:00 in the first week of January and repeats for ever. Its months are those
of a 365-day year without 31 December, in whole days. It is there for the rhythm only.
"""

from __future__ import annotations

from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models.demand import BookedList, Demand
    from bedplan.models.stay import LengthOfStay

    Array = NDArray[np.float64]

HOURS_A_WEEK = 168
HOURS_A_YEAR = 52 * HOURS_A_WEEK
MONTH_DAYS = (31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 30)
_MOST_YEARS = 5
_HOUR = 1.0 / 24.0


def _fixed(array: NDArray[np.generic]) -> NDArray[np.generic]:
    """Make an array read-only: it is shared by everyone who asks."""
    array.setflags(write=False)
    return array


hour_of_day = _fixed(np.arange(HOURS_A_YEAR) % 24)
weekday_of_hour = _fixed(np.arange(HOURS_A_YEAR) // 24 % 7)
month_of_hour = _fixed(np.repeat(np.arange(12), 24 * np.array(MONTH_DAYS)))


def rhythm_of_week(demand: Demand) -> Array:
    """How much busier than the mean hour is each hour of the week, Monday 00:00 first? ``(168,)``, mean 1."""
    return np.outer(demand.weekday_factors, demand.hour_factors).ravel()


@lru_cache(maxsize=256)
def unbooked_by_hour(demand: Demand) -> Array:
    """How many patients come unbooked in each hour of the year? ``(8736,)``, adding up to 364 days' arrivals."""
    factors = np.tile(rhythm_of_week(demand), 52) * np.array(demand.month_factors)[month_of_hour]
    return _fixed(demand.arrivals_per_day * _HOUR * factors / factors.mean())


def booked_in_week(booked: BookedList) -> Array:
    """How many patients does a booked list bring in each hour of the week, on average? ``(168,)``."""
    week = np.zeros((7, 24))
    week[:, booked.hour] = np.array(booked.per_weekday) * booked.attends
    return week.ravel()


def arrivals_by_hour(demand: Demand) -> Array:
    """How many patients come in each hour of the year, booked ones included? ``(8736,)``, read-only.

    Checked by: tests/models/test_year.py
    """
    booked = sum((booked_in_week(one) for one in demand.booked), np.zeros(HOURS_A_WEEK))
    return _fixed(unbooked_by_hour(demand) + np.tile(booked, 52))


def _held_beyond(stay: LengthOfStay, turnaround_days: float, days: Array) -> tuple[Array, Array]:
    """Return E and E2 of the days a bed is held, stay and then turnaround."""
    rest = np.maximum(days - turnaround_days, 0.0)
    ahead = np.maximum(turnaround_days - days, 0.0)
    beyond, squares = stay.days_beyond(rest), stay.squared_days_beyond(rest)
    return beyond + ahead, squares + beyond * ahead + ahead**2 / 2.0


@lru_cache(maxsize=512)
def hours_held(stay: LengthOfStay, turnaround_hours: float, period: int) -> Array:
    """Which share of those who came k hours ago still hold a bed? ``(period,)``, earlier periods folded onto it.

    Averaged over both hours, exactly, for arrivals at a steady rate within an hour: second differences of the mean
    square of the days beyond. Adds up to the mean hours a bed is held.

    Checked by: tests/models/test_year.py
    """
    turnaround_days = turnaround_hours * _HOUR
    longest = period * max(1, _MOST_YEARS * HOURS_A_YEAR // period)
    horizon = period
    while horizon < longest and stay.days_beyond(max(horizon * _HOUR - turnaround_days, 0.0)) > 1e-15 * stay.mean_days:
        horizon = min(2 * horizon, longest)
    beyond, squares = _held_beyond(stay, turnaround_days, np.arange(horizon + 1) * _HOUR)
    held = np.empty(horizon)
    held[0] = (beyond[0] * _HOUR - squares[0] + squares[1]) / _HOUR**2
    held[1:] = (squares[:-2] - 2.0 * squares[1:-1] + squares[2:]) / _HOUR**2
    # What is left after the horizon is so smooth that it is spread evenly.
    left_over = (beyond[0] / _HOUR - held.sum()) / period
    return _fixed(held.reshape(-1, period).sum(axis=0) + left_over)


def beds_held(arrivals: Array, held: Array) -> Array:
    """How many beds do these arrivals hold in each hour, if the period repeats for ever? Last axis is the hours.

    Source: Eick, Massey & Whitt 1993, Management Science 39(2).
    """
    period = held.size
    return np.fft.irfft(np.fft.rfft(arrivals) * np.fft.rfft(held), period)


@lru_cache(maxsize=256)
def unbooked_load_by_hour(demand: Demand) -> Array:
    """How many beds do unbooked patients want in each hour of the year? ``(8736,)``."""
    held = hours_held(demand.length_of_stay, demand.turnaround_hours, HOURS_A_YEAR)
    return _fixed(np.maximum(beds_held(unbooked_by_hour(demand), held), 0.0))


@lru_cache(maxsize=256)
def booked_load_in_week(demand: Demand) -> Array:
    """How many beds do booked patients want in each hour of the week, on average? ``(168,)``."""
    load = np.zeros(HOURS_A_WEEK)
    for one in demand.booked:
        held = hours_held(one.length_of_stay, demand.turnaround_hours, HOURS_A_WEEK)
        load += np.maximum(beds_held(booked_in_week(one), held), 0.0)
    return _fixed(load)


def offered_load_by_hour(demand: Demand) -> Array:
    """How many beds are wanted in each hour of the year, on average, if nobody is ever turned away?

    ``(8736,)`` read-only hour averages of the 52-week year that starts Monday 00:00 in the first week of January and
    repeats for ever; booked patients included, and the turnaround after each stay. Exact for arrivals at a steady
    rate within each hour.

    Source: Eick, Massey & Whitt 1993, Management Science 39(2).
    Checked by: tests/models/test_year.py
    """
    return _fixed(unbooked_load_by_hour(demand) + np.tile(booked_load_in_week(demand), 52))
