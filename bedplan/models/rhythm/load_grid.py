"""Average over many hours at once: hours that want nearly the same beds share a few points on a grid of loads.

A formula is worked out at the points only, then read between them by six-point interpolation. The points lie evenly
in the square root of the load, 0.14 standard deviations of a ward's census apart, at any size of ward.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]

_STEP = 0.07
_OFFSETS = np.arange(6)
# 1 / Π(j − i) over the other five points, for each of the six
_SCALES = np.array([1.0 / np.prod([j - i for i in range(6) if i != j]) for j in range(6)])


class LoadGrid(NamedTuple):
    """Loads ``(g,)`` ascending, and for each group of hours the weight of each load, ``(groups, g)``."""

    loads: Array
    weights: Array


def load_grid(loads: Array, shares: Array, groups: NDArray[np.int64], group_count: int) -> LoadGrid:
    """Which loads, with which weights, stand for these hours?

    ``loads``, ``shares`` (weight of each hour) and ``groups`` (whole numbers from 0) are ``(hours,)``.

    Checked by: tests/models/test_year.py (against every hour on its own, within 1e-6)
    """
    if np.ptp(loads) <= 1e-9 * loads.max():
        return LoadGrid(loads[:1], np.bincount(groups, weights=shares, minlength=group_count)[:, None])
    place = np.sqrt(loads) / _STEP
    first = np.floor(place).astype(np.int64) - 2
    lowest = int(first.min())
    points = (np.arange(int(first.max()) - lowest + 6) + lowest) * _STEP
    away = (place - first) - _OFFSETS[:, None]
    below, above = np.ones_like(away), np.ones_like(away)
    for j in range(1, 6):
        np.multiply(below[j - 1], away[j - 1], out=below[j])
        np.multiply(above[6 - j], away[6 - j], out=above[5 - j])
    weights = _SCALES[:, None] * below * above * shares
    cells = groups * points.size + first - lowest + _OFFSETS[:, None]
    summed = np.bincount(cells.ravel(), weights=weights.ravel(), minlength=group_count * points.size)
    return LoadGrid(points**2, summed.reshape(group_count, points.size))
