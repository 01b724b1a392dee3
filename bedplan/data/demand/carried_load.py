"""From the beds in use back to the beds wanted: the Erlang loss formula solved for its load."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from scipy import optimize, special

from bedplan.errors import ImpossibleFigure
from bedplan.models import erlang_b

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

OFTEN = 0.02  # of the time: a formula must expect beds to be used as often before it is said that they were not
SELDOM = 0.1  # of the time at a level: less above it, where the level below it was seen half as often, is a wall
FEWEST_OCCASIONS = 10.0  # expected, mean stays apart: by chance none would come once in 20,000 files
FULLEST = 0.995  # of the beds: nearer to full, hardly any use of beds tells one demand from another


def load_behind(beds_in_use: float, beds: ArrayLike) -> tuple[float, float]:
    """How many beds are wanted on average where so many are in use on average, if patients leave when it is full?

    Solves in use = load × (1 − B(beds, load)); ``beds`` is one number, or one for each day. Returns the load, and by
    how much beds in use grow for each bed more that is wanted: near 0, the answer says little. Demand is taken to be
    steady: with seasons or guests of other wards the load found is too low.

    Raises:
        ImpossibleFigure: beds in use below 0, or so near all of them that the demand can't be told.

    Source: inverse of Erlang 1917.
    Checked by: tests/data/demand/test_hidden_demand.py
    """
    counts, times = np.unique(np.asarray(beds, dtype=float), return_counts=True)
    weights = times / times.sum()
    most = float(weights @ counts)
    if not 0 <= beds_in_use <= FULLEST * most:
        raise ImpossibleFigure(
            f"{beds_in_use:.1f} beds in use of {most:.1f} can't tell the demand: the ward must have free beds at times."
        )

    def carried(load: float) -> float:
        """Return the beds in use on average at this load."""
        return float(weights @ (load * (1.0 - erlang_b(load, counts))))

    top = max(1.0, 2.0 * most)
    while carried(top) < beds_in_use:
        top *= 2.0
    load = float(optimize.brentq(lambda one: carried(one) - beds_in_use, 0.0, top, xtol=1e-10))
    step = 1e-5 * max(load, 1.0)
    return load, (carried(load + step) - carried(max(load - step, 0.0))) / (step + min(step, load))


def beds_below_wall(free_share: NDArray[np.float64], beds: ArrayLike, in_use: float, stays: float) -> int:
    """How many of the stated beds are hardly ever used, though patients pile up just below them? Mostly 0.

    ``free_share[k]``: share of time with k stated beds free; ``beds`` as for :func:`load_behind`; ``in_use`` on
    average; ``stays``: mean stays that the file lasts. A wall at k free beds: at most a tenth as much time with fewer
    free, at least half as much as with one more free, and the loss formula expects fewer free often (2 % of the time,
    on 10 occasions or more). A smooth fall towards the last beds is none.

    Checked by: tests/data/demand/test_hidden_demand.py
    """
    try:
        load, _ = load_behind(in_use, beds)
    except ImpossibleFigure:
        return 0
    counts, times = np.unique(np.asarray(beds, dtype=np.int64), return_counts=True)
    for free in range(1, min(free_share.size - 1, int(counts.max()))):
        above, at, below = float(free_share[:free].sum()), free_share[free], free_share[free + 1]
        expected = float(times @ [_chance_above(load, int(count), free) for count in counts]) / times.sum()
        if above <= SELDOM * at and at >= max(below / 2, OFTEN) and expected >= max(OFTEN, FEWEST_OCCASIONS / stays):
            return free
    return 0


def _chance_above(load: float, beds: int, free: int) -> float:
    """Return the share of time with fewer than so many beds free, in a ward whose patients leave when it is full."""
    taken = np.arange(max(beds - free + 1, 0), beds + 1)
    chance = np.exp(special.xlogy(taken, load) - special.gammaln(taken + 1) - load)
    return float(chance.sum() / special.pdtr(beds, load))
