"""How many patients are present at once when they come in groups: the exact law, however long each member stays.

Groups come independently; so those of which one, two, three … members are still there are independent Poisson numbers.

Symbols: S(u) share staying longer than u days, k size of a group, a load, z the generating function's argument.
"""

from __future__ import annotations

import math
from functools import lru_cache
from typing import TYPE_CHECKING, NamedTuple

import numpy as np
from scipy import special

from bedplan.models.formulas.clusters import group_sizes
from bedplan.models.rhythm.leaving import HOURS_A_YEAR, beds_held, hours_held
from bedplan.models.rhythm.within_hour import looks
from bedplan.models.rhythm.year import leaving_of, unbooked_by_hour, unbooked_load_by_hour

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models.value_objects.demand import Demand
    from bedplan.models.value_objects.stay import LengthOfStay

    Array = NDArray[np.float64]
    Counts = NDArray[np.int64]

_PANELS = special.expit(np.linspace(-20.0, 22.0, 43))
_CERTAIN = 1e-6
_DIGITS = 11
_CELLS_AT_ONCE = 200_000
_RARE = 0.01
_UNSEEN = 1e-12
_ALIKE, _STEP = 0.01, 0.1


def _days_and_survival(stay: LengthOfStay) -> tuple[Array, Array]:
    """Return the share still there at many moments, and for how many days each stands."""
    edges = np.unique(np.concatenate([[0.0], stay.quantile(_PANELS), [day for day, _ in stay.points]]))
    places, weights = looks(6)
    width = np.diff(edges)
    moments = edges[:-1, None] + width[:, None] * places
    return (width[:, None] * weights).ravel(), stay.survival(moments).ravel()


@lru_cache(maxsize=128)
def loads_by_number(demand: Demand) -> Array:
    """How often are 1, 2, 3 … of a group there at once, if groups are of one size? A rate for each number, ``(k,)``.

    The number present is Σ j·Poisson(a·rate(j)) at a load a: Σ j·rate(j) = 1. At least j of k are there until the
    (k − j + 1)-th of them leaves.

    Source: Daw & Pender 2019, arXiv 1805.02117 (exponential stays: rate(j) = 1/(jk)).
    Checked by: tests/models/test_group_census.py
    """
    days, left = _days_and_survival(demand.length_of_stay)
    shares = group_sizes(demand.clustering)
    rates = np.zeros(shares.size)
    for size in (np.flatnonzero(shares) + 1).tolist():
        number = np.arange(1, size + 1)[:, None]
        at_least = special.betainc(number, size - number + 1.0, left) @ days + demand.turnaround_hours / 24.0
        rates[:size] += shares[size - 1] * (at_least - np.append(at_least[1:], 0.0)) / at_least.sum()
    return rates


class HoursOfGroups(NamedTuple):
    """Hours in which groups are about as whole as each other: the rates ``(levels, k)`` of :func:`loads_by_number`.

    ``shares`` ``(levels, 8736)``: how much each hour of the year counts to each level; they add up to 1.
    """

    rates: Array
    shares: Array


@lru_cache(maxsize=64)
def groups_by_hour(demand: Demand) -> HoursOfGroups:
    """How whole are the groups who are there in each hour? After a busy time more of each are still there.

    Of each hour the variance ÷ mean is right, from pairs of one group who are both still there; the numbers between
    are those of a steady rate, shifted towards whole groups or last members.

    Checked by: tests/models/test_group_census.py (simulation)
    """
    steady = loads_by_number(demand)
    number = np.arange(1, steady.size + 1)
    swing = float(number**2 @ steady)
    held = hours_held(demand.length_of_stay, leaving_of(demand), HOURS_A_YEAR)
    both = held**2
    both[:, 0] *= 2.0
    arrivals = unbooked_by_hour(demand)
    pairs = beds_held(arrivals, both) / np.maximum(unbooked_load_by_hour(demand), 1e-300)
    by_hour = 1.0 + (swing - 1.0) * pairs * (held.sum() / both.sum())
    by_hour = np.clip(by_hour, 1.0, demand.clustering)
    lowest, highest = float(by_hour.min()), float(by_hour.max())
    if highest - lowest < _ALIKE * swing:
        return HoursOfGroups(steady[None], np.ones((1, HOURS_A_YEAR)))
    levels = np.linspace(lowest, highest, 2 + int((highest - lowest) / swing / _STEP))
    place = (by_hour - lowest) / (levels[1] - levels[0])
    shares = np.maximum(1.0 - np.abs(place - np.arange(levels.size)[:, None]), 0.0)
    whole, last = group_sizes(demand.clustering) / number, number == 1
    part = np.where(
        levels > swing, (levels - swing) / max(demand.clustering - swing, 1e-9), (swing - levels) / (swing - 1.0)
    )
    towards = np.where((levels > swing)[:, None], whole, last)
    return HoursOfGroups((1.0 - part[:, None]) * steady + part[:, None] * towards, shares)


def loads_by_number_if_groups_differ(demand: Demand) -> Array:
    """As :func:`loads_by_number`, for groups of geometric size with the same variance ÷ mean of arrivals.

    Checked by: tests/models/test_group_census.py
    """
    days, left = _days_and_survival(demand.length_of_stay)
    left, days = np.append(left, 1.0), np.append(days, demand.turnaround_hours / 24.0)
    ends = 2.0 / (demand.clustering + 1.0)
    some = left / (ends + (1.0 - ends) * left)
    one_more = (1.0 - ends) * some
    number = np.arange(1, 2 + math.ceil(math.log(_UNSEEN) / math.log1p(-ends)))
    rates = (one_more ** (number[:, None] - 1)) @ (days * some * (1.0 - one_more))
    return rates / (rates @ number)


def at_least_in_groups(counts: Counts, loads: Array, rates: Array, mixing: tuple[float, bool] = (0.0, False)) -> Array:
    """What is the chance of this many patients or more, if they come in groups? ``(n,)`` counts × ``(k,)`` -> ``(n, k)``.

    ``loads`` ascending. ``rates``: how often 1, 2, 3 … of a group are there (:func:`loads_by_number`). ``mixing``:
    variance of a gamma-distributed rate about its mean of 1, and whether to weigh by the rate, as patients do. Right to
    about 1e-10.

    Source: Abate & Whitt 1992, Operations Research Letters 12:245-251 (inversion of generating functions).
    Checked by: tests/models/test_group_census.py
    """
    top = int(counts.max(initial=1))
    chance = np.zeros((top + 1, loads.size))
    step = max(1, _CELLS_AT_ONCE // (top + 1))
    for start in range(0, loads.size, step):
        some = slice(start, start + step)
        lowest, room = 0, top
        if mixing[0] <= _CERTAIN:
            lowest, room = _reach(loads[some], rates)
        chance[: lowest + 1, some] = 1.0
        if lowest < top:
            likely = _likely_in_groups((lowest, room), loads[some], rates, mixing)[:, : top - lowest]
            chance[lowest + 1 : lowest + 1 + likely.shape[1], some] = 1.0 - np.cumsum(likely, axis=1).T
    return np.clip(chance[np.maximum(counts, 0)], 0.0, 1.0)


def _reach(loads: Array, rates: Array) -> tuple[int, int]:
    """Return from which number on, and over how many, all but 1e-15 or so of the chance lies."""
    room = 9.0 * np.sqrt(loads * (np.arange(1, rates.size + 1) ** 2 @ rates)) + 30.0 * rates.size
    lowest = max(0, int((loads - room).min()))
    return lowest, int((loads + room).max()) + 1 - lowest


def _likely_in_groups(reach: tuple[int, int], loads: Array, rates: Array, mixing: tuple[float, bool]) -> Array:
    """Return how likely each number is, at each load, from the first on, over as many as the second: ``(k, numbers)``."""
    lowest, count = reach
    spread, weighed = mixing
    # An uncertain rate reaches far beyond these numbers: damped, so that what is further off hardly counts.
    points = (2 if spread > _CERTAIN else 1) * 64 * math.ceil(count / 64)
    radius = 10.0 ** (-_DIGITS / points) if spread > _CERTAIN else 1.0
    number = np.arange(1, rates.size + 1)
    jumps = np.bincount(number % points, weights=rates * radius**number, minlength=points)
    exponent = loads[:, None] * (np.fft.rfft(jumps) - rates.sum())
    if spread > _CERTAIN:
        exponent = -(1.0 / spread + weighed) * np.log(1.0 - spread * exponent)
    shift = lowest * (2j * np.pi * np.arange(points // 2 + 1) / points - math.log(radius))
    likely = np.fft.irfft(np.exp(exponent + shift), points)[:, :count]
    return np.maximum(likely * radius ** -np.arange(float(count)), 0.0)


def ahead_in_group(demand: Demand) -> Array:
    """How likely is it that 0, 1, 2 … others of a patient's own group took a bed just before?

    Checked by: tests/models/test_group_census.py
    """
    if demand.clustering <= 1.0:
        return np.ones(1)
    shares = group_sizes(demand.clustering)
    return np.cumsum((shares / np.arange(1, shares.size + 1))[::-1])[::-1]


@lru_cache(maxsize=128)
def more_find_full_if_groups_differ(demand: Demand) -> float:
    """By which part more find the ward full if group sizes differ widely (geometric) instead of being equal, at most?

    At a steady rate, over the bed counts at which 1 in 100 or more find it full.

    Checked by: tests/models/test_group_census.py
    """
    load = demand.arrivals_per_day * (demand.length_of_stay.mean_days + demand.turnaround_hours / 24.0)
    if demand.clustering <= 1.0 or load == 0.0:
        return 0.0
    ends = 2.0 / (demand.clustering + 1.0)
    top = math.ceil(load + 6.0 * math.sqrt(load * demand.clustering) + 8.0 * demand.clustering)
    counts = np.arange(1, top + 1)
    found = []
    for rates, ahead in (
        (loads_by_number(demand), ahead_in_group(demand)),
        (loads_by_number_if_groups_differ(demand), ends * (1.0 - ends) ** np.arange(top)),
    ):
        present = at_least_in_groups(counts, np.array([load]), rates)[:, 0]
        beyond = np.append(1.0 - np.cumsum(ahead), np.zeros(top + 1))
        found.append((np.convolve(np.append(1.0, present), ahead) + beyond[: top + ahead.size])[1 : top + 1])
    equal, differing = found
    often = differing >= _RARE
    return max(float((differing[often] / equal[often]).max(initial=1.0)) - 1.0, 0.0)
