"""From the patients a ward admitted to those who wanted a bed on it: step by step, by every method the files allow."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from bedplan.data.demand.asked import Asked, who_asked
from bedplan.data.demand.demand_methods import (
    CARRIED,
    LIST,
    OPEN_TIME,
    SPECIALTY,
    by_carried_load,
    by_list,
    by_open_time,
    by_specialty,
    list_and,
    listed_per_day,
    most_by_beds,
    share_text,
    wall_text,
)
from bedplan.data.demand.evidence import NINETY, DemandMethod, Evidence, Range, gather
from bedplan.data.wards.patients import beds_used, own_patients, started
from bedplan.data.wards.silence import without_silences
from bedplan.errors import ImpossibleFigure
from bedplan.wording import percent

if TYPE_CHECKING:
    from bedplan.data.beside.capacity import Capacity
    from bedplan.data.beside.logs import EventLog
    from bedplan.data.cleaning.records import Records

BEST_FIRST = (LIST, OPEN_TIME, CARRIED, SPECIALTY)
RECORDED = "recorded admissions alone"


@dataclass(frozen=True, slots=True)
class DemandStep:
    """One step from recorded to demand: the patients a day and beds it adds (below 0: takes away)."""

    label: str
    patients_per_day: float
    beds: float


@dataclass(frozen=True, slots=True)
class HiddenDemand:
    """What was wanted of a ward over the file's days, whether there was a bed or not.

    ``steps`` lead from what is recorded on the ward, the first, to its demand: they add up to it. ``methods``:
    every method of finding demand, used or not, and why; ``method`` names the one that the steps follow. ``interval`` and
    ``beds_interval`` are its 90 % intervals; ``spread`` (patients a day) and ``beds_spread`` reach from the lowest to
    the highest bound of all methods used. ``asked``: when those of the method followed came.
    """

    ward: str
    method: str
    steps: tuple[DemandStep, ...]
    methods: tuple[DemandMethod, ...]
    interval: Range
    beds_interval: Range
    spread: Range
    beds_spread: Range
    notes: tuple[str, ...]
    asked: Asked = field(compare=False, repr=False)

    @property
    def admitted_per_day(self) -> float:
        """How many patients a day does the ward's own record show?"""
        return self.steps[0].patients_per_day

    @property
    def demand_per_day(self) -> float:
        """How many patients a day wanted a bed on this ward?"""
        return math.fsum(step.patients_per_day for step in self.steps)

    @property
    def beds_wanted(self) -> float:
        """How many beds would they have used on average, had there always been one?"""
        return math.fsum(step.beds for step in self.steps)

    @property
    def takes_away(self) -> bool:
        """Is less wanted than was in use, because other wards' patients are taken out?"""
        return self.beds_wanted < self.steps[0].beds

    @property
    def mean_stay_days(self) -> float:
        """How long do the ward's own patients use a bed, on average?"""
        return self.beds_wanted / self.demand_per_day if self.demand_per_day > 0 else 0.0


def hidden_demand(
    records: Records,
    ward: str,
    *,
    capacity: Capacity | None = None,
    refusals: EventLog | tuple[EventLog, ...] | None = None,
    share_recorded: float | Range = 1.0,
) -> HiddenDemand:
    """How many patients wanted a bed on this ward, those included who lay elsewhere or could not be given one?

    Every method that the files allow is shown with its 90 % interval. The one followed is the first of these that can
    be used: lists of those who could not be given a bed (``refusals``: one or more of refusals and cancellations),
    arrivals while a bed was free, the Erlang loss formula solved for demand, the ward's own patients wherever they
    lay. All of them count its own patients on other wards. The second and third are refused where patients queue for
    the ward: a freed bed is then taken by somebody who came earlier. ``share_recorded``: the share of refusals that
    get written down, above 0 and at most 1, or the lowest and highest that the planner holds possible.

    Raises:
        ImpossibleFigure: a share outside its meaning.
        UnreadableRecords: no stay on the ward, or none that ended.

    Source: Wolff 1982 (open time); Erlang 1917 (carried load).
    Checked by: tests/data/demand/test_hidden_demand.py
    """
    share = _share(share_recorded)
    brought = refusals if isinstance(refusals, tuple) else () if refusals is None else (refusals,)
    logs = tuple(log.linked_to(records) for log in brought)
    found = without_silences(records.settled, ward, settled=True)
    evidence = gather(own_patients(found, ward), capacity and capacity.linked_to(records))
    methods = (
        by_list(evidence, logs, share),
        by_specialty(evidence),
        by_open_time(evidence),
        by_carried_load(evidence),
    )
    used = {name: method for name in BEST_FIRST for method in methods if method.name == name and method.used}
    followed = next(iter(used.values()), None) or evidence.found(RECORDED, "")
    most = _at_most(evidence, followed)
    shown = [*(list(used.values()) or [followed]), *([most] if most else [])]
    return HiddenDemand(
        ward=ward,
        method=followed.name,
        steps=_steps(evidence, followed),
        methods=methods,
        interval=followed.interval,
        beds_interval=followed.beds_interval,
        spread=(min(one.interval[0] for one in shown), max(one.interval[1] for one in shown)),
        beds_spread=(min(one.beds_interval[0] for one in shown), max(one.beds_interval[1] for one in shown)),
        notes=(
            *_notes(evidence, followed),
            *_range_notes(evidence, most),
            *(note for log in logs for note in log.notes_on(ward)),
            *_listed_too_few(evidence, logs, share, used),
        ),
        asked=who_asked(evidence, followed, logs, share),
    )


def _share(given: float | Range) -> Range:
    """Return the lowest and highest share that gets written down, checked."""
    low, high = (given, given) if isinstance(given, int | float) else given
    if not 0 < low <= high <= 1:
        said = f"{low:g}" if low == high else f"{low:g} to {high:g}"
        raise ImpossibleFigure(
            f"A share written down of {said} is not possible: it lies above 0 and is at most 1, the lower figure first."
        )
    return float(low), float(high)


def _steps(evidence: Evidence, followed: DemandMethod) -> tuple[DemandStep, ...]:
    """Return the steps that add up to demand; those that change nothing are left out."""
    own, records = evidence.own, evidence.own.records
    ward, more = own.ward, followed.patients_per_day - evidence.had_a_bed_per_day
    guests = started(records, own.guests["start"]) / evidence.days, beds_used(records, own.guests)
    here = evidence.direct_per_day + evidence.moved_in_per_day
    steps = (
        DemandStep(f"Recorded on {ward}", here + guests[0], evidence.beds_here + guests[1]),
        DemandStep("Other wards' patients here, taken out", -guests[0], -guests[1]),
        DemandStep("Own patients elsewhere, brought home", evidence.elsewhere_per_day, evidence.beds_elsewhere),
        DemandStep("Could not be given a bed here", more, more * evidence.mean_stay_days),
    )
    return tuple(step for place, step in enumerate(steps) if place == 0 or step.beds or step.patients_per_day)


def _at_most(evidence: Evidence, followed: DemandMethod) -> DemandMethod | None:
    """Return what the range must reach up to, where the method followed sees nobody who went elsewhere."""
    blind = followed.name == RECORDED or (followed.name == SPECIALTY and evidence.walls)
    return most_by_beds(evidence) if blind else None


def _range_notes(evidence: Evidence, most: DemandMethod | None) -> list[str]:
    """Say what to check in the file of beds, and why the range reaches up."""
    notes, wall = [], wall_text(evidence)
    if wall:
        notes.append(f"{wall} Check the file of beds: every bed too many hides patients who found the ward full.")
    if most:
        as_if = (
            "with the beds that were used" if wall else "if none of those who came while one was free had waited for it"
        )
        high = f"{most.patients_per_day:.2f} patients a day, at most {most.interval[1]:.2f}"
        notes.append(f"The range reaches up to what {most.name} would give {as_if}: {high}.")
    return notes


def _notes(evidence: Evidence, followed: DemandMethod) -> list[str]:
    """Return what belongs beside the answer."""
    own, records = evidence.own, evidence.own.records
    notes = [f"Averages over the {evidence.days:,} days of the file that count, not the latest year alone."]
    if own.specialties:
        twins = f" Such patients on {list_and(list(own.twins))} are at home there." if own.twins else ""
        kinds = list_and(list(own.specialties))
        notes.append(f"Its own patients are those of {kinds}, {percent(own.share)} of the stays on it.{twins}")
    if len(own.guests):
        notes.append(
            f"Patients of other wards used {beds_used(records, own.guests):.1f} of its beds. They are left out here, "
            "because they belong to the demand of their own wards; if those get no more beds, they still need these."
        )
    if len(own.on_the_way):
        wards = list_and(sorted({str(ward) for ward in own.on_the_way["ward"]}))
        notes.append(
            f"Its patients on {wards} ({beds_used(records, own.on_the_way):.1f} beds) are not counted: most only pass "
            "through there, so these beds are care on the way, or waiting, and are needed there."
        )
    if own.specialties and not own.knows_moves:
        notes.append(
            "No patient has two stays in the file, so those on their way to or from the ward can't be told apart."
        )
    if followed.name == SPECIALTY:
        all_full = evidence.all_full_share
        share = "" if all_full is None else f" All of them were full at once {percent(all_full)} of the time."
        notes.append(
            "Patients who found a bed on none of these wards, and went to another hospital or home, are not in the file "
            f"nor in the range: demand may be higher.{share}"
        )
    if followed.name == RECORDED:
        notes.append(
            "These files can't tell how many could not be given a bed: those who waited and then came in are in the "
            "records, those who went elsewhere are not, so demand may be higher."
        )
    return notes


def _listed_too_few(
    evidence: Evidence, logs: tuple[EventLog, ...], share: Range, used: dict[str, DemandMethod]
) -> list[str]:
    """Say so where the lists seem to miss more than the planner's share, by arrivals while a bed was free."""
    if LIST not in used or OPEN_TIME not in used:
        return []
    by_open, by_name = (used[name].patients_per_day - evidence.had_a_bed_per_day for name in (OPEN_TIME, LIST))
    if by_open - by_name <= NINETY * evidence.direct.error:
        return []
    seems = sum(listed_per_day(evidence, log)[0] for log in logs) / by_open
    said = (
        f"The list may miss more than assumed: by arrivals while a bed was free, {by_open:.2f} patients a day could "
        f"not be given one, by the list {by_name:.2f}. About {percent(seems)} of such cases seem to be written down, "
        f"where {share_text(share)} was assumed: if so, demand is higher."
    )
    return [said]
