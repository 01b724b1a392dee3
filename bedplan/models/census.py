"""How many patients want a bed at once, if nobody is ever turned away: the whole distribution, not its mean alone.

Unbooked patients: Poisson about the load of the hour; negative binomial when they come together or their rate is
uncertain, binomial when they come more evenly than chance. Booked patients: each is there or not, with a known chance.
"""

from __future__ import annotations

from functools import lru_cache
from itertools import pairwise
from typing import TYPE_CHECKING, NamedTuple

import numpy as np
from scipy import special

from bedplan.models.clusters import group_sizes, peakedness
from bedplan.models.leaving import HOURS_A_WEEK, HOURS_A_YEAR, Leaving, hours_held
from bedplan.models.load_grid import load_grid
from bedplan.models.year import leaving_of, unbooked_load_by_hour

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models.demand import BookedList, Demand

    Array = NDArray[np.float64]
    Counts = NDArray[np.int64]

_NOBODY = 1e-9
_INDEPENDENT = 1e-6
_HOUR_OF_WEEK = np.arange(HOURS_A_YEAR) % HOURS_A_WEEK


def at_least(counts: Counts, mean: Array, swing: Array | float) -> Array:
    """What is the chance of this many patients or more? ``(n,)`` counts × ``(k,)`` means -> ``(n, k)``.

    ``swing`` ``(k,)`` is variance ÷ mean: 1 gives Poisson, more the negative binomial, less the binomial distribution.

    Source: Greenwood & Yule 1920 (negative binomial as a Poisson of uncertain rate).
    Checked by: tests/models/test_unlimited.py
    """
    swing = np.broadcast_to(np.asarray(swing, dtype=float), mean.shape)
    count = np.maximum(counts, 1)[:, None].astype(float)
    chance = np.empty((counts.size, mean.size))
    more, less = swing > 1.0 + _INDEPENDENT, swing < 1.0 - _INDEPENDENT
    even = ~(more | less)
    chance[:, even] = special.gammainc(count, mean[even])
    order = mean[more] / (swing[more] - 1.0)
    chance[:, more] = special.betainc(count, np.maximum(order, 1e-300), 1.0 - 1.0 / swing[more])
    rest = mean[less] / (1.0 - swing[less]) - count + 1.0
    chance[:, less] = np.where(rest > 0, special.betainc(count, np.where(rest > 0, rest, 1.0), 1.0 - swing[less]), 0.0)
    return np.where(counts[:, None] > 0, chance, 1.0)


def chances_present(booked: BookedList, leaving: Leaving) -> Array:
    """With which chance is each booked patient in a bed in each hour of the week? ``(168, patients)``.

    One column for each patient of each of the past weeks who may still be there.
    """
    held = hours_held(booked.length_of_stay, leaving, HOURS_A_YEAR)
    hours, columns = np.arange(HOURS_A_WEEK), []
    for day, patients in enumerate(booked.per_weekday):
        came = 24 * day + booked.hour
        since = (hours - came) % HOURS_A_WEEK
        row = held[came % held.shape[0]]
        weeks = since[:, None] + HOURS_A_WEEK * np.arange(row.size // HOURS_A_WEEK)
        chance = booked.attends * np.clip(row[weeks], 0.0, 1.0)
        chance = chance[:, chance.max(axis=0) > _NOBODY]
        columns.append(np.repeat(chance, patients, axis=1))
    return np.concatenate(columns, axis=1)


def number_present(chances: Array) -> Array:
    """How likely is each number of patients, if each is there with its own chance? ``(..., patients)`` -> ``(..., k)``.

    Numbers too large to happen (chance below 1e-15 or so) are left out.

    Source: Gallivan & Utley 2005, IMA Journal of Management Mathematics 16:173-186; Hong 2013 (Poisson-binomial).
    Checked by: tests/models/test_unlimited.py
    """
    mean = float(chances.sum(axis=-1).max(initial=0.0))
    most = int(min(chances.shape[-1], np.ceil(mean + 12.0 * np.sqrt(mean) + 30.0)))
    likely = np.zeros((most + 1, *chances.shape[:-1]))
    likely[0] = 1.0
    for patient, chance in enumerate(np.moveaxis(chances, -1, 0)):
        so_far = likely[: patient + 2]
        moved = so_far[:-1] * chance
        so_far *= 1.0 - chance
        so_far[1:] += moved
    return np.ascontiguousarray(np.moveaxis(likely, 0, -1))


@lru_cache(maxsize=128)
def booked_present(booked: tuple[BookedList, ...], leaving: Leaving) -> Array:
    """How likely is each number of booked patients in beds in each hour of the week? ``(168, k)``."""
    if not booked:
        return np.ones((1, 1))
    return number_present(np.concatenate([chances_present(one, leaving) for one in booked], axis=1))


def ahead_in_group(demand: Demand) -> Array:
    """How likely is it that 0, 1, 2 … others of a patient's own group took a bed just before?"""
    if demand.clustering <= 1.0:
        return np.ones(1)
    shares = group_sizes(demand.clustering)
    return np.cumsum((shares / np.arange(1, shares.size + 1))[::-1])[::-1]


class Watch(NamedTuple):
    """Which hours to look at, as whom: weight of each hour, and its group, ``(8736,)`` each.

    ``as_unbooked``: as a patient of the unbooked stream, who comes oftener when the rate is high and may come with
    others.
    """

    weights: Array
    group: Counts
    as_unbooked: bool = False


def chance_of(demand: Demand, counts: Counts, watch: Watch) -> Array:
    """What is the chance of this many beds wanted or more, averaged over the hours of each group? ``(groups, n)``.

    The unbooked census is convolved with the booked one exactly, hour of the week by hour of the week.

    Checked by: tests/models/test_unlimited.py
    """
    extra = booked_present(demand.booked, leaving_of(demand))
    if watch.as_unbooked:
        ahead = ahead_in_group(demand)
        extra = np.stack([np.convolve(row, ahead) for row in extra])
    groups, rows = int(watch.group.max()) + 1, extra.shape[0]
    cells, cell = np.unique(watch.group * rows + _HOUR_OF_WEEK % rows, return_inverse=True)
    grid = load_grid(unbooked_load_by_hour(demand), watch.weights, cell, cells.size)
    of_group, row = np.divmod(cells, rows)
    drift = demand.rate_variation**2
    fewer = np.unique(np.maximum(counts[:, None] - np.arange(extra.shape[1]), 0))
    mean = grid.loads * (1.0 + drift) if watch.as_unbooked else grid.loads
    chance = at_least(fewer, mean, peakedness(demand) + drift * grid.loads)
    ends = np.searchsorted(of_group, np.arange(groups + 1))
    inside = [slice(*pair) for pair in pairwise(ends)]
    mixed = np.stack([extra[row[here]].T @ grid.weights[here] for here in inside], axis=1)
    found = np.zeros((groups, counts.size))
    for number, weights in enumerate(mixed):
        found += weights @ chance[np.searchsorted(fewer, np.maximum(counts - number, 0))].T
    total = np.bincount(of_group, grid.weights.sum(axis=1), groups)[:, None]
    return np.clip(np.divide(found, total, out=np.zeros_like(found), where=total > 0), 0.0, 1.0)
