"""A rate of arrivals that is not known exactly: a gamma spread about its mean, as a few rates with weights."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]

_NEGLIGIBLE = 1e-13
_CERTAIN = 1e-4
# standard deviations: rates beyond are one in a thousand million
_FARTHEST = 6.0


def possible_rates(variation: float, load: float) -> tuple[Array, Array]:
    """Which rates, as multiples of the mean one, and with which weights, stand for a gamma spread of this SD ÷ mean?

    Evenly spaced in their logarithm, near enough together for the rate itself and for the chance swing of a ward with
    this load. The weighted mean is exactly 1.

    Source: Greenwood & Yule 1920; Jongbloed & Koole 2001.
    Checked by: tests/models/test_uncertain_rate.py
    """
    if variation < 1e-6:
        return np.ones(1), np.ones(1)
    order = 1.0 / variation**2
    spread = math.sqrt(float(special.polygamma(1, order)))
    step = min(0.7 * spread, 0.35, 1.2 / math.sqrt(max(load, 1.0)))
    logs = np.arange(-math.ceil(60.0 * spread / step), math.ceil(10.0 * spread / step) + 1) * step
    density = order * (logs - np.expm1(logs))
    keep = density > density.max() + math.log(_NEGLIGIBLE)
    weights = np.exp(density[keep] - density.max())
    weights /= weights.sum()
    rates = np.exp(logs[keep])
    return rates / (weights @ rates), weights


def few_rates(variation: float, most: int) -> tuple[Array, Array]:
    """As :func:`possible_rates`, in so many rates at most: for a figure that changes smoothly with the rate.

    Source: Gauss's rule for a normal variable, carried over to the gamma spread by its quantiles.
    Checked by: tests/models/test_uncertain_rate.py
    """
    if variation < _CERTAIN:
        return np.ones(1), np.ones(1)
    nodes, weights = np.polynomial.hermite_e.hermegauss(most)
    near = np.abs(nodes) < _FARTHEST
    chance = weights[near] / weights[near].sum()
    rates = special.gammaincinv(variation**-2, special.ndtr(nodes[near])) * variation**2
    return rates / (rates @ chance), chance
