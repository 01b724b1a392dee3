"""A queue that follows the year: patients who wait are carried from busy weeks into the next, on every bed count at once.

Carried is x, the mean number of patients in the ward and in its queue. A steady ward holds a known x at each use of
its beds; turned round, x says how many beds are in use, how many patients wait and for how long.

Symbols: a(t) beds wanted if nobody ever waited, c beds, m mean time a bed is held, b(x) beds in use at x.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, NamedTuple

import numpy as np
from scipy.linalg import blas

from bedplan.models.formulas.clusters import loss_table
from bedplan.models.queue.spread import wait_ratio
from bedplan.models.rhythm.within_hour import looks

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models.queue.spread import Spread

    Array = NDArray[np.float64]

_USES = np.unique(np.concatenate([np.linspace(1e-4, 0.98, 100), 1.0 - np.geomspace(1e-8, 0.3, 90)]))
_POINTS = 500
_LONGEST_QUEUE = 1e6
_SETTLED, _MOST_TURNS = 1e-5, 60
_FEW = 1e-3
_SWING = 0.9
_CELLS_AT_ONCE = 30_000
_STEEP, _LOOKS = 0.15, 4


def share_who_wait(loads: Array, counts: NDArray[np.int64], peakedness: float) -> Array:
    """Return the delay share C for each count above 0 and each load, ``(n, k)``.

    Exact for exponential stays, in groups of equal size too: up to c patients loss and delay have the same ratios
    between neighbouring states, and beyond c beds come free at one rate.

    Source: Erlang 1917: C = B / (1 − (a/c)·(1 − B)).
    Checked by: tests/models/test_waiting.py
    """
    blocked = loss_table(loads, counts, peakedness)
    use = np.minimum(loads / counts[:, None], 1.0)
    steady = use < 1.0
    return np.where(steady, blocked / np.where(steady, 1.0 - use * (1.0 - blocked), 1.0), 1.0)


class Pace(NamedTuple):
    """How long a step is, how long a bed is held on average, and how many steps the queue is carried over at once."""

    step_days: float
    mean_days: float
    steps_at_once: int = 1


@dataclass(frozen=True, slots=True, eq=False)
class Wards:
    """What x says of a steady ward at each bed count, ascending; ``number``: its column in the sheets.

    Sheets ``(points, wards)`` evenly in arsinh((x − c)·scale), scale = 1/√c: patients who wait × free beds, which
    hardly changes once a queue is long; the logarithm of the mean wait, in mean stays, of those who wait; and ln C
    without its power law near no patients (see ``_law``).
    """

    number: NDArray[np.int64]
    beds: Array
    scale: Array
    first: Array
    steps: Array
    power: Array
    product: Array
    log_stays: Array
    log_wait: Array

    def only(self, which: NDArray[np.int64]) -> Wards:
        """Return some of the wards; the sheets are shared."""
        some = (getattr(self, name)[which] for name in ("number", "beds", "scale", "first", "steps", "power"))
        return Wards(*some, self.product, self.log_stays, self.log_wait)

    def largest(self, many: int) -> Wards:
        """Return the wards of the largest bed counts, so many of them."""
        return self.only(np.arange(self.number.size - many, self.number.size))

    def place(self, present: Array) -> tuple[NDArray[np.int64], Array]:
        """Return the cell below each x and the way to the next, for x ``(..., wards)``."""
        at = (np.arcsinh((present - self.beds) * self.scale) - self.first) * self.steps
        np.minimum(at, _POINTS - 1.001, out=at)
        point = at.astype(np.int64)
        return point * self.product.shape[1] + self.number, at - point

    def in_use(self, present: Array) -> tuple[Array, Array]:
        """Return b(x) and its slope, for x ``(..., wards)``."""
        cell, way = self.place(present)
        flat, over = self.product.reshape(-1), present - self.beds
        low = flat.take(cell)
        rise = flat.take(cell + self.product.shape[1]) - low
        # from (x − b)·(c − b) = product
        root = np.sqrt(over**2 + 4.0 * (low + way * rise))
        in_use = (present + self.beds - root) / 2.0
        grows = rise * self.steps * self.scale / np.sqrt(1.0 + (over * self.scale) ** 2)
        return in_use, np.clip((self.beds - in_use - grows) / np.maximum(root, 1e-9), 0.0, 1.0)

    def waits(self, present: Array) -> tuple[Array, Array]:
        """Return C and the mean wait in mean stays of those who wait, for x ``(..., wards)``."""
        cell, way = self.place(present)
        logs = _read(self.log_wait, cell, way) + _law(self.power, self.beds, present)
        return np.exp(np.minimum(logs, 0.0)), np.exp(_read(self.log_stays, cell, way))

    def queue_at(self, loads: Array) -> Array:
        """Return each steady ward's queue at loads ``(k,)``, ``(k, wards)``; where they aren't below the beds, none."""
        over = np.sinh(self.first + np.arange(_POINTS)[:, None] / self.steps) / self.scale
        waiting = (over + np.sqrt(over**2 + 4.0 * self.product[:, self.number])) / 2.0
        in_use = self.beds + over - waiting
        queue = np.stack([np.interp(loads, *both) for both in zip(in_use.T, waiting.T, strict=True)], axis=1)
        return np.where(loads[:, None] < 0.999 * self.beds, np.maximum(queue, 0.0), 0.0)


def _law(power: Array, beds: Array, present: Array) -> Array:
    """Return the logarithm that C follows near no patients, power·ln x, bent to stay level from c patients on."""
    x = np.maximum(present, 1e-12)
    return power * np.log(x / (1.0 + x / beds))


def _read(sheet: Array, cell: NDArray[np.int64], way: Array) -> Array:
    """Read a sheet on a straight line between its points."""
    flat, width = sheet.reshape(-1), sheet.shape[1]
    low = flat.take(cell)
    return low + way * (flat.take(cell + width) - low)


def steady_wards(spread: Spread, counts: NDArray[np.int64]) -> Wards:
    """Work out, at every bed count, how many patients a steady ward holds at each use, and turn it round.

    Checked by: tests/models/test_waiting.py
    """
    beds = counts.astype(float)
    power = beds / spread.peakedness
    loads = np.concatenate([np.geomspace(1e-6, 1e-2, 40), np.arange(0.1, np.sqrt(beds[-1]) + 0.05, 0.05)[1:] ** 2])
    shares = np.maximum(share_who_wait(loads, counts, spread.peakedness), 1e-300)
    logs = np.log(shares) - power[:, None] * np.log(loads)
    wanted = beds[:, None] * _USES
    smooth = np.empty_like(wanted)
    for j, most in enumerate(beds):
        below = np.searchsorted(loads, most)
        known = np.append(logs[j, :below], -power[j] * np.log(most))
        smooth[j] = np.interp(wanted[j], np.append(loads[:below], most), known)
    stays = wait_ratio(spread, beds[:, None], wanted) / (beds[:, None] * (1.0 - _USES))
    present = wanted * (1.0 + np.exp(smooth + power[:, None] * np.log(wanted)) * stays)
    first = np.arcsinh(-np.sqrt(beds))
    step = (np.arcsinh(_LONGEST_QUEUE / np.sqrt(beds)) - first) / (_POINTS - 1)
    sheet = beds + np.sqrt(beds) * np.sinh(first + np.arange(_POINTS)[:, None] * step)
    sheets = np.empty((3, *sheet.shape))
    for j in range(beds.size):
        in_use = np.interp(sheet[:, j], present[j], wanted[j])
        log_stays = np.interp(sheet[:, j], present[j], np.log(stays[j]))
        log_wait = np.interp(in_use, wanted[j], smooth[j]) + power[j] * np.log(in_use)
        sheets[:, :, j] = in_use, log_stays, log_wait
    some = sheet > present[:, 0]
    sheets[2] = np.where(some, sheets[2] - _law(power, beds, sheet), 0.0)
    sheets[2, 0] = sheets[2, 1]
    sheets[0] = np.where(some, np.maximum(sheet - sheets[0], 0.0) * (beds - sheets[0]), 0.0)
    return Wards(np.arange(beds.size), beds, 1.0 / np.sqrt(beds), first, 1.0 / step, power, *sheets)


def _at_least_waiting(wanted: Array, beds: Array, share: float) -> Array:
    """Return the queue if every bed were in use as soon as anybody waits: never more than there is (Lindley 1952)."""
    grown = np.cumsum(np.tile(share * (wanted - beds), (2, 1)), axis=0)
    queue = grown - np.minimum.accumulate(np.minimum(grown, 0.0))
    return queue[wanted.shape[0] - 1 : -1]


def _comes_back(kept: Array, added: Array) -> Array:
    """Return what repeats with the period and follows δ(k+1) = kept(k)·δ(k) + added(k), all ``(steps, wards)``.

    What is added, and what is left of one unit from the start, one column after the other in one long recursion.
    """
    steps, columns = kept.shape
    band = np.ones((2, columns, steps))
    np.negative(kept.T, out=band[1])
    band[1, :, -1] = 0.0
    sums, shares = np.zeros((2, columns, steps))
    sums[:, 1:], shares[:, 0] = added.T[:, :-1], 1.0
    for rows in (sums, shares):
        rows[:] = blas.dtbsv(1, band.reshape(2, -1), rows.ravel(), lower=1, diag=1, overwrite_x=1).reshape(rows.shape)
    start = (kept[-1] * sums[:, -1] + added[-1]) / np.maximum(1.0 - kept[-1] * shares[:, -1], 1e-12)
    return (sums + shares * start[:, None]).T


def _settled(wards: Wards, wanted: Array, share: float) -> Array:
    """Return x through a period, a year or a week, that comes back to itself; beds give up ``share`` of b in a step.

    All steps at once by Newton's method: b(x) bends one way only, so each turn comes nearer from the same side. Where
    even the busiest step keeps few waiting, nothing is carried.
    """
    *light, usual = wards.queue_at(np.append(wanted, wanted.mean()))
    busiest, wanted = wanted.argmax(), wanted[:, None]
    present = wanted + np.array(light)
    keeps_few = wards.waits(present[busiest])[0] < _FEW
    left = np.flatnonzero((wanted[busiest] >= wards.beds) | ~keeps_few)
    present[:, left] = wanted + np.maximum(_at_least_waiting(wanted, wards.beds[left], share), usual[left])
    for _ in range(_MOST_TURNS):
        if not left.size:
            break
        some, here = wards.only(left), present[:, left]
        in_use, slope = some.in_use(here)
        queue = here - wanted
        # stays shorter than a step: within it the queue nears what the load keeps waiting, and never swings past it
        gives = share if share <= 1.0 else -np.expm1(-share * slope) / np.maximum(slope, 1e-12)
        missing = queue + gives * (wanted - in_use) - np.roll(queue, -1, axis=0)
        change = np.maximum(_comes_back(1.0 - gives * slope, missing), -queue)
        present[:, left] = np.minimum(here + change, _LONGEST_QUEUE)
        left = left[np.abs(change).max(axis=0) > _SETTLED * some.beds]
    return present


def _carried(wards: Wards, wanted: Array, pace: Pace) -> Array:
    """Return x in every step, carried over several at once."""
    together = wanted.reshape(-1, pace.steps_at_once)
    mean = together.mean(axis=1)
    queue = _settled(wards, mean, pace.steps_at_once * pace.step_days / pace.mean_days) - mean[:, None]
    return (together[:, :, None] + queue[:, None]).reshape(wanted.size, -1)


def settled_queue(wards: Wards, wanted: Array, pace: Pace, rise: Array) -> tuple[Array, Array]:
    """Who waits of those who come in each step of a year, or a week, that repeats for ever, and how long on average?

    ``wanted`` ``(steps,)``: beds wanted if nobody ever waited, on average less than the beds of each ward. Returns the
    share who wait and the mean wait in mean stays of those who do, both ``(steps, wards)``. x follows dx/dt = a'(t) + (a(t) − b(x))/m:
    without a queue x is a(t), whatever the shape of stay; with one, the beds give up b(x)/m patients a day. Steps
    carried over at once share one queue, on which each step's own load rides. ``rise`` ``(steps,)``: by how much the
    beds wanted rise within each step as a list comes in; who comes late in it finds its earlier patients there.

    Source: Wang, Tipper & Banerjee 1996, IEEE INFOCOM (pointwise stationary fluid flow).
    Checked by: tests/models/test_waiting.py
    """
    present = _carried(wards, wanted, pace)
    wait, stays = np.empty((2, *present.shape))
    # some steps at a time fit the processor's fast memory
    at_once = max(1, _CELLS_AT_ONCE // present.shape[1])
    for start in range(0, present.shape[0], at_once):
        some = slice(start, start + at_once)
        wait[some], stays[some] = wards.waits(present[some])
    steep = np.flatnonzero(np.abs(rise) > _STEEP * np.sqrt(np.maximum(wanted, 1.0)))
    if steep.size:
        places, weights = looks(_LOOKS)
        within = present[steep, None] + (rise[steep, None] * (places - 0.5))[:, :, None]
        shares, longer = wards.waits(np.maximum(within, 0.0))
        wait[steep] = weights @ shares
        stays[steep] = weights @ (shares * longer) / np.maximum(wait[steep], 1e-300)
    return wait, stays


def raised_by_swing(wait: Array, wanted: Array, patients: Array, weeks: int) -> Array:
    """Which share waits of those who come in each step, if demand swings through the week? ``(steps, wards)``.

    A steady ward that holds x patients has emptier and fuller days behind it than one filled from Monday to Wednesday:
    at the same x fewer find all beds in use. So p, the share of a whole week, is raised by p²·(1 − p)·s²/(s² + 0.9);
    s is half the range of beds wanted in the week ÷ √beds wanted. Fitted to exact chains with exponential stays. ``wait``
    is the share at x, ``wanted`` and ``patients`` ``(steps,)`` for whole weeks, so many of them.

    Checked by: tests/models/test_waiting.py
    """
    wanted, patients = wanted.reshape(weeks, -1), patients.reshape(weeks, -1)
    swing = np.ptp(wanted, axis=1) ** 2 / 4.0 / np.maximum(wanted.mean(axis=1), 1e-300)
    part = (swing / (swing + _SWING))[:, None]
    in_weeks = wait.reshape(*wanted.shape, -1)
    everyone = np.maximum(patients.sum(axis=1), 1e-300)[:, None]
    share = (patients[:, None] @ in_weeks)[:, 0] / everyone
    raised = in_weeks * (1.0 + part * share * (1.0 - share))[:, None]
    return np.minimum(raised, 1.0, out=raised).reshape(wait.shape)
