"""The answer of every model: for each bed count, the share of patients who find no free bed.

A ``BedCurve`` holds the demand it was computed from, so that a justification can be rebuilt from it alone.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np

from bedplan.errors import ImpossibleFigure
from bedplan.models.value_objects.figures import number, quoted

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import ArrayLike, NDArray

    from bedplan.models.value_objects.demand import Demand

WhenFull = Literal["leaves", "waits", "stays anyway", "no chance"]
MOST_BEDS = 20_000


def bed_counts(beds: ArrayLike) -> NDArray[np.int64]:
    """Which bed counts were asked for? Whole, 0 or more, ascending, as a read-only ``(n,)`` array.

    Raises:
        ImpossibleFigure: not whole, negative, not ascending, empty or above 20,000 beds.

    Checked by: tests/models/test_bed_curve.py
    """
    try:
        given = np.atleast_1d(np.asarray(beds))
    except ValueError:
        given = np.zeros((0, 0))
    if given.size and given.dtype.kind not in "iuf":
        raise ImpossibleFigure(
            f"{quoted(beds)} beds is not possible: bed counts are whole numbers from 0 to {MOST_BEDS:,}."
        )
    given = given.astype(float)
    if given.ndim != 1 or given.size == 0:
        raise ImpossibleFigure("Give at least one bed count, as a plain list.")
    bad = ~np.isfinite(given) | (given < 0) | (given != np.floor(given)) | (given > MOST_BEDS)
    if bad.any():
        raise ImpossibleFigure(
            f"{given[bad][0]:g} beds is not possible: bed counts are whole numbers from 0 to {MOST_BEDS:,}."
        )
    counts = given.astype(np.int64)
    if (np.diff(counts) <= 0).any():
        raise ImpossibleFigure("Bed counts must go up: each one larger than the one before it.")
    counts.setflags(write=False)
    return counts


@dataclass(frozen=True, slots=True)
class BedPoint:
    """One bed count on a curve: the share who find no free bed, over the year and in each month (January first)."""

    beds: int
    turn_away_probability: float
    occupancy: float
    by_month: NDArray[np.float64]

    @property
    def worst_month(self) -> int:
        """The month (0 = January) in which the largest share finds no free bed."""
        return int(np.argmax(self.by_month))


def _of_hours(share_over: Callable[[float], NDArray[np.float64]]) -> Callable[[float], NDArray[np.float64]]:
    """Return the same question, refusing waits that are none."""

    def checked(hours: float) -> NDArray[np.float64]:
        """Return the share waiting longer than so many hours."""
        return share_over(number("A wait of {} hours", hours, (0.0, 1e9), "it is 0 or more"))

    return checked


@dataclass(frozen=True, slots=True)
class Waits:
    """How long patients wait, for the bed counts of a curve whose patients wait.

    ``mean_hours`` is ``(n,)``, the mean wait of all patients (inf where the queue only grows). ``share_over(hours)``
    gives ``(n,)`` for the year and ``share_over_by_month(hours)`` ``(12, n)``.
    """

    mean_hours: NDArray[np.float64]
    share_over: Callable[[float], NDArray[np.float64]]
    share_over_by_month: Callable[[float], NDArray[np.float64]]

    def __post_init__(self) -> None:
        """Have every wait that is asked about checked."""
        for name in ("share_over", "share_over_by_month"):
            object.__setattr__(self, name, _of_hours(getattr(self, name)))


@dataclass(frozen=True, slots=True, eq=False)
class BedCurve:
    """What happens at each bed count, by one model.

    ``turn_away_probability`` ``(n,)`` is the share of patients, averaged over patients, who find no free bed when
    they come; what they do then is ``when_full``. ``occupancy`` ``(n,)`` is mean patients in beds ÷ beds, from the
    model's own state. ``by_month`` ``(12, n)``, January first. ``notes`` are sentences for the document.

    Two readings only some models give: ``overfull_share_of_hours`` ``(n,)`` and ``overfull_by_month`` ``(12, n)``,
    the share of hours with more patients than beds (*stays anyway*); ``waits`` (*waits*).

    Models of the hour-by-hour year also split the share by weekday, ``by_weekday`` ``(7, n)`` Monday first, and by
    group, ``unbooked_turn_away`` and ``booked_turn_away`` ``(n,)``, the latter None where nobody is booked.
    """

    model: str
    when_full: WhenFull
    demand: Demand
    beds: NDArray[np.int64]
    turn_away_probability: NDArray[np.float64]
    occupancy: NDArray[np.float64]
    by_month: NDArray[np.float64]
    notes: tuple[str, ...] = ()
    overfull_share_of_hours: NDArray[np.float64] | None = None
    overfull_by_month: NDArray[np.float64] | None = None
    waits: Waits | None = None
    by_weekday: NDArray[np.float64] | None = None
    unbooked_turn_away: NDArray[np.float64] | None = None
    booked_turn_away: NDArray[np.float64] | None = None

    def __post_init__(self) -> None:
        """Make every array read-only: a curve is shared by pages, documents and caches."""
        for name in (
            "beds",
            "turn_away_probability",
            "occupancy",
            "by_month",
            "overfull_share_of_hours",
            "overfull_by_month",
            "by_weekday",
            "unbooked_turn_away",
            "booked_turn_away",
        ):
            array = getattr(self, name)
            if array is not None:
                array.setflags(write=False)

    def at(self, beds: int) -> BedPoint:
        """What does this model say at exactly this many beds?

        Raises:
            ImpossibleFigure: the curve was not computed for that count.
        """
        beds = number("{} beds", beds, (-math.inf, math.inf), "bed counts are whole numbers, 0 or more")
        place = int(np.searchsorted(self.beds, beds))
        if place == self.beds.size or self.beds[place] != beds:
            raise ImpossibleFigure(
                f"{beds:g} beds is not on this curve, which runs from {self.beds[0]} to {self.beds[-1]} beds."
            )
        return BedPoint(
            int(beds), float(self.turn_away_probability[place]), float(self.occupancy[place]), self.by_month[:, place]
        )
