"""A ward through a week (or a year) that repeats for ever, as a chain over the number of beds in use.

In each hour patients come at that hour's rate, and each bed in use comes free at the rate at which it would if nobody
were ever turned away. So the chain wants exactly the beds of the hour-by-hour year, for any shape of stay and any
rhythm of leaving; it is the exact chain where stays are exponential, and Erlang's loss formula where nothing changes
with time. Many wards (levels of demand × bed counts) are carried side by side.

Sources: Jagerman 1975, Bell System Technical Journal 54 (loss with a rate that changes); Massey & Whitt 1994.
Checked by: tests/models/test_periodic_chain.py
"""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from bedplan.models.chains.side_by_side import Wards, at_end, in_step, through_step

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    Array = NDArray[np.float64]

_COARSE_STEPS, _LESS_COARSE_STEPS, _FINE_STEPS = 7, 2, 24
_FASTEST_LEAVING = 500.0
_LEAVING_A_PART = 2.0
_SETTLED, _SETTLED_START = 5e-3, 1e-3
_MOST_PARTS = 4
_MOST_LEAVING_PARTS = 8


class Group(NamedTuple):
    """Booked patients who come in one hour of the period: how many, and the chance that each comes."""

    hour: int
    patients: int
    attends: float


class Rhythm(NamedTuple):
    """What comes in each hour, at each level of demand: ``unbooked`` and ``load_at_end`` ``(period, levels)``."""

    unbooked: Array
    load_at_end: Array
    booked: tuple[Group, ...] = ()


class Fullness(NamedTuple):
    """How full the wards are: for each level of demand ``(period, bed counts)``.

    ``unbooked``: share of each hour all beds are taken. ``booked``: share of that hour's booked patients who find all
    beds taken, 0 where none are booked. ``mean_in_use``: mean beds in use at the end of each hour.
    """

    unbooked: list[Array]
    booked: list[Array]
    mean_in_use: list[Array]


def leaving_rates(rhythm: Rhythm) -> Array:
    """At what rate an hour does each bed in use come free, so that the beds wanted come out right at every hour's end?

    ``(period, levels)``. Solves a₁ = a₀·e^(−μ) + λ·(1 − e^(−μ))/μ + n·e^(−μ/2) for μ by Newton's method.

    Checked by: tests/models/test_periodic_chain.py
    """
    after = rhythm.load_at_end
    before, coming = np.roll(after, 1, axis=0), rhythm.unbooked
    booked = np.zeros((after.shape[0], 1))
    for group in rhythm.booked:
        booked[group.hour] += group.patients * group.attends
    gone = np.maximum(before + coming + booked - after, 0.0)
    rate = gone / np.maximum((before + after + booked) / 2.0, 1e-12)
    for _ in range(12):
        left, half = np.exp(-rate), booked * np.exp(-rate / 2.0)
        some = np.maximum(rate, 1e-6)
        came = np.where(rate > 1e-6, -np.expm1(-some) / some, 1.0 - rate / 2.0)
        slope = np.where(rate > 1e-4, (left - came) / some, -0.5 + rate / 3.0)
        excess = before * left + coming * came + half - after
        fall = -before * left + coming * slope - half / 2.0
        rate = np.clip(rate - excess / np.minimum(fall, -1e-12), 0.0, _FASTEST_LEAVING)
    # Where nobody is left, whoever rounding left behind goes too.
    return np.where(before + coming + booked < 1e-9, _FASTEST_LEAVING, rate)


class _Wards(Wards):
    """A ward for each level of demand and each of its bed counts, to the last state, "all beds in use".

    Counts that are next to never reached, far below the quietest hour's load, are left out.
    """

    def __init__(self, loads: Array, beds: Sequence[NDArray[np.int64]]) -> None:
        count = np.concatenate(beds)
        self.level_of_ward = np.repeat(np.arange(len(beds)), [counts.size for counts in beds])
        super().__init__(lowest_count(loads.min(axis=0)[self.level_of_ward], count), count)
        self.level = self.level_of_ward[self.ward]
        self.can_come = np.ones(self.ward.size)
        self.can_come[self.last] = 0.0
        self.can_leave = self.patients.copy()
        self.can_leave[self.first] = 0.0

    def step(self, state: Array, coming: Array, leaving: Array) -> tuple[Array, Array]:
        """Carry the wards through one step at these rates, ``(levels,)``: the state after it, and the share full."""
        solved = through_step(state, self.can_come * coming[self.level], self.can_leave * leaving[self.level])
        return at_end(solved), in_step(solved[self.last])

    def take_in(self, state: Array, group: Group) -> tuple[Array, Array]:
        """Let a booked group come one by one: the state after it, and how many of its slots met no free bed."""
        turned_away = np.zeros(self.last.size)
        for _ in range(group.patients):
            turned_away += state[self.last]
            moved = np.zeros_like(state)
            moved[1:] = state[:-1]
            moved[self.first] = 0.0
            moved[self.last] += state[self.last]
            state = (1.0 - group.attends) * state + group.attends * moved
        return state, turned_away


def lowest_count(quietest_load: Array, beds: NDArray[np.int64]) -> NDArray[np.int64]:
    """Return the fewest beds in use worth following in each ward.

    Checked by: tests/models/test_periodic_chain.py
    """
    least = np.minimum(quietest_load, beds)
    return np.maximum(0.0, np.floor(least - 5.0 * np.sqrt(least) - 3.0)).astype(np.int64)


def merged(rhythm: Rhythm, starts: NDArray[np.int64]) -> Rhythm:
    """What comes in longer steps, the first of which starts at 0? Booked patients come in the middle of theirs.

    Checked by: tests/models/test_seasonal.py
    """
    ends = np.append(starts[1:], rhythm.unbooked.shape[0]) - 1
    step_of = np.searchsorted(starts, [group.hour for group in rhythm.booked], side="right") - 1
    return Rhythm(
        np.add.reduceat(rhythm.unbooked, starts, axis=0),
        rhythm.load_at_end[ends],
        tuple(group._replace(hour=int(step)) for group, step in zip(rhythm.booked, step_of, strict=True)),
    )


def _coarser(rhythm: Rhythm, size: int, fine: int) -> Rhythm:
    """Return the same period in steps of this many of its own, the last ``fine`` of which are left as they are."""
    period = rhythm.unbooked.shape[0]
    tail = max(period - fine, 0)
    return merged(rhythm, np.append(np.arange(0, tail, size), np.arange(tail, period)))


def _settled_start(wards: _Wards, rhythm: Rhythm) -> Array:
    """Return the state in which the period starts: a few periods in coarse steps, and one in less coarse ones."""
    coarse = _coarser(rhythm, _COARSE_STEPS, 0)
    rates = leaving_rates(coarse)
    states = [wards.truncated_poisson(rhythm.load_at_end[-1, wards.level_of_ward])]
    for turn in range(6):
        states.append(wards.scaled(_one_period(wards, coarse, rates, states[-1])[0]))
        if wards.total(np.abs(states[-1] - states[-2])).max() < _SETTLED_START:
            break
        if turn % 2:
            states = [_jump_ahead(wards, states[-3:])]
    finer = _coarser(rhythm, _LESS_COARSE_STEPS, _FINE_STEPS)
    return _one_period(wards, finer, leaving_rates(finer), states[-1])[0]


def _jump_ahead(wards: _Wards, states: Sequence[Array]) -> Array:
    """Return where three states, each a period after the other, are heading (Aitken's extrapolation)."""
    first, second = states[1] - states[0], states[2] - states[1]
    ratio = np.clip(wards.total(first * second) / np.maximum(wards.total(first**2), 1e-300), -0.5, 0.97)
    return wards.scaled(states[2] + second * (ratio / (1.0 - ratio))[wards.ward])


def fullness(rhythm: Rhythm, beds: Sequence[NDArray[np.int64]], most_periods: int = 4) -> Fullness:
    """How full is each ward in each hour, for each level of demand and each of its bed counts?

    ``beds``: for each level whole numbers of 1 or more. Followed until the end of a period looks like its start.

    Checked by: tests/models/test_periodic_chain.py
    """
    wards = _Wards(rhythm.load_at_end, beds)
    state, rates = _settled_start(wards, rhythm), leaving_rates(rhythm)
    for _ in range(most_periods):
        start = state
        state, found = _one_period(wards, rhythm, rates, start)
        if wards.total(np.abs(state - start)).max() < _SETTLED:
            break
    ends = np.cumsum([counts.size for counts in beds])[:-1]
    return Fullness(*(np.split(np.maximum(part, 0.0), ends, axis=1) for part in found))


def _one_period(wards: _Wards, rhythm: Rhythm, rates: Array, state: Array) -> tuple[Array, Fullness]:
    """Carry the wards through one period: the state after it, and how full they were, all wards side by side."""
    groups: dict[int, list[Group]] = {}
    for group in rhythm.booked:
        groups.setdefault(group.hour, []).append(group)
    found = Fullness(*(np.zeros((rates.shape[0], wards.last.size)) for _ in range(3)))
    for hour in range(rates.shape[0]):
        state = _one_hour(wards, state, (rhythm.unbooked[hour], rates[hour]), groups.get(hour, ()), found, hour)
    return state, found


def _one_hour(
    wards: _Wards, state: Array, rates: tuple[Array, Array], groups: Sequence[Group], found: Fullness, hour: int
) -> Array:
    """Carry the wards through one hour, booked groups spread over it, and note how full they were."""
    patients = sum(group.patients for group in groups)
    hurried = int(min(rates[1].max() / _LEAVING_A_PART, _MOST_LEAVING_PARTS))
    parts = max(min(patients, _MOST_PARTS), hurried, 1)
    lengths = np.full(parts, 1.0 / parts)
    if groups:
        # a booked patient comes in the middle of a part: from one to the next is a whole part's time
        lengths = np.append(lengths, lengths[0])
        lengths[[0, -1]] /= 2.0
    for part, length in enumerate(lengths):
        state, full = wards.step(state, rates[0] * length, rates[1] * length)
        found.unbooked[hour] += full * length
        for group in groups if part < parts else ():
            some = group._replace(patients=_share(group.patients, part, parts))
            state, turned_away = wards.take_in(state, some)
            found.booked[hour] += turned_away
    found.booked[hour] /= max(patients, 1)
    found.mean_in_use[hour] = wards.total(state * wards.patients)
    return state


def _share(patients: int, part: int, parts: int) -> int:
    """Return how many of these patients come in this part of the hour."""
    return (part + 1) * patients // parts - part * patients // parts
