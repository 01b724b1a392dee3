"""A plan: what the records say about each ward, and what the planner changed. Aggregates and settings, no patient rows."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from bedplan import wording
from bedplan.decision import Ward
from bedplan.models import Demand, LengthOfStay

if TYPE_CHECKING:
    from bedplan.data import DemandEstimate
    from bedplan.decision.ward import WhenWardIsFull


@dataclass(frozen=True, slots=True)
class Baseline:
    """Where every slider of one ward starts: the demand its records (or typed totals) show, and today's beds.

    ``facts`` are (what, value, where from) rows for the assumptions table; ``notes`` whole sentences.
    """

    name: str
    demand: Demand
    admissions_per_year: float
    beds: int
    growth_per_year: float = 0.0
    facts: tuple[tuple[str, str, str], ...] = ()
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Changes:
    """What the planner changed, as shares of what the records say: 0.05 = 5 % more; ``peak`` 1 = the recorded season."""

    demand: float = 0.0
    stay: float = 0.0
    spread: float = 0.0
    peak: float = 1.0
    growth: float = 0.0

    def rows(self) -> tuple[tuple[str, str], ...]:
        """Return (setting, value) for the document, every setting, changed or not."""
        return (
            ("Demand, against the records", wording.signed_percent(self.demand)),
            ("Mean stay, against the records", wording.signed_percent(self.stay)),
            ("Spread of stay, against the records", wording.signed_percent(self.spread)),
            ("Size of the winter peak, against the records", wording.percent(self.peak)),
            ("Growth to the planned year", wording.signed_percent(self.growth)),
        )


def peaked(factors: tuple[float, ...], size: float) -> tuple[float, ...]:
    """What do month factors become when the season is this many times its recorded size? Mean 1, none below 0.

    Checked by: tests/test_plan.py
    """
    stretched = [max(0.0, 1.0 + size * (factor - 1.0)) for factor in factors]
    mean = sum(stretched) / len(stretched)
    return tuple(factor / mean for factor in stretched)


def changed_stay(stay: LengthOfStay, changes: Changes) -> LengthOfStay:
    """How long do patients stay under these changes? A changed spread is drawn as a lognormal of that spread.

    Checked by: tests/test_plan.py
    """
    if changes.spread == 0:
        return stay.scaled(1.0 + changes.stay)
    shape = stay.shape if stay.shape in ("lognormal", "gamma") else "lognormal"
    return LengthOfStay(stay.mean_days * (1.0 + changes.stay), stay.variation * (1.0 + changes.spread), shape)


def changed_demand(baseline: Baseline, changes: Changes) -> Demand:
    """What is the ward asked for under these changes?

    Raises:
        ImpossibleFigure: the changed figures leave what the models accept.

    Checked by: tests/test_plan.py
    """
    demand = baseline.demand
    return replace(
        demand,
        arrivals_per_day=demand.arrivals_per_day * (1.0 + changes.demand) * (1.0 + changes.growth),
        length_of_stay=changed_stay(demand.length_of_stay, changes),
        month_factors=peaked(demand.month_factors, changes.peak),
    )


def planned_ward(baseline: Baseline, beds: int, when_full: WhenWardIsFull, changes: Changes) -> Ward:
    """Return the ward as planned: today's beds, the changed demand, the recorded admissions for the average formula."""
    return Ward(
        baseline.name,
        beds,
        changed_demand(baseline, changes),
        when_full=when_full,
        admissions_per_year=baseline.admissions_per_year,
        notes=baseline.notes,
    )


def from_estimate(estimate: DemandEstimate, beds: int | None) -> Baseline:
    """What do a ward's records say? The estimate's demand and facts; without a capacity file beds start at its load.

    Checked by: tests/test_plan.py
    """
    start = math.ceil(estimate.demand.offered_load) if beds is None else beds
    unknown = "No capacity file was given: type today's staffed beds. Until then they start at the average beds wanted."
    return Baseline(
        name=estimate.ward,
        demand=estimate.demand,
        admissions_per_year=estimate.admissions_per_year,
        beds=start,
        growth_per_year=estimate.growth_per_year,
        facts=estimate.facts,
        notes=(*estimate.notes, *((unknown,) if beds is None else ())),
    )


def from_totals(name: str, admissions_per_year: float, stay: LengthOfStay, beds: int) -> Baseline:
    """What can be said of a ward known by totals only? Steady demand; no season, because totals hold none.

    Raises:
        ImpossibleFigure: figures outside their meaning.

    Checked by: tests/test_plan.py
    """
    demand = Demand(admissions_per_year / 365.0, stay)
    typed = "typed by the planner"
    return Baseline(
        name=name,
        demand=demand,
        admissions_per_year=admissions_per_year,
        beds=beds,
        facts=(
            ("Admissions a year", f"{admissions_per_year:,.0f}", typed),
            ("Mean stay", wording.days(stay.mean_days), typed),
            ("Spread of stay (SD ÷ mean)", f"{stay.variation:.2f}", typed),
        ),
        notes=(
            "Based on totals only: no season, weekday or hour is known, so busy months turn away more than shown.",
            "Admissions are patients who found a bed. If the ward was often full, true demand is higher.",
        ),
    )
