"""From the beds in use back to the beds wanted: the Erlang loss formula solved for its load."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from scipy import optimize

from bedplan.errors import ImpossibleFigure
from bedplan.models import erlang_b

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

FULLEST = 0.995  # of the beds: nearer to full, hardly any use of beds tells one demand from another


def load_behind(beds_in_use: float, beds: ArrayLike) -> tuple[float, float]:
    """How many beds are wanted on average where so many are in use on average, if patients leave when it is full?

    Solves in use = load × (1 − B(beds, load)); ``beds`` is one number, or one for each day. Returns the load, and by
    how much beds in use grow for each bed more that is wanted: near 0, the answer says little. Demand is taken to be
    steady: with seasons or guests of other wards the load found is too low.

    Raises:
        ImpossibleFigure: beds in use below 0, or so near all of them that the demand can't be told.

    Source: inverse of Erlang 1917.
    Checked by: tests/data/test_hidden_demand.py
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
