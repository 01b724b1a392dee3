"""A queue that follows the year: patients who wait are carried from busy weeks into the next, on every bed count at once.

Carried is x, the mean number of patients in the ward and in its queue. A steady ward holds a known x at each use of
its beds; turned round, x says how many beds are in use, how many patients wait and for how long.

Symbols: a(t) beds wanted if nobody ever waited, c beds, m mean time a bed is held, b(x) beds in use at x.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, fields
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from bedplan.models.erlang import erlang_b_table
from bedplan.models.waiting_spread import wait_ratio

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models.waiting_spread import Spread

    Array = NDArray[np.float64]

_USES = np.unique(np.concatenate([np.linspace(1e-4, 0.98, 100), 1.0 - np.geomspace(1e-8, 0.3, 90)]))
_POINTS = 500
_LONGEST_QUEUE = 1e6
_SETTLED = 3e-8
_FEW = 1e-3


def share_who_wait(loads: Array, counts: NDArray[np.int64], peakedness: float) -> Array:
    """Return the delay share C for each count above 0 and each load, ``(n, k)``; peaked demand by Hayward, C(c/z, a/z).

    Loss at parts of a bed is read between whole ones on a straight line of logarithms.

    Source: Erlang 1917: C = B / (1 − (a/c)·(1 − B)); Fredericks 1980, Bell System Technical Journal 59 (Hayward).
    """
    beds = counts / peakedness
    below = np.floor(beds).astype(np.int64)
    needed = np.unique(np.concatenate([below, below + 1]))
    logs = np.log(np.maximum(erlang_b_table(loads / peakedness, needed), 1e-300))
    part = (beds - below)[:, None]
    low, high = np.searchsorted(needed, below), np.searchsorted(needed, below + 1)
    blocked = np.where(part > 0.0, np.exp((1.0 - part) * logs[low] + part * logs[high]), np.exp(logs[low]))
    use = np.minimum(loads / counts[:, None], 1.0)
    steady = use < 1.0
    return np.where(steady, blocked / np.where(steady, 1.0 - use * (1.0 - blocked), 1.0), 1.0)


class Pace(NamedTuple):
    """How long a step is, how long a bed is held on average, and after how many years a queue is taken as it is."""

    step_days: float
    mean_days: float
    most_years: int


@dataclass(frozen=True, slots=True, eq=False)
class _Columns:
    """What x says in each column, a bed count at one rate of arrival.

    Sheets ``(points, columns)`` evenly in arsinh((x − c)·scale), scale = 1/√c: the share of x that waits, the logarithm
    of the mean wait, in mean stays, of those who wait, and ln C without its power law near no patients (see
    ``_law``).
    """

    number: NDArray[np.int64]
    beds: Array
    scale: Array
    first: Array
    steps: Array
    power: Array
    queued: Array
    log_stays: Array
    log_wait: Array

    def only(self, which: NDArray[np.int64]) -> _Columns:
        """Return some of the columns."""
        rest = (np.ascontiguousarray(getattr(self, one.name)[..., which]) for one in fields(self)[1:])
        return _Columns(np.arange(which.size), *rest)

    def place(self, present: Array) -> tuple[NDArray[np.int64], Array]:
        """Return the cell below each x and the way to the next, for x ``(..., columns)``."""
        at = (np.arcsinh((present - self.beds) * self.scale) - self.first) * self.steps
        np.minimum(at, _POINTS - 1.001, out=at)
        point = at.astype(np.int64)
        return point * self.number.size + self.number, at - point

    def in_use(self, present: Array) -> Array:
        """Return b(x) for x ``(..., columns)``."""
        return present - present * _read(self.queued, *self.place(present))

    def waits(self, present: Array) -> tuple[Array, Array]:
        """Return C and the mean wait in mean stays of those who wait, for x ``(..., columns)``."""
        cell, way = self.place(present)
        logs = _read(self.log_wait, cell, way) + _law(self.power, self.beds, present)
        return np.exp(np.minimum(logs, 0.0)), np.exp(_read(self.log_stays, cell, way))

    def queue_at(self, loads: Array) -> Array:
        """Return the queue of a steady ward at loads ``(..., columns)``; where they aren't below the beds, none."""
        sheet = self.beds + np.sinh(self.first + np.arange(_POINTS)[:, None] / self.steps) / self.scale
        queued = self.queued * sheet
        columns = zip(loads.T, queued.T, sheet.T, strict=True)
        queue = np.array([np.interp(load, present - wait, wait) for load, wait, present in columns]).T
        return np.where(loads < 0.999 * self.beds, np.maximum(queue, 0.0), 0.0)


def _law(power: Array, beds: Array, present: Array) -> Array:
    """Return the logarithm that C follows near no patients, power·ln x, bent to stay level from c patients on."""
    x = np.maximum(present, 1e-12)
    return power * np.log(x / (1.0 + x / beds))


def _read(sheet: Array, cell: NDArray[np.int64], way: Array) -> Array:
    """Read a sheet on a straight line between its points."""
    flat, width = sheet.reshape(-1), sheet.shape[1]
    low = flat.take(cell)
    return low + way * (flat.take(cell + width) - low)


def _columns(spread: Spread, counts: NDArray[np.int64]) -> _Columns:
    """Work out, at every bed count, how many patients a steady ward holds at each use, and turn it round."""
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
    sheets[0] = np.where(some, np.maximum(1.0 - sheets[0] / np.where(some, sheet, 1.0), 0.0), 0.0)
    return _Columns(np.arange(beds.size), beds, 1.0 / np.sqrt(beds), first, 1.0 / step, power, *sheets)


def _a_period(columns: _Columns, wanted: Array, queue: Array, share: float, present: Array) -> Array:
    """Carry the queues through one period from the first row on, note x in each row, and return the queues after it."""
    for row in range(wanted.shape[0]):
        here = np.add(queue, wanted[row], out=present[row])
        queue = queue + share * (wanted[row] - columns.in_use(here))
    return queue


def _settled(columns: _Columns, wanted: Array, pace: Pace) -> tuple[Array, Array]:
    """Return x through a period, a year or a week, that comes back to itself, and the mean beds in use, by column.

    A queue a period on is nearly a straight line of the queue it starts from: two periods give the line, and the line
    the queue that stays (Aitken 1926). Where even the busiest step keeps few waiting, nothing is carried.
    """
    light = columns.queue_at(wanted)
    present = wanted + light
    busiest = np.take_along_axis(present, wanted.argmax(axis=0)[None], axis=0)
    keeps_few = columns.waits(busiest)[0][0] < _FEW
    left = np.flatnonzero((wanted.max(axis=0) >= columns.beds) | ~keeps_few)
    queue, in_use = light[0, left], wanted.mean(axis=0)
    share = pace.step_days / pace.mean_days
    period_days = wanted.shape[0] * pace.step_days
    for _ in range(math.ceil(182.0 * pace.most_years / period_days)):
        some, asked = columns.only(left), wanted[:, left]
        sheet = np.empty(asked.shape)
        after = _a_period(some, asked, queue, share, sheet)
        later = _a_period(some, asked, after, share, sheet)
        present[:, left], in_use[left] = sheet, some.in_use(sheet).mean(axis=0)
        moves = np.abs(later - after) > _SETTLED * some.beds * period_days
        if not moves.any():
            break
        queue = _where_it_comes_back(queue, after, later)[moves]
        left = left[moves]
    return present, in_use


def _where_it_comes_back(before: Array, after: Array, later: Array) -> Array:
    """Follow the line through two periods' queues to the queue that stays the same."""
    run, rise = after - before, later - after
    slope = np.clip(np.divide(rise, run, out=np.zeros_like(run), where=np.abs(run) > 1e-12), 0.0, 0.9999)
    return np.clip(after + rise / (1.0 - slope), 0.0, _LONGEST_QUEUE)


@dataclass(frozen=True, slots=True, eq=False)
class SettledQueue:
    """The settled year or week, ``(steps, columns)``: who waits of those who come then, and for how long on average.

    ``wait`` is a share; ``wait_days`` the mean over those who wait; ``in_use`` ``(columns,)`` mean beds in use.
    """

    wait: Array
    wait_days: Array
    in_use: Array


def settled_queue(
    spread: Spread, counts: NDArray[np.int64], wanted: Array, columns: NDArray[np.int64], pace: Pace
) -> SettledQueue:
    """How does the queue go through a year, or a week, that repeats for ever?

    ``counts`` ``(n,)`` above 0, ascending; ``columns`` ``(k,)``: the place in ``counts`` of each column; ``wanted``
    ``(steps, k)``: beds wanted if nobody ever waited, on average less than the beds. x follows
    dx/dt = a'(t) + (a(t) − b(x))/m: without a queue x is a(t), whatever the shape of stay; with one, the beds give up
    b(x)/m patients a day.

    Source: Wang, Tipper & Banerjee 1996, IEEE INFOCOM (pointwise stationary fluid flow).
    Checked by: tests/models/test_waiting.py
    """
    wards = _columns(spread, counts).only(columns)
    quietest = int(np.argmin(wanted[:, 0]))
    present, in_use = _settled(wards, np.roll(wanted, -quietest, axis=0), pace)
    wait, stays = wards.waits(np.roll(present, quietest, axis=0))
    return SettledQueue(wait, pace.mean_days * stays, in_use)
