"""The limits a board may set, and the fewest beds that meet one."""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from dataclasses import dataclass
from typing import TYPE_CHECKING, ClassVar, Literal

import numpy as np

from bedplan.errors import ImpossibleFigure, TargetOutOfReach
from bedplan.models.rhythm.year import MONTHS
from bedplan.models.value_objects.figures import ABOVE_ZERO, number

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models import BedCurve, BedPoint, Waits

    Array = NDArray[np.float64]

Within = Literal["year", "every_month"]
_BELOW_ONE = math.nextafter(1.0, 0.0)


class Rule(ABC):
    """A limit: the figure it watches at each bed count of a curve, and the most it may be, where it must hold."""

    __slots__ = ()
    share: float
    within: Within

    @property
    def most(self) -> float:
        """The most the figure may be."""
        return self.share

    @abstractmethod
    def over_year(self, curve: BedCurve) -> Array:
        """Return the year's figure for each bed count, ``(n,)``."""

    @abstractmethod
    def by_month(self, curve: BedCurve) -> Array:
        """Return the figure for each month and bed count, ``(12, n)``."""

    def figures(self, curve: BedCurve) -> Array:
        """Return what must not exceed ``most``, for each bed count: the year's figure or the worst month's."""
        return self.over_year(curve) if self.within == "year" else self.by_month(curve).max(axis=0)

    def _check(self, name: str) -> None:
        """Refuse a share or a span that can't be."""
        number(
            f"A {name} of {{}}", self.most, (ABOVE_ZERO, _BELOW_ONE), "give a share above 0 and below 1, such as 0.05"
        )
        if self.within not in ("year", "every_month"):
            raise ImpossibleFigure(f"{self.within!r} is not a span: a limit holds for the 'year' or for 'every_month'.")


@dataclass(frozen=True, slots=True)
class TurnAwayLimit(Rule):
    """At most this share of patients may find no free bed, in every month or over the year (which hides January)."""

    share: float
    within: Within = "every_month"

    def __post_init__(self) -> None:
        """Check the share and the span."""
        self._check("limit")

    def over_year(self, curve: BedCurve) -> Array:
        """Return the share who find no free bed over the year."""
        return curve.turn_away_probability

    def by_month(self, curve: BedCurve) -> Array:
        """Return the share who find no free bed in each month."""
        return curve.by_month


@dataclass(frozen=True, slots=True)
class OccupancyLimit(Rule):
    """At most this share of beds may be in use over the year. An output of chance and size, so a poor rule alone."""

    within: ClassVar[Within] = "year"
    share: float

    def __post_init__(self) -> None:
        """Check the share."""
        self._check("occupancy limit")

    def over_year(self, curve: BedCurve) -> Array:
        """Return the year's occupancy; a ward without beds counts as full when anyone wants one."""
        return np.where((curve.beds == 0) & (curve.demand.offered_load > 0), 1.0, curve.occupancy)

    def by_month(self, curve: BedCurve) -> Array:
        """Return the year's occupancy for every month: curves carry no more."""
        return np.tile(self.over_year(curve), (MONTHS, 1))


@dataclass(frozen=True, slots=True)
class OverfullLimit(Rule):
    """At most this share of hours may see more patients than beds: for wards that never turn anyone away."""

    share_of_hours: float
    within: Within = "every_month"

    def __post_init__(self) -> None:
        """Check the share and the span."""
        self._check("share of hours over-full")

    @property
    def most(self) -> float:
        """The most the share of hours may be."""
        return self.share_of_hours

    def over_year(self, curve: BedCurve) -> Array:
        """Return the share of hours over-full over the year."""
        return self._known(curve.overfull_share_of_hours)

    def by_month(self, curve: BedCurve) -> Array:
        """Return the share of hours over-full in each month."""
        return self._known(curve.overfull_by_month)

    @staticmethod
    def _known(shares: Array | None) -> Array:
        if shares is None:
            raise ImpossibleFigure(
                "This model never puts more patients on a ward than it has beds: use a limit on patients instead."
            )
        return shares


@dataclass(frozen=True, slots=True)
class WaitLimit(Rule):
    """At most this share of patients may wait longer than so many hours for a bed."""

    hours: float
    share: float
    within: Within = "every_month"

    def __post_init__(self) -> None:
        """Check the hours, the share and the span."""
        self._check("share waiting")
        number("A wait of {} hours", self.hours, (0.0, 720.0), "give 0 to 720 hours")

    def over_year(self, curve: BedCurve) -> Array:
        """Return the share waiting longer over the year."""
        return self._waits(curve).share_over(self.hours)

    def by_month(self, curve: BedCurve) -> Array:
        """Return the share waiting longer in each month."""
        return self._waits(curve).share_over_by_month(self.hours)

    @staticmethod
    def _waits(curve: BedCurve) -> Waits:
        if curve.waits is None:
            raise ImpossibleFigure("On this model's wards nobody waits: use a limit on patients turned away instead.")
        return curve.waits


@dataclass(frozen=True, slots=True, eq=False)
class Decision:
    """The fewest beds that meet a rule, where they stand on the curve, and the month that decides."""

    beds: int
    rule: Rule
    point: BedPoint
    worst_month: int
    curve: BedCurve


def decide(curve: BedCurve, rule: Rule) -> Decision:
    """How few beds meet this rule, at that count and at every larger one on the curve?

    Raises:
        TargetOutOfReach: no bed count on the curve meets it; the message says how near the largest came.

    Checked by: tests/decision/test_rules.py
    """
    figures = rule.figures(curve)
    fails = np.flatnonzero(~(figures <= rule.most))
    place = int(fails[-1]) + 1 if fails.size else 0
    if place == curve.beds.size:
        raise TargetOutOfReach(
            f"Even {curve.beds[-1]} beds do not keep this figure to {rule.most:.1%}: it is {figures[-1]:.1%} there. "
            "Allow a larger share, or look at more beds."
        )
    beds = int(curve.beds[place])
    return Decision(beds, rule, curve.at(beds), int(np.argmax(rule.by_month(curve)[:, place])), curve)
