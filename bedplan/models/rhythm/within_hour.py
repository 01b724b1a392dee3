"""Inside the hour: how many of those who came lately hold a bed at a given part of an hour, not on average over it.

A booked list fills many beds within its hour, and very short stays fill and empty a ward within theirs.
"""

from __future__ import annotations

from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np

from bedplan.models.rhythm.leaving import HOURS_A_YEAR, Leaving, beds_held, hours_held
from bedplan.models.rhythm.year import leaving_of, unbooked_by_hour, unbooked_load_by_hour

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models.value_objects.demand import Demand
    from bedplan.models.value_objects.stay import LengthOfStay

    Array = NDArray[np.float64]
    Counts = NDArray[np.int64]

_HOUR = 1.0 / 24.0
_LITTLE = 0.15
_NEGLIGIBLE = 1e-9
_MOST_PARTS = 24


@lru_cache(maxsize=64)
def looks(count: int) -> tuple[Array, Array]:
    """At which parts of an hour to look, and with which weights, so that the mean over the hour is exact or nearly?

    Both ``(count,)``. Source: Gauss 1814 (exact for polynomials up to degree 2 × count − 1).
    Checked by: tests/models/test_unlimited.py
    """
    places, weights = np.polynomial.legendre.leggauss(count)
    return (places + 1.0) / 2.0, weights / 2.0


def _bed_hours_by(stay: LengthOfStay, turnaround_hours: float, hours: Array) -> Array:
    """Return how many hours a bed is held on average within these hours of coming, ``∫ S`` up to them."""
    first = np.minimum(np.maximum(hours, 0.0), turnaround_hours)
    rest = np.maximum(hours - turnaround_hours, 0.0) * _HOUR
    return first + (stay.mean_days - stay.days_beyond(rest)) / _HOUR


@lru_cache(maxsize=128)
def _from_years_before(stay: LengthOfStay, leaving: Leaving) -> Array:
    """Return the share of those who came this many hours and one or more whole years ago who are still there."""
    if stay.days_beyond(HOURS_A_YEAR * _HOUR) < _NEGLIGIBLE * stay.mean_days:
        return np.zeros(HOURS_A_YEAR)
    all_years = hours_held(stay, leaving, HOURS_A_YEAR, at_end=True)[0]
    this_year = np.diff(_bed_hours_by(stay, leaving.turnaround_hours, np.arange(HOURS_A_YEAR + 1.0)))
    return np.maximum(all_years - this_year, 0.0)


def held_at(stay: LengthOfStay, leaving: Leaving, came: Counts, hours: Array) -> Array:
    """Which share of those who came evenly through one hour hold a bed this many hours after that hour began?

    ``came``: hour of the week in which they came; ``hours``, any shape that ``came`` broadcasts to. Those still to come
    don't count; ``hours`` stand for whole years more, too. Exact where a stay ends when it ends; where leaving has a rhythm, stays end evenly over their hour.

    Checked by: tests/models/test_unlimited.py
    """
    if not leaving.has_rhythm:
        by, before = (_bed_hours_by(stay, leaving.turnaround_hours, some) for some in (hours, hours - 1.0))
        return by - before + _from_years_before(stay, leaving)[hours.astype(np.int64) % HOURS_A_YEAR]
    at_end = hours_held(stay, leaving, HOURS_A_YEAR, at_end=True)
    whole = np.minimum(hours.astype(np.int64), at_end.shape[1] - 1)
    part = hours - whole
    later, gone = at_end[came, whole], 1.0 - at_end[came, 0]
    earlier = at_end[came, np.maximum(whole - 1, 0)]
    return np.where(
        hours < 1.0,
        (1.0 - gone) * part + 2.0 * gone * part * (1.0 - part),
        earlier + np.clip(part, 0.0, 1.0) * (later - earlier),
    )


@lru_cache(maxsize=128)
def parts_of_hour(demand: Demand) -> int:
    """At how many parts of each hour to look, so that unbooked patients' load changes little between them?

    Checked by: tests/models/test_unlimited.py
    """
    load = unbooked_load_by_hour(demand)
    change = np.abs(load - np.roll(load, 1)) / np.sqrt(np.maximum(load, 1.0))
    most = float(change.max())
    return 1 if most < _LITTLE else min(2 + int(2.0 * most), _MOST_PARTS)


@lru_cache(maxsize=32)
def unbooked_load_within(demand: Demand, count: int) -> Array:
    """How many beds do unbooked patients want at each part of each hour of the year? ``(count, 8736)``.

    Checked by: tests/models/test_unlimited.py
    """
    if count == 1:
        return unbooked_load_by_hour(demand)[None]
    arrivals, leaving, stay = unbooked_by_hour(demand), leaving_of(demand), demand.length_of_stay
    places, _ = looks(count)
    if leaving.has_rhythm:
        at_end = beds_held(arrivals, hours_held(stay, leaving, HOURS_A_YEAR, at_end=True))
        return np.roll(at_end, 1) + places[:, None] * (at_end - np.roll(at_end, 1))
    bed_hours = stay.mean_days / _HOUR + leaving.turnaround_hours
    load = np.empty((count, HOURS_A_YEAR))
    for part, place in enumerate(places):
        by = _bed_hours_by(stay, leaving.turnaround_hours, np.arange(-1, HOURS_A_YEAR) + place)
        held = np.diff(by)
        load[part] = beds_held(arrivals, held[None] + (bed_hours - by[-1]) / HOURS_A_YEAR)
    return load
