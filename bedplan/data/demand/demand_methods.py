"""Four methods, from patients who got a bed to patients who wanted one, each with its range or the reason it can't tell."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import pandas as pd

from bedplan.data.demand.carried_load import load_behind
from bedplan.data.demand.evidence import NINETY, DemandMethod, Evidence, Range
from bedplan.data.demand.open_time import RUSH, OpenTime
from bedplan.data.wards.patients import beds_used, started
from bedplan.errors import ImpossibleFigure
from bedplan.wording import beds_text, percent

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    from bedplan.data.beside.logs import EventLog
    from bedplan.data.demand.walls import Wall

LIST, SPECIALTY, OPEN_TIME, CARRIED = (
    "the list of those who could not be given a bed",
    "patients of its specialty on every ward",
    "arrivals while a bed was free",
    "the Erlang loss formula, solved for demand",
)
LEAST_SHARE_ELSEWHERE = 0.01  # of its patients' beds: below, they don't matter
MOST_WAITING = 0.05  # of own patients who lay on another ward first or instead, from which they queue; no source
MOSTLY = 0.5
LEAST_TO_TELL = (
    0.1  # of all time with a free bed: with less, free hours don't even tell what there was at most; no source
)
LEAST_SLOPE = 0.15  # beds in use gained for each bed more wanted; below, a ward is too full to tell
NOTABLE = 0.02  # of the time, by which a formula may miss the hours that a ward was full before it is said
SILENCE = 10.0  # usual gaps between a list's entries, from which it was not kept (by chance: 1 in 20,000)


def list_and(names: list[str]) -> str:
    """Write names as people do: "Plover, Heron and Kestrel"."""
    return " and ".join(part for part in (", ".join(names[:-1]), *names[-1:]) if part)


def not_used(name: str, reason: str) -> DemandMethod:
    """Return a method that can't be used here, and why."""
    return DemandMethod(name, used=False, reason=reason)


def by_list(evidence: Evidence, logs: tuple[EventLog, ...], share: Range) -> DemandMethod:
    """How many wanted a bed, by those who had one and lists of those who could not be given one?

    ``share``: lowest and highest share of such cases that get written down; booked patients who were cancelled are
    taken to be written down always. A patient asked for twice counts twice.
    """
    if not logs:
        return not_used(LIST, "No list of patients who could not be given a bed was brought.")
    names, ward = list_and([log.name for log in logs]), evidence.own.ward
    if any(log.kind == "bed requests" for log in logs):
        told = (
            "holds all who asked for a bed, most of whom had one: bring the list of those who could not be given one."
        )
        return not_used(LIST, f"{names} {told}")
    found = [_not_given(evidence, log, share_of(log, share)) for log in logs]
    not_given, variance = (sum(part) for part in zip(*found, strict=True))
    if not_given == 0:
        return not_used(LIST, _nobody_listed(ward, names, logs))
    listed = sum(listed_per_day(evidence, log)[0] for log in logs)
    stands = f", which stand for {not_given:.2f} if {share_text(share)} are written down" if not_given > listed else ""
    reason = (
        f"{evidence.had_a_bed_per_day:.2f} of its patients a day had a bed. {listed:.2f} more are listed as those who "
        f"could not be given one here{stands}."
    )
    return evidence.found(LIST, reason, not_given, variance + evidence.by_chance(evidence.had_a_bed_per_day))


def _nobody_listed(ward: str, names: str, logs: tuple[EventLog, ...]) -> str:
    """Say why lists hold nobody for a ward: reasons nobody understands, perhaps another name, or nobody was noted."""
    unclear = [note for log in logs for note in log.notes_on(ward)]
    if unclear:
        return " ".join(unclear)
    told = f"Nobody is listed for {ward} in {names}: either nobody was sent away, or nobody noted it"
    other = [f"“{name}”" for log in logs for name in log.unknown_wards][:5]
    return f"{told}, or it stands there as {' or '.join(other)}, which have no stays." if other else f"{told}."


def _not_given(evidence: Evidence, log: EventLog, share: Range) -> Range:
    """Return the patients a day who could not be given a bed, and the variance of that figure.

    Three things make it uncertain: who came, who of them was written down, and how sure the planner is of the share.
    """
    listed, days = listed_per_day(evidence, log)
    middle, half = (share[0] + share[1]) / 2, (share[1] - share[0]) / 2
    not_given = listed / middle
    by_chance = (evidence.swing + (1 - middle) / middle) * not_given / days
    return not_given, by_chance + (not_given / middle * half / NINETY) ** 2


def share_of(log: EventLog, share: Range) -> Range:
    """Which share of such cases is written down in this list? Cancellations are taken to be complete."""
    return share if log.kind == "refusals" else (1.0, 1.0)


def share_text(share: Range) -> str:
    """Write a share that is written down: "all", "60 %", "50 % to 70 %"."""
    if share[0] == share[1]:
        return "all" if share[0] == 1 else percent(share[0])
    return f"{percent(share[0])} to {percent(share[1])}"


def listed_per_day(evidence: Evidence, log: EventLog) -> tuple[float, int]:
    """How many a day are on a list for this ward, and over how many days was it kept?"""
    records = evidence.own.records
    mine = log.for_lack_of_beds(evidence.own.ward, records.window)["time"]
    if mine.empty:
        return 0.0, evidence.days
    days = max(int(days_kept(evidence, log).sum()), 1)
    return started(records, mine) / days, days


def days_kept(evidence: Evidence, log: EventLog) -> NDArray[np.bool_]:
    """On which days of the window was this list kept?

    A list that is silent at the start or end of the file for ten usual gaps was not kept then: those days don't count.
    """
    records = evidence.own.records
    first, last = records.window
    times = log.table["time"]
    times = times[(times >= first) & (times < last)]
    silence = max(SILENCE * (times.max() - times.min()) / len(times), pd.Timedelta(days=1))
    began = first if times.min() - first <= silence else times.min().normalize()
    ended = last if last - times.max() <= silence else times.max().normalize() + pd.Timedelta(days=1)
    return (records.calendar >= began) & (records.calendar < ended) & records.counted_days


def by_specialty(evidence: Evidence) -> DemandMethod:
    """How many wanted a bed, by counting the ward's own patients wherever they lay?"""
    own, reason = evidence.own, ""
    if "specialty" not in own.records.stays:
        reason = "The file has no column for the patients' specialty."
    elif not own.specialties:
        reason = (
            "Its patients are of many specialties, most of them at home elsewhere: its own can't be told from others."
        )
    elif evidence.beds_elsewhere < LEAST_SHARE_ELSEWHERE * evidence.own_beds:
        reason = "Hardly any of its patients lay on another ward; those who went to another hospital it can't see."
    if reason:
        return not_used(SPECIALTY, reason)
    reason = (
        f"Patients of {list_and(list(own.specialties))} used {evidence.own_beds:.1f} beds on average: "
        f"{evidence.beds_here:.1f} on {own.ward} and {evidence.beds_elsewhere:.1f} on {_busiest(own.elsewhere)}."
    )
    return evidence.found(SPECIALTY, reason)


def _busiest(stays: pd.DataFrame) -> str:
    """Return the wards of these stays, the one with most of them first, three at most."""
    return list_and([str(name) for name, count in stays["ward"].value_counts().items() if count][:3])


def by_open_time(evidence: Evidence) -> DemandMethod:
    """How many wanted a bed, by those who came from outside while one was free?

    Those who moved in from other wards are added, and the few who lay elsewhere, though some of these may be among
    those who came: if it errs by that, it is towards more.
    """
    opening, reason = evidence.direct, why_not_loss(evidence)
    if not reason and opening is None:
        reason = "The file has dates without times, so the hours with a free bed are not known."
    elif not reason and not opening.can_tell:
        reason = f"In some hour of the week or month a bed was free only {percent(opening.least_open)} of the time: too little."
    return not_used(OPEN_TIME, reason) if reason else _open_time(evidence, opening)


def _open_time(evidence: Evidence, opening: OpenTime) -> DemandMethod:
    """Return what free hours tell; where patients come together, hours with room for all of them, if there are enough."""
    others, room, at_a_time = (
        evidence.moved_in_per_day + evidence.elsewhere_per_day,
        evidence.with_room,
        evidence.together,
    )
    added = f"; {others:.2f} a day who came from other wards of the hospital are added" if others else ""
    told, free, less = opening, "a bed was free", ""
    if at_a_time > 1 and room.can_tell:
        told, free = room, f"{at_a_time} beds were free"
    elif at_a_time > 1:
        less = " Patients come together and there was seldom room for all of them, so this is too low."
    reason = (
        f"{evidence.own.ward} was full {percent(opening.share_full)} of the time. While {free}, "
        f"{told.per_day:.2f} patients a day came from outside{added}.{less}"
    )
    variance = evidence.swing * told.error**2 + evidence.by_chance(others)
    return evidence.found(OPEN_TIME, reason, max(told.per_day - evidence.direct_per_day, 0.0), variance)


def by_carried_load(evidence: Evidence) -> DemandMethod:
    """How many wanted a bed, by the beds in use and the formula for a ward whose patients leave when it is full?"""
    reason = why_not_loss(evidence)
    return not_used(CARRIED, reason) if reason else _carried_load(evidence)


def _carried_load(evidence: Evidence) -> DemandMethod:
    """Return what beds in use tell, if patients go elsewhere at once when the ward is full."""
    in_use, beds = beds_used(evidence.own.records, evidence.on_ward), evidence.beds
    told = f"{in_use:.1f} of {beds.mean():.1f} beds were in use on average"
    try:
        load, slope = load_behind(in_use, beds)
    except ImpossibleFigure:
        slope = 0.0
    if slope < LEAST_SLOPE or in_use <= 0:
        return not_used(CARRIED, f"{told}: demand can't be told from that.")
    not_given = evidence.direct_per_day * (load / in_use - 1.0)
    chance = evidence.by_chance(evidence.had_a_bed_per_day + not_given)
    in_use_error = evidence.mean_stay_days * (chance * (1 + evidence.variation**2)) ** 0.5
    by_use = evidence.direct_per_day / in_use * (1.0 / slope - load / in_use) * in_use_error
    full, expected = min(evidence.share_full, 0.99), 1 - in_use / load
    misfit = evidence.direct_per_day * full / (1.0 - full) - not_given
    told = (
        f"{told}, as if {load:.1f} were wanted. The ward was then full {percent(expected)} of the time by the formula; it "
        f"was {percent(full)}."
    )
    told += " It misses demand, and the range allows for that." if full > expected + NOTABLE else ""
    if evidence.with_room is not None and evidence.with_room.can_tell:
        # Those who come find it full more often than it is by the clock: in busy hours, and just behind one another.
        misfit = max(misfit, evidence.with_room.per_day - evidence.direct_per_day - not_given, key=abs)
    if evidence.minutes is None:
        told += " Without times of day it can't be seen whether patients queue; where they do, this is too high."
    return evidence.found(CARRIED, told, not_given, chance + by_use**2 + misfit**2)


def most_by_beds(evidence: Evidence) -> DemandMethod | None:
    """How many may have wanted a bed at most, by free hours or beds in use where these were refused as too uncertain?

    Where stated beds were hardly ever used: at the level of beds that was. Where patients queue: those who came while
    a bed was free, some of whom may have waited for it. None where neither can be told: no bed is known, most patients
    come by list, or the ward was hardly ever open.
    """
    if evidence.capacity is None or evidence.booked_share > MOSTLY:
        return None
    level = replace(evidence, fewer_beds=evidence.never_used)
    if level.direct is None:
        return next((method for method in (_carried_load(level),) if method.used), None)
    return _open_time(level, level.direct) if level.direct.share_full <= 1 - LEAST_TO_TELL else None


def wall_text(evidence: Evidence) -> str:
    """Say that stated beds were hardly ever used though the ward was often as full as it got; nothing where they were."""
    return " ".join(_one_wall(evidence, wall) for wall in evidence.walls)


def _one_wall(evidence: Evidence, wall: Wall) -> str:
    """Say it of one part of the file."""
    most, ward, fewer, calendar = wall.beds, evidence.own.ward, wall.fewer, evidence.own.records.calendar
    first, last = calendar[wall.first], calendar[wall.end - 1]
    is_whole = wall.end - wall.first == calendar.size
    when = "" if is_whole else f" from {first.day} {first:%B %Y} to {last.day} {last:%B %Y}"
    return (
        f"Hardly ever were more than {most - fewer} patients on {ward}{when}, though {beds_text(most)} are stated as staffed and "
        f"it often had {most - fewer}: {'one of them seems' if fewer == 1 else f'{fewer} of them seem'} not to be there, or to be kept free."
    )


def why_not_loss(evidence: Evidence) -> str:
    """Why can't demand be read from free and full hours here? Nothing where it can: patients then go elsewhere at once."""
    if evidence.capacity is None:
        return "The beds of each day are not known: bring a file of beds by ward and date."
    if evidence.booked_share > MOSTLY:
        return f"{percent(evidence.booked_share)} of its patients are booked: they come by list, not by chance."
    if evidence.walls:
        return f"{wall_text(evidence)} When the ward was full is not known until that is checked."
    own, rush, moved = evidence.own, evidence.rush, evidence.moved_in_per_day / max(evidence.had_a_bed_per_day, 1e-9)
    told, rushed = "", rush is None or rush >= RUSH
    if own.waiting_share > MOST_WAITING:
        where = _busiest(pd.concat([own.on_the_way, own.elsewhere]))
        told = f"{percent(own.waiting_share)} of its own first waited, or lay instead, on {where}"
    elif rushed and moved > MOSTLY:
        told = f"{percent(moved)} of its own come from other wards of the hospital"
    queued = evidence.direct is not None and evidence.direct.is_queued_for
    if told and not rushed:
        return f"{told}: they are counted there, and arrivals while a bed is free would count some of them twice."
    if not told and not queued:
        return ""
    at_once = f"a bed freed while it is full is taken {rush:.0f} times as fast as usual" if rush else ""
    return (
        f"Patients queue for {own.ward}: {', and '.join(part for part in (told, at_once) if part)}. Whoever takes it "
        "had been waiting, so arrivals while a bed is free are not those who ask for one."
    )
