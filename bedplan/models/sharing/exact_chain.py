"""Small wards solved exactly: the long-run share of time in each state of a chain with exponential stays."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from scipy import sparse
from scipy.sparse import linalg

from bedplan.errors import ImpossibleFigure
from bedplan.models.value_objects.figures import ABOVE_ZERO, listed, number

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    Places = NDArray[np.int64]

MOST_STATES = 20_000
_SHIFT = 1e-11
_STEPS = 3


class StateGrid:
    """Every combination of patient counts that fits, numbered: ``counts`` holds one ``(states,)`` array a kind.

    ``most`` is the largest count of each kind; ``together`` (optional) kinds whose sum may not pass a limit.

    Raises:
        ImpossibleFigure: more than 20,000 states.
    """

    def __init__(self, most: tuple[int, ...], together: tuple[slice, int] | None = None) -> None:
        if np.prod([count + 1.0 for count in most]) > 20 * MOST_STATES:
            raise ImpossibleFigure(self._too_large(most))
        grid = np.indices([count + 1 for count in most])
        fits = np.ones(grid.shape[1:], dtype=bool) if together is None else grid[together[0]].sum(axis=0) <= together[1]
        if fits.sum() > MOST_STATES:
            raise ImpossibleFigure(self._too_large(most))
        self.counts = tuple(one[fits] for one in grid)
        self._number = np.where(fits, np.cumsum(fits.ravel()).reshape(fits.shape) - 1, -1)
        self._moves: list[tuple[Places, Places, Array]] = []

    @staticmethod
    def _too_large(most: tuple[int, ...]) -> str:
        return f"Wards of {' and '.join(map(str, most))} beds are too large to be solved exactly together."

    @property
    def size(self) -> int:
        """How many states there are."""
        return self.counts[0].size

    def add_move(self, where: NDArray[np.bool_], change: tuple[int, ...], rate: Array | float) -> None:
        """Let the states ``where`` change by so many patients of each kind at this rate a day."""
        start = np.flatnonzero(where)
        end = self._number[tuple(count[start] + step for count, step in zip(self.counts, change, strict=True))]
        self._moves.append((start, end, np.broadcast_to(rate, self.size)[start]))

    def shares_of_time(self) -> Array:
        """Which share of time does each state take in the long run? ``(states,)``, adding up to 1.

        Inverse iteration on the balance equations, shifted a hair from singular and eliminated without pivoting, which
        keeps every share positive: three steps leave nothing of any other solution.
        """
        start, end, rate = (np.concatenate(column) for column in zip(*self._moves, strict=True))
        if rate.size == 0:
            return np.ones(1)
        cells = (np.concatenate([end, start]), np.concatenate([start, start]))
        flow = sparse.csc_matrix((np.concatenate([-rate, rate]), cells), shape=(self.size, self.size))
        shifted = flow + _SHIFT * rate.max() * sparse.eye_array(self.size, format="csc")
        factors = linalg.splu(
            shifted.tocsc(), permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0, options={"SymmetricMode": True}
        )
        shares = np.full(self.size, 1.0 / self.size)
        for _ in range(_STEPS):
            shares = factors.solve(shares)
            shares /= shares.sum()
        return np.maximum(shares, 0.0)


def checked_loads(loads: object) -> tuple[float, ...]:
    """Return the loads as floats, or say which is impossible.

    Checked by: tests/models/test_reservation.py
    """
    said, allowed = "An offered load of {} beds", "it is 0 or more"
    return tuple(number(said, one, (0.0, 1e6), allowed) for one in listed(loads, "Loads need one figure a kind"))


def checked_stays(stay_days: object) -> tuple[float, ...]:
    """Return the mean stays as floats, or say which is impossible.

    Checked by: tests/models/test_reservation.py
    """
    said, allowed = "A mean stay of {} days", "it is more than 0 days"
    given = listed(stay_days, "Mean stays need one figure a kind")
    return tuple(number(said, one, (ABOVE_ZERO, 3_650.0), allowed) for one in given)
