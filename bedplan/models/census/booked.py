"""How many booked patients are in beds at once: each is there or not, with a known chance.

Those of one list come at any moment of its hour, so the number of them placed so far grows evenly through that hour.
"""

from __future__ import annotations

from functools import lru_cache
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from bedplan.models.rhythm.leaving import HOURS_A_WEEK, HOURS_A_YEAR, Leaving, hours_held
from bedplan.models.rhythm.within_hour import held_at, looks

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models.value_objects.demand import BookedList

    Array = NDArray[np.float64]
    Counts = NDArray[np.int64]

_NOBODY = 1e-9
_LITTLE, _UNCHANGED = 0.15, 0.01
_MOST_LOOKS = 32
_CELLS_AT_ONCE = 30_000


def number_present(chances: Array, patients: Counts, weights: Array, starts: Counts) -> Array:
    """How likely is each number of patients, if each is there with its own chance? ``(n, kinds)`` -> ``(m, k)``.

    ``patients`` ``(kinds,)`` have the same chance each. The n laws are averaged to m, with ``weights`` ``(n,)`` that
    add up to 1 from each of ``starts`` ``(m,)`` to the next. Numbers too large to happen (chance below 1e-15 or so)
    are left out.

    Source: Gallivan & Utley 2005, IMA Journal of Management Mathematics 16:173-186; Hong 2013 (Poisson-binomial,
    by its characteristic function).
    Checked by: tests/models/test_unlimited.py
    """
    mean = chances @ patients
    room = 9.0 * np.sqrt((chances * (1.0 - chances)) @ patients) + 30.0
    fewest = max(0, int((mean - room).min()))
    points = min(int(patients.sum()), int((mean + room).max())) + 1 - fewest
    around = 2j * np.pi * np.arange(points // 2 + 1) / points
    turn = np.exp(-around) - 1.0
    law = weights[:, None] * np.exp(fewest * around)
    step = max(1, _CELLS_AT_ONCE // turn.size)
    for start in range(0, law.shape[0], step):
        law[start : start + step] *= _characteristic(chances[start : start + step], patients, turn)
    likely = np.fft.irfft(np.add.reduceat(law, starts, axis=0), points)
    return np.pad(np.maximum(likely, 0.0), ((0, 0), (fewest, 0)))


def _characteristic(chances: Array, patients: Counts, turn: NDArray[np.complex128]) -> NDArray[np.complex128]:
    """Return the characteristic function of the number present, ``(n, turns)``: Π (1 + chance × turn) over patients."""
    law = np.ones((chances.shape[0], turn.size), dtype=complex)
    one = np.empty_like(law)
    for alike in np.unique(patients[patients > 0]).tolist():
        together = np.ones_like(law)
        for kind in np.flatnonzero(patients == alike):
            np.multiply(chances[:, kind, None], turn, out=one)
            one += 1.0
            together *= one
        law *= _power(together, alike)
    return law


def _power(base: NDArray[np.complex128], exponent: int) -> NDArray[np.complex128]:
    """Raise to a whole power of 1 or more by squaring: ``base`` is used up."""
    result = None
    while True:
        if exponent % 2:
            result = base.copy() if result is None else result * base
        exponent //= 2
        if exponent == 0:
            return result
        np.multiply(base, base, out=base)


class Kinds(NamedTuple):
    """Booked patients with the same chance to be there: those of one list, weekday and week, ``(kinds,)`` each.

    ``of_list``: which list; ``came``: hour of the week; ``weeks`` ago; how many ``patients``. ``listed`` are all of that
    list and day: of those who came this week one stands apart, ``is_one``.
    """

    of_list: Counts
    came: Counts
    weeks: Counts
    patients: Counts
    listed: Counts
    is_one: Counts


def _kinds(booked: tuple[BookedList, ...], leaving: Leaving) -> Kinds:
    """Return everyone who may still be there."""
    rows = []
    for place, one in enumerate(booked):
        held = hours_held(one.length_of_stay, leaving, HOURS_A_YEAR, at_end=True)
        for day, listed in enumerate(one.per_weekday):
            if listed == 0 or one.attends == 0.0:
                continue
            came = 24 * day + one.hour
            by_week = held[came % held.shape[0]].reshape(-1, HOURS_A_WEEK).max(axis=1)
            weeks = np.union1d([0], np.flatnonzero(one.attends * by_week > _NOBODY)).tolist()
            rows += [(place, came, week, listed - (week == 0), listed, 0) for week in weeks]
            rows.append((place, came, 0, 1, listed, 1))
    return Kinds(*np.array(rows, dtype=np.int64).reshape(-1, 6).T)


def _chances(booked: tuple[BookedList, ...], leaving: Leaving, kinds: Kinds, hours: Array) -> Array:
    """Return with which chance each kind of patient is in a bed at these hours of the week, ``(n, kinds)``."""
    chances = np.empty((hours.size, kinds.came.size))
    for place, one in enumerate(booked):
        mine = kinds.of_list == place
        since = (hours[:, None] - kinds.came[mine]) % HOURS_A_WEEK + HOURS_A_WEEK * kinds.weeks[mine]
        share = held_at(one.length_of_stay, leaving, kinds.came[mine], since)
        chances[:, mine] = one.attends * np.clip(share, 0.0, 1.0)
    return chances


class BookedCensus(NamedTuple):
    """How likely is each number of booked patients in beds, ``(168 × parts, k)``?

    At any moment, and as the booked patients who come just then find it, themselves left out.
    """

    at_any_moment: Array
    when_booked_come: Array


@lru_cache(maxsize=128)
def booked_census(booked: tuple[BookedList, ...], leaving: Leaving, parts: int = 1) -> BookedCensus:
    """How likely is each number of booked patients in beds in each hour of the week, or in each part of it?

    Within its hour a list's number is averaged over the moment looked at, exactly for up to 60 patients.

    Source: Gallivan & Utley 2005, IMA Journal of Management Mathematics 16:173-186.
    Checked by: tests/models/test_unlimited.py
    """
    kinds = _kinds(booked, leaving)
    if kinds.came.size == 0:
        return BookedCensus(np.ones((1, 1)), np.ones((1, 1)))
    moments, row, weights = _moments(booked, leaving, kinds, parts)
    chances = _chances(booked, leaving, kinds, moments)
    starts = np.flatnonzero(np.diff(row, prepend=-1))
    at_any_moment = number_present(chances, kinds.patients, weights, starts)

    comers = np.array([booked[place].attends for place in kinds.of_list]) * np.where(kinds.is_one, kinds.listed, 0)
    kind, seen = np.nonzero((comers[:, None] > 0) & (kinds.came[:, None] == row // parts))
    kind, seen = (some[np.argsort(seen, kind="stable")] for some in (kind, seen))
    others = chances[seen]
    others[np.arange(seen.size), kind] = 0.0
    starts = np.flatnonzero(np.diff(row[seen], prepend=-1))
    weights = weights[seen] * comers[kind]
    weights /= np.repeat(np.add.reduceat(weights, starts), np.diff(starts, append=seen.size))
    found = number_present(others, kinds.patients, weights, starts)
    when_booked_come = np.zeros((HOURS_A_WEEK * parts, found.shape[1]))
    when_booked_come[row[seen][starts]] = found
    return BookedCensus(at_any_moment, when_booked_come)


def _moments(booked: tuple[BookedList, ...], leaving: Leaving, kinds: Kinds, parts: int) -> tuple[Array, Counts, Array]:
    """Choose when to look in each part of each hour, by how many patients come or leave in it.

    Returns hours of the week ``(n,)`` ascending, the part of the week each is in, and its weight there.
    """
    at_ends = _chances(booked, leaving, kinds, np.arange(1, HOURS_A_WEEK + 1) - 1e-9)
    change = np.abs(at_ends - np.roll(at_ends, 1, axis=0))
    swing = np.sqrt(np.maximum((at_ends * (1.0 - at_ends)) @ kinds.patients, 0.25))
    swings, moving = change @ kinds.patients / parts / swing, (change > _UNCHANGED) @ kinds.patients
    counts = np.minimum(2 + np.minimum(moving / 2.0, 1.5 * swings).astype(np.int64), _MOST_LOOKS)
    counts = np.repeat(np.where(swings < _LITTLE, 1, counts), parts)
    places, weights = (np.concatenate(both) for both in zip(*map(looks, counts.tolist()), strict=True))
    row = np.repeat(np.arange(counts.size), counts)
    hour, part = np.divmod(row, parts)
    width = looks(parts)[1]
    begin = np.cumsum(width) - width
    return hour + begin[part] + width[part] * places, row, weights
