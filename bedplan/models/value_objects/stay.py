"""How long patients stay: mean, spread and shape, and everything the models ask about them."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

from bedplan.errors import ImpossibleFigure
from bedplan.models.value_objects import stay_shapes
from bedplan.models.value_objects.figures import ABOVE_ZERO, all_of_kind, days_given, listed, number, quoted, whole

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import ArrayLike, NDArray

LONGEST_MEAN_DAYS = 3_650.0
LONGEST_STAY_DAYS = 36_500.0
SHORTEST_MEAN_DAYS = 1e-9
MOST_VARIATION = 20.0
MOST_POINTS = 60
_DAYS, _AGES_DAYS = "A stay of {} days", 1e15
# the lognormal σ of the widest spread
_WIDEST_SIGMA = math.sqrt(math.log1p(MOST_VARIATION**2)) * (1.0 + 1e-12)


def _pair(given: object) -> tuple[float, float]:
    """Return a share of patients gone by then and the days, or say what was given instead."""
    both = listed(given, "A share of patients and a number of days are needed")
    if len(both) != 2:
        raise ImpossibleFigure(f"A share of patients and a number of days are needed, but {given!r} was given.")
    share = number("A share of patients of {}", both[0], (0.0, 1.0), "it must lie between 0 and 1")
    return share, number("A length of stay of {} days", both[1], (ABOVE_ZERO, LONGEST_STAY_DAYS), "it must be above 0")


@dataclass(frozen=True, slots=True)
class LengthOfStay:
    """How long do patients of this kind stay?

    ``variation`` = standard deviation ÷ mean (0 = every stay the same); ``shape`` is ``"lognormal"`` or ``"gamma"``
    (exponential stays = gamma with variation 1). Both are held by (mean, variation): the mean is never taken from a
    fitted curve. Other shapes come from :meth:`two_streams`, :meth:`measured` and :meth:`from_two_quantiles`.

    Raises:
        ImpossibleFigure: a mean that is not above 0 (or above ten years), a variation outside 0–20, an unknown shape.

    Checked by: tests/models/test_stay.py
    """

    mean_days: float
    variation: float = 1.0
    shape: str = "lognormal"
    streams: tuple[tuple[float, LengthOfStay], ...] = ()
    points: tuple[tuple[float, float], ...] = ()

    def __post_init__(self) -> None:
        """Check every figure once, here."""
        allowed = f"it is more than 0 and at most {LONGEST_MEAN_DAYS:,.0f} days"
        mean_days = number("A mean stay of {} days", self.mean_days, (ABOVE_ZERO, LONGEST_MEAN_DAYS), allowed)
        allowed = f"SD ÷ mean lies between 0 and {MOST_VARIATION:g}"
        variation = number("A spread of stay of {}", self.variation, (0.0, MOST_VARIATION), allowed)
        object.__setattr__(self, "mean_days", mean_days)
        object.__setattr__(self, "variation", variation)
        if self.shape not in ("lognormal", "gamma", "two streams", "measured"):
            raise ImpossibleFigure(f"The stay shape {self.shape!r} is not known: use 'lognormal' or 'gamma'.")
        if (self.shape == "two streams") != bool(self.streams) or (self.shape == "measured") != bool(self.points):
            raise ImpossibleFigure("Two streams and measured curves are built by two_streams(...) and measured(...).")
        for given in (self.streams, self.points):
            pairs = all_of_kind(given, tuple, "Two streams and measured curves are built of pairs")
            if any(len(one) != 2 for one in pairs):
                raise ImpossibleFigure(f"Two streams and measured curves are built of pairs, but {given!r} was given.")

    @classmethod
    def two_streams(cls, share_of_second: float, first: LengthOfStay, second: LengthOfStay) -> LengthOfStay:
        """What if two kinds of patient share the ward? Mean and spread follow from the two; shares are of patients."""
        share_of_second = number("A share of {}", share_of_second, (0.0, 1.0), "it lies between 0 and 1")
        all_of_kind((first, second), cls, "Two streams are two LengthOfStay")
        parts = ((1.0 - share_of_second, first), (share_of_second, second))
        mean = math.fsum(share * part.mean_days for share, part in parts)
        square = math.fsum(share * part.mean_days**2 * (1.0 + part.variation**2) for share, part in parts)
        return cls(mean, math.sqrt(max(square / mean**2 - 1.0, 0.0)), "two streams", streams=parts)

    @classmethod
    def measured(cls, days: Sequence[float], survival: Sequence[float]) -> LengthOfStay:
        """What if stays follow a measured curve? ``survival[i]`` = share staying longer than ``days[i]``.

        At most 60 points, days ascending from 0 on, survival from 1 falling to 0 (a curve that does not reach 0 is
        not a whole answer: the caller must close its tail first). Straight lines between the points.
        """
        days = listed(days, "A measured stay curve needs a list of days")
        survival = listed(survival, "A measured stay curve needs a list of shares")
        if len(days) != len(survival):
            raise ImpossibleFigure(
                f"A measured stay curve needs as many shares as days, but {len(days)} days and {len(survival)} shares were given."
            )
        day_said, share_said = "A day {} of a measured stay curve", "A share of {} in a measured stay curve"
        grid = [
            (
                number(day_said, day, (0.0, LONGEST_STAY_DAYS), "days are 0 or more and go up"),
                number(share_said, share, (-1e-9, 1.0 + 1e-9), "it lies between 0 and 1"),
            )
            for day, share in zip(days, survival, strict=True)
        ]
        if grid and grid[0][0] > 0:
            grid.insert(0, (0.0, 1.0))
        at, left = (np.array(column) for column in zip(*grid, strict=True)) if grid else (np.zeros(0), np.zeros(0))
        if not 2 <= at.size <= MOST_POINTS + 1:
            raise ImpossibleFigure(f"A measured stay curve needs 2 to {MOST_POINTS} points, but {at.size} were given.")
        if not (np.diff(at) > 0).all():
            raise ImpossibleFigure(
                f"The days of a measured stay curve, from {at[0]:g} on, must be 0 or more and go up."
            )
        if not (np.diff(left) <= 0).all() or abs(left[0] - 1) > 1e-9 or abs(left[-1]) > 1e-9:
            raise ImpossibleFigure("A measured stay curve starts at 1, never rises and ends at 0.")
        shape = stay_shapes.Measured(at, left)
        mean, square = float(shape.days_beyond(0.0)), 2.0 * float(shape.squared_days_beyond(0.0))
        number("A mean stay of {} days", mean, (SHORTEST_MEAN_DAYS, LONGEST_MEAN_DAYS), "the curve falls to 0 at once")
        return cls(mean, math.sqrt(max(square / mean**2 - 1.0, 0.0)), "measured", points=tuple(grid))

    @classmethod
    def from_two_quantiles(cls, low: tuple[float, float], high: tuple[float, float]) -> LengthOfStay:
        """What if all I know is "1 in 20 leave before … days, 1 in 20 stay past … days"? Lognormal through both.

        ``low`` and ``high`` are (share of patients gone by then, days), for example ``(0.05, 1.0), (0.95, 20.0)``.
        """
        (low_share, low_days), (high_share, high_days) = _pair(low), _pair(high)
        if not (0 < low_share < high_share < 1):
            raise ImpossibleFigure(
                f"The two shares {low_share:g} and {high_share:g} must lie between 0 and 1 and go up."
            )
        if not low_days < high_days:
            raise ImpossibleFigure(
                f"The two lengths of stay, {low_days:g} and {high_days:g} days, must be above 0 and go up."
            )
        z_low, z_high = special.ndtri(low_share), special.ndtri(high_share)
        sigma = (math.log(high_days) - math.log(low_days)) / (z_high - z_low)
        if sigma > _WIDEST_SIGMA:
            raise ImpossibleFigure(
                f"{low_days:g} and {high_days:g} days are too far apart for the shares {low_share:g} and {high_share:g}: "
                f"the spread of stay, SD ÷ mean, would be above {MOST_VARIATION:g}."
            )
        mu = math.log(low_days) - sigma * z_low
        return cls(math.exp(mu + sigma**2 / 2), math.sqrt(math.expm1(sigma**2)))

    def scaled(self, factor: float) -> LengthOfStay:
        """What if every stay were this many times as long? Same spread, same shape."""
        factor = number("Stays {} times as long", factor, (0.0, 1e6), "give a number above 0")
        return LengthOfStay(
            self.mean_days * factor,
            self.variation,
            self.shape,
            tuple((share, part.scaled(factor)) for share, part in self.streams),
            tuple((days * factor, share) for days, share in self.points),
        )

    @property
    def _curve(self) -> stay_shapes.Shape:
        return _shape_of(self)

    def survival(self, days: ArrayLike) -> NDArray[np.float64]:
        """Which share of patients stays longer than this many days? Same shape as ``days``; before day 0, all."""
        return self._curve.survival(days_given(_DAYS, days))

    def quantile(self, p: ArrayLike) -> NDArray[np.float64]:
        """By how many days has this share of patients left? ``p`` in 0–1, same shape back."""
        share = days_given("A share of patients of {}", p)
        if not ((share <= 1) & (np.asarray(p) >= 0)).all():
            raise ImpossibleFigure(f"A share of patients of {quoted(p)} is not possible: it lies between 0 and 1.")
        return self._curve.quantile(share)

    def sample(self, n: int, rng: np.random.Generator) -> NDArray[np.float64]:
        """Draw ``n`` stays in days. The same generator gives the same patients whatever the mean stay is."""
        return self._curve.sample(whole("{} stays to draw", n, (0, 10**9), "give a whole number, 0 or more"), rng)

    def days_beyond(self, days: ArrayLike) -> NDArray[np.float64]:
        """How many days a patient, on average over all patients, fall after day L? ``∫ survival`` from L on."""
        return self._curve.days_beyond(np.minimum(days_given(_DAYS, days), _AGES_DAYS))

    def squared_days_beyond(self, days: ArrayLike) -> NDArray[np.float64]:
        """Half the mean square of the days after day L, ``∫ days_beyond`` from L on; what hour averages need."""
        return self._curve.squared_days_beyond(np.minimum(days_given(_DAYS, days), _AGES_DAYS))

    def share_of_bed_days_past(self, days: ArrayLike) -> NDArray[np.float64]:
        """Which share of all bed-days falls after day L of a stay?"""
        return self.days_beyond(days) / self.mean_days

    def mean_of_shorter_of_two(self) -> float:
        """How long does the shorter of two patients' stays last on average? ``∫ survival²``."""
        return self._curve.mean_of_shorter_of_two()


@lru_cache(maxsize=512)
def _shape_of(stay: LengthOfStay) -> stay_shapes.Shape:
    """Build the curve behind a stay, once."""
    if stay.shape == "two streams":
        return stay_shapes.TwoStreams(tuple((share, _shape_of(part)) for share, part in stay.streams))
    if stay.shape == "measured":
        days, survival = zip(*stay.points, strict=True)
        return stay_shapes.Measured(np.array(days), np.array(survival))
    if stay.variation < 1e-6:
        return stay_shapes.Fixed(stay.mean_days)
    if stay.shape == "gamma":
        return stay_shapes.Gamma(stay.mean_days, stay.variation)
    return stay_shapes.Lognormal(stay.mean_days, stay.variation)
