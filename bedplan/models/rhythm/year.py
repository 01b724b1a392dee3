"""The hour-by-hour year: who comes in each hour, and how many beds they want.

The year has 52 weeks: it starts Monday 00:00 in the first week of January and repeats for ever. Its months are those
of a 365-day year without 31 December, in whole days. It is there for the rhythm only.
"""

from __future__ import annotations

from functools import lru_cache
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from bedplan.models.rhythm.leaving import HOURS_A_WEEK, HOURS_A_YEAR, Leaving, beds_held, hours_held

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models.value_objects.demand import BookedList, Demand

    Array = NDArray[np.float64]

MONTH_DAYS = (31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 30)
MONTHS, WEEKDAYS = 12, 7
WEEKS = HOURS_A_YEAR // HOURS_A_WEEK
YEAR_DAYS = HOURS_A_YEAR // 24


def _fixed(array: NDArray[np.generic]) -> NDArray[np.generic]:
    """Make an array read-only: it is shared by everyone who asks."""
    array.setflags(write=False)
    return array


hour_of_day = _fixed(np.arange(HOURS_A_YEAR) % 24)
weekday_of_hour = _fixed(np.arange(HOURS_A_YEAR) // 24 % WEEKDAYS)
month_of_hour = _fixed(np.repeat(np.arange(MONTHS), 24 * np.array(MONTH_DAYS)))
month_of_day, weekday_of_day = month_of_hour[::24], weekday_of_hour[::24]


def leaving_of(demand: Demand) -> Leaving:
    """When do this ward's beds come free?

    Checked by: tests/models/test_year.py
    """
    return Leaving(demand.discharge_hours, demand.weekend_slip, demand.turnaround_hours)


def rhythm_of_week(demand: Demand) -> Array:
    """How much busier than the mean hour is each hour of the week, Monday 00:00 first? ``(168,)``, mean 1.

    Checked by: tests/models/test_year.py
    """
    return np.outer(demand.weekday_factors, demand.hour_factors).ravel()


@lru_cache(maxsize=256)
def unbooked_by_hour(demand: Demand) -> Array:
    """How many patients come unbooked in each hour of the year? ``(8736,)``, adding up to 364 days' arrivals.

    Checked by: tests/models/test_year.py
    """
    factors = np.tile(rhythm_of_week(demand), WEEKS) * np.array(demand.month_factors)[month_of_hour]
    return _fixed(demand.arrivals_per_day / 24.0 * factors / factors.mean())


def _booked_in_week(booked: BookedList) -> Array:
    """How many patients does a booked list bring in each hour of the week, on average? ``(168,)``."""
    week = np.zeros((7, 24))
    week[:, booked.hour] = np.array(booked.per_weekday) * booked.attends
    return week.ravel()


def all_booked_in_week(demand: Demand) -> Array:
    """How many patients do all booked lists bring in each hour of the week, on average? ``(168,)``.

    Checked by: tests/models/test_year.py
    """
    return sum((_booked_in_week(one) for one in demand.booked), np.zeros(HOURS_A_WEEK))


def arrivals_by_hour(demand: Demand) -> Array:
    """How many patients come in each hour of the year, booked ones included? ``(8736,)``, read-only.

    Checked by: tests/models/test_year.py
    """
    return _fixed(unbooked_by_hour(demand) + np.tile(all_booked_in_week(demand), WEEKS))


@lru_cache(maxsize=256)
def unbooked_load_by_hour(demand: Demand) -> Array:
    """How many beds do unbooked patients want in each hour of the year? ``(8736,)``, turnaround included.

    Checked by: tests/models/test_year.py
    """
    return _fixed(
        beds_held(unbooked_by_hour(demand), hours_held(demand.length_of_stay, leaving_of(demand), HOURS_A_YEAR))
    )


def booked_load_in_week(demand: Demand, *, at_end: bool = False) -> Array:
    """How many beds do booked patients want in each hour of the week, on average, or at its end? ``(168,)``.

    Turnaround included.

    Checked by: tests/models/test_year.py
    """
    load, leaving = np.zeros(HOURS_A_WEEK), leaving_of(demand)
    for one in demand.booked:
        load += beds_held(_booked_in_week(one), hours_held(one.length_of_stay, leaving, HOURS_A_WEEK, at_end=at_end))
    return _fixed(load)


def offered_load_by_hour(demand: Demand) -> Array:
    """How many beds are wanted in each hour of the year, on average, if nobody is ever turned away?

    ``(8736,)`` read-only hour averages of the 52-week year that starts Monday 00:00 in the first week of January and
    repeats for ever; booked patients included, and the turnaround after each stay. Exact for arrivals at a steady
    rate within each hour; the hours patients leave at, and discharges that slip past the weekend, follow
    ``demand.discharge_hours`` and ``demand.weekend_slip``.

    Source: Eick, Massey & Whitt 1993, Management Science 39(2).
    Checked by: tests/models/test_year.py
    """
    return _fixed(unbooked_load_by_hour(demand) + np.tile(booked_load_in_week(demand), WEEKS))


class Week(NamedTuple):
    """One week that repeats for ever at the year's mean level, each ``(168,)``, Monday 00:00 first.

    ``unbooked`` and ``booked`` patients who come in each hour; the beds each group wants on average in each hour, and
    at its end.
    """

    unbooked: Array
    booked: Array
    unbooked_load: Array
    booked_load: Array
    unbooked_load_at_end: Array
    booked_load_at_end: Array


@lru_cache(maxsize=256)
def mean_week(demand: Demand) -> Week:
    """What does a week without seasons look like?

    Checked by: tests/models/test_year.py
    """
    unbooked = demand.arrivals_per_day / 24.0 * rhythm_of_week(demand)
    leaving, stay = leaving_of(demand), demand.length_of_stay
    return Week(
        unbooked,
        all_booked_in_week(demand),
        beds_held(unbooked, hours_held(stay, leaving, HOURS_A_WEEK)),
        booked_load_in_week(demand),
        beds_held(unbooked, hours_held(stay, leaving, HOURS_A_WEEK, at_end=True)),
        booked_load_in_week(demand, at_end=True),
    )


def beds_wanted(demand: Demand) -> float:
    """How many beds would be held on average over the year, turnaround included, if nobody were ever turned away?

    Arrivals × the time each holds a bed, where the stay may be moved by the hours patients leave at.

    Checked by: tests/models/test_year.py
    """
    if leaving_of(demand).has_rhythm:
        return float(offered_load_by_hour(demand).mean())
    return demand.offered_load + demand.total_arrivals_per_day * demand.turnaround_hours / 24.0


def patients_wanted(demand: Demand) -> float:
    """How many patients would be present on average over the year? As :func:`beds_wanted`, without the turnaround.

    Checked by: tests/models/test_year.py
    """
    return max(beds_wanted(demand) - demand.total_arrivals_per_day * demand.turnaround_hours / 24.0, 0.0)
