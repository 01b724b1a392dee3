"""How long do patients stay when some are still in, and some were in before counting began?"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bedplan.errors import ImpossibleFigure

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

TAIL_EVENTS = 10  # the last so many departures say how fast the rest leave
NORMAL_95 = 1.96


@dataclass(frozen=True, slots=True)
class StayCurve:
    """The share of patients still in after so many days, estimated by the product limit.

    ``days`` (k,) ascending moments at which somebody left; ``share_left`` (k,) just after each; ``at_risk`` and
    ``left`` (k,) whole numbers. ``longest_days`` is the longest time anybody was watched. Where the curve has not
    reached 0 by then, the rest leave at ``tail_per_day``, the rate of the last ten departures.
    """

    days: NDArray[np.float64]
    share_left: NDArray[np.float64]
    at_risk: NDArray[np.int64]
    left: NDArray[np.int64]
    longest_days: float
    tail_per_day: float

    @property
    def open_share(self) -> float:
        """Which share of patients was never seen to leave? Above 0, the tail had to be closed."""
        return float(self.share_left[-1])

    def at(self, days: ArrayLike) -> NDArray[np.float64]:
        """Which share stays longer than so many days?"""
        asked = np.asarray(days, dtype=float)
        place = np.searchsorted(self.days, asked, side="right")
        steps = np.concatenate(([1.0], self.share_left))[place]
        beyond = np.maximum(asked - self.longest_days, 0.0)
        return steps * np.exp(-self.tail_per_day * beyond) if self.open_share > 0 else steps

    def standard_error(self, days: float) -> float:
        """How far may the share at so many days be off? Greenwood's formula."""
        before = (self.days <= days) & (self.at_risk > self.left)
        terms = self.left[before] / (self.at_risk[before] * (self.at_risk[before] - self.left[before]))
        return float(self.at(days)) * math.sqrt(math.fsum(terms))

    def restricted_mean(self, until_days: float) -> float:
        """How many of the first so many days does a patient stay, on average?"""
        edges = np.concatenate(([0.0], self.days[self.days < until_days], [until_days]))
        return float((np.diff(edges) * self.at(edges[:-1])).sum())

    @property
    def tail_days(self) -> float:
        """How many days of the mean come from closing the tail?"""
        return self.open_share / self.tail_per_day if self.open_share > 0 else 0.0

    @property
    def mean_days(self) -> float:
        """How long do patients stay on average, the closed tail included?"""
        return self.restricted_mean(self.longest_days) + self.tail_days

    @property
    def variation(self) -> float:
        """How spread out are stays? SD ÷ mean, the closed tail included."""
        edges = np.concatenate(([0.0], self.days, [self.longest_days]))
        square = float((np.diff(edges**2) * np.concatenate(([1.0], self.share_left))).sum())
        if self.open_share > 0:
            square += 2.0 * self.open_share * (self.longest_days / self.tail_per_day + self.tail_per_day**-2)
        return math.sqrt(max(square / self.mean_days**2 - 1.0, 0.0))

    @property
    def mean_standard_error(self) -> float:
        """How far may the mean be off by chance? Area beyond each departure, Greenwood's weights, plus the tail."""
        steps = np.append(np.diff(self.days), self.longest_days - self.days[-1])
        beyond = np.cumsum((steps * self.share_left)[::-1])[::-1] + self.tail_days
        safe = self.at_risk > self.left
        weights = self.left[safe] / (self.at_risk[safe] * (self.at_risk[safe] - self.left[safe]))
        variance = float((beyond[safe] ** 2 * weights).sum())
        return math.sqrt(variance + self.tail_days**2 / min(TAIL_EVENTS, int(self.left.sum())))

    @property
    def skewness(self) -> float:
        """How much longer is the tail of long stays than that of short ones? Third central moment ÷ SD³; 2 if exponential."""
        edges = np.concatenate(([0.0], self.days, [self.longest_days]))
        left = np.concatenate(([1.0], self.share_left))
        cube = float((np.diff(edges**3) * left).sum())
        if self.open_share > 0:
            longest, pace = self.longest_days, self.tail_per_day
            cube += 3.0 * self.open_share * (longest**2 / pace + 2.0 * longest / pace**2 + 2.0 / pace**3)
        mean, deviation = self.mean_days, self.variation * self.mean_days
        if deviation <= 0:
            return 0.0
        return (cube - 3.0 * mean * deviation**2 - mean**3) / deviation**3

    @property
    def mean_spread(self) -> float:
        """By which factor, either way, may the mean be off? 95 %, wide enough for records that miss the longest stays.

        Few stays seldom hold the rare long ones, so that most samples show too short a mean: the usual interval is moved
        up by what the skewness of stays does to it.

        Source: Johnson 1978, Journal of the American Statistical Association 73(363); Hall 1992, JRSS B 54(1).
        """
        error, deviation = self.mean_standard_error, self.variation * self.mean_days
        if deviation <= 0:
            return math.exp(NORMAL_95 * error / self.mean_days)
        moved = max(self.skewness, 0.0) * error**2 * (1.0 + 2.0 * NORMAL_95**2) / (6.0 * deviation)
        return math.exp(NORMAL_95 * error / self.mean_days) + moved / self.mean_days

    def points(self) -> tuple[list[float], list[float]]:
        """Return at most 58 points of the curve, from 1 down to 0, with the curve's own mean: for a measured stay."""
        end = self.longest_days + (5.0 / self.tail_per_day if self.open_share > 0 else 0.0)
        before = np.concatenate(([1.0], self.share_left[:-1]))
        middle = (before + self.share_left) / 2  # a step's middle, so that straight lines neither add nor lose days
        wanted = np.concatenate((np.linspace(0.98, 0.1, 30), np.geomspace(0.09, max(middle[-1], 1e-5), 26)))
        places = np.unique(np.searchsorted(-middle, -wanted).clip(max=middle.size - 1))
        days, left = self.days[places], middle[places]
        keep = (days > 0) & (days < end) & (left < 1) & (left > 0)
        days, left = np.array([0.0, *days[keep], end]), np.array([1.0, *left[keep], 0.0])
        mean = float((np.diff(days) * (left[1:] + left[:-1])).sum()) / 2
        return (days * (self.mean_days / mean)).tolist(), left.tolist()


def product_limit(days: ArrayLike, finished: ArrayLike, entry_days: ArrayLike | None = None) -> StayCurve:
    """How long do patients stay, counting unfinished stays for what they show and no more?

    ``days`` (n,) how long each patient was seen to stay; ``finished`` (n,) False = still in; ``entry_days`` (n,) how
    long each had been in when watching began (0 = from arrival), so that patients found in the beds at the start
    don't make stays look longer.

    Raises:
        ImpossibleFigure: nobody finished, or a patient entered after leaving.

    Source: Kaplan & Meier 1958; delayed entry: Klein & Moeschberger, Survival Analysis, section 4.6.
    Checked by: tests/data/wards/test_survival.py
    """
    seen, done = np.asarray(days, dtype=float), np.asarray(finished, dtype=bool)
    entry = np.zeros(seen.size) if entry_days is None else np.asarray(entry_days, dtype=float)
    if not done.any():
        raise ImpossibleFigure(
            "0 finished stays are too few to say how long patients stay: at least 1 must have ended."
        )
    if (entry > seen).any() or (seen < 0).any():
        raise ImpossibleFigure("A stay can't end before the patient came: check starts and ends.")
    moments, left = np.unique(seen[done], return_counts=True)
    entered = np.searchsorted(np.sort(entry), moments, side="left")
    if entry_days is None:
        entered = np.full(moments.size, seen.size)
    gone = np.searchsorted(np.sort(seen), moments, side="left")
    # Someone who enters and leaves in the same moment counts as at risk in it.
    at_risk = np.maximum(np.where(moments == 0, (entry <= 0).sum(), entered - gone), left)
    share = np.cumprod(1.0 - left / at_risk)
    longest = float(seen.max())
    return StayCurve(moments, share, at_risk, left, longest, _tail_rate(seen, done, entry))


def _tail_rate(seen: NDArray[np.float64], done: NDArray[np.bool_], entry: NDArray[np.float64]) -> float:
    """Return departures a day among the longest stays: the last ten, or half of all where there are fewer than 20."""
    ends = np.sort(seen[done])
    wanted = max(min(TAIL_EVENTS, ends.size // 2), 1)
    since = ends[-wanted - 1] if ends.size > wanted else 0.0
    watched = np.maximum(seen - np.maximum(entry, since), 0.0).sum()
    return wanted / watched if watched > 0 else 1.0 / max(float(seen.max()), 1e-3)
