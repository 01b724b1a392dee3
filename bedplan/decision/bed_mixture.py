"""The curve of a ward whose beds change: what a model says at each open count, mixed, and the time a ward needs to settle.

A model answers for a fixed bed count. A ward whose count changes is read as a mixture over its patients and its time.
Where patients leave a full ward, the mixture is then corrected for those already there when beds close, and for the
time the ward takes to fill when they open, by a chain that follows them.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from bedplan.decision.changing_beds import arrivals_by_day, arrivals_by_month
from bedplan.models import Waits
from bedplan.models.chains.settling import (
    days_of,
    share_full_as_if_settled,
    share_full_at_random,
    share_full_by_day,
)
from bedplan.models.rhythm.year import (
    MONTHS,
    YEAR_DAYS,
    beds_wanted,
    month_of_day,
    month_of_hour,
    offered_load_by_hour,
    patients_wanted,
    weekday_of_day,
)

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.decision.changing_beds import BedChanges
    from bedplan.models import BedCurve, Demand

    Array = NDArray[np.float64]
    Counts = NDArray[np.int64]

_MOST_FOLLOWED = 32
_NEARLY_ALL, _NEARLY_NONE = 0.95, 1e-6
_TINY = 1e-12


def _share_by_month(days: Array, weights: Array) -> Array:
    """Average figures of each day, ``(364, n)``, over each month, ``(12, n)``; a month without weight by its days."""
    weights = np.where(np.bincount(month_of_day, weights)[month_of_day] > 0, weights, 1.0)
    sums = np.zeros((MONTHS, days.shape[1]))
    np.add.at(sums, month_of_day, days * weights[:, None])
    return sums / np.bincount(month_of_day, weights)[:, None]


@dataclass(frozen=True, slots=True, eq=False)
class _Mixture:
    """Every state of a month: its open beds beside the count it starts from, weekday, share of time and of patients."""

    beds: Counts
    more: tuple[Counts, ...]
    weekday: tuple[Counts, ...]
    of_time: tuple[Array, ...]
    of_patients: tuple[Array, ...]
    patients: Array

    def _mixed(self, figures: Array, by_weekday: Array | None, shares: tuple[Array, ...]) -> Array:
        rows = np.broadcast_to(figures, (MONTHS, figures.shape[-1]))
        mixed = np.empty((MONTHS, self.beds.size))
        for month, row in enumerate(rows):
            places = np.maximum(self.beds + self.more[month][:, None], 0)
            found = row[places]
            if by_weekday is not None:
                found = np.minimum(found * by_weekday[self.weekday[month][:, None], places], 1.0)
            mixed[month] = shares[month] @ found
        return mixed

    def of_patients_by_month(self, figures: Array, by_weekday: Array | None = None) -> Array:
        """Mix figures known at each open count over the patients of each month's open days: ``(12, n)``."""
        return self._mixed(figures, by_weekday, self.of_patients)

    def of_time_by_month(self, figures: Array, by_weekday: Array | None = None) -> Array:
        """Mix figures known at each open count over the hours of each month's open days: ``(12, n)``."""
        return self._mixed(figures, by_weekday, self.of_time)

    def over_hours(self, by_month: Array) -> Array:
        """Average over the hours of the year."""
        return np.bincount(month_of_hour) / month_of_hour.size @ by_month

    def over_patients(self, by_month: Array) -> Array:
        """Average over the patients of the year; months in which nobody comes don't count, however full they are."""
        some = self.patients > 0
        return self.patients[some] @ by_month[some]


def _mixture(demand: Demand, changes: BedChanges, beds: Counts) -> _Mixture:
    """Lay out the states of each month: what its open days have in common, times what is out of use at random."""
    arrivals, extra, is_open = arrivals_by_day(demand), changes.extra_by_day, changes.is_open_by_day
    missing, chance = changes.out_of_use()
    weekday = weekday_of_day if any(changes.extra_by_weekday) else np.zeros(YEAR_DAYS, dtype=np.int64)
    states = []
    for month in range(MONTHS):
        days = np.flatnonzero((month == month_of_day) & is_open)
        kinds, kind = np.unique(np.stack([extra[days], weekday[days]]), axis=1, return_inverse=True)
        time, patients = (np.bincount(kind.ravel(), weights) for weights in (np.ones(days.size), arrivals[days]))
        patients = patients if patients.sum() > 0 else time
        states.append(
            (
                (kinds[0][:, None] - missing).ravel(),
                np.repeat(kinds[1], missing.size),
                np.outer(time / time.sum(), chance).ravel(),
                np.outer(patients / patients.sum(), chance).ravel(),
            )
        )
    return _Mixture(beds, *zip(*states, strict=True), arrivals_by_month(demand))


def with_changing_beds(curve: BedCurve, changes: BedChanges, beds: Counts) -> BedCurve:
    """What does a curve say for a ward whose open beds change, at each count it starts from?

    ``curve`` must hold every count from 0 to the last of ``beds`` plus the extra beds of any day. Each month's share is
    the mixture, over its patients, of the curve at each open count; where patients leave, times what a chain of the
    ward's patients finds more or fewer than that mixture of itself. The year's is the months' weighed by patients.
    Occupancy is patients in beds ÷ open beds on average, at most 1 where nobody lies beyond the beds. Shares by weekday
    and by group are not given.

    Source: the law of total probability; the chain as in ``models/chains/settling.py``.
    Checked by: tests/decision/test_changing_beds.py
    """
    if changes.is_neutral:
        return curve
    mixture = _mixture(curve.demand, changes, beds)
    closed = _share_by_month(1.0 - changes.is_open_by_day[:, None], arrivals_by_day(curve.demand))
    leaves = curve.when_full == "leaves"
    by_weekday = None if leaves or not any(changes.extra_by_weekday) else _weekday_against_year(curve)
    by_month = _or_closed(mixture.of_patients_by_month(curve.by_month, by_weekday), closed)
    if leaves:
        by_month = np.minimum(by_month * _settling(curve, changes, beds), 1.0)
        by_month = np.maximum.accumulate(by_month[:, ::-1], axis=1)[:, ::-1].copy()
    left_over = _queue_left_over(curve.demand, changes, beds) if curve.waits is not None else 0.0
    by_month = _or_closed(by_month, left_over)
    year = mixture.over_patients(by_month)
    overfull = curve.overfull_by_month
    overfull = None if overfull is None else mixture.of_time_by_month(overfull, by_weekday)
    return replace(
        curve,
        beds=beds,
        turn_away_probability=year,
        occupancy=_occupancy(curve, mixture, changes, year),
        by_month=by_month,
        notes=(*curve.notes, *changes.notes(curve.when_full)),
        overfull_share_of_hours=None if overfull is None else mixture.over_hours(overfull),
        overfull_by_month=overfull,
        waits=None
        if curve.waits is None
        else _mixed_waits(curve.waits, mixture, (closed, left_over), by_weekday, changes),
        by_weekday=None,
        unbooked_turn_away=None,
        booked_turn_away=None,
    )


def _weekday_against_year(curve: BedCurve) -> Array | None:
    """Return how much more often than over the year the ward is full on each weekday, ``(7, n)``."""
    if curve.by_weekday is None:
        return None
    year = curve.turn_away_probability
    return np.divide(curve.by_weekday, year, out=np.ones_like(curve.by_weekday), where=year > _TINY)


def _or_closed(shares: Array, closed: Array) -> Array:
    """Count everyone who comes on a closed day, ``(12, 1)``, as finding no bed."""
    return shares + closed * (1.0 - shares)


def _settling(curve: BedCurve, changes: BedChanges, beds: Counts) -> Array:
    """Return how many more or fewer are turned away than if the ward settled at once, ``(12, n)``.

    Worked out for some counts around the decision and read between them.
    """
    demand = curve.demand
    if demand.offered_load <= 0:
        return np.ones((MONTHS, beds.size))
    share = curve.turn_away_probability[beds]
    near = np.flatnonzero((share < _NEARLY_ALL) & (share > _NEARLY_NONE))
    ends = (int(near[0]), min(int(near[-1]) + changes.most_out_of_use, beds.size - 1)) if near.size else (0, 0)
    factor = np.ones((MONTHS, beds.size))
    at_random = _MOST_FOLLOWED if demand.is_steady else _MOST_FOLLOWED // 2
    for follow, most in ((_settling_by_day, _MOST_FOLLOWED // 2), (_settling_at_random, at_random)):
        some = beds[np.unique(np.linspace(*ends, most).astype(np.int64))]
        logs = np.log(np.maximum(follow(demand, changes, some), _TINY))
        factor *= np.exp(np.array([np.interp(beds, some, row) for row in logs]))
    return factor


def _settling_by_day(demand: Demand, changes: BedChanges, beds: Counts) -> Array:
    """Return what following the dated changes adds, ``(12, n)``."""
    open_beds = changes.beds_by_day(beds)
    if (open_beds == open_beds[0]).all():
        return np.ones((MONTHS, beds.size))
    days, arrivals = days_of(demand), arrivals_by_day(demand)
    counts, place = np.unique(open_beds, return_inverse=True)
    both = share_full_by_day(days, np.hstack([open_beds, np.tile(counts, (YEAR_DAYS, 1))]))
    followed, alone = both[:, : beds.size], _share_by_month(both[:, beds.size :], arrivals)
    at_once = alone[month_of_day[:, None], place.reshape(open_beds.shape)]
    found, settled = (_share_by_month(one, arrivals) for one in (followed, at_once))
    return np.divide(found, settled, out=np.ones_like(found), where=settled > _TINY)


def _settling_at_random(demand: Demand, changes: BedChanges, beds: Counts) -> Array:
    """Return what following the changes at random adds, ``(12, n)``: each kind in the long run at each month's load."""
    stay_days = beds_wanted(demand) / demand.total_arrivals_per_day
    loads = np.bincount(month_of_hour, offered_load_by_hour(demand)) / np.bincount(month_of_hour)
    factor = np.ones((MONTHS, beds.size))
    for kind in changes.at_random(stay_days):
        for load in np.unique(loads.round(6)):
            found = [share_full_at_random(load, stay_days, int(count), kind) for count in beds]
            settled = np.array([share_full_as_if_settled(load, int(count), kind) for count in beds])
            row = np.divide(found, settled, out=np.ones(beds.size), where=settled > _TINY)
            factor[loads.round(6) == load] *= row
    return factor


def _occupancy(curve: BedCurve, mixture: _Mixture, changes: BedChanges, turned_away: Array) -> Array:
    """Return patients in beds ÷ open beds; those who aren't turned away are in the beds (Little 1961)."""
    if curve.when_full == "leaves":
        present = patients_wanted(curve.demand) * (1.0 - turned_away)
    else:
        present = mixture.over_hours(mixture.of_time_by_month(curve.occupancy * curve.beds))
    counts = np.arange(curve.beds.size, dtype=float)
    is_open = _share_by_month(changes.is_open_by_day[:, None].astype(float), np.ones(YEAR_DAYS))
    open_beds = mixture.over_hours(mixture.of_time_by_month(counts) * is_open)
    share = np.divide(present, open_beds, out=np.zeros(present.size), where=open_beds > 0)
    return share if curve.when_full == "stays anyway" else np.minimum(share, 1.0)


def _queue_left_over(demand: Demand, changes: BedChanges, beds: Counts) -> Array:
    """Return for which share of each month a queue is left from beds too few to keep up, ``(12, n)``.

    A queue grows by arrivals less the patients the open beds can take, and shrinks likewise once there are more: a
    fluid, day by day for dated changes, and for those at random the time it takes to shrink again.
    """
    load = offered_load_by_hour(demand).reshape(YEAR_DAYS, 24).mean(axis=1)
    open_beds = changes.beds_by_day(beds)
    queue, left_over = np.zeros(beds.size), np.zeros(open_beds.shape)
    for day in (*range(YEAR_DAYS), *range(YEAR_DAYS)):
        queue = np.minimum(np.maximum(queue + load[day] - open_beds[day], 0.0), YEAR_DAYS * load.max())
        left_over[day] = (queue > 0) & (open_beds[day] > load[day])
    missing, chance = changes.out_of_use()
    short = sum(
        share * np.maximum(load[:, None] - np.maximum(open_beds - beds_missing, 0), 0.0)
        for beds_missing, share in zip(missing, chance, strict=True)
    )
    spare = np.maximum(open_beds - load[:, None], 1e-9)
    at_random = np.where(open_beds > load[:, None], np.minimum(short / spare, 1.0), 0.0)
    return _share_by_month(np.maximum(left_over, at_random), arrivals_by_day(demand))


def _mixed_waits(
    waits: Waits, mixture: _Mixture, added: tuple[Array, Array], by_weekday: Array | None, changes: BedChanges
) -> Waits:
    """Mix the waits of each open count; who comes on a closed day, or to a queue left over, waits past every limit."""
    closed, left_over = added
    closed_hours = 24.0 * changes.open_weekdays.count(False)

    def share_over_by_month(hours: float) -> Array:
        """Return the share waiting longer in each month, closed days and queues left over included."""
        mixed = mixture.of_patients_by_month(waits.share_over_by_month(hours), by_weekday)
        return _or_closed(_or_closed(mixed, closed), left_over)

    return Waits(
        mean_hours=mixture.over_patients(mixture.of_patients_by_month(waits.mean_hours) + closed * closed_hours),
        share_over=lambda hours: mixture.over_patients(share_over_by_month(hours)),
        share_over_by_month=share_over_by_month,
    )
