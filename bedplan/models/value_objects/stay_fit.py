"""Which curve do recorded stays follow: lognormal, gamma, or two lognormal groups of patients in one ward?

By likelihood, from whole-day or exact stays, with patients still in and patients who were in before counting began.
The curve's shape comes from here; its mean never does: a fitted lognormal misses the mean of real stays by up to a
fifth, and beds with it.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np
from scipy import optimize, special

from bedplan.errors import ImpossibleFigure
from bedplan.models.value_objects.stay import LengthOfStay

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from numpy.typing import ArrayLike, NDArray

    Array = NDArray[np.float64]

_GROUPED_FROM = 2_000
_SHORTEST_DAYS = 1e-3
_NARROWEST = 0.02
_WEIGHT_LIMIT = 6.0
# what lies out of a curve's reach: a curve may not excuse stays that it calls impossible by entries it calls so too
_FAINT, _HOPELESS = -600.0, -1e4
_SEARCH = {"ftol": 1e-9, "maxiter": 300}
_HALF_LOG_TWO_PI = 0.5 * math.log(2.0 * math.pi)
_STEEPEST = 600.0  # a slope's logarithm where a stay is called impossible: steep enough to turn back from, and finite


@dataclass(frozen=True, slots=True, eq=False)
class SeenStays:
    """Stays as they were seen. All ``(n,)``; days are 0 or more.

    ``days``: how long each was seen to stay. ``finished``: False = still in (None = all have left). ``entered_at``: days
    already stayed when watching began (None = watched from arrival); patients who left before that can't be among
    them. ``whole_days``: days are counted, so that k means k − ½ to k + ½; 1 means 0 to 1½ where no stay is 0.

    Raises:
        ImpossibleFigure: nobody has left, a negative or endless stay, or a stay that ended before watching began.
    """

    days: ArrayLike
    finished: ArrayLike | None = None
    entered_at: ArrayLike | None = None
    whole_days: bool = True

    def __post_init__(self) -> None:
        """Check every figure once, here."""
        days = np.asarray(self.days, dtype=float)
        finished = np.ones(days.shape, bool) if self.finished is None else np.asarray(self.finished, dtype=bool)
        entered = np.zeros(days.shape) if self.entered_at is None else np.asarray(self.entered_at, dtype=float)
        if not days.shape == finished.shape == entered.shape or days.ndim != 1:
            raise ImpossibleFigure("Stays, ends and entries must be three lists of one length.")
        if not finished.any():
            raise ImpossibleFigure("0 finished stays are too few to fit a curve: at least 1 must have ended.")
        if not (np.isfinite(days) & np.isfinite(entered) & (days >= 0) & (entered >= 0)).all():
            raise ImpossibleFigure("A stay of less than 0 days, or without an end to it, is not possible.")
        if ((entered > days) & (entered >= days + 0.5 * self.whole_days)).any():
            raise ImpossibleFigure("A stay can't end before its patient was first seen: check starts and ends.")
        for name, array in (("days", days), ("finished", finished), ("entered_at", entered)):
            object.__setattr__(self, name, array)

    def intervals(self) -> tuple[Array, Array, Array, Array]:
        """Return different stays once each: between which days they ended (inf = still in), entry, and how many."""
        low, high = self._day_bounds() if self.whole_days else self._moment_bounds()
        low, high = np.where(self.finished, low, self.days), np.where(self.finished, high, np.inf)
        # whoever was met within a day counted whole can't have left earlier in it
        low = np.maximum(low, self.entered_at) if self.whole_days else low
        entered = np.minimum(self.entered_at, low)
        rows, counts = np.unique(np.stack([low, high, entered]), axis=1, return_counts=True)
        return rows[0], rows[1], rows[2], counts.astype(float)

    def _day_bounds(self) -> tuple[Array, Array]:
        """Return half a day to either side; a day from 0 on where nobody is counted with 0."""
        low = np.maximum(self.days - 0.5, 0.0)
        return np.where((self.days == 1) & (self.days[self.finished].min() >= 1), 0.0, low), self.days + 0.5

    def _moment_bounds(self) -> tuple[Array, Array]:
        """Return a thousandth around each stay, as good as the density; half a per cent, in steps, where there are many."""
        logs, width = np.log(np.maximum(self.days, _SHORTEST_DAYS)), 0.001
        if self.days.size >= _GROUPED_FROM:
            width = 0.005
            logs = np.round(logs / width) * width
        low = np.where(self.days < _SHORTEST_DAYS, 0.0, np.exp(logs - width / 2.0))
        return low, np.exp(logs + width / 2.0)


@dataclass(frozen=True, slots=True)
class StayFit:
    """The curve the records prefer, and by how much.

    ``family``: ``"lognormal"``, ``"gamma"`` or ``"two lognormals"``. ``behind``: each family's AIC minus the best one's;
    0 for the best, more than about 10 = the records hardly allow it. ``length_of_stay`` has that shape and the mean it was
    given. ``fitted_mean_days`` is what the curve alone would have said.
    """

    family: str
    behind: Mapping[str, float]
    parameters: Mapping[str, tuple[float, ...]]
    length_of_stay: LengthOfStay
    fitted_mean_days: float


def _lognormal(low: Array, high: Array, mu: float, log_sigma: float) -> Array:
    """Return ln P(low < stay ≤ high), from the side of the curve that keeps its digits."""
    logs = [np.log(ends, out=np.full(ends.shape, -np.inf), where=ends > 0) for ends in (low, high)]
    a, b = ((log - mu) / math.exp(log_sigma) for log in logs)
    flip = a > 0
    a, b = np.where(flip, -b, a), np.where(flip, -a, b)
    top = special.log_ndtr(b)
    return top + np.log(np.maximum(-np.expm1(special.log_ndtr(a) - top), 1e-300))


def _gamma(low: Array, high: Array, log_order: float, log_scale: float) -> Array:
    """Return ln P(low < stay ≤ high), from the side of the curve that keeps its digits."""
    order, scale = math.exp(log_order), math.exp(log_scale)
    a, b = low / scale, high / scale
    below = special.gammainc(order, b) - special.gammainc(order, a)
    above = special.gammaincc(order, a) - special.gammaincc(order, b)
    share = np.where(a < order, below, above)
    return np.where(share > 1e-300, np.log(np.maximum(share, 1e-300)), _HOPELESS)


def _two_lognormals(low: Array, high: Array, *figures: float) -> Array:
    """Return ln P(low < stay ≤ high) of a mix; the first figure says, as ±ln odds, how many belong to the second."""
    weight, *curves = figures
    first = special.log_expit(-weight) + _lognormal(low, high, *curves[:2])
    return np.logaddexp(first, special.log_expit(weight) + _lognormal(low, high, *curves[2:]))


def _lognormal_slope(low: Array, high: Array, mu: float, log_sigma: float) -> Array:
    """Return how ln P(low < stay ≤ high) moves with each figure, ``(2, n)``."""
    log, sigma = _lognormal(low, high, mu, log_sigma), math.exp(log_sigma)
    slopes = np.zeros((2, low.size))
    for ends, sign in ((low, 1.0), (high, -1.0)):
        inside = (ends > 0) & np.isfinite(ends)
        z = (np.log(ends[inside]) - mu) / sigma
        density = sign * np.exp(np.minimum(-(z**2) / 2.0 - _HALF_LOG_TWO_PI - log[inside], _STEEPEST))
        slopes[:, inside] += np.stack([density / sigma, density * z])
    return slopes


def _two_lognormals_slope(low: Array, high: Array, *figures: float) -> Array:
    """Return how the logarithm of the mix moves with each figure, ``(5, n)``."""
    weight, *curves = figures
    log = _two_lognormals(low, high, *figures)
    logs = [_lognormal(low, high, *curves[at : at + 2]) for at in (0, 2)]
    first, second = (
        np.exp(special.log_expit(-weight) + logs[0] - log),
        np.exp(special.log_expit(weight) + logs[1] - log),
    )
    slopes = [_lognormal_slope(low, high, *curves[at : at + 2]) for at in (0, 2)]
    return np.vstack([second - special.expit(weight), first * slopes[0], second * slopes[1]])


def _best(family: Callable[..., Array], stays: tuple[Array, ...], starts: list[list[float]]) -> tuple[float, Array]:
    """Return the highest log likelihood over several starts, and the figures that reach it.

    Who was met only after some days stands for those who stayed that long: their share is divided out.
    """
    low, high, entered, counts = stays
    is_late = entered > 0
    forever = np.full(int(is_late.sum()), np.inf)

    def unlikeliness(figures: Array) -> float:
        """Return minus the logarithm of the likelihood."""
        log = family(low, high, *figures)
        late = family(entered[is_late], forever, *figures)
        return -float(counts @ log - counts[is_late] @ np.maximum(late, _FAINT))

    def slope(figures: Array) -> Array:
        """Return how that moves with each figure."""
        late = _SLOPES[family](entered[is_late], forever, *figures)
        faint = family(entered[is_late], forever, *figures) < _FAINT
        return late @ np.where(faint, 0.0, counts[is_late]) - _SLOPES[family](low, high, *figures) @ counts

    given = slope if family in _SLOPES else None
    bounds = [(-_WEIGHT_LIMIT, _WEIGHT_LIMIT)] * (len(starts[0]) % 2) + _BOUNDS[family] * (len(starts[0]) // 2)
    # a search without large matrices: others wait for a second thread longer than they compute
    tries = [
        optimize.minimize(unlikeliness, start, jac=given, method="SLSQP", bounds=bounds, options=_SEARCH)
        for start in starts
    ]
    best = min(tries, key=lambda one: one.fun)
    return -float(best.fun), best.x


_SLOPES = {_lognormal: _lognormal_slope, _two_lognormals: _two_lognormals_slope}
_BOUNDS = {
    _lognormal: [(-12.0, 12.0), (math.log(_NARROWEST), 3.0)],
    _gamma: [(-5.0, 5.0), (-12.0, 12.0)],
    _two_lognormals: [(-12.0, 12.0), (math.log(_NARROWEST), 3.0)],
}


def _starts(stays: tuple[Array, ...]) -> dict[str, list[list[float]]]:
    """Return where each family's search begins, from the mean and deviation of ln days (still in: as they stand)."""
    low, high, _, counts = stays
    middle = np.where(np.isfinite(high), (low + np.where(np.isfinite(high), high, low)) / 2.0, np.maximum(low, 0.5))
    logs = np.log(np.maximum(middle, _SHORTEST_DAYS))
    share = counts / counts.sum()
    mu = float(share @ logs)
    sigma = max(math.sqrt(float(share @ (logs - mu) ** 2)), 0.05)
    mean = float(share @ middle)
    order = 1.0 / max(float(share @ (middle - mean) ** 2) / mean**2, 0.01)
    spread, narrow = math.log(sigma), math.log(0.6 * sigma)
    return {
        "lognormal": [[mu, spread]],
        "gamma": [[math.log(order), math.log(mean / order)], [0.0, math.log(mean)]],
        "two lognormals": [
            [0.0, mu - 0.7 * sigma, narrow, mu + 0.7 * sigma, narrow],
            [-1.5, mu - 0.2 * sigma, spread, mu + 1.2 * sigma, narrow],
            [1.5, mu - 1.2 * sigma, narrow, mu + 0.2 * sigma, spread],
            [0.0, mu, math.log(0.3 * sigma), mu, math.log(1.4 * sigma)],
        ],
    }


_FAMILIES = {"lognormal": _lognormal, "gamma": _gamma, "two lognormals": _two_lognormals}


def fit_stay(seen: SeenStays, mean_days: float, variation: float) -> StayFit:
    """Which curve do these stays follow, held at their own mean?

    ``mean_days`` and ``variation`` come from the records themselves, by the product limit where stays are unfinished;
    a single curve keeps both, two groups are stretched to the mean. With few stays or long waits for the end of them the
    difference between families is small: ``behind`` says so.

    Raises:
        ImpossibleFigure: stays that can't be, or a mean that isn't above 0.

    Source: Akaike 1974, IEEE Transactions on Automatic Control 19; whole days by intervals: Heitjan 1989, Statistical
        Science 4; delayed entry: Klein & Moeschberger, Survival Analysis, section 3.5.
    Checked by: tests/models/test_stay_fit.py
    """
    LengthOfStay(mean_days, variation)  # refuses figures that can't be before any time is spent
    stays = seen.intervals()
    starts = _starts(stays)
    found = {name: _best(_FAMILIES[name], stays, starts[name]) for name in _FAMILIES}
    aic = {name: 2.0 * figures.size - 2.0 * likelihood for name, (likelihood, figures) in found.items()}
    family = min(aic, key=aic.__getitem__)
    parameters = {name: _natural(name, figures) for name, (_, figures) in found.items()}
    stay, fitted_mean = _held(family, parameters[family], mean_days, variation)
    behind = {name: value - aic[family] for name, value in aic.items()}
    return StayFit(family, MappingProxyType(behind), MappingProxyType(parameters), stay, fitted_mean)


def _natural(name: str, figures: Array) -> tuple[float, ...]:
    """Return (mu, sigma); (order, scale); or (share of the longer group, mu, sigma, mu, sigma), shorter group first."""
    if name == "lognormal":
        return float(figures[0]), math.exp(figures[1])
    if name == "gamma":
        return math.exp(figures[0]), math.exp(figures[1])
    share, groups = float(special.expit(figures[0])), [(float(figures[k]), math.exp(figures[k + 1])) for k in (1, 3)]
    if groups[0][0] > groups[1][0]:
        share, groups = 1.0 - share, groups[::-1]
    return share, *groups[0], *groups[1]


def _held(family: str, figures: tuple[float, ...], mean_days: float, variation: float) -> tuple[LengthOfStay, float]:
    """Return the stay of that shape with the records' own mean, and the mean the curve alone would have."""
    if family == "gamma":
        return LengthOfStay(mean_days, variation, "gamma"), figures[0] * figures[1]
    if family == "lognormal":
        return LengthOfStay(mean_days, variation), math.exp(figures[0] + figures[1] ** 2 / 2.0)
    share, *curves = figures
    means = [math.exp(mu + sigma**2 / 2.0) for mu, sigma in (curves[:2], curves[2:])]
    fitted = (1.0 - share) * means[0] + share * means[1]
    groups = [
        LengthOfStay(mean * mean_days / fitted, math.sqrt(math.expm1(sigma**2)))
        for mean, sigma in zip(means, curves[1::2], strict=True)
    ]
    return LengthOfStay.two_streams(share, *groups), fitted
