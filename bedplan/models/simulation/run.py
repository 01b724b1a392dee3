"""How a simulation is run: how long, how often, and what else happens on the ward besides its demand."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from datetime import date
from typing import TYPE_CHECKING, Literal

from bedplan.errors import ImpossibleFigure
from bedplan.models.rhythm.year import MONTH_DAYS, YEAR_DAYS
from bedplan.models.value_objects.bed_curve import MOST_BEDS
from bedplan.models.value_objects.figures import ABOVE_ZERO, all_of_kind, listed, number, whole

if TYPE_CHECKING:
    from bedplan.models.value_objects.demand import Demand

DAYS_A_YEAR = float(YEAR_DAYS)
USUAL_ARRIVALS = 1_000_000
MOST_REPLICATIONS, FEWEST_REPLICATIONS = 1_000, 20
LONGEST_WARM_UP_DAYS = 40.0 * DAYS_A_YEAR
MOST_YEARS = 200
_LONGEST_RUN_DAYS = 1_000.0 * DAYS_A_YEAR
_MOST_RUNS = 1_000_000
_FORGOTTEN = 1e-3


def _day_of_year(day: date) -> int:
    """Return which day of the 364-day year this is, 1 January being 0."""
    days = MONTH_DAYS[day.month - 1]
    return sum(MONTH_DAYS[: day.month - 1]) + min(day.day, days) - 1


@dataclass(frozen=True, slots=True)
class Closure:
    """Beds that are shut for some days: once, ``from_day`` of the run on (0 = its first day), or ``per_year`` times.

    The beds that empty first are shut; patients in bed stay, and patients already waiting keep their turn.

    Raises:
        ImpossibleFigure: beds not a whole number above 0, days not above 0, or not exactly one of date and rate.
    """

    beds: int
    days: float
    from_day: float | None = None
    per_year: float = 0.0

    def __post_init__(self) -> None:
        """Check every figure once, here."""
        put, days = object.__setattr__, (0.0, _LONGEST_RUN_DAYS)
        beds = whole("{} closed beds", self.beds, (1, MOST_BEDS), "give a whole number above 0")
        put(self, "beds", beds)
        put(self, "days", number("A closure of {} days", self.days, (ABOVE_ZERO, days[1]), "it is more than 0"))
        rate = number("A closure rate of {} a year", self.per_year, (0.0, 36_500.0), "it is 0 to 36,500")
        put(self, "per_year", rate)
        if self.from_day is not None:
            put(self, "from_day", number("A closure from day {} on", self.from_day, days, "0 is the first day"))
        if (self.from_day is None) == (self.per_year == 0.0):
            raise ImpossibleFigure("A closure has either a first day or a number of times a year.")

    @classmethod
    def expected(cls, beds: int, per_year: float, days: float) -> Closure:
        """What if so many closures a year, at any time, take these beds out for so many days each?

        They come independently of each other, so that several may be in force: on average ``per_year × days ÷ 365``.
        """
        return cls(beds, days, per_year=per_year)

    @classmethod
    def between(cls, beds: int, first_day: date, last_day: date) -> Closure:
        """What if these beds are closed from one day to another, both included, in each year like the planned one?

        Read on the year of 364 days: 29 February and 31 December count as the day before.
        """
        if not (isinstance(first_day, date) and isinstance(last_day, date) and 0 <= (last_day - first_day).days < 366):
            raise ImpossibleFigure(f"A closure from {first_day} to {last_day} is not possible: it lasts 1 to 365 days.")
        first, last = _day_of_year(first_day), _day_of_year(last_day)
        years = last_day.year - first_day.year
        return cls(beds, min(last - first + YEAR_DAYS * years + 1, YEAR_DAYS), from_day=first)


@dataclass(frozen=True, slots=True)
class WardRun:
    """How long and how often to run, and what else happens. Everything has a fitting default.

    ``replications`` runs of ``days`` each, side by side, after ``warm_up_days`` that aren't counted. Left at None
    they are chosen for about a million patients and a ward that has forgotten its empty start.

    ``patience_days``: mean of the exponential time after which a waiting patient gives up (inf = never).
    ``groups``: how patients who come together are drawn when ``clustering`` is above 1: group sizes ``"geometric"``,
    or ``"fixed"`` (the two whole sizes around it; a clustering of 2 is pairs). Below 1 arrivals are evened out by gamma gaps.
    ``booked_decided_at``: the hour at which the bed for a booked patient is looked for, and kept; with none free the
    patient is cancelled. None = a booked patient comes and then leaves or waits like the others.
    ``extra_by_day``: beds more (or fewer) open on each of the 364 days of the year, the first a Monday in the first
    week of January; empty = the same beds every day. Beds close at midnight as in a ``Closure``: those that empty first.

    Raises:
        ImpossibleFigure: a figure outside its meaning.
    """

    replications: int | None = None
    days: float | None = None
    warm_up_days: float | None = None
    patience_days: float = math.inf
    groups: Literal["geometric", "fixed"] = "geometric"
    booked_decided_at: int | None = None
    closures: tuple[Closure, ...] = field(default=())
    extra_by_day: tuple[int, ...] = ()

    def __post_init__(self) -> None:
        """Check every figure once, here."""
        put, days = object.__setattr__, _LONGEST_RUN_DAYS
        if self.replications is not None:
            allowed = f"give a whole number from 2 to {_MOST_RUNS:,}"
            put(self, "replications", whole("{} replications", self.replications, (2, _MOST_RUNS), allowed))
        if self.days is not None:
            put(
                self,
                "days",
                number("A run of {} days", self.days, (ABOVE_ZERO, days), f"it is above 0, at most {days:,.0f}"),
            )
        if self.warm_up_days is not None:
            allowed = f"it is 0 to {days:,.0f} days"
            put(self, "warm_up_days", number("A warm-up of {} days", self.warm_up_days, (0.0, days), allowed))
        if self.patience_days != math.inf:
            number("A patience of {} days", self.patience_days, (ABOVE_ZERO, 1e9), "it is more than 0")
        if self.groups not in ("geometric", "fixed"):
            raise ImpossibleFigure(f"Groups of kind {self.groups!r} are not known: use 'geometric' or 'fixed'.")
        if self.booked_decided_at is not None:
            put(self, "booked_decided_at", whole("Hour {}", self.booked_decided_at, (0, 23), "give 0 to 23"))
        put(self, "closures", all_of_kind(self.closures, Closure, "Closures are a tuple of Closure"))
        put(self, "extra_by_day", self._days_of_beds(self.extra_by_day))

    @staticmethod
    def _days_of_beds(values: object) -> tuple[int, ...]:
        """Return extra beds for each day of the year, or none, or say what is wrong."""
        wanted = f"Extra beds by day need {YEAR_DAYS} whole numbers"
        given = listed(values, wanted)
        if given and len(given) != YEAR_DAYS:
            raise ImpossibleFigure(f"{wanted}, but {len(given)} were given.")
        limits, allowed = (-MOST_BEDS, MOST_BEDS), "give whole numbers, below 0 for fewer"
        return tuple(whole("{} extra beds", one, limits, allowed) for one in given)

    @property
    def has_changing_beds(self) -> bool:
        """Whether beds open or close in the course of the run."""
        return bool(self.closures) or len(set(self.extra_by_day)) > 1


@dataclass(frozen=True, slots=True)
class Extent:
    """The run as it is done: everything left open is decided. The warm-up is whole weeks, so day 0 is a Monday."""

    replications: int
    days: float
    warm_up_days: float

    @property
    def end_day(self) -> float:
        """The last day, counted from the start of the warm-up."""
        return self.warm_up_days + self.days


def _days_to_forget(demand: Demand) -> float:
    """Find the day after which less than a thousandth of a bed's use by an earlier patient is left."""
    longest = 0.0
    for stay in (demand.length_of_stay, *(one.length_of_stay for one in demand.booked)):
        day = stay.mean_days
        while float(stay.days_beyond(day)) > _FORGOTTEN * stay.mean_days and day < LONGEST_WARM_UP_DAYS:
            day *= 1.25
        longest = max(longest, day)
    return longest


def _days_to_settle(demand: Demand, beds: int) -> float:
    """Say how long a queue takes to settle: five relaxation times of the delay system, spread of stay included.

    Source: Newell 1982, Applications of Queueing Theory (relaxation of a queue near saturation).
    """
    stay = demand.length_of_stay
    use = min(demand.offered_load / beds, 0.999)
    spread = (max(demand.clustering, 1.0) + stay.variation**2) / 2.0
    return 5.0 * stay.mean_days * spread / (beds * (1.0 - math.sqrt(use)) ** 2)


def extent_of(run: WardRun, demand: Demand, beds: int, *, waits: bool) -> Extent:
    """Decide what the run left open: long enough to forget the empty start, and about a million patients in all.

    Only the warm-up depends on the beds, and it has random numbers of its own: the patients who are counted are the
    same whatever the beds.

    Checked by: tests/models/test_simulation.py
    """
    warm_up = run.warm_up_days
    if warm_up is None:
        warm_up = _days_to_forget(demand)
        if waits and beds > 0 and math.isinf(run.patience_days):
            warm_up += _days_to_settle(demand, beds) + (0.0 if demand.is_steady else DAYS_A_YEAR / 2.0)
        warm_up = min(warm_up, LONGEST_WARM_UP_DAYS)
    a_day = max(demand.total_arrivals_per_day, 1e-9)
    days = run.days
    if days is None:
        years = USUAL_ARRIVALS / (run.replications or MOST_REPLICATIONS) / (a_day * DAYS_A_YEAR)
        is_dated = any(one.from_day is not None for one in run.closures)
        days = DAYS_A_YEAR * (1 if is_dated else min(max(math.ceil(years), 1), MOST_YEARS))
    for one in run.closures:
        if one.from_day is not None and one.from_day >= days:
            raise ImpossibleFigure(
                f"A closure from day {one.from_day:g} on is not possible: the run has {days:g} days."
            )
    wanted = math.ceil(USUAL_ARRIVALS / (a_day * days))
    replications = run.replications or min(max(wanted, FEWEST_REPLICATIONS), MOST_REPLICATIONS)
    return Extent(int(replications), float(days), 7.0 * math.ceil(warm_up / 7.0))
