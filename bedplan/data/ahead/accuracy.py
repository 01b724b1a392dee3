"""How wrong was a forecast? The usual measures, and the forecast that any other has to beat."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bedplan.errors import ImpossibleFigure

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    Array = NDArray[np.float64]

BLOCK_DAYS = 28
NORMAL_95 = 1.96


@dataclass(frozen=True, slots=True)
class Accuracy:
    """How wrong a forecast was.

    Root mean square and mean absolute error are in the series' unit; the share is of the actual values; scaled, below
    1 is better than the seasonal naive forecast was on the earlier values, one period ahead.
    """

    root_mean_square_error: float
    mean_absolute_error: float
    mean_absolute_share: float
    mean_absolute_scaled_error: float


def forecast_accuracy(actual: ArrayLike, forecast: ArrayLike, earlier: ArrayLike, period: int = 1) -> Accuracy:
    """How far was this forecast (n,) from what happened (n,), given the ``earlier`` values it was made from?

    ``period``: steps after which the season repeats (1 = no season). Actual values must not be 0 for the share, which
    is then infinite.

    Raises:
        ImpossibleFigure: lengths that differ, nothing to compare, or no more earlier values than one period.

    Source: Hyndman & Koehler 2006, International Journal of Forecasting 22(4).
    Checked by: tests/data/ahead/test_accuracy.py
    """
    happened, told, before = (np.asarray(values, dtype=float) for values in (actual, forecast, earlier))
    if happened.shape != told.shape or not happened.size:
        raise ImpossibleFigure(
            f"{told.size} forecasts can't be compared with {happened.size} actual values: give one for each."
        )
    if before.size <= period:
        raise ImpossibleFigure(f"{before.size} earlier values are too few: a scale needs more than {period}.")
    wrong = np.abs(happened - told)
    scale = float(np.abs(before[period:] - before[:-period]).mean())
    zero = not happened.all()
    return Accuracy(
        math.sqrt(float((wrong**2).mean())),
        float(wrong.mean()),
        math.inf if zero else float((wrong / np.abs(happened)).mean()),
        float(wrong.mean()) / scale if scale > 0 else math.inf,
    )


def seasonal_naive(earlier: ArrayLike, period: int, steps: int) -> Array:
    """What if everything came again as it did one period ago? ``(steps,)``; period 1 repeats the last value.

    Source: Hyndman & Athanasopoulos, Forecasting: Principles and Practice, 2nd edition, simple methods.
    Checked by: tests/data/ahead/test_accuracy.py
    """
    before = np.asarray(earlier, dtype=float)
    if not 1 <= period <= before.size:
        raise ImpossibleFigure(f"A period of {period} steps needs as many earlier values; there are {before.size}.")
    return np.resize(before[-period:], steps)


def coverage_range(inside: Array, block_days: int = BLOCK_DAYS) -> tuple[float, float]:
    """Between which shares may the true coverage lie, 95 %, when neighbouring days share their patients?

    ``inside`` (d,) 0 to 1. The variance is that of a circular block bootstrap with infinitely many redraws, which has
    a closed form; the interval is Wilson's for as many independent days as that variance is worth, so that it stays
    within 0 and 1 and never shrinks to a point.

    Source: Politis & Romano 1992 (circular blocks); Wilson 1927 (interval).
    Checked by: tests/data/ahead/test_accuracy.py
    """
    days, share = inside.size, float(inside.mean())
    block = min(block_days, days)
    sums = np.concatenate(([0.0], np.cumsum(np.concatenate((inside, inside[: block - 1])))))
    means = (sums[block:] - sums[:-block]) / block
    variance = float(means.var()) * block / days
    spread = share * (1.0 - share)
    worth = min(max(spread / variance, days / block), days) if variance > 1e-12 else days / block
    square = NORMAL_95**2 / worth
    middle = (share + square / 2.0) / (1.0 + square)
    half = math.sqrt(spread * square + square**2 / 4.0) / (1.0 + square)
    return max(middle - half, 0.0), min(middle + half, 1.0)
