"""The curves behind a length of stay: five shapes that answer the same six questions.

Symbols: S(u) is the share staying longer than u days; E(L) = ∫ S from L on; E2(L) = ∫ E from L on = half the mean
square of the days beyond L. All accept arrays of any shape, days of 0 or more.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Protocol

import numpy as np
from scipy import special

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]


class Shape(Protocol):
    """What every curve can answer."""

    def survival(self, days: Array) -> Array:
        """Return S(days)."""

    def quantile(self, p: Array) -> Array:
        """Return the days by which a share p has left."""

    def days_beyond(self, days: Array) -> Array:
        """Return E(days)."""

    def squared_days_beyond(self, days: Array) -> Array:
        """Return E2(days)."""

    def mean_of_shorter_of_two(self) -> float:
        """Return ∫ S²."""

    def sample(self, n: int, rng: np.random.Generator) -> Array:
        """Draw n stays."""


@dataclass(frozen=True, slots=True)
class Fixed:
    """Every stay the same."""

    mean: float

    def survival(self, days: Array) -> Array:
        """Return S(days): 1 before the day of leaving, 0 from it on."""
        return np.where(days < self.mean, 1.0, 0.0)

    def quantile(self, p: Array) -> Array:
        """Return the one stay there is."""
        return np.full(np.shape(p), self.mean)

    def days_beyond(self, days: Array) -> Array:
        """Return E(days)."""
        return np.maximum(self.mean - days, 0.0)

    def squared_days_beyond(self, days: Array) -> Array:
        """Return E2(days)."""
        return np.maximum(self.mean - days, 0.0) ** 2 / 2.0

    def mean_of_shorter_of_two(self) -> float:
        """Return the one stay there is."""
        return self.mean

    def sample(self, n: int, rng: np.random.Generator) -> Array:  # noqa: ARG002  every curve is asked alike
        """Return n times the one stay there is."""
        return np.full(n, self.mean)


@dataclass(frozen=True, slots=True)
class Lognormal:
    """Lognormal by mean and variation: σ² = ln(1 + variation²), μ = ln mean − σ²/2."""

    mean: float
    variation: float

    @property
    def _sigma(self) -> float:
        return math.sqrt(math.log1p(self.variation**2))

    def _standard(self, days: Array) -> Array:
        """Return (ln days − μ)/σ, −∞ at 0 days."""
        sigma = self._sigma
        logs = np.log(days, out=np.full(np.shape(days), -np.inf), where=np.asarray(days) > 0)
        return (logs - math.log(self.mean) + sigma**2 / 2.0) / sigma

    def survival(self, days: Array) -> Array:
        """Return S(days)."""
        return special.ndtr(-self._standard(days))

    def quantile(self, p: Array) -> Array:
        """Return the days by which a share p has left."""
        sigma = self._sigma
        return self.mean * np.exp(sigma * special.ndtri(p) - sigma**2 / 2.0)

    def days_beyond(self, days: Array) -> Array:
        """Return E(days) = mean·Φ(σ − z) − days·S(days)."""
        z = self._standard(days)
        return np.maximum(self.mean * special.ndtr(self._sigma - z) - days * special.ndtr(-z), 0.0)

    def squared_days_beyond(self, days: Array) -> Array:
        """Return E2(days) from the first two partial moments."""
        z, sigma = self._standard(days), self._sigma
        square = self.mean**2 * (1.0 + self.variation**2) * special.ndtr(2 * sigma - z)
        middle = 2.0 * days * self.mean * special.ndtr(sigma - z)
        return np.maximum(square - middle + days**2 * special.ndtr(-z), 0.0) / 2.0

    def mean_of_shorter_of_two(self) -> float:
        """Return ∫ S² = 2·mean·Φ(−σ/√2)."""
        return 2.0 * self.mean * float(special.ndtr(-self._sigma / math.sqrt(2.0)))

    def sample(self, n: int, rng: np.random.Generator) -> Array:
        """Draw n stays."""
        sigma = self._sigma
        return self.mean * np.exp(sigma * rng.standard_normal(n) - sigma**2 / 2.0)


@dataclass(frozen=True, slots=True)
class Gamma:
    """Gamma by mean and variation: order k = 1/variation², scale = mean·variation²."""

    mean: float
    variation: float

    @property
    def _order(self) -> float:
        return 1.0 / self.variation**2

    def survival(self, days: Array) -> Array:
        """Return S(days)."""
        return special.gammaincc(self._order, days * self._order / self.mean)

    def quantile(self, p: Array) -> Array:
        """Return the days by which a share p has left."""
        return special.gammaincinv(self._order, p) * self.mean / self._order

    def days_beyond(self, days: Array) -> Array:
        """Return E(days) = mean·S_{k+1} − days·S_k."""
        x, k = days * self._order / self.mean, self._order
        return np.maximum(self.mean * special.gammaincc(k + 1, x) - days * special.gammaincc(k, x), 0.0)

    def squared_days_beyond(self, days: Array) -> Array:
        """Return E2(days) from the first two partial moments."""
        x, k = days * self._order / self.mean, self._order
        square = self.mean**2 * (1.0 + self.variation**2) * special.gammaincc(k + 2, x)
        middle = 2.0 * days * self.mean * special.gammaincc(k + 1, x)
        return np.maximum(square - middle + days**2 * special.gammaincc(k, x), 0.0) / 2.0

    def mean_of_shorter_of_two(self) -> float:
        """Return ∫ S² = mean·(1 − Gini index), Gini = Γ(k + ½)/(√π·Γ(k + 1))."""
        k = self._order
        return self.mean * (1.0 - math.exp(special.gammaln(k + 0.5) - special.gammaln(k + 1.0)) / math.sqrt(math.pi))

    def sample(self, n: int, rng: np.random.Generator) -> Array:
        """Draw n stays."""
        return rng.standard_gamma(self._order, n) * (self.mean / self._order)


@dataclass(frozen=True, slots=True)
class TwoStreams:
    """A mix of two curves by share of patients."""

    parts: tuple[tuple[float, Shape], ...]

    def _mix(self, question: str, days: Array) -> Array:
        return sum(share * getattr(part, question)(days) for share, part in self.parts)

    def survival(self, days: Array) -> Array:
        """Return S(days)."""
        return self._mix("survival", days)

    def days_beyond(self, days: Array) -> Array:
        """Return E(days)."""
        return self._mix("days_beyond", days)

    def squared_days_beyond(self, days: Array) -> Array:
        """Return E2(days)."""
        return self._mix("squared_days_beyond", days)

    def quantile(self, p: Array) -> Array:
        """Return the days by which a share p has left, by halving the gap between the two curves' own answers."""
        ends = [np.asarray(part.quantile(p), dtype=float) for share, part in self.parts if share > 0]
        low, high = np.minimum(ends[0], ends[-1]), np.maximum(ends[0], ends[-1])
        finite = np.isfinite(high)
        low, high = np.where(finite, low, 0.0), np.where(finite, high, 0.0)
        for _ in range(60):
            middle = (low + high) / 2.0
            gone = self.survival(middle) <= 1.0 - np.asarray(p)
            low, high = np.where(gone, low, middle), np.where(gone, middle, high)
        return np.where(finite, high, np.inf)

    def mean_of_shorter_of_two(self) -> float:
        """Return ∫ S², by Gauss's rule between the parts' own quantiles (where a curve may jump)."""
        ends = np.unique(np.concatenate([part.quantile(_SHARES) for share, part in self.parts if share > 0]))
        ends = np.concatenate([[0.0], ends[ends > 0]])
        half = np.diff(ends)[:, None] / 2.0
        left = self.survival(ends[:-1, None] + half * (1.0 + _NODES))
        return float(np.sum(half * _WEIGHTS * left**2))

    def sample(self, n: int, rng: np.random.Generator) -> Array:
        """Draw n stays."""
        (_, first), (share_of_second, second) = self.parts
        is_second = rng.random(n) < share_of_second
        return np.where(is_second, second.sample(n, rng), first.sample(n, rng))


_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(12)
_SHARES = 1.0 - np.concatenate([np.linspace(1.0, 0.02, 50), np.geomspace(0.02, 1e-15, 60)[1:]])


@dataclass(frozen=True, slots=True, eq=False)
class Measured:
    """Straight lines between measured points; S = 0 after the last one."""

    days: Array
    left: Array

    def survival(self, days: Array) -> Array:
        """Return S(days)."""
        return np.interp(days, self.days, self.left)

    def quantile(self, p: Array) -> Array:
        """Return the days by which a share p has left."""
        return np.interp(p, 1.0 - self.left, self.days)

    def _sums_beyond(self) -> tuple[Array, Array]:
        """Return E and E2 at the measured points, exactly for straight lines."""
        step, s0, s1 = np.diff(self.days), self.left[:-1], self.left[1:]
        pieces = step * (s0 + s1) / 2.0
        beyond = np.concatenate([np.cumsum(pieces[::-1])[::-1], [0.0]])
        squares = step * beyond[1:] + step**2 * (s0 + 2.0 * s1) / 6.0
        return beyond, np.concatenate([np.cumsum(squares[::-1])[::-1], [0.0]])

    def _place(self, days: Array) -> tuple[NDArray[np.int64], Array, Array]:
        """Return the piece each day lies in, the days left in that piece, and S there."""
        at = np.clip(days, 0.0, self.days[-1])
        piece = np.clip(np.searchsorted(self.days, at, side="right") - 1, 0, self.days.size - 2)
        return piece, self.days[piece + 1] - at, np.interp(at, self.days, self.left)

    def days_beyond(self, days: Array) -> Array:
        """Return E(days)."""
        beyond, _ = self._sums_beyond()
        piece, rest, here = self._place(days)
        return beyond[piece + 1] + rest * (here + self.left[piece + 1]) / 2.0

    def squared_days_beyond(self, days: Array) -> Array:
        """Return E2(days)."""
        beyond, squares = self._sums_beyond()
        piece, rest, here = self._place(days)
        return squares[piece + 1] + rest * beyond[piece + 1] + rest**2 * (here + 2.0 * self.left[piece + 1]) / 6.0

    def mean_of_shorter_of_two(self) -> float:
        """Return ∫ S², exactly for straight lines."""
        s0, s1 = self.left[:-1], self.left[1:]
        return float(np.sum(np.diff(self.days) * (s0**2 + s0 * s1 + s1**2) / 3.0))

    def sample(self, n: int, rng: np.random.Generator) -> Array:
        """Draw n stays."""
        return self.quantile(rng.random(n))
