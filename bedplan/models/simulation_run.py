"""How a simulation is run: how long, how often, and what else happens on the ward besides its demand."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Literal

from bedplan.errors import ImpossibleFigure

if TYPE_CHECKING:
    from bedplan.models.demand import Demand

DAYS_A_YEAR = 364.0
USUAL_ARRIVALS = 1_000_000
MOST_REPLICATIONS, FEWEST_REPLICATIONS = 1_000, 20
LONGEST_WARM_UP_DAYS = 40.0 * DAYS_A_YEAR
MOST_YEARS = 200
_FORGOTTEN = 1e-3


def _at_least(name: str, value: float, lowest: float) -> None:
    """Refuse a figure below what it may be."""
    if not value >= lowest:
        raise ImpossibleFigure(f"{name} of {value:g} is not possible: it is {lowest:g} or more.")


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
        if self.beds != int(self.beds) or self.beds < 1:
            raise ImpossibleFigure(f"{self.beds:g} closed beds is not possible: give a whole number above 0.")
        if not (math.isfinite(self.days) and self.days > 0):
            raise ImpossibleFigure(f"A closure of {self.days:g} days is not possible: it is more than 0.")
        _at_least("A closure rate", self.per_year, 0.0)
        if (self.from_day is None) == (self.per_year == 0.0):
            raise ImpossibleFigure("A closure has either a first day or a number of times a year.")


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

    def __post_init__(self) -> None:
        """Check every figure once, here."""
        if self.replications is not None and (self.replications != int(self.replications) or self.replications < 2):
            raise ImpossibleFigure(f"{self.replications:g} replications is not possible: give 2 or more.")
        if self.days is not None and not (math.isfinite(self.days) and self.days > 0):
            raise ImpossibleFigure(f"A run of {self.days:g} days is not possible: it is more than 0.")
        if self.warm_up_days is not None:
            _at_least("A warm-up", self.warm_up_days, 0.0)
        if not self.patience_days > 0:
            raise ImpossibleFigure(f"A patience of {self.patience_days:g} days is not possible: it is more than 0.")
        if self.groups not in ("geometric", "fixed"):
            raise ImpossibleFigure(f"Groups of kind {self.groups!r} are not known: use 'geometric' or 'fixed'.")
        if self.booked_decided_at is not None and self.booked_decided_at not in range(24):
            raise ImpossibleFigure(f"Hour {self.booked_decided_at} is not on the clock: give 0 to 23.")
        object.__setattr__(self, "closures", tuple(self.closures))


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
    wanted = math.ceil(USUAL_ARRIVALS / (a_day * days))
    replications = run.replications or min(max(wanted, FEWEST_REPLICATIONS), MOST_REPLICATIONS)
    return Extent(int(replications), float(days), 7.0 * math.ceil(warm_up / 7.0))
