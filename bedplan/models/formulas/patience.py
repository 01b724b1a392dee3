"""Patients who wait, but not for ever: some give up and go elsewhere (the Erlang A formula).

Symbols: a offered load, c beds, x = c·p and y = a·p with p mean patience ÷ mean stay, B Erlang's loss.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

from bedplan.errors import ImpossibleFigure
from bedplan.models.formulas.erlang import erlang_b, erlang_b_log
from bedplan.models.value_objects.bed_curve import MOST_BEDS
from bedplan.models.value_objects.figures import ABOVE_ZERO, array_of, number

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Patience:
    """What happens when patients wait only so long. All arrays have the shape the figures broadcast to.

    ``share_who_wait``: who find no free bed. ``share_who_give_up``: of everyone. ``mean_wait``: of everyone, in mean
    stays, until a bed or until giving up. ``occupancy``: beds in use ÷ beds (0 without beds).
    """

    share_who_wait: Array
    share_who_give_up: Array
    mean_wait: Array
    occupancy: Array
    _beds_at_stake: Array
    _patients_at_stake: Array
    _patience_stays: Array

    def share_waiting_over(self, stays: float) -> Array:
        """Which share of everyone waits longer than this many mean stays, for a bed or until giving up?"""
        stays = number("A wait of {} mean stays", stays, (0.0, 1e12), "it is 0 or more")
        left = np.exp(-stays / self._patience_stays)
        x, y = self._beds_at_stake, self._patients_at_stake
        whole = special.gammainc(x, y)
        bed_later = np.divide(special.gammainc(x, y * left), whole, out=np.zeros(whole.shape), where=whole > 0)
        return self.share_who_wait * np.where(x > 0, bed_later, 1.0) * left


def _log_full_longer(x: Array, y: Array) -> Array:
    """Return ln A, A = x·e^y·y^(−x)·γ(x, y): how much longer the ward is full than if nobody waited.

    Where γ underflows A = 1 + y/(x + 1) + y²/(x + 1)(x + 2) + … is nearly a geometric series.
    """
    part = special.gammainc(x, y)
    tiny = part <= 0.0
    logs = np.log(x) + y - x * np.log(y) + special.gammaln(x) + np.log(np.where(tiny, 1.0, part))
    use = np.where(tiny, y / x, 0.0)
    return np.where(tiny, np.log(1.0 / (1.0 - use) - use / x / (1.0 - use) ** 3), logs)


def erlang_a(offered_load: ArrayLike, beds: ArrayLike, patience_stays: ArrayLike) -> Patience:
    """Which share waits, and which gives up, if a waiting patient goes elsewhere after a while?

    Steady demand, exponential stays and patience, first come, first served. Holds at any load, also above the beds:
    giving up keeps the queue in bounds. ``patience_stays``: mean time until a waiting patient gives up ÷ mean stay,
    above 0. Other spreads of stay change it little where patience is short beside a stay.

    Raises:
        ImpossibleFigure: a negative or endless load, beds outside 0–20,000, patience not above 0.

    Source: Palm 1957; Garnett, Mandelbaum & Reiman 2002, Manufacturing & Service Operations Management 4.
    Checked by: tests/models/test_waiting.py
    """
    figures = (
        array_of("An offered load of {} beds", offered_load, (0.0, 1e6), "it is 0 or more"),
        array_of("{} beds", beds, (0.0, MOST_BEDS), f"give 0 to {MOST_BEDS:,}"),
        array_of("A patience of {} mean stays", patience_stays, (ABOVE_ZERO, 1e12), "it is above 0"),
    )
    try:
        load, count, patience = np.broadcast_arrays(*figures)
    except ValueError:
        shapes = ", ".join(str(one.shape) for one in figures)
        raise ImpossibleFigure(f"Loads, beds and patience of the shapes {shapes} don't go together.") from None
    is_ward = (load > 0) & (count > 0)
    a, c = np.where(is_ward, load, 1.0), np.where(is_ward, count, 1.0)
    longer, log_blocked = _log_full_longer(c * patience, a * patience), erlang_b_log(a, c)
    # waiting : not waiting = A·B : 1 − B
    waits = 1.0 / (1.0 - np.exp(-longer) + np.exp(np.minimum(-longer - log_blocked, 700.0)))
    give_up = waits * np.clip(1.0 + (np.exp(-longer) - 1.0) * c / a, 0.0, 1.0)
    waits = np.where(is_ward, waits, erlang_b(load, count))
    give_up = np.where(is_ward, give_up, waits)
    return Patience(
        waits,
        give_up,
        give_up * patience,
        np.where(is_ward, a / c * (1.0 - give_up), 0.0),
        np.where(is_ward, c, 0.0) * patience,
        a * patience,
        patience + 0.0,
    )
