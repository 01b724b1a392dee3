"""Beds that change: closures, winter bays, five-day wards, and beds nobody may be put in.

A model answers for a fixed bed count. A ward whose count changes is read as a mixture over time: the share of time
spent at each count, times the model's answer at that count. That takes the ward to settle at once after each change:
against an exact chain it is 0–8 % of the figure too low, most where half a small ward of long stays closes.
"""

from __future__ import annotations

import calendar
import math
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

from bedplan.errors import ImpossibleFigure
from bedplan.models import Waits
from bedplan.models.year import arrivals_by_hour, month_of_hour, patients_wanted, weekday_of_hour

if TYPE_CHECKING:
    from datetime import date

    from numpy.typing import NDArray

    from bedplan.models import BedCurve, Demand

    Array = NDArray[np.float64]

MONTHS = 12
MOST_CHANGE = 2_000
DAYS_PER_YEAR = 365.0


@dataclass(frozen=True, slots=True)
class Closure:
    """Which beds are out of use, and for which share of each month (12,), January first?

    Raises:
        ImpossibleFigure: beds not whole or outside 1–2,000, not 12 shares, a share outside 0–1.

    Checked by: tests/decision/test_changing_beds.py
    """

    beds: int
    share_of_month: tuple[float, ...]

    def __post_init__(self) -> None:
        """Check every figure once, here."""
        if not (1 <= self.beds <= MOST_CHANGE and self.beds == int(self.beds)):
            raise ImpossibleFigure(f"A closure of {self.beds:g} beds is not possible: give a whole number from 1.")
        if len(self.share_of_month) != MONTHS:
            raise ImpossibleFigure(f"A closure needs 12 months, January first, not {len(self.share_of_month)}.")
        for share in self.share_of_month:
            if not 0 <= share <= 1:
                raise ImpossibleFigure(f"Beds closed for {share:.4g} of a month is not possible: it lies from 0 to 1.")

    @classmethod
    def expected(cls, beds: int, per_year: float, days: float) -> Closure:
        """What if so many closures a year, at any time, take these beds out for so many days each?

        Closed for ``per_year × days ÷ 365`` of the time: 1.33 closures of 7.9 days close a unit 2.9 % of the time.
        """
        share = per_year * days / DAYS_PER_YEAR
        if not (per_year >= 0 and days >= 0 and share <= 1):
            raise ImpossibleFigure(
                f"{per_year:g} closures a year of {days:g} days each is not possible: both are 0 or more, "
                "and together at most 365 days."
            )
        return cls(beds, (share,) * MONTHS)

    @classmethod
    def between(cls, beds: int, first_day: date, last_day: date) -> Closure:
        """What if these beds are closed from one day to another, both included, in each year like the planned one?"""
        days = (last_day - first_day).days + 1
        if not 1 <= days <= DAYS_PER_YEAR:
            raise ImpossibleFigure(f"A closure from {first_day} to {last_day} is not possible: it lasts 1 to 365 days.")
        shares = [0.0] * MONTHS
        for ordinal in range(first_day.toordinal(), last_day.toordinal() + 1):
            day = first_day.fromordinal(ordinal)
            shares[day.month - 1] += 1.0 / calendar.monthrange(day.year, day.month)[1]
        return cls(beds, tuple(min(share, 1.0) for share in shares))


@dataclass(frozen=True, slots=True)
class BedChanges:
    """How do a ward's open beds differ from the count that is read off its curve?

    ``closures``; ``extra_by_month`` (12,) beds more (or fewer) open in each month, January first; ``open_weekdays``
    (7,) Monday first; ``unassignable`` beds, on average, that are empty but that nobody may be put in (single-sex bays,
    isolation): their number is taken to vary as Poisson counts do.
    """

    closures: tuple[Closure, ...] = ()
    extra_by_month: tuple[int, ...] = (0,) * MONTHS
    open_weekdays: tuple[bool, ...] = (True,) * 7
    unassignable: float = 0.0

    def __post_init__(self) -> None:
        """Check every figure once, here."""
        extra, weekdays = tuple(self.extra_by_month), tuple(self.open_weekdays)
        if len(extra) != MONTHS:
            raise ImpossibleFigure(f"Extra beds need 12 months, January first, but {len(extra)} were given.")
        for beds in extra:
            if not (abs(beds) <= MOST_CHANGE and beds == int(beds)):
                raise ImpossibleFigure(f"{beds:g} extra beds is not possible: give whole numbers, below 0 for fewer.")
        if len(weekdays) != 7 or not any(weekdays):
            raise ImpossibleFigure("A ward needs 7 weekdays, Monday first, and is open on one of them at least.")
        if not (math.isfinite(self.unassignable) and 0 <= self.unassignable <= MOST_CHANGE):
            raise ImpossibleFigure(
                f"{self.unassignable:g} beds nobody may be put in is not possible: give 0 or more, on average."
            )
        object.__setattr__(self, "extra_by_month", tuple(int(beds) for beds in extra))
        object.__setattr__(self, "open_weekdays", tuple(bool(is_open) for is_open in weekdays))
        object.__setattr__(self, "closures", tuple(self.closures))

    @property
    def is_neutral(self) -> bool:
        """Whether the open beds are simply the count that is read off the curve."""
        return not (self.closures or any(self.extra_by_month) or self.unassignable) and all(self.open_weekdays)

    @property
    def most_out_of_use(self) -> int:
        """The most beds worth allowing for when a curve is drawn: every closure at once, and missing beds."""
        unassignable = math.ceil(self.unassignable + 3.0 * math.sqrt(self.unassignable))
        return sum(one.beds for one in self.closures) + unassignable - min(0, *self.extra_by_month)

    def states(self, month: int) -> tuple[NDArray[np.int64], Array]:
        """How many beds more or fewer are open in a month (0 = January), and for which share of it?

        Closures and missing beds come and go independently of each other.
        """
        out_of_use = _poisson_shares(self.unassignable)
        for closure in self.closures:
            share = closure.share_of_month[month]
            longer = np.zeros(out_of_use.size + closure.beds)
            longer[: out_of_use.size] += (1.0 - share) * out_of_use
            longer[closure.beds :] += share * out_of_use
            out_of_use = longer
        some = np.flatnonzero(out_of_use > 0)
        return self.extra_by_month[month] - some, out_of_use[some]

    def notes(self) -> tuple[str, ...]:
        """Say what was done, and which way it errs."""
        said = []
        if self.closures or any(self.extra_by_month):
            said.append(
                "Open beds change over the year: each month is the mixture of the curve at each open bed count, as if "
                "the ward settled at once. Patients already there need time to leave, so up to a twelfth more are "
                "turned away than this says."
            )
        if self.unassignable:
            said.append(f"On average {self.unassignable:.1f} empty beds that nobody may be put in are taken off.")
        if not all(self.open_weekdays):
            said.append(
                "Closed on some weekdays: patients who come then find no bed, and those there are taken to stay on. "
                "Where they go home or move out before the ward closes, it turns fewer away than this says; the beds "
                "they move to are not counted."
            )
        return tuple(said)


NO_BED_CHANGES = BedChanges()


def arrivals_by_month(demand: Demand) -> Array:
    """Which share of a year's patients comes in each month? ``(12,)``, adding up to 1; month lengths when none come.

    Checked by: tests/decision/test_changing_beds.py
    """
    arrivals = arrivals_by_hour(demand)
    counts = np.bincount(month_of_hour, weights=arrivals if arrivals.sum() > 0 else None, minlength=MONTHS)
    return counts / counts.sum()


def _poisson_shares(mean: float) -> Array:
    """Return the chance of 0, 1, 2, … for a Poisson count, what is left of its tail put on the last."""
    most = math.ceil(mean + 10.0 * math.sqrt(mean)) + 10 if mean else 0
    count = np.arange(most + 1)
    shares = np.exp(special.xlogy(count, mean) - mean - special.gammaln(count + 1))
    shares[-1] += max(0.0, 1.0 - shares.sum())
    return shares


def _share_on_closed_days(demand: Demand, open_weekdays: tuple[bool, ...]) -> float:
    """Return the share of patients who come on a weekday on which the ward is closed."""
    arrivals = arrivals_by_hour(demand)
    closed = arrivals[~np.array(open_weekdays)[weekday_of_hour]].sum()
    return float(closed / arrivals.sum()) if closed > 0 else 0.0


@dataclass(frozen=True, slots=True, eq=False)
class _Mixture:
    """The open counts of each month with their shares of time, for each count read off a curve."""

    places: tuple[NDArray[np.int64], ...]
    shares: tuple[Array, ...]
    patients: Array

    def by_month(self, figures: Array) -> Array:
        """Mix figures known at each open count, ``(12, counts)`` or ``(counts,)``, in each month: ``(12, n)``."""
        rows = np.broadcast_to(figures, (MONTHS, figures.shape[-1]))
        return np.array([row[place] @ share for row, place, share in zip(rows, self.places, self.shares, strict=True)])

    def over_hours(self, by_month: Array) -> Array:
        """Average over the hours of the year."""
        return np.bincount(month_of_hour) / month_of_hour.size @ by_month

    def over_patients(self, by_month: Array) -> Array:
        """Average over the patients of the year; months in which nobody comes don't count, however full they are."""
        some = self.patients > 0
        return self.patients[some] @ by_month[some]


def _mixture(curve: BedCurve, changes: BedChanges, beds: NDArray[np.int64]) -> _Mixture:
    states = [changes.states(month) for month in range(MONTHS)]
    places = tuple(np.maximum(beds[:, None] + more, 0) for more, _ in states)
    return _Mixture(places, tuple(share for _, share in states), arrivals_by_month(curve.demand))


def with_changing_beds(curve: BedCurve, changes: BedChanges, beds: NDArray[np.int64]) -> BedCurve:
    """What does a curve say for a ward whose open beds change, at each count it starts from?

    ``curve`` must hold every count from 0 to the last of ``beds`` plus the extra beds of any month. Each month's share
    is the time-weighted mixture of the curve at each open count, (1 − p)·B(c) + p·B(c − k) for one closure of k beds;
    the year's is the months' weighed by patients. Occupancy is patients in beds ÷ open beds on average.

    Source: the law of total probability, as if the ward settled at once; common practice.
    Checked by: tests/decision/test_changing_beds.py
    """
    if changes.is_neutral:
        return curve
    mixture = _mixture(curve, changes, beds)
    closed = _share_on_closed_days(curve.demand, changes.open_weekdays)
    by_month = _or_closed(mixture.by_month(curve.by_month), closed)
    year = mixture.over_patients(by_month)
    overfull = None if curve.overfull_by_month is None else mixture.by_month(curve.overfull_by_month)
    return replace(
        curve,
        beds=beds,
        turn_away_probability=year,
        occupancy=_occupancy(curve, mixture, year),
        by_month=by_month,
        notes=(*curve.notes, *changes.notes()),
        overfull_share_of_hours=None if overfull is None else mixture.over_hours(overfull),
        overfull_by_month=overfull,
        waits=None if curve.waits is None else _mixed_waits(curve.waits, mixture, closed, changes),
    )


def _or_closed(shares: Array, closed: float) -> Array:
    """Count everyone who comes on a closed day as finding no bed."""
    return shares + closed * (1.0 - shares)


def _occupancy(curve: BedCurve, mixture: _Mixture, turned_away: Array) -> Array:
    """Return patients in beds ÷ open beds; those who aren't turned away are in the beds (Little 1961)."""
    if curve.when_full == "leaves":
        present = patients_wanted(curve.demand) * (1.0 - turned_away)
    else:
        present = mixture.over_hours(mixture.by_month(curve.occupancy * curve.beds))
    open_beds = mixture.over_hours(mixture.by_month(curve.beds.astype(float)))
    share = np.divide(present, open_beds, out=np.zeros(present.size), where=open_beds > 0)
    return share if curve.when_full == "stays anyway" else np.minimum(share, 1.0)


def _mixed_waits(waits: Waits, mixture: _Mixture, closed: float, changes: BedChanges) -> Waits:
    """Mix the waits of each open count; who comes on a closed day waits past every limit, and until the ward opens."""
    closed_hours = 24.0 * changes.open_weekdays.count(False)

    def share_over_by_month(hours: float) -> Array:
        """Return the share waiting longer in each month, closed days included."""
        return _or_closed(mixture.by_month(waits.share_over_by_month(hours)), closed)

    return Waits(
        mean_hours=mixture.over_patients(mixture.by_month(waits.mean_hours)) + closed * closed_hours,
        share_over=lambda hours: mixture.over_patients(share_over_by_month(hours)),
        share_over_by_month=share_over_by_month,
    )
