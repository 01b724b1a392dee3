"""Slow exact answers for wards through a week that repeats for ever, to hold the models against.

Different from the models in every step: full matrix exponentials, and states that know how many patients of each kind
or in each phase of their stay there are.
"""

from __future__ import annotations

from itertools import product
from typing import TYPE_CHECKING, NamedTuple

import numpy as np
from scipy.linalg import expm

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    Array = NDArray[np.float64]


class Phases(NamedTuple):
    """A stay in phases: chance to start in each, rate a day of leaving each, and the next phase (None = home)."""

    start: tuple[float, ...]
    per_day: tuple[float, ...]
    following: tuple[int | None, ...]


class Arrivals(NamedTuple):
    """Who comes: unbooked patients an hour ``(168,)``, in groups of one size; booked slots by hour of the week."""

    per_hour: Array
    group_size: int = 1
    booked: tuple[tuple[int, int, float], ...] = ()  # hour of the week, slots, chance to attend


def exponential(mean_days: float) -> Phases:
    """Return exponential stays as a single phase."""
    return Phases((1.0,), (1.0 / mean_days,), (None,))


class _Ward:
    def __init__(self, beds: int, stay: Phases, group_size: int) -> None:
        kinds = len(stay.start)
        self.states = [state for state in product(range(beds + 1), repeat=kinds) if sum(state) <= beds]
        self.number = {state: place for place, state in enumerate(self.states)}
        size = len(self.states)
        self.come, self.leave, self.lost = np.zeros((size, size)), np.zeros((size, size)), np.zeros(size)
        for state, place in self.number.items():
            room = beds - sum(state)
            fitting = min(group_size, room)
            self.lost[place] = (group_size - fitting) / group_size
            for mix in product(range(kinds), repeat=fitting):
                chance = float(np.prod([stay.start[kind] for kind in mix]))
                self._move(self.come, state, [(kind, 1) for kind in mix], chance / group_size)
            for kind, count in enumerate(state):
                if not count:
                    continue
                onward = stay.following[kind]
                change = [(kind, -1), *([] if onward is None else [(onward, 1)])]
                self._move(self.leave, state, change, count * stay.per_day[kind] / 24.0)
        self.one_more = [self._taken_in(kind, beds) for kind in range(kinds)]

    def _move(self, rates: Array, state: tuple[int, ...], change: Sequence[tuple[int, int]], rate: float) -> None:
        end = list(state)
        for kind, step in change:
            end[kind] += step
        rates[self.number[state], self.number[tuple(end)]] += rate
        rates[self.number[state], self.number[state]] -= rate

    def _taken_in(self, kind: int, beds: int) -> Array:
        moved = np.zeros((len(self.states), len(self.states)))
        for state, place in self.number.items():
            end = list(state)
            end[kind] += sum(state) < beds
            moved[place, self.number[tuple(end)]] = 1.0
        return moved


def turned_away(beds: int, stay: Phases, arrivals: Arrivals, booked_kind: int = 0) -> tuple[float, float]:
    """Return the share of unbooked and of booked patients turned away, over patients.

    Booked slots come evenly through their hour, ``(slot + ½)/slots``; ``booked_kind``: the phase they start in.
    """
    ward = _Ward(beds, stay, arrivals.group_size)
    full = (np.array([sum(state) for state in ward.states]) == beds).astype(float)
    steps: list[tuple[str, Array | float, Array]] = []  # a stretch of time, or one slot
    known: dict[tuple[float, float], tuple[Array, Array]] = {}

    def stretch(rate: float, hours: float) -> None:
        if (rate, hours) not in known:
            size = len(ward.states)
            system = np.zeros((size + 1, size + 1))
            system[:size, :size] = rate * ward.come + ward.leave
            system[:size, size] = ward.lost
            whole = expm(system * hours)
            known[rate, hours] = whole[:size, :size], whole[:size, size]
        move, lost = known[rate, hours]
        steps.append(("time", move, rate * lost))

    slots_of = {hour: (slots, attends) for hour, slots, attends in arrivals.booked}
    for hour, rate in enumerate(arrivals.per_hour):
        slots, attends = slots_of.get(hour, (0, 0.0))
        if not slots:
            stretch(float(rate), 1.0)
        for _ in range(slots):
            stretch(float(rate), 0.5 / slots)
            move = attends * ward.one_more[booked_kind] + (1.0 - attends) * np.eye(len(ward.states))
            steps.append(("slot", move, attends * full))
            stretch(float(rate), 0.5 / slots)
    state = _periodic(steps, len(ward.states))
    lost = {"time": 0.0, "slot": 0.0}
    for kind, move, per_state in steps:
        lost[kind] += float(state @ per_state)
        state = state @ move
    slots = sum(count * attends for count, attends in slots_of.values())
    return lost["time"] / max(float(np.sum(arrivals.per_hour)), 1e-300), lost["slot"] / max(slots, 1e-300)


def _periodic(steps: list[tuple[str, Array | float, Array]], size: int) -> Array:
    """Return the state at the start of the week that the week leads back to."""
    state = np.zeros(size)
    state[0] = 1.0
    for _ in range(400):
        start = state
        for _, move, _ in steps:
            state = state @ move
        if np.abs(state - start).sum() < 1e-10:
            break
    return state / state.sum()
