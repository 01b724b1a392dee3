"""Stated beds that were hardly ever used, over the whole file or a part of it: a bed too many hides hidden demand."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.demand.carried_load import OFTEN, SELDOM, beds_below_wall

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

LEAST_STAYS = 30.0  # mean stays that a part of the file lasts: in less, nothing is expected often enough to be missed
LEAST_DAYS = 28  # for which the same beds are stated, to be looked at by themselves


@dataclass(frozen=True, slots=True)
class Wall:
    """``fewer`` of at most ``beds`` stated beds were hardly ever used from day ``first`` of the window to before ``end``."""

    first: int
    end: int
    fewer: int
    beds: int


@dataclass(frozen=True)
class BedUse:
    """How many of the stated beds were free, at some moments of each day.

    ``free`` (days, moments) whole numbers, 0 where full or fuller; ``beds`` (days,) as stated; ``counts`` (days,)
    which days count; ``month`` (days,) a number for each month; ``mean_stay_days`` of a patient.
    """

    free: NDArray[np.int64]
    beds: NDArray[np.int64]
    counts: NDArray[np.bool_]
    month: NDArray[np.int64]
    mean_stay_days: float

    def walls(self) -> tuple[Wall, ...]:
        """Where were stated beds hardly ever used, though the ward was often as full as it got?

        Looked for in the whole file, in every stretch of months and of the same stated beds, the longest first; in none
        that lasts fewer than 30 mean stays. Parts found don't overlap. A wall: see ``beds_below_wall``.

        Checked by: tests/data/demand/test_walls.py
        """
        found: list[Wall] = []
        for first, end in self._parts():
            if any(first < one.end and one.first < end for one in found):
                continue
            fewer = self._fewer(first, end)
            if fewer:
                found.append(Wall(first, end, fewer, int(self.beds[first:end].max())))
        return tuple(sorted(found, key=lambda one: one.first))

    def _parts(self) -> Iterator[tuple[int, int]]:
        """Give first day and end of every part that may have a wall, the longest first."""
        bounds = self._bounds()
        first, last = np.triu_indices(bounds.size, 1)
        free, days = self._counted(bounds)
        seen = free[last] - free[first]
        share = seen / np.maximum(seen.sum(axis=1, keepdims=True), 1)
        above = np.cumsum(share, axis=1) - share
        at, below = share[:, 1:-1], share[:, 2:]
        is_wall = (above[:, 1:-1] <= SELDOM * at) & (at >= np.maximum(below / 2, OFTEN))
        long = days[last] - days[first]
        which = np.flatnonzero(is_wall.any(axis=1) & (long >= LEAST_STAYS * self.mean_stay_days))
        for part in which[np.argsort(-long[which], kind="stable")]:
            yield int(bounds[first[part]]), int(bounds[last[part]])

    def _bounds(self) -> NDArray[np.int64]:
        """Return the days on which a part may begin or end: those of months, and of stated beds that last."""
        days = self.beds.size
        months = np.flatnonzero(np.diff(self.month)) + 1
        changes = np.flatnonzero(np.diff(self.beds)) + 1
        edges = np.concatenate(([0], changes, [days]))
        last = np.diff(edges) >= LEAST_DAYS
        stated = np.concatenate((edges[:-1][last], edges[1:][last]))
        return np.unique(np.concatenate(([0, days], months, stated)))

    def _counted(self, bounds: NDArray[np.int64]) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
        """Return, up to each bound, how often each number of beds was free (bounds, beds), and how many days count."""
        part = np.searchsorted(bounds, np.arange(self.beds.size), side="right")  # 1 for days before the second bound
        width = int(self.free.max(initial=0)) + 2
        place = (part[:, None] * width + self.free)[self.counts]
        many = np.bincount(place.ravel(), minlength=bounds.size * width).reshape(-1, width)
        days = np.bincount(part[self.counts], minlength=bounds.size)
        return np.cumsum(many, axis=0)[: bounds.size], np.cumsum(days)[: bounds.size]

    def _fewer(self, first: int, end: int) -> int:
        """Return how many of the stated beds were hardly ever used in this part."""
        counts = self.counts[first:end]
        free, beds = self.free[first:end][counts], self.beds[first:end][counts]
        share = np.bincount(free.ravel()) / free.size
        in_use = float((beds[:, None] - free).mean())
        return beds_below_wall(share, beds, in_use, beds.size / self.mean_stay_days)
