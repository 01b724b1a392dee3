"""Beds that change: closures, winter bays, five-day wards, and beds nobody may be put in.

One rule for all of them: a bed that closes takes no new patient, and a patient who is in it stays until the stay ends.
So a ward may hold more patients than it has beds open; somebody is let in once fewer are in than are open.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bedplan.errors import ImpossibleFigure
from bedplan.models import Closure
from bedplan.models.chains.settling import AtRandom, shares_in_force
from bedplan.models.rhythm.year import MONTHS, WEEKDAYS, YEAR_DAYS, arrivals_by_hour, month_of_day, weekday_of_day
from bedplan.models.value_objects.figures import all_of_kind, listed, number, whole

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models import Demand

    Array = NDArray[np.float64]
    Counts = NDArray[np.int64]

MOST_CHANGE = 2_000
_MOST_IN_FORCE = 20.0
_MIXED = {
    "leaves": "each month mixes the curve at each open bed count, and whoever is in a bed stays until the stay ends. "
    "Against simulations up to 1 in 20 too low over the year, 1 in 8 in a closure's own month with stays spread widely; "
    "up to a third too high there for stays all alike, twice for booked patients alone.",
    "waits": "each month mixes the curve at each open bed count, as if the ward settled at once, and adds the time that "
    "queues left over take to go. Against simulations up to a half too high over the year, twice in a closure's own "
    "month.",
    "stays anyway": "each month mixes the curve at each open bed count.",
}


def _extra_beds(values: object, count: int, said: str) -> tuple[int, ...]:
    """Return extra beds for each month or weekday, or say what is wrong."""
    given = listed(values, f"Extra beds need {count} {said}")
    if len(given) != count:
        raise ImpossibleFigure(f"Extra beds need {count} {said}, but {len(given)} were given.")
    limits, allowed = (-MOST_CHANGE, MOST_CHANGE), "give whole numbers, below 0 for fewer"
    return tuple(whole("{} extra beds", beds, limits, allowed) for beds in given)


@dataclass(frozen=True, slots=True)
class BedChanges:
    """How do a ward's open beds differ from the count that is read off its curve?

    ``closures``, on their dates each year or at random; ``extra_by_month`` (12,) beds more (or fewer) open in each
    month, January first, ``extra_by_weekday`` (7,) on each weekday, Monday first, both added; ``open_weekdays`` (7,):
    on the others nobody is let in, and who is there stays; ``unassignable`` beds, on average, that are empty but that
    nobody may be put in (single-sex bays, isolation): their number is taken to vary as Poisson counts do, each for a
    mean stay.

    Raises:
        ImpossibleFigure: a figure outside its meaning, or a list of another length.

    Checked by: tests/decision/test_changing_beds.py
    """

    closures: tuple[Closure, ...] = ()
    extra_by_month: tuple[int, ...] = (0,) * MONTHS
    open_weekdays: tuple[bool, ...] = (True,) * WEEKDAYS
    unassignable: float = 0.0
    extra_by_weekday: tuple[int, ...] = (0,) * WEEKDAYS

    def __post_init__(self) -> None:
        """Check every figure once, here."""
        put = object.__setattr__
        put(self, "extra_by_month", _extra_beds(self.extra_by_month, MONTHS, "months, January first"))
        put(self, "extra_by_weekday", _extra_beds(self.extra_by_weekday, WEEKDAYS, "weekdays, Monday first"))
        wanted = "A ward needs 7 weekdays, Monday first, each open or not, and is open on one of them at least"
        weekdays = listed(self.open_weekdays, wanted)
        if len(weekdays) != WEEKDAYS or not any(weekdays) or not all(one in (True, False) for one in weekdays):
            raise ImpossibleFigure(f"{wanted}, but {self.open_weekdays!r} was given.")
        put(self, "open_weekdays", tuple(bool(is_open) for is_open in weekdays))
        said, allowed = "{} beds nobody may be put in", f"give 0 to {MOST_CHANGE:,}, on average"
        put(self, "unassignable", number(said, self.unassignable, (0.0, MOST_CHANGE), allowed))
        put(self, "closures", all_of_kind(self.closures, Closure, "Closures are a tuple of Closure"))
        for one in self.closures:
            if one.from_day is not None and not (one.from_day + 1 <= YEAR_DAYS and one.days <= YEAR_DAYS):
                raise ImpossibleFigure(f"A closure from day {one.from_day:g} for {one.days:g} days is not in a year.")
            if one.per_year * one.days / 365.0 > _MOST_IN_FORCE:
                raise ImpossibleFigure(
                    f"{one.per_year:g} closures a year of {one.days:g} days each is not possible: "
                    f"at most {_MOST_IN_FORCE:g} may be in force at once, on average."
                )

    @property
    def is_neutral(self) -> bool:
        """Whether the open beds are simply the count that is read off the curve."""
        changes = (self.closures, any(self.extra_by_month), any(self.extra_by_weekday), self.unassignable)
        return not any(changes) and all(self.open_weekdays)

    @property
    def extra_by_day(self) -> Counts:
        """How many beds more or fewer are open on each day of the 364-day year, closed weekdays aside? ``(364,)``."""
        extra = np.array(self.extra_by_month)[month_of_day] + np.array(self.extra_by_weekday)[weekday_of_day]
        for one in self.closures:
            if one.from_day is not None:
                extra[(int(one.from_day) + np.arange(math.ceil(one.days))) % YEAR_DAYS] -= one.beds
        return extra

    @property
    def is_open_by_day(self) -> NDArray[np.bool_]:
        """On which days of the 364-day year does the ward take anybody in? ``(364,)``."""
        return np.array(self.open_weekdays)[weekday_of_day]

    def beds_by_day(self, beds: Counts) -> Counts:
        """How many beds are open on each day, if a ward of these beds starts from them? ``(n,)`` -> ``(364, n)``."""
        return np.where(self.is_open_by_day[:, None], np.maximum(beds + self.extra_by_day[:, None], 0), 0)

    def at_random(self, stay_days: float) -> tuple[AtRandom, ...]:
        """Which beds go out of use at random? Those nobody may be put in for a mean stay each."""
        kinds = [AtRandom(one.beds, one.per_year * one.days / 365.0, one.days) for one in self.closures if one.per_year]
        return (*kinds, AtRandom(1, self.unassignable, stay_days)) if self.unassignable else tuple(kinds)

    def out_of_use(self) -> tuple[Counts, Array]:
        """How many beds are out of use at random, and for which share of time? Each kind independent of the others."""
        shares = np.ones(1)
        for one in self.at_random(1.0):
            in_force = shares_in_force(one.mean_in_force)
            spread = np.zeros((in_force.size - 1) * one.beds + 1)
            spread[:: one.beds] = in_force
            shares = np.convolve(shares, spread)
        some = np.flatnonzero(shares > 0)
        return some, shares[some]

    @property
    def most_out_of_use(self) -> int:
        """The most beds worth allowing for when a curve is drawn: closures at once, and missing beds."""
        most = -int(min(0, self.extra_by_day.min()))
        for one in self.at_random(1.0):
            most += one.beds * max(1, math.ceil(one.mean_in_force + 3.0 * math.sqrt(one.mean_in_force)))
        return most

    def notes(self, when_full: str) -> tuple[str, ...]:
        """Say what was done, and which way it errs."""
        said = []
        if self.closures or any(self.extra_by_month) or any(self.extra_by_weekday):
            said.append(f"Open beds change: {_MIXED.get(when_full, _MIXED['stays anyway'])}")
        if self.unassignable:
            said.append(f"On average {self.unassignable:.1f} empty beds that nobody may be put in are taken off.")
        if not all(self.open_weekdays):
            said.append(
                "Closed on some weekdays: patients who come then find no bed, and those there stay until their stay ends. "
                "Where they go home or move out before the ward closes, it turns fewer away than this says; the beds "
                "they move to are not counted."
            )
        return tuple(said)


NO_BED_CHANGES = BedChanges()


def arrivals_by_day(demand: Demand) -> Array:
    """How many patients come on each day of the year? ``(364,)``; days alike when none come.

    Checked by: tests/decision/test_changing_beds.py
    """
    arrivals = arrivals_by_hour(demand).reshape(YEAR_DAYS, 24).sum(axis=1)
    return arrivals if arrivals.sum() > 0 else np.ones(YEAR_DAYS)


def arrivals_by_month(demand: Demand) -> Array:
    """Which share of a year's patients comes in each month? ``(12,)``, adding up to 1; month lengths when none come.

    Checked by: tests/decision/test_changing_beds.py
    """
    counts = np.bincount(month_of_day, weights=arrivals_by_day(demand), minlength=MONTHS)
    return counts / counts.sum()
