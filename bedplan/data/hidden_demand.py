"""From recorded use to demand, step by step: patients on other wards, refused, cancelled."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

from bedplan.data.demand_methods import (
    HOME,
    DemandFigure,
    WardEvidence,
    full_ward_demand,
    gather,
    home_demand,
    logged_demand,
)
from bedplan.errors import ImpossibleFigure

if TYPE_CHECKING:
    from bedplan.data.capacity import Capacity
    from bedplan.data.logs import EventLog
    from bedplan.data.records import Records


@dataclass(frozen=True, slots=True)
class Unmet:
    """What is written down of demand that was not met: refusals (and the share that gets written down), cancellations.

    Raises:
        ImpossibleFigure: a share of refusals recorded outside 0–1, or 0.
    """

    refusals: EventLog | None = None
    recorded_share: float = 1.0
    cancellations: EventLog | None = None

    def __post_init__(self) -> None:
        """Check the share."""
        if not 0 < self.recorded_share <= 1:
            raise ImpossibleFigure(
                f"A recorded share of {self.recorded_share:g} is not possible: it lies above 0 and is at most 1."
            )


@dataclass(frozen=True, slots=True)
class DemandStep:
    """One step from recorded use to demand: the beds it adds on average (below 0: takes away)."""

    label: str
    beds: float
    sentence: str


@dataclass(frozen=True, slots=True)
class HiddenDemand:
    """What was asked of a ward, met or not.

    ``steps`` add up to ``beds_wanted`` (beds on average); ``figures`` are the methods' answers side by side, and
    ``spread`` reaches from the lowest bound to the highest of those that can tell. ``method`` names the one used.
    ``patients_queue`` is None where no capacity file says when the ward was full. Cancelled patients count as arrivals.

    Checked by: tests/data/test_hidden_demand.py
    """

    ward: str
    admitted_per_day: float
    arrivals_per_day: float
    beds_wanted: float
    method: str
    steps: tuple[DemandStep, ...]
    figures: tuple[DemandFigure, ...]
    spread: tuple[float, float]
    patients_queue: bool | None
    notes: tuple[str, ...]

    @property
    def mean_stay_days(self) -> float:
        """How long would each of them stay on average?"""
        return self.beds_wanted / self.arrivals_per_day if self.arrivals_per_day > 0 else 0.0


def hidden_demand(
    records: Records, ward: str, capacity: Capacity | None = None, unmet: Unmet | None = None
) -> HiddenDemand:
    """How much demand do the records not show: patients refused, cancelled, or lying on other wards?

    Each method has its ward: a log of refusals where there is one; the patients' own specialty where they lie
    elsewhere; the rate while a bed is free, or the carried load, where patients leave when the ward is full. Where
    patients queue for the ward, freed beds are taken at once, and those last two methods are refused.

    Raises:
        UnreadableRecords: no stays on the ward, or none that ended.

    Checked by: tests/data/test_hidden_demand.py
    """
    unmet = unmet or Unmet()
    evidence = gather(records, ward, capacity)
    log = unmet.refusals
    refused = None if log is None else len(log.for_lack_of_beds(ward, records.window))
    logged = logged_demand(evidence, refused, unmet.recorded_share)
    figures = (logged, home_demand(evidence), *full_ward_demand(evidence))
    admitted, base = evidence.admitted / records.days, evidence.own_arrivals / records.days
    chosen = _choose(figures, evidence)
    per_day = base if chosen is None or chosen.arrivals_per_day is None else chosen.arrivals_per_day
    cancels = unmet.cancellations
    cancelled = 0.0 if cancels is None else len(cancels.for_lack_of_beds(ward, records.window)) / records.days
    steps = _steps(evidence, chosen, per_day - base, cancelled)
    told = [figure for figure in figures if figure.arrivals_per_day is not None]
    error = 1.96 * math.sqrt(max(evidence.own_arrivals, 1)) / records.days
    return HiddenDemand(
        ward=ward,
        admitted_per_day=admitted,
        arrivals_per_day=per_day + cancelled,
        beds_wanted=math.fsum(step.beds for step in steps),
        method="recorded admissions alone" if chosen is None else chosen.method,
        steps=steps,
        figures=figures,
        spread=(
            max(min([base - error, *(figure.low for figure in told)]), 0.0) + cancelled,
            max([base + error, *(figure.high for figure in told)]) + cancelled,
        ),
        patients_queue=evidence.opening.patients_queue if evidence.opening else None,
        notes=_notes(evidence, told),
    )


def _choose(figures: tuple[DemandFigure, ...], evidence: WardEvidence) -> DemandFigure | None:
    """Return the figure with the best evidence: written down, then where patients lie, then how a full ward behaves."""
    logged, home, rate, carried = figures
    queue = evidence.opening is not None and evidence.opening.patients_queue
    order = (logged, home) if queue else (logged, rate, carried, home)
    return next((figure for figure in order if figure.arrivals_per_day is not None), None)


def _steps(
    evidence: WardEvidence, chosen: DemandFigure | None, turned_away_per_day: float, cancelled_per_day: float
) -> tuple[DemandStep, ...]:
    """Return the steps from beds in use on the ward to beds wanted."""
    ward, stay = evidence.ward, evidence.mean_stay_days
    steps = [
        DemandStep(
            "Recorded on the ward", evidence.recorded_beds, f"{evidence.recorded_beds:.1f} beds in use on average."
        )
    ]
    if evidence.matters:
        guests, away = evidence.guest_beds, evidence.away_beds
        steps.append(
            DemandStep("Other wards' patients here", -guests, f"{guests:.1f} beds are used by other wards' patients.")
        )
        steps.append(
            DemandStep("Own patients elsewhere", away, f"{away:.1f} beds of other wards are used by {ward}'s patients.")
        )
    if chosen is not None and chosen.method != HOME and turned_away_per_day > 0:
        told = f"{turned_away_per_day * 365:,.0f} patients a year, by {chosen.method}, for {stay:.1f} days each."
        steps.append(DemandStep("Turned away", turned_away_per_day * stay, told))
    told = f"{cancelled_per_day * 365:,.0f} booked patients a year were cancelled for lack of a bed, for {stay:.1f} days each."
    steps.append(DemandStep("Cancelled", cancelled_per_day * stay, told))
    return tuple(step for place, step in enumerate(steps) if place == 0 or step.beds != 0)


def _notes(evidence: WardEvidence, told: list[DemandFigure]) -> tuple[str, ...]:
    """Return what belongs beside the answer."""
    notes, ward, opening = [], evidence.ward, evidence.opening
    if opening is not None:
        notes.append(f"{ward} had no free bed {opening.full_share:.0%} of the time.")
        if opening.patients_queue:
            notes.append(
                f"Patients queue for {ward}: {opening.taken_soon:,} came within two hours of a bed coming free, where "
                f"{opening.expected_soon:,.0f} would by chance. Its demand is read from where its patients lie."
            )
    if not told:
        notes.append("No method could tell more than the admissions show; true demand may be higher.")
    elif len(told) > 1:
        notes.append("The methods differ; the range covers them all.")
    return tuple(notes)
