"""Patients who stay anyway: how many want a bed in each hour if nobody is ever turned away, and when that is too many."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np

from bedplan.models.census.everyone import Watch, chance_of
from bedplan.models.census.groups import more_find_full_if_groups_differ
from bedplan.models.rhythm.found_full import FoundFull, group_of_hour, shares_full
from bedplan.models.rhythm.leaving import HOURS_A_WEEK, HOURS_A_YEAR
from bedplan.models.rhythm.year import (
    WEEKS,
    all_booked_in_week,
    month_of_hour,
    offered_load_by_hour,
    patients_wanted,
    unbooked_by_hour,
)
from bedplan.models.value_objects.bed_curve import BedCurve, bed_counts

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    from bedplan.models.value_objects.demand import Demand

    Array = NDArray[np.float64]
    Counts = NDArray[np.int64]

_BUSY = 0.05
_SMOOTH_NOTE = (
    "Arrivals smoother than chance: the number present is taken as binomial. Where 1 in 20 or more find the ward full the "
    "figure is up to a quarter too high; where fewer than 1 in 100 do, up to a quarter too low."
)
_GROUPS_IN_RHYTHM = ", and with a rhythm of the week or day the figure is at most 1 % too low and 3 % too high"
_MOST_COUNTS = 2_000


def unlimited_beds(demand: Demand, beds: ArrayLike) -> BedCurve:
    """For each bed count, which share of patients finds the ward full, if everyone stays anyway?

    Also the share of hours with more patients than beds, for the year and each month. Averaged over patients: who
    comes with others finds them there, and more come when the rate is high. Beds under turnaround count as wanted;
    occupancy counts patients only. Booked patients come at any moment of their hour, and each finds those of the list
    who came before. Exact for patients who come one by one, booked or not, and for groups of equal size at a steady
    rate; with a rhythm groups are within 1 % low and 3 % high. The notes say how far it may err for others.

    Source: Eick, Massey & Whitt 1993, Management Science 39(2); Gallivan & Utley 2005; Greenwood & Yule 1920; Daw &
        Pender 2019.
    Checked by: tests/models/test_unlimited.py
    """
    counts = bed_counts(beds)
    unbooked = _found_full(demand, counts, unbooked_by_hour(demand), "unbooked")
    booked = None
    if demand.booked:
        booked = _found_full(demand, counts, np.tile(all_booked_in_week(demand), WEEKS), "booked")
    overfull = chance_of(demand, counts + 1, Watch(np.ones(HOURS_A_YEAR), month_of_hour))
    return BedCurve(
        model="unlimited_beds",
        when_full="stays anyway",
        demand=demand,
        beds=counts,
        occupancy=np.where(counts > 0, patients_wanted(demand) / np.maximum(counts, 1), 0.0),
        notes=_notes(demand),
        overfull_share_of_hours=np.bincount(month_of_hour) @ overfull / HOURS_A_YEAR,
        overfull_by_month=overfull,
        **shares_full(unbooked, booked),
    )


def _found_full(demand: Demand, counts: Counts, comers: Array, who: Literal["unbooked", "booked"]) -> FoundFull:
    """Return who comes and who of them finds at least as many patients as beds; without beds, everyone."""
    patients = np.bincount(group_of_hour, weights=comers)
    shares = np.where(counts > 0, chance_of(demand, counts, Watch(comers, group_of_hour, who)), 1.0)
    return FoundFull(patients, patients[:, None] * shares)


def _notes(demand: Demand) -> tuple[str, ...]:
    """Say what is assumed of patients who come together, or spread out, and which way it errs."""
    if demand.arrivals_per_day == 0.0 or demand.clustering == 1.0:
        return ()
    if demand.clustering < 1.0:
        return (_SMOOTH_NOTE,)
    more = math.ceil(100.0 * more_find_full_if_groups_differ(demand))
    many = f"up to {more} % more" if more <= 100 else "more than twice as many"
    rhythm = "" if demand.with_changes(booked=()).is_steady else _GROUPS_IN_RHYTHM
    note = (
        f"Patients who come together: groups of equal size are assumed{rhythm}. If group sizes differ widely, {many} "
    )
    return (note + "find the ward full than this says, where 1 in 100 or more do.",)


@dataclass(frozen=True, slots=True, eq=False)
class Levels:
    """Beds wanted in each of some groups of hours: on average, on a busy day, and the chance of too many.

    ``mean`` ``(g,)`` beds; ``busy`` ``(g,)`` whole beds that are enough in 19 of 20 such hours. ``chances`` ``(g, k)``:
    chance of at least ``lowest``, ``lowest`` + 1 … beds wanted.
    """

    mean: Array
    busy: Counts
    lowest: int
    chances: Array

    def overfull(self, beds: int) -> Array:
        """With which chance are more beds wanted than this many, in each group? ``(g,)``."""
        place = beds + 1 - self.lowest
        if place < 0:
            return np.ones(self.mean.size)
        return self.chances[:, place] if place < self.chances.shape[1] else np.zeros(self.mean.size)


@dataclass(frozen=True, slots=True)
class BusyLevels:
    """Beds wanted through the day (24), the week (7), every hour of the week (168) and the year (12, January first)."""

    by_hour: Levels
    by_weekday: Levels
    by_hour_of_week: Levels
    by_month: Levels


def _at_all(counts: Counts, some: Counts, chances: Array) -> Array:
    """Read chances known at some counts, ``(g, m)``, at all of them."""
    if some.size == counts.size:
        return chances
    return np.stack([np.interp(counts, some, row) for row in chances])


def busy_levels(demand: Demand) -> BusyLevels:
    """How many beds are wanted on a usual and on a busy (1 in 20) hour: by hour, weekday, hour of the week and month?

    If nobody is ever turned away; the year's hours of each kind taken together, so seasons widen the hours' levels.

    Source: Eick, Massey & Whitt 1993; Gallivan & Utley 2005.
    Checked by: tests/models/test_unlimited.py
    """
    load = offered_load_by_hour(demand)
    highest = load.max() * (1.0 + 4.0 * demand.rate_variation)
    room = 10.0 * np.sqrt(highest * max(1.0, demand.clustering)) + 10.0 * demand.clustering + 10.0
    lowest = max(0, int(load.min() * max(0.0, 1.0 - 4.0 * demand.rate_variation) - room))
    counts = np.arange(lowest, int(highest + room) + 1)
    # In very large wards the chances are read between a few thousand counts.
    some = np.unique(np.linspace(counts[0], counts[-1], min(counts.size, _MOST_COUNTS)).astype(np.int64))
    hour_of_week = np.arange(HOURS_A_YEAR) % HOURS_A_WEEK
    evenly = np.ones(HOURS_A_YEAR)
    week = _at_all(counts, some, chance_of(demand, some, Watch(evenly, hour_of_week)))
    mean_of_week = load.reshape(WEEKS, HOURS_A_WEEK).mean(axis=0)
    months = _at_all(counts, some, chance_of(demand, some, Watch(evenly, month_of_hour)))
    mean_of_month = np.bincount(month_of_hour, weights=load) / np.bincount(month_of_hour)

    def levels(mean: Array, chances: Array) -> Levels:
        """Return the busy levels of some hours, averaged."""
        return Levels(mean, lowest + (chances > _BUSY).sum(axis=1) - 1, lowest, chances)

    days, means = week.reshape(7, 24, -1), mean_of_week.reshape(7, 24)
    return BusyLevels(
        levels(means.mean(axis=0), days.mean(axis=0)),
        levels(means.mean(axis=1), days.mean(axis=1)),
        levels(mean_of_week, week),
        levels(mean_of_month, months),
    )
