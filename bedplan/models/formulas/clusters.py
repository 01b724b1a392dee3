"""Patients who come together, or spread out: how much the census swings, and what a full ward then turns away.

Symbols: a offered load, c beds, S(u) share staying longer than u days; z = 1 + (clustering − 1)·ω with ω = ∫S²/∫S is
the variance of the beds wanted divided by their mean. This is where the spread of stay acts on turn-away: ω is ½ for
exponential stays and 1 when every stay is the same.
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

from bedplan.models.formulas.erlang import erlang_b_table
from bedplan.models.rhythm.year import beds_wanted

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models.value_objects.demand import Demand

    Array = NDArray[np.float64]

_PART_OF_EVEN_STAYS, _PART_OF_UNEVEN_STAYS = 0.7, 0.5
_RARE = 0.01
TOGETHER_NOTE = "Several of these together were not checked: run the simulation under the picture."
_SMOOTH_NOTE = (
    "Arrivals smoother than chance: Hayward's approximation, which errs towards more beds. Where 1 in 100 or more are "
    "turned away the figure is up to a fifth too high from 15 beds on, on smaller wards or with even stays by half and "
    "more."
)


def peakedness(demand: Demand) -> float:
    """How much more does the number of unbooked patients swing than if they came one by one? Variance ÷ mean, z.

    Source: Whitt 1984; Eckberg 1983 (peakedness of arrivals in groups).
    Checked by: tests/models/test_clusters.py
    """
    turnaround_days = demand.turnaround_hours / 24.0
    shorter = demand.length_of_stay.mean_of_shorter_of_two() + turnaround_days
    return 1.0 + (demand.clustering - 1.0) * shorter / (demand.length_of_stay.mean_days + turnaround_days)


def swing_when_full(demand: Demand) -> float:
    """Which swing does a ward that turns patients away feel? As :func:`peakedness`, but stays count in part only.

    The rest of a group comes at the very moment the first of it takes a bed, however long they then stay. So for
    groups ω counts in part, and the ½ of exponential stays for the rest: half and half for uneven stays, 7 to 3 for
    even ones. The parts are fitted to exact phase-type chains of pairs and threes, where 1 in 100 or more are turned away: from
    15 beds on they leave 3 % too low to 8 % too high, on smaller wards 8 % and 15 %.

    Checked by: tests/models/test_clusters.py
    """
    swing = peakedness(demand)
    if demand.clustering <= 1.0:
        return swing
    exponential = 1.0 + (demand.clustering - 1.0) / 2.0
    part = _PART_OF_EVEN_STAYS if swing > exponential else _PART_OF_UNEVEN_STAYS
    return part * swing + (1.0 - part) * exponential


def group_sizes(clustering: float) -> Array:
    """Which share of patients comes in groups of 1, 2, 3 …, if variance ÷ mean of arrivals is ``clustering`` ≥ 1?

    Groups of the whole number below and above it, as few sizes as can be.

    Checked by: tests/models/test_clusters.py
    """
    smaller = math.floor(clustering)
    shares = np.zeros(smaller + 1)
    shares[smaller - 1 :] = 1.0 - (clustering - smaller), clustering - smaller
    return shares if shares[-1] > 0 else shares[:-1]


def _groups_table(loads: Array, counts: NDArray[np.int64], clustering: float) -> Array:
    """Return the share of patients turned away when groups come and as many as fit get in; exact, exponential stays.

    The flow up past n patients equals the flow down from n + 1: p(n+1) = (a/(n+1))·Σ_j p(n−j)·t(j), t(j) = rate of
    groups larger than j ÷ rate of patients. Carried for all loads at once, scaled so that Σ p = 1 at every count.
    """
    shares = group_sizes(clustering)
    sizes = np.arange(1, shares.size + 1)
    larger = np.cumsum((shares / sizes)[::-1])[::-1]
    lost = np.cumsum(larger[::-1])[::-1]
    last = np.zeros((sizes.size, loads.size))
    last[0] = 1.0
    table = np.empty((counts.size, loads.size))
    row = 0
    for beds in range(int(counts[-1]) + 1):
        if beds:
            fresh = loads / beds * (larger @ last)
            last[1:] = last[:-1]
            last[0] = fresh
            last /= 1.0 + fresh
        if counts[row] == beds:
            table[row] = lost @ last
            row += 1
    return np.where((loads <= 0) & (counts[:, None] > 0), 0.0, table)


def hayward(loads: Array, counts: NDArray[np.int64], swing: float) -> Array:
    """Which share is turned away if variance ÷ mean of the beds wanted is ``swing``? ``(n,)`` × ``(k,)`` -> ``(n, k)``.

    B(c/z, a/z): for arrivals smoother than independent ones.

    Source: Fredericks 1980, Bell System Technical Journal 59:807-827.
    Checked by: tests/models/test_clusters.py
    """
    beds, load = counts[:, None] / swing, np.maximum(loads, 1e-12) / swing
    near = np.minimum(load, beds + 15.0 * np.sqrt(beds) + 15.0)
    log_share = beds * np.log(near) - near - special.gammaln(beds + 1.0)
    blocked = np.exp(log_share) / special.gammaincc(beds + 1.0, near)
    # Far above the beds the mean of the idle ones is beds/(load − beds).
    above = np.maximum(load - beds, 2.0)
    crowded = 1.0 - beds / load * (1.0 - 1.0 / above)
    share = np.where(load > near, crowded, blocked)
    return np.where((loads <= 0) & (counts[:, None] > 0), 0.0, share)


def loss_table(loads: Array, counts: NDArray[np.int64], swing: float) -> Array:
    """Which share is turned away at each bed count (rows, ascending) and load, at a steady rate?

    Erlang's formula for independent patients (``swing`` 1). Above 1 the exact chain of groups with exponential stays
    that makes the census swing as much; below 1 Hayward's approximation.

    Checked by: tests/models/test_clusters.py
    """
    if abs(swing - 1.0) < 1e-9:
        return erlang_b_table(loads, counts)
    if swing > 1.0:
        return _groups_table(loads, counts, 1.0 + 2.0 * (swing - 1.0))
    return hayward(loads, counts, swing)


def uneven_groups_loss(load: float, counts: NDArray[np.int64], clustering: float) -> Array:
    """Which share is turned away if group sizes differ widely (geometric), by bed count? ``(n,)``; exponential stays.

    The flow up past n patients equals the flow down from n + 1, where each group goes past with one chance a patient.

    Checked by: tests/models/test_clusters.py (a dense chain)
    """
    mean_size = (clustering + 1.0) / 2.0
    going_past = 1.0
    shares = np.empty(int(counts[-1]) + 1)
    shares[0] = 1.0
    for beds in range(1, shares.size):
        fresh = load / mean_size * going_past / beds
        # scaled so that the shares of time add up to 1 at every count
        going_past = (going_past * (1.0 - 1.0 / mean_size) + fresh) / (1.0 + fresh)
        shares[beds] = going_past
    return shares[counts]


def more_if_groups_differ(demand: Demand, *, waits: bool = False) -> float:
    """By which part of the figure more find no bed if group sizes differ widely instead of being equal, at most?

    At a steady rate, over the bed counts at which 1 in 100 or more are turned away (or wait).

    Checked by: tests/models/test_clusters.py, tests/models/test_waiting.py
    """
    load = beds_wanted(demand)
    if demand.clustering <= 1.0 or load == 0.0:
        return 0.0
    unbooked = demand.arrivals_per_day * (demand.length_of_stay.mean_days + demand.turnaround_hours / 24.0)
    swing = peakedness(demand) if waits else swing_when_full(demand)
    clustering = 1.0 + 2.0 * (swing - 1.0) * min(unbooked / load, 1.0)
    most = load + 6.0 * math.sqrt(load * clustering) + 6.0 * clustering
    counts = np.arange(math.floor(load) + 1 if waits else 1, math.ceil(most) + 1)
    differing = uneven_groups_loss(load, counts, clustering)
    equal = _groups_table(np.array([load]), counts, clustering)[:, 0]
    if waits:
        # Erlang 1917: the share who wait from the share turned away
        differing, equal = (one / (1.0 - load / counts * (1.0 - one)) for one in (differing, equal))
    often = differing >= _RARE
    return max(float((differing[often] / equal[often]).max(initial=1.0)) - 1.0, 0.0)


def clustering_notes(demand: Demand, *, waits: bool = False) -> tuple[str, ...]:
    """What is assumed of patients who come together, or spread out, and which way does it err?

    Checked by: tests/models/test_clusters.py, tests/models/test_waiting.py (exact chains)
    """
    if demand.clustering > 1.0:
        more = math.ceil(100.0 * more_if_groups_differ(demand, waits=waits))
        many = f"up to {more} % more" if more <= 100 else "more than twice as many"
        note = "Patients who come together: groups of equal size are assumed"
        note += "." if waits else ", and with a weekly or daily rhythm the figure is up to a fifth too high."
        share = (
            "wait than this says, where 1 in 100 or more do"
            if waits
            else ("are turned away than this says, where 1 in 100 or more are")
        )
        return (f"{note} If group sizes differ widely, {many} {share}.",)
    return (_SMOOTH_NOTE,) if demand.clustering < 1.0 and not waits else ()
