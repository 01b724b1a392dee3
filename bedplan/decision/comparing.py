"""Wards side by side: today's beds, the average formula's, the rule's, what the next bed or another change would do."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

from bedplan.decision.rules import Decision, decide
from bedplan.errors import TargetOutOfReach

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from bedplan.decision.rules import Rule
    from bedplan.decision.ward import Ward
    from bedplan.models import BedCurve, BedPoint

DAYS_PER_YEAR = 365.0


def patients_per_year(curve: BedCurve, beds: int) -> float:
    """How many patients a year find no free bed at this bed count? Daily rates × 365.

    Checked by: tests/decision/test_comparing.py
    """
    return curve.demand.total_arrivals_per_day * DAYS_PER_YEAR * curve.at(beds).turn_away_probability


def spared_by_next_bed(curve: BedCurve, beds: int) -> float:
    """How many patients a year would one more bed spare from finding the ward full?

    Checked by: tests/decision/test_comparing.py
    """
    return patients_per_year(curve, beds) - patients_per_year(curve, beds + 1)


@dataclass(frozen=True, slots=True)
class Refused:
    """One group of patients: how many come a year, and the share who find no bed before and after a change."""

    patients_per_year: float
    share_before: float
    share_after: float

    @property
    def before(self) -> float:
        """Patients a year who find no bed before the change."""
        return self.patients_per_year * self.share_before

    @property
    def after(self) -> float:
        """Patients a year who find no bed after it."""
        return self.patients_per_year * self.share_after

    @classmethod
    def together(cls, groups: Sequence[Refused]) -> Refused:
        """What happens to all these patients taken together?"""
        everyone = math.fsum(one.patients_per_year for one in groups)
        shares = (
            math.fsum(found) / max(everyone, 1e-300)
            for found in zip(*((g.before, g.after) for g in groups), strict=True)
        )
        return cls(everyone, *shares)


@dataclass(frozen=True, slots=True, eq=False)
class WardComparison:
    """One ward's row: ``decision`` is None where no bed count on its curve meets the rule."""

    ward: Ward
    curve: BedCurve
    today: BedPoint
    average_formula_beds: int
    decision: Decision | None
    patients_today: float
    spared_by_next_bed: float

    @property
    def worst_month(self) -> int:
        """The month (0 = January) in which most patients find no free bed with today's beds."""
        return self.today.worst_month


def compare_wards(wards: Iterable[Ward], rule: Rule) -> tuple[WardComparison, ...]:
    """Where does the next bed spare most patients? A row a ward, the largest first.

    Each ward is read on the model that fits what its patients do when it is full. Not a league table: it says nothing
    about how well a ward works.

    Checked by: tests/decision/test_comparing.py
    """
    rows = [_row(ward, rule) for ward in wards]
    return tuple(sorted(rows, key=lambda row: -row.spared_by_next_bed))


def _row(ward: Ward, rule: Rule) -> WardComparison:
    curve = ward.curve()
    try:
        decision = decide(curve, rule)
    except TargetOutOfReach:
        decision = None
    return WardComparison(
        ward=ward,
        curve=curve,
        today=curve.at(ward.beds),
        average_formula_beds=ward.average_formula_beds,
        decision=decision,
        patients_today=patients_per_year(curve, ward.beds),
        spared_by_next_bed=spared_by_next_bed(curve, ward.beds),
    )
