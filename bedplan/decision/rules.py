"""The limits a board may set, and the fewest beds that meet one."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal, Protocol

import numpy as np

from bedplan.errors import ImpossibleFigure, TargetOutOfReach

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models import BedCurve, BedPoint, Waits

    Array = NDArray[np.float64]

Within = Literal["year", "every_month"]
MONTHS = 12


class Rule(Protocol):
    """A limit: the figure it watches, for each bed count of a curve, and the most it may be."""

    @property
    def most(self) -> float:
        """The most the figure may be."""

    def over_year(self, curve: BedCurve) -> Array:
        """Return the year's figure for each bed count, ``(n,)``."""

    def by_month(self, curve: BedCurve) -> Array:
        """Return the figure for each month and bed count, ``(12, n)``."""

    def figures(self, curve: BedCurve) -> Array:
        """Return what must not exceed ``most``, for each bed count: the year's figure or the worst month's."""


def _checked_share(share: float, name: str) -> None:
    if not 0 < share < 1:
        raise ImpossibleFigure(
            f"A {name} of {share:g} is not possible: give a share above 0 and below 1, such as 0.05."
        )


def _checked_within(within: str) -> None:
    if within not in ("year", "every_month"):
        raise ImpossibleFigure(f"{within!r} is not a span: a limit holds for the 'year' or for 'every_month'.")


@dataclass(frozen=True, slots=True)
class TurnAwayLimit:
    """At most this share of patients may find no free bed, in every month or over the year (which hides January)."""

    share: float
    within: Within = "every_month"

    def __post_init__(self) -> None:
        """Check the share and the span."""
        _checked_share(self.share, "limit")
        _checked_within(self.within)

    @property
    def most(self) -> float:
        """The most the share may be."""
        return self.share

    def over_year(self, curve: BedCurve) -> Array:
        """Return the share who find no free bed over the year."""
        return curve.turn_away_probability

    def figures(self, curve: BedCurve) -> Array:
        """Return the share who find no free bed: the year's, or the worst month's."""
        return self.over_year(curve) if self.within == "year" else self.by_month(curve).max(axis=0)

    def by_month(self, curve: BedCurve) -> Array:
        """Return the share who find no free bed in each month."""
        return curve.by_month


@dataclass(frozen=True, slots=True)
class OccupancyLimit:
    """At most this share of beds may be in use over the year. An output of chance and size, so a poor rule alone."""

    share: float

    def __post_init__(self) -> None:
        """Check the share."""
        _checked_share(self.share, "occupancy limit")

    @property
    def most(self) -> float:
        """The most the occupancy may be."""
        return self.share

    def over_year(self, curve: BedCurve) -> Array:
        """Return the year's occupancy."""
        return self.figures(curve)

    def figures(self, curve: BedCurve) -> Array:
        """Return the year's occupancy; a ward without beds counts as full when anyone wants one."""
        return np.where((curve.beds == 0) & (curve.demand.offered_load > 0), 1.0, curve.occupancy)

    def by_month(self, curve: BedCurve) -> Array:
        """Return the year's occupancy for every month: curves carry no more."""
        return np.tile(self.figures(curve), (MONTHS, 1))


@dataclass(frozen=True, slots=True)
class OverfullLimit:
    """At most this share of hours may see more patients than beds: for wards that never turn anyone away."""

    share_of_hours: float
    within: Within = "every_month"

    def __post_init__(self) -> None:
        """Check the share and the span."""
        _checked_share(self.share_of_hours, "share of hours over-full")
        _checked_within(self.within)

    @property
    def most(self) -> float:
        """The most the share of hours may be."""
        return self.share_of_hours

    def over_year(self, curve: BedCurve) -> Array:
        """Return the share of hours over-full over the year."""
        if curve.overfull_share_of_hours is None:
            raise _never_over_full()
        return curve.overfull_share_of_hours

    def figures(self, curve: BedCurve) -> Array:
        """Return the share of hours over-full: the year's, or the worst month's."""
        return self.over_year(curve) if self.within == "year" else self.by_month(curve).max(axis=0)

    def by_month(self, curve: BedCurve) -> Array:
        """Return the share of hours over-full in each month."""
        if curve.overfull_by_month is None:
            raise _never_over_full()
        return curve.overfull_by_month


def _never_over_full() -> ImpossibleFigure:
    return ImpossibleFigure(
        "This model never puts more patients on a ward than it has beds: use a limit on patients instead."
    )


@dataclass(frozen=True, slots=True)
class WaitLimit:
    """At most this share of patients may wait longer than so many hours for a bed."""

    hours: float
    share: float
    within: Within = "every_month"

    def __post_init__(self) -> None:
        """Check the hours, the share and the span."""
        _checked_share(self.share, "share waiting")
        _checked_within(self.within)
        if not 0 <= self.hours <= 720:
            raise ImpossibleFigure(f"A wait of {self.hours:g} hours is not possible: give 0 to 720 hours.")

    @property
    def most(self) -> float:
        """The most the share may be."""
        return self.share

    def over_year(self, curve: BedCurve) -> Array:
        """Return the share waiting longer over the year."""
        return self._waits(curve).share_over(self.hours)

    def figures(self, curve: BedCurve) -> Array:
        """Return the share waiting longer: the year's, or the worst month's."""
        return self.over_year(curve) if self.within == "year" else self.by_month(curve).max(axis=0)

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
