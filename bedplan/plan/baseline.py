"""Where a ward's sliders start, and the ward as planned: its records' demand under the planner's changes."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from bedplan import wording
from bedplan.data import return_of_census, swing_beyond_chance
from bedplan.decision import Ward
from bedplan.decision.ward import MOST_WARD_BEDS
from bedplan.errors import ImpossibleFigure
from bedplan.models import Demand, LengthOfStay

if TYPE_CHECKING:
    from bedplan.data import Census, DemandEstimate, HiddenDemand, MonthlyReturn
    from bedplan.decision.ward import WhenWardIsFull

TYPED = "typed by the planner"


@dataclass(frozen=True, slots=True)
class Baseline:
    """Where every slider of one ward starts: the demand its records (or typed totals) show, and today's beds.

    ``facts`` are (what, value, where from) rows for the assumptions table; ``notes`` whole sentences; ``origin`` where the figures
    come from, where that is not the records file. ``growth_per_year``: of bed-days, which is what beds follow;
    ``admissions_growth_per_year``: of heads.

    Raises:
        ImpossibleFigure: beds not whole or outside 0–2,000.
    """

    name: str
    demand: Demand
    admissions_per_year: float
    beds: int
    growth_per_year: float = 0.0
    admissions_growth_per_year: float = 0.0
    facts: tuple[tuple[str, str, str], ...] = ()
    notes: tuple[str, ...] = ()
    origin: str = ""

    def __post_init__(self) -> None:
        """Check the beds once, here."""
        if not (0 <= self.beds <= MOST_WARD_BEDS and self.beds == int(self.beds)):
            raise ImpossibleFigure(
                f"{self.name} has {self.beds:,} staffed beds; a ward has a whole number up to {MOST_WARD_BEDS:,}. "
                "Check the file or the figure."
            )


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
            ("Size of the season, against the records", wording.percent(self.peak)),
            ("Growth of bed-days to the planned year", wording.signed_percent(self.growth)),
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
    """Return the ward as planned: today's beds, the changed demand, and admissions changed alike for the formula."""
    return Ward(
        baseline.name,
        beds,
        changed_demand(baseline, changes),
        when_full=when_full,
        admissions_per_year=baseline.admissions_per_year * (1.0 + changes.demand) * (1.0 + changes.growth),
        notes=baseline.notes,
    )


def from_estimate(estimate: DemandEstimate, beds: int | None, hidden: HiddenDemand | None = None) -> Baseline:
    """What do a ward's records say? The estimate's demand and facts; without a capacity file beds start at its load.

    ``hidden``: what the estimate was changed by; where that takes beds away, a note says so first.

    Raises:
        ImpossibleFigure: more staffed beds than a ward can have.

    Checked by: tests/test_plan.py
    """
    start = math.ceil(estimate.demand.offered_load) if beds is None else beds
    guests = (wording.GUESTS_OUT,) if hidden is not None and hidden.takes_away else ()
    return Baseline(
        name=estimate.ward,
        demand=estimate.demand,
        admissions_per_year=estimate.admissions_per_year,
        beds=start,
        growth_per_year=estimate.bed_days_growth_per_year,
        admissions_growth_per_year=estimate.growth_per_year,
        facts=_facts(estimate),
        notes=(*guests, *estimate.notes, *((wording.BEDS_UNKNOWN,) if beds is None else ())),
    )


def _facts(estimate: DemandEstimate) -> tuple[tuple[str, str, str], ...]:
    """Return (what, value with its range, where from) for everything the demand rests on."""
    demand, unsure = estimate.demand, estimate.uncertainty
    top = max(range(12), key=lambda month: demand.month_factors[month])
    peak = f"{wording.MONTHS[top]}, {wording.signed_percent(demand.month_factors[top] - 1.0)} against the mean month"
    stays = f"{estimate.stays:,} stays, {wording.few(estimate.unfinished)} of them unfinished"
    recorded = "recorded admissions, last 12 months or whole file"
    return (
        ("Admissions a year", f"{estimate.admissions_per_year:,.0f}", recorded),
        ("Patients a day", wording.with_range(demand.total_arrivals_per_day, unsure.arrivals_per_day), estimate.method),
        ("Mean stay, days", wording.with_range(demand.length_of_stay.mean_days, unsure.mean_stay_days), stays),
        ("Spread of stay (SD ÷ mean)", f"{estimate.variation:.2f}", stays),
        (
            "Beds wanted on average",
            wording.with_range(demand.offered_load, unsure.beds_wanted),
            "patients a day × mean stay",
        ),
        ("Busiest month", peak, "admissions by month, all years"),
        (
            "Growth of bed-days in the records",
            f"{wording.signed_percent(estimate.bed_days_growth_per_year)} a year",
            "trend over the file, by how long patients have been in",
        ),
        (
            "Growth of admissions in the records",
            f"{wording.signed_percent(estimate.growth_per_year)} a year",
            "trend over the file; more short stays need few beds",
        ),
        (
            "Swing of daily arrivals (variance ÷ mean)",
            f"{demand.clustering:.2f}",
            "around rhythm and a 28-day level; 1 = chance alone",
        ),
        ("Drift of demand (SD ÷ mean)", f"{demand.rate_variation:.3f}", "what is slower than a stay"),
    )


def from_return(returned: MonthlyReturn, ward: str) -> Baseline:
    """What does a monthly return say of a ward? Averages and months; how far stays and arrivals swing is assumed.

    Where it names no available bed-days, beds start at the load, and a note says so.

    Raises:
        ImpossibleFigure: no bed-days or no discharges.

    Checked by: tests/test_plan.py
    """
    demand, level = returned.demand(ward), returned.level(ward)
    known = (
        f"{returned.name}, last 12 of {level.months} months"
        if level.months > 12
        else f"{returned.name}, {level.months} months"
    )
    stated = round(level.available_beds)
    unknown = () if stated else (wording.BEDS_UNKNOWN,)
    averages = "Based on averages only: how far demand and stays swing is assumed, not measured."
    growth = (("bed-days", level.bed_days_growth), ("discharges", level.discharges_growth))
    return Baseline(
        name=ward,
        demand=demand,
        admissions_per_year=level.discharges_per_year,
        beds=stated or math.ceil(demand.offered_load),
        growth_per_year=level.bed_days_growth.per_year if level.bed_days_growth else 0.0,
        admissions_growth_per_year=level.discharges_growth.per_year if level.discharges_growth else 0.0,
        facts=(
            ("Discharges a year", f"{level.discharges_per_year:,.0f}", known),
            ("Mean stay", wording.days(demand.length_of_stay.mean_days), f"{known}: bed-days ÷ discharges"),
            ("Spread of stay (SD ÷ mean)", f"{demand.length_of_stay.variation:.2f}", "assumed"),
            *(
                (f"Growth of {what}", found.told, f"all {level.months} months, net of season")
                for what, found in growth
                if found
            ),
        ),
        notes=(averages, level.note, *returned.cannot, *unknown),
        origin=f"{returned.name}, a monthly return",
    )


def from_census(census: Census, ward: str, mean_stay_days: float) -> Baseline:
    """What does a census say of a ward without ward stays, if patients stay so long? Its level, months and swing.

    All of the swing beyond chance is taken for drift of demand.

    Raises:
        ImpossibleFigure: a mean stay of 0 or less, or nobody counted.
        UnreadableRecords: a ward that the census doesn't count.

    Checked by: tests/plan/test_averages.py
    """
    base = from_return(return_of_census(census, {ward: mean_stay_days}), ward)
    swing = min(swing_beyond_chance(census, ward, mean_stay_days), 2.0)
    kept = [fact for fact in base.facts if fact[0] not in ("Discharges a year", "Mean stay")]
    return replace(
        base,
        demand=replace(base.demand, rate_variation=swing),
        facts=(
            ("Beds in use on average", f"{base.demand.offered_load:.1f}", f"{census.name}, last 12 months"),
            ("Mean stay", wording.days(mean_stay_days), TYPED),
            ("Patients a year", f"{base.admissions_per_year:,.0f}", "beds in use × 365 ÷ mean stay"),
            *kept,
            ("Drift of demand (SD ÷ mean)", f"{swing:.3f}", f"{census.name}: swing of the counts beyond chance"),
        ),
        notes=("How far stays differ is assumed, not measured.", *base.notes[1:]),
        origin=f"{census.name}, a census, and a mean stay typed by the planner",
    )


def from_totals(name: str, admissions_per_year: float, stay: LengthOfStay, beds: int) -> Baseline:
    """What can be said of a ward known by totals only? Steady demand; no season, because totals hold none.

    Raises:
        ImpossibleFigure: figures outside their meaning.

    Checked by: tests/test_plan.py
    """
    demand = Demand(admissions_per_year / 365.0, stay)
    return Baseline(
        name=name,
        demand=demand,
        admissions_per_year=admissions_per_year,
        beds=beds,
        facts=(
            ("Admissions a year", f"{admissions_per_year:,.0f}", TYPED),
            ("Mean stay", wording.days(stay.mean_days), TYPED),
            ("Spread of stay (SD ÷ mean)", f"{stay.variation:.2f}", TYPED),
        ),
        notes=(
            "Based on totals only: no season, weekday or hour is known, so busy months turn away more than shown.",
            "Admissions are patients who found a bed. If the ward was often full, true demand is higher.",
        ),
        origin="Totals typed by the planner",
    )
