"""How far the level of arrivals wanders beyond rhythm and chance, told apart from what season and growth take up of it."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]

BLOCK_DAYS = 28
# Days after which 1 part in e of a drift is left; nan: each block's own. Nobody knows it, so all weigh alike.
LASTS_DAYS = (math.nan, 60.0, 120.0, 240.0, 480.0, 960.0)
# SD ÷ mean, before the records speak: mostly 1 to 13 %. Common practice, no source.
USUAL, SPREAD = 0.04, 1.2
SIZES = np.geomspace(0.002, 0.8, 48)


@dataclass(frozen=True, slots=True, eq=False)
class Drift:
    """Drift of a rate: SD ÷ mean, and between which figures it lies (90 %).

    ``effect_errors`` (k,): standard errors of the effects that the rate was fitted by, chance and drift together.
    ``squares``: variance ÷ mean² by how long the drift lasts (``LASTS_DAYS``), what the parts add up to.
    """

    variation: float
    interval: tuple[float, float]
    effect_errors: Array
    squares: tuple[float, ...]

    def variance_of_mean(self, days: int) -> float:
        """How far may the mean of so many days be off the long run by drift alone? Variance ÷ square of the rate."""
        return math.fsum(
            square * _of_means(days, lasts, 0)[0] for square, lasts in zip(self.squares, LASTS_DAYS, strict=True)
        )


@dataclass(frozen=True, slots=True, eq=False)
class Blocks:
    """Totals of 28 days: by how much each was off, as a share (b,); what chance alone gives, as a variance (b,).

    ``number`` (b,) counts blocks, those left out too; ``design`` (b, k): what level, season and growth can take up.
    """

    off: Array
    chance: Array
    number: NDArray[np.int64]
    design: Array


def find_drift(blocks: Blocks) -> Drift:
    """How far does the level wander, given totals around a fitted rhythm?

    What the fit can't have taken up decides (residual likelihood), whichever way it was fitted. Drift is taken to fade
    with time, by a speed that nobody knows: every speed of ``LASTS_DAYS`` is weighed by how well it fits. Few or small
    blocks say little; then the answer stays near what is usual.

    Source: Patterson & Thompson 1971 (residual likelihood); Uhlenbeck & Ornstein 1930 (a drift that fades).
    Checked by: tests/data/ahead/test_drift.py
    """
    alike = [_alike(blocks.number, lasts) for lasts in LASTS_DAYS]
    chances = _weights(blocks, alike)
    by_size = chances.sum(axis=0)
    squares = chances @ SIZES**2
    covariance = np.diag(blocks.chance) + np.tensordot(squares, np.array(alike), axes=1)
    weighted = blocks.design.T / blocks.chance
    effects = np.linalg.pinv(weighted @ blocks.design) @ weighted
    low, high = np.interp((0.05, 0.95), np.cumsum(by_size), SIZES)
    return Drift(
        variation=float(by_size @ SIZES),
        interval=(float(low), float(high)),
        effect_errors=np.sqrt(np.einsum("ij,jk,ik->i", effects, covariance, effects)),
        squares=tuple(squares.tolist()),
    )


def _weights(blocks: Blocks, alike: list[Array]) -> Array:
    """Return how likely each length and size of drift is (lengths, sizes), given the blocks; they add up to 1."""
    scale = 1.0 / np.sqrt(blocks.chance)
    left, singular, _ = np.linalg.svd(blocks.design * scale[:, None])
    free = left[:, int((singular > 1e-8 * singular[0]).sum()) :]
    seen = free.T @ (blocks.off * scale)
    likely = []
    for together in alike:
        strength, directions = np.linalg.eigh(free.T @ (together * scale[:, None] * scale) @ free)
        told = 1.0 + SIZES[:, None] ** 2 * np.maximum(strength, 0.0)
        likely.append(-0.5 * (np.log(told) + (directions.T @ seen) ** 2 / told).sum(axis=1))
    before = np.log(SIZES / USUAL) / SPREAD
    total = np.array(likely) - 0.5 * before**2
    chances = np.exp(total - total.max())
    return chances / chances.sum()


def _alike(number: NDArray[np.int64], lasts: float) -> Array:
    """Return the covariance (b, b) of the blocks' levels, for a drift of variance 1."""
    apart = np.abs(np.subtract.outer(number, number))
    return _of_means(BLOCK_DAYS, lasts, int(apart.max()))[apart]


def _of_means(days: int, lasts: float, most: int) -> Array:
    """Return the covariance of means over so many days, 0, 1 … ``most`` such stretches apart, for a drift of variance 1."""
    if math.isnan(lasts):
        return np.append(min(BLOCK_DAYS / days, 1.0), np.zeros(most))
    share = days / lasts
    same = 2.0 * (share + math.expm1(-share)) / share**2
    return np.append(same, (math.expm1(-share) / share) ** 2 * np.exp(-share * np.arange(most)))
