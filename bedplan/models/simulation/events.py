"""Who comes to a simulated ward: everybody's time, stay and patience, drawn before anybody gets a bed.

Drawn once and side by side for many replications, from random numbers that depend on the seed, the demand and the
run, never on the beds: two bed counts meet the same patients. Days count from the start of the warm-up, a Monday.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from bedplan.models.rhythm.year import HOURS_A_YEAR, YEAR_DAYS, unbooked_by_hour
from bedplan.models.simulation.run import DAYS_A_YEAR

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models.simulation.run import WardRun
    from bedplan.models.value_objects.demand import BookedList, Demand

    Array = NDArray[np.float64]

UNBOOKED, BOOKED, CLOSURE, NOBODY = 0, 1, 2, 3
_HOUR = 1.0 / 24.0


@dataclass(frozen=True, slots=True)
class Comers:
    """Everybody who comes, a column a replication, each column in the order of coming.

    Arrays are ``(rows, replications)``. ``at``: day the bed is asked for. ``ahead_days``: from asking to coming (booked
    patients decided ahead). ``shut_until``: a shut bed opens again. ``patience_days`` inf = waits as long as it takes.
    ``clock`` and ``slip`` are the chances that decide hour of leaving and weekend slip; None where demand has neither.
    ``kind`` None = everybody is unbooked.
    """

    at: Array
    stay_days: Array
    patience_days: Array | float
    kind: NDArray[np.int8] | None = None
    ahead_days: Array | None = None
    shut_until: Array | None = None
    clock: Array | None = None
    slip: Array | None = None

    @property
    def latest_start(self) -> Array | None:
        """The day by which each must have a bed ready; None where everyone waits as long as it takes."""
        if isinstance(self.patience_days, float):
            return None if math.isinf(self.patience_days) else self.at + self.patience_days
        return self.at + self.patience_days


@dataclass(frozen=True, slots=True)
class Part:
    """A stretch of days to draw for, and its own random numbers."""

    start_day: float
    end_day: float
    first_day_of_year: float
    replications: int
    seeds: np.random.SeedSequence

    def rng(self, purpose: int) -> np.random.Generator:
        """Return the random numbers of one purpose, so that a change to one leaves the others alone."""
        return np.random.default_rng(
            np.random.SeedSequence(self.seeds.entropy, spawn_key=(*self.seeds.spawn_key, purpose))
        )


_GAPS, _GROUPS, _STAYS, _BOOKED, _CLOSURES, _PATIENCE, _LEAVING = range(7)


def _days_at(expected: Array, demand: Demand, part: Part) -> Array:
    """Turn "so many patients expected since the start of the part" into days: the rhythm, read backwards."""
    a_day = demand.arrivals_per_day
    by_hour = unbooked_by_hour(demand)
    if np.ptp(by_hour) <= 1e-12 * by_hour[0]:
        return part.start_day + expected / a_day
    come_by = np.concatenate([[0.0], np.cumsum(by_hour)])
    phase = (part.start_day - part.first_day_of_year) % DAYS_A_YEAR
    expected = expected + np.interp(phase * 24.0, np.arange(HOURS_A_YEAR + 1), come_by)
    years = np.floor(expected / come_by[-1])
    hours = np.interp(expected - years * come_by[-1], come_by, np.arange(HOURS_A_YEAR + 1))
    return part.start_day - phase + years * DAYS_A_YEAR + hours * _HOUR


def _mean_group(demand: Demand, run: WardRun) -> tuple[float, int, float]:
    """Return the mean group size, and for fixed groups the smaller size and the chance of one patient more.

    Groups of size N that come independently give variance ÷ mean = E[N²]/E[N] in every count of patients: 2·mean − 1
    when N is geometric.
    """
    clustering = demand.clustering
    if clustering <= 1.0:
        return 1.0, 1, 0.0
    if run.groups == "geometric":
        return (clustering + 1.0) / 2.0, 0, 0.0
    smaller = math.floor(clustering)
    one_more = smaller * (clustering - smaller) / (2.0 * smaller + 1.0 - clustering)
    return smaller + one_more, smaller, one_more


def _group_days(demand: Demand, run: WardRun, part: Part, rate: Array) -> Array:
    """Draw when groups come: ``(rows, replications)``, every column past the end of the part."""
    rng = part.rng(_GAPS)
    size, _, _ = _mean_group(demand, run)
    spread = min(demand.clustering, 1.0)
    expected = demand.arrivals_per_day * (part.end_day - part.start_day) * rate.max() / size
    rows = math.ceil(expected + 6.0 * math.sqrt(expected) + 12.0)
    blocks: list[Array] = []
    reached = np.zeros(part.replications)
    while True:
        shape = (rows, part.replications)
        gaps = rng.standard_exponential(shape) if spread == 1.0 else rng.standard_gamma(1.0 / spread, shape) * spread
        if size != 1.0 or demand.rate_variation > 0:
            gaps *= size / rate
        gaps[0] += reached
        passed = np.cumsum(gaps, axis=0, out=gaps)
        days = _days_at(passed, demand, part)
        blocks.append(days)
        if days[-1].min() >= part.end_day:
            return blocks[0] if len(blocks) == 1 else np.concatenate(blocks)
        reached, rows = passed[-1], max(rows // 4, 8)


def _columns_of(sheet: NDArray[np.bool_]) -> NDArray[np.int64]:
    """Return each cell's column number."""
    return np.broadcast_to(np.arange(sheet.shape[1]), sheet.shape)


def _unbooked(demand: Demand, run: WardRun, part: Part, rate: Array) -> tuple[Array, NDArray[np.int64]]:
    """Draw unbooked patients who come in groups: days and replication of each, in a plain list."""
    days = _group_days(demand, run, part, rate)
    inside = days < part.end_day
    days, columns = days[inside], _columns_of(inside)[inside]
    if demand.clustering <= 1.0:
        return days, columns
    rng = part.rng(_GROUPS)
    size, smaller, one_more = _mean_group(demand, run)
    sizes = rng.geometric(1.0 / size, days.size) if smaller == 0 else smaller + (rng.random(days.size) < one_more)
    return np.repeat(days, sizes), np.repeat(columns, sizes)


def _booked(one: BookedList, run: WardRun, part: Part, rng: np.random.Generator) -> tuple[Array, ...]:
    """Draw one booked list: the day each asks for a bed, the days from asking to coming, and the replication."""
    all_days = np.arange(math.floor(part.start_day), math.ceil(part.end_day))
    slots = np.repeat(all_days, np.array(one.per_weekday)[all_days % 7])[:, None]
    shape = (slots.size, part.replications)
    come = slots + (one.hour + rng.random(shape)) * _HOUR
    kept = (rng.random(shape) < one.attends) & (come >= part.start_day) & (come < part.end_day)
    columns, come = _columns_of(kept)[kept], come[kept]
    if run.booked_decided_at is None:
        return come, np.zeros(come.size), columns
    day = np.floor(come) - (run.booked_decided_at > one.hour)
    asked = np.clip(day + run.booked_decided_at * _HOUR, part.start_day, come)
    return asked, come - asked, columns


def _beds_shut_by_day(run: WardRun, part: Part) -> tuple[Array, Array]:
    """Return from when until when each bed is shut that is open on some days of the year only."""
    by_day = np.array(run.extra_by_day)
    starts, ends = [np.zeros(0)], [np.zeros(0)]
    years = np.arange((part.start_day - part.first_day_of_year) // DAYS_A_YEAR - 1, part.end_day // DAYS_A_YEAR + 1)
    for level in range(int(by_day.min()), int(by_day.max())):
        # a bed of this level closes on the first and opens on the second kind of day; some day it is open
        is_open = by_day > level
        closes = np.flatnonzero(~is_open & np.roll(is_open, 1))
        opens = np.flatnonzero(is_open & ~np.roll(is_open, 1))
        length = (opens[np.searchsorted(opens, closes) % opens.size] - closes) % YEAR_DAYS
        begin = (part.first_day_of_year + DAYS_A_YEAR * years[:, None] + closes).ravel()
        starts.append(begin)
        ends.append(begin + np.tile(length, years.size))
    begin, end = np.concatenate(starts), np.concatenate(ends)
    if part.start_day == 0.0:
        begin = np.where(end > 0.0, np.maximum(begin, 0.0), begin)
    inside = (begin >= part.start_day) & (begin < part.end_day)
    return begin[inside], end[inside]


def _closures(run: WardRun, part: Part) -> tuple[Array, Array, NDArray[np.int64]]:
    """Draw every shut bed: from, until, and the replication."""
    rng = part.rng(_CLOSURES)
    everywhere = np.arange(part.replications)
    starts, ends, columns = [np.zeros(0)], [np.zeros(0)], [np.zeros(0, dtype=np.int64)]
    if run.extra_by_day:
        begin, end = _beds_shut_by_day(run, part)
        starts.append(np.repeat(begin, part.replications))
        ends.append(np.repeat(end, part.replications))
        columns.append(np.tile(everywhere, begin.size))
    for one in run.closures:
        if one.from_day is not None:
            begin = np.full(part.replications, part.first_day_of_year + one.from_day)
            at = everywhere
        else:
            expected = one.per_year / 365.0 * (part.end_day - part.start_day)
            at = np.repeat(everywhere, rng.poisson(expected, part.replications))
            begin = rng.uniform(part.start_day, part.end_day, at.size)
        inside = (begin >= part.start_day) & (begin < part.end_day)
        begin, at = np.repeat(begin[inside], one.beds), np.repeat(at[inside], one.beds)
        starts.append(begin)
        ends.append(begin + one.days)
        columns.append(at)
    return np.concatenate(starts), np.concatenate(ends), np.concatenate(columns)


def _packed(replications: int, at: Array, column: NDArray[np.int64], fields: list[Array]) -> list[Array]:
    """Lay a plain list of events out as ``(rows, replications)``, each column in order; empty cells come last.

    One key for column and time sorts in half the time of two; it tells times apart down to some microseconds.
    """
    order = np.argsort(column * (at.max(initial=0.0) + 1.0) + at)
    counts = np.bincount(column, minlength=replications)
    place = np.arange(at.size) - np.repeat(np.cumsum(counts) - counts, counts)
    cells = place * replications + column[order]
    laid = []
    for field in fields:
        sheet = np.zeros((max(int(counts.max(initial=0)), 1)) * replications, dtype=field.dtype)
        sheet[cells] = field[order]
        laid.append(sheet.reshape(-1, replications))
    return laid


def _listed(demand: Demand, run: WardRun, part: Part, rate: Array) -> Comers:
    """Draw everyone where groups, booked lists or closures come into it: lists first, then one sheet."""
    stay_rng, booked_rng = part.rng(_STAYS), part.rng(_BOOKED)
    rows: list[tuple[Array, ...]] = []
    if demand.arrivals_per_day > 0:
        at, column = _unbooked(demand, run, part, rate)
        none = np.zeros(at.size)
        rows.append((at, column, demand.length_of_stay.sample(at.size, stay_rng), none, none, none + UNBOOKED))
    for one in demand.booked:
        at, ahead, column = _booked(one, run, part, booked_rng)
        stay = one.length_of_stay.sample(at.size, booked_rng)
        rows.append((at, column, stay, ahead, np.zeros(at.size), np.full(at.size, BOOKED)))
    if run.has_changing_beds:
        at, until, column = _closures(run, part)
        none = np.zeros(at.size)
        rows.append((at, column, none, none, until, none + CLOSURE))
    if not rows:
        rows.append((np.zeros(0),) * 6)
    at, column, stay, ahead, until, kind = (np.concatenate(parts) for parts in zip(*rows, strict=True))
    fields = [at, stay, ahead, until, (kind - NOBODY).astype(np.int8)]
    at, stay, ahead, until, kind = _packed(part.replications, at, column.astype(np.int64), fields)
    kind += NOBODY
    at = np.where(kind == NOBODY, part.end_day, at)
    return Comers(at, stay, math.inf, kind, ahead, until if run.has_changing_beds else None)


def _plain(demand: Demand, run: WardRun, part: Part, rate: Array) -> Comers:
    """Draw everyone where single patients are all there is: one sheet at once."""
    at = _group_days(demand, run, part, rate)
    stay = demand.length_of_stay.sample(at.size, part.rng(_STAYS)).reshape(at.shape)
    return Comers(np.minimum(at, part.end_day, out=at), stay, math.inf)


def _patience(comers: Comers, run: WardRun, rng: np.random.Generator, *, waits: bool) -> Array | float:
    """Return how long each would wait: no time where the ward turns away; without end for a bed to be shut."""
    if comers.kind is None and (not waits or math.isinf(run.patience_days)):
        return math.inf if waits else 0.0
    patience = rng.standard_exponential(comers.at.shape)
    patience *= run.patience_days if waits else 0.0
    if comers.kind is not None:
        if run.booked_decided_at is not None:
            patience[comers.kind == BOOKED] = 0.0
        patience[comers.kind == CLOSURE] = math.inf
    return patience


def draw_comers(demand: Demand, run: WardRun, part: Part, rate: Array, *, waits: bool) -> Comers:
    """Who comes in this part of the run, when, and for how long? ``rate`` ``(replications,)`` scales unbooked arrivals.

    Checked by: tests/models/test_simulation.py
    """
    is_plain = (
        demand.clustering <= 1.0 and not demand.booked and not run.has_changing_beds and demand.arrivals_per_day > 0
    )
    comers = (_plain if is_plain else _listed)(demand, run, part, rate)
    is_idle = comers.at >= part.end_day
    if comers.kind is not None:
        is_idle |= comers.kind >= CLOSURE
    # an empty cell and a shut bed must take no time of their own, turnaround included
    comers.stay_days[is_idle] = -demand.turnaround_hours * _HOUR
    leaving = part.rng(_LEAVING)
    return replace(
        comers,
        patience_days=_patience(comers, run, part.rng(_PATIENCE), waits=waits),
        clock=np.where(is_idle, -1.0, _clock(demand, leaving, is_idle.shape)) if demand.discharge_hours else None,
        slip=np.where(is_idle, 2.0, leaving.random(is_idle.shape)) if max(demand.weekend_slip) > 0 else None,
    )


def _clock(demand: Demand, rng: np.random.Generator, shape: tuple[int, ...]) -> Array:
    """Draw the time of day at which each patient leaves, as a part of a day."""
    hours = rng.choice(24, size=shape, p=np.array(demand.discharge_hours))
    return (hours + rng.random(shape)) * _HOUR
