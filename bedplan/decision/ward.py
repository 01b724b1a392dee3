"""A ward as decisions see it: its name, today's staffed beds, what it is asked for, what its patients do when full."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING, Literal

import numpy as np

from bedplan.decision.bed_mixture import with_changing_beds
from bedplan.decision.changing_beds import NO_BED_CHANGES, BedChanges
from bedplan.errors import ImpossibleFigure
from bedplan.models import MODELS, BedCurve, Demand, average_beds
from bedplan.models.rhythm.year import beds_wanted
from bedplan.models.value_objects.figures import all_of_kind, number, quoted, whole

if TYPE_CHECKING:
    from numpy.typing import NDArray

MOST_WARD_BEDS = 2_000
WhenWardIsFull = Literal["leaves", "waits"]


@dataclass(frozen=True, slots=True)
class Ward:
    """Which ward is being planned?

    ``beds`` are today's staffed beds; ``when_full`` says what its patients do when it is full: ``"leaves"`` (they go
    elsewhere) or ``"waits"`` (they wait, or are placed elsewhere). ``admissions_per_year`` are the recorded ones, for
    the average formula; without them the demand's own arrivals are used. ``notes`` go into the document.
    ``bed_changes``: closures, winter bays, closed weekdays, beds nobody may be put in; by default none. Every bed count
    of the ward, today's and each on its curves, is the count those changes start from.

    Raises:
        ImpossibleFigure: beds not whole or outside 0–2,000, negative admissions.

    Checked by: tests/decision/test_ward.py
    """

    name: str
    beds: int
    demand: Demand
    when_full: WhenWardIsFull = "leaves"
    admissions_per_year: float | None = None
    notes: tuple[str, ...] = ()
    bed_changes: BedChanges = NO_BED_CHANGES

    def __post_init__(self) -> None:
        """Check every figure once, here."""
        if not isinstance(self.name, str):
            raise ImpossibleFigure(f"A name of {quoted(self.name)} is not possible: give the ward's name in letters.")
        allowed = f"give a whole number from 0 to {MOST_WARD_BEDS:,}"
        object.__setattr__(self, "beds", whole("{} beds", self.beds, (0, MOST_WARD_BEDS), allowed))
        for said, value, kind in (("A demand", self.demand, Demand), ("Bed changes", self.bed_changes, BedChanges)):
            if not isinstance(value, kind):
                raise ImpossibleFigure(f"{said} of {quoted(value)} is not possible: give {kind.__name__}(…).")
        if self.when_full not in ("leaves", "waits"):
            raise ImpossibleFigure(
                f"{self.when_full!r} is not an answer: patients of a full ward either 'leaves' or 'waits'."
            )
        if self.admissions_per_year is not None:
            number("{} admissions a year", self.admissions_per_year, (0.0, 1e9), "give 0 or more")
        object.__setattr__(self, "notes", all_of_kind(self.notes, str, "Notes are a tuple of sentences"))

    @property
    def model(self) -> str:
        """The name of the model that answers for this ward."""
        return "seasonal_loss" if self.when_full == "leaves" else "unlimited_beds"

    @property
    def bed_counts(self) -> NDArray[np.int64]:
        """Every bed count worth drawing: from none to well past today's, the formula's and the busiest month's.

        Beds that closures or single-sex bays take out of use come on top, so that a rule can still be met.
        """
        peak = beds_wanted(self.demand) * max(self.demand.month_factors)
        swing = math.sqrt(self.demand.clustering + peak * self.demand.rate_variation**2)
        most = math.ceil(peak + 5.0 * swing * math.sqrt(peak) + 8) + self.bed_changes.most_out_of_use
        most = max(most, self.beds + 5, self.average_formula_beds + 5)
        return np.arange(min(most, 20_000) + 1)

    @property
    def average_formula_beds(self) -> int:
        """The average formula's whole number of beds: recorded bed-days ÷ 365 ÷ 85 %, rounded up."""
        if self.demand.offered_load <= 0:
            return 0
        arrivals = self.demand.total_arrivals_per_day
        admissions = arrivals * 365.0 if self.admissions_per_year is None else self.admissions_per_year
        return math.ceil(average_beds(admissions, self.demand.offered_load / arrivals) - 1e-9)

    def curve(self, model: str | None = None) -> BedCurve:
        """What does a model (by default the ward's own) say at every bed count worth drawing?

        Closures, winter bays and the like are in it: each count is what those changes start from.
        """
        name = self.model if model is None else model
        if name not in MODELS:
            raise ImpossibleFigure(f"The model {name!r} is not known: there are {', '.join(MODELS)}.")
        return _changed_curve(name, self.demand, self.bed_changes, int(self.bed_counts[-1]))


@lru_cache(maxsize=512)
def _curve(model: str, demand: Demand, most_beds: int) -> BedCurve:
    """Return a model's curve, remembered: a page asks for the same wards again and again."""
    return MODELS[model](demand, np.arange(most_beds + 1))


@lru_cache(maxsize=256)
def _changed_curve(model: str, demand: Demand, changes: BedChanges, most_beds: int) -> BedCurve:
    """Return a model's curve for beds that change, remembered too."""
    more = max(0, int(changes.extra_by_day.max()))
    return with_changing_beds(_curve(model, demand, most_beds + more), changes, np.arange(most_beds + 1))
