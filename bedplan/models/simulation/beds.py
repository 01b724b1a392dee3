"""The beds of a simulated ward: everybody in turn gets the bed that empties first, many replications in one step.

A patient who finds no free bed waits for the one that empties first, or gives up when that takes longer than patience
lasts. Turning away is waiting without patience, so one rule serves every ward.

Source: Kiefer & Wolfowitz 1955, Transactions of the American Mathematical Society 78 (first come, first served).
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models.simulation.events import Comers
    from bedplan.models.value_objects.demand import Demand

    Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Passage:
    """When each comer's bed was ready, ``(rows, replications)``, when the patient in it left, and who found no free bed."""

    bed_ready: Array
    left: Array
    found_full: NDArray[np.bool_]


def all_empty(replications: int, beds: int) -> Array:
    """When does each bed empty? ``(replications, beds)``: at the start all have; without beds, one that never does.

    Checked by: tests/models/test_simulation.py
    """
    return np.zeros((replications, beds)) if beds else np.full((replications, 1), math.inf)


def _leaving(end: Array, start: Array, demand: Demand, clock: Array | None, slip: Array | None) -> Array:
    """Move the end of a stay to the hour patients leave at, and past the weekend; never before its start.

    The day a stay ends on is kept, so the hours move the mean stay by part of a day. Day 0 is a Monday.
    """
    if clock is not None:
        moved = np.floor(end) + clock
        end = np.where(moved > start, moved, end)
    if slip is not None:
        weekday = np.floor(end) % 7.0
        chance = np.where(weekday == 5.0, demand.weekend_slip[0], np.where(weekday == 6.0, demand.weekend_slip[1], 0.0))
        end = end + np.where(slip < chance, 7.0 - weekday, 0.0)
    return end


def settle_leaving(comers: Comers, demand: Demand) -> Comers:
    """Work the hours of leaving into the stays at once, for a ward where every stay starts when the patient comes.

    Checked by: tests/models/test_simulation.py
    """
    if comers.clock is None and comers.slip is None:
        return comers
    start = comers.at if comers.ahead_days is None else comers.at + comers.ahead_days
    end = _leaving(start + comers.stay_days, start, demand, comers.clock, comers.slip)
    return replace(comers, stay_days=end - start, clock=None, slip=None)


def pass_through(empties: Array, comers: Comers, demand: Demand) -> Passage:
    """Give everybody a bed in turn. ``empties`` ``(replications, beds)``, when each bed empties, is kept up to date.

    Checked by: tests/models/test_simulation.py
    """
    rows, replications = comers.at.shape
    flat, first = empties.reshape(-1), np.arange(replications) * empties.shape[1]
    ready, left = np.empty((rows, replications)), np.empty((rows, replications))
    latest = comers.latest_start
    turnaround_days = demand.turnaround_hours / 24.0
    is_simple = comers.ahead_days is None and comers.clock is None and comers.slip is None
    for row in range(rows):
        bed = empties.argmin(axis=1)
        bed += first
        emptied = flat.take(bed)
        begin = np.maximum(emptied, comers.at[row], out=ready[row])
        end = np.add(begin, comers.stay_days[row], out=left[row])
        if not is_simple:
            end[:] = _end_of_stay(comers, demand, row, begin)
        free_again = end + turnaround_days if turnaround_days else end
        if comers.shut_until is not None:
            free_again = np.maximum(free_again, comers.shut_until[row])
        if latest is not None:
            free_again = np.where(begin <= latest[row], free_again, emptied)
        flat.put(bed, free_again)
    return Passage(ready, left, ready > comers.at)


def _held_until(comers: Comers, demand: Demand) -> Array:
    """Until when does each comer of a ward where every stay starts at once hold a bed? Turnaround and shut beds included."""
    until = comers.at + comers.stay_days + demand.turnaround_hours / 24.0
    if comers.ahead_days is not None:
        until += comers.ahead_days
    return until if comers.shut_until is None else np.maximum(until, comers.shut_until)


def place_at_once(held: Array, comers: Comers, demand: Demand, beds: int) -> tuple[Passage, Array]:
    """Give everybody a bed at once, however many there are, and see who finds as many taken as there are beds.

    ``held`` ``(any, replications)``: until when beds are held by those who came before this part, in any order. Returns
    the same for the next part too.

    Checked by: tests/models/test_simulation.py
    """
    until = _held_until(comers, demand)
    everyone = np.concatenate([held, until])
    emptied = np.sort(everyone, axis=0)
    taken = np.arange(held.shape[0], everyone.shape[0])[:, None] - np.stack(
        [np.searchsorted(ends, at, side="right") for ends, at in zip(emptied.T, comers.at.T, strict=True)], axis=1
    )
    left = until - demand.turnaround_hours / 24.0
    return Passage(comers.at, left, taken >= beds), everyone


def _end_of_stay(comers: Comers, demand: Demand, row: int, begin: Array) -> Array:
    """Return when the patients of one row leave, if their beds are ready at ``begin``."""
    came = begin if comers.ahead_days is None else begin + comers.ahead_days[row]
    clock, slip = (None if sheet is None else sheet[row] for sheet in (comers.clock, comers.slip))
    return _leaving(came + comers.stay_days[row], came, demand, clock, slip)
