"""How many patients want a bed at once, if nobody is ever turned away: the whole distribution, not its mean alone.

Unbooked patients: Poisson about the load of the hour; negative binomial when their rate is uncertain, the exact law of
equal groups when they come together, binomial when they come more evenly than chance. Booked patients: each is there or
not, with a known chance.
"""

from __future__ import annotations

from itertools import pairwise
from typing import TYPE_CHECKING, Literal, NamedTuple

import numpy as np
from scipy import special

from bedplan.models.census.booked import booked_census
from bedplan.models.census.groups import HoursOfGroups, ahead_in_group, at_least_in_groups, groups_by_hour
from bedplan.models.formulas.clusters import peakedness
from bedplan.models.rhythm.leaving import HOURS_A_WEEK, HOURS_A_YEAR
from bedplan.models.rhythm.load_grid import load_grid
from bedplan.models.rhythm.within_hour import looks, parts_of_hour, unbooked_load_within
from bedplan.models.rhythm.year import leaving_of

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models.value_objects.demand import Demand

    Array = NDArray[np.float64]
    Counts = NDArray[np.int64]

_INDEPENDENT = 1e-6
_NEVER = 1e-17


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


class Watch(NamedTuple):
    """Which hours to look at, as whom: weight of each hour, and its group, ``(8736,)`` each.

    ``who``: at any moment; or as a patient of the unbooked stream, who comes oftener when the rate is high and may
    come with others; or as a booked patient, who finds a part of the own list there.
    """

    weights: Array
    group: Counts
    who: Literal["anyone", "unbooked", "booked"] = "anyone"


def _levels(demand: Demand) -> HoursOfGroups:
    """Return hours in which groups are about as whole as each other; all of them where nobody comes in groups."""
    if demand.clustering > 1.0 + _INDEPENDENT and demand.arrivals_per_day > 0:
        return groups_by_hour(demand)
    return HoursOfGroups(np.ones((1, 1)), np.ones((1, HOURS_A_YEAR)))


def _unbooked_at_least(demand: Demand, counts: Counts, loads: Array, rates: Array, *, weighed: bool) -> Array:
    """Return the chance of this many unbooked patients or more at each load, ``(n, k)``."""
    drift = demand.rate_variation**2
    if rates.size > 1:
        return at_least_in_groups(counts, loads, rates, (drift, weighed))
    mean = loads * (1.0 + drift) if weighed else loads
    return at_least(counts, mean, peakedness(demand) + drift * loads)


def _with_others(counts: Counts, others: tuple[Counts, Array], unbooked: tuple[Counts, Array]) -> Array:
    """Return the chance of this many or more, ``(groups, n)``, where so many others ``(k,)`` are there too.

    ``others``: numbers, and the weight of each group's hours at each load ``(k, groups, g)`` with that number.
    ``unbooked``: numbers ``(m,)`` and the chance of as many or more at each load, ``(m, g)``.
    """
    (numbers, mixed), (fewer, chance) = others, unbooked
    certain, possible = int((chance.min(axis=1) >= 1.0).sum()), int((chance.max(axis=1) > 0.0).sum())
    limits = np.append(fewer, np.iinfo(np.int64).max)[[certain, possible]]
    found, up_to = np.zeros((2, mixed.shape[1], counts.size + 1))
    for number, weight, total in zip(numbers.tolist(), mixed, mixed.sum(axis=2), strict=True):
        lowest, highest = np.searchsorted(counts - number, limits)
        up_to[:, lowest] += total
        at = np.searchsorted(fewer, counts[lowest:highest] - number)
        found[:, lowest:highest] += weight @ chance[at].T
    return found[:, :-1] + np.cumsum(up_to[:, :0:-1], axis=1)[:, ::-1]


def chance_of(demand: Demand, counts: Counts, watch: Watch) -> Array:
    """What is the chance of this many beds wanted or more, averaged over the hours of each group? ``(groups, n)``.

    The unbooked census is convolved with the booked one exactly, hour of the week by hour of the week; where the
    number changes fast within an hour, part by part.

    Checked by: tests/models/test_unlimited.py
    """
    parts, looked = parts_of_hour(demand), np.flatnonzero(watch.weights > 0)
    groups = int(watch.group.max()) + 1
    if looked.size == 0:
        return np.zeros((groups, counts.size))
    census = booked_census(demand.booked, leaving_of(demand), parts)
    extra = census.when_booked_come if watch.who == "booked" else census.at_any_moment
    if watch.who == "unbooked":
        ahead = ahead_in_group(demand)
        extra = np.stack([np.convolve(row, ahead) for row in extra])
    rows = extra.shape[0]
    row_of_look = (looked % HOURS_A_WEEK * parts + np.arange(parts)[:, None]) % rows
    cells, cell = np.unique((watch.group[looked] * rows + row_of_look).ravel(), return_inverse=True)
    rates, level_shares = _levels(demand)
    load, grids = unbooked_load_within(demand, parts)[:, looked], []
    for of_level in level_shares[:, looked]:
        weights = looks(parts)[1][:, None] * watch.weights[looked] * of_level
        grid = load_grid(load.ravel(), weights.ravel(), cell, cells.size)
        used = grid.weights.any(axis=0)
        grids.append((grid.loads[used], grid.weights[:, used]))
    weights = np.hstack([weights for _, weights in grids])
    of_group, row = np.divmod(cells, rows)
    happens = np.flatnonzero(extra.max(axis=0) > _NEVER)
    ends = np.searchsorted(of_group, np.arange(groups + 1))
    inside = [slice(*pair) for pair in pairwise(ends)]
    mixed = np.stack([extra[row[here]][:, happens].T @ weights[here] for here in inside], axis=1)
    needed = np.zeros(int(counts.max(initial=0)) + 1, dtype=bool)
    for number in happens.tolist():
        needed[np.maximum(counts - number, 0)] = True
    fewer = np.flatnonzero(needed)
    weighed = watch.who == "unbooked"
    chance = np.hstack(
        [
            _unbooked_at_least(demand, fewer, loads, one, weighed=weighed)
            for one, (loads, _) in zip(rates, grids, strict=True)
        ]
    )
    found = _with_others(counts, (happens, mixed), (fewer, chance))
    total = np.bincount(of_group, weights.sum(axis=1), groups)[:, None]
    return np.clip(np.divide(found, total, out=np.zeros_like(found), where=total > 0), 0.0, 1.0)
