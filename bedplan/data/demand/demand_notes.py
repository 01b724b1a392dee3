"""What does not stop an estimate of demand but belongs beside it."""

from __future__ import annotations

from typing import TYPE_CHECKING

from bedplan.data.ahead.arrivals import FEWEST_STAYS, Arrivals, is_booked
from bedplan.data.ahead.drift import USUAL
from bedplan.data.demand.doubted import beds_doubted
from bedplan.data.wards.silence import silence_notes
from bedplan.data.wards.stays import stay_change
from bedplan.wording import beds_on_average, few, percent

if TYPE_CHECKING:
    import pandas as pd

    from bedplan.data.ahead.drift import Drift
    from bedplan.data.cleaning.records import Records
    from bedplan.data.demand.hidden_demand import HiddenDemand
    from bedplan.data.wards.survival import StayCurve

MUCH_LOST = 0.01  # of a ward's stays, and so of its bed-days
LEAST_BEDS = 0.05  # of doubted stays: less reads as 0.0
MUCH_BOOKED = 0.1  # share of admissions from which booked patients are mentioned
ADMISSIONS_NOTE = (
    "Admissions are not arrivals: the records hold patients who got a bed here. Patients who were turned away, waited "
    "elsewhere or were cancelled are missing, so true demand may be higher."
)


def demand_notes(
    records: Records,
    arrivals: Arrivals,
    curve: StayCurve,
    stays: pd.DataFrame,
    hidden: HiddenDemand | None,
) -> tuple[str, ...]:
    """What belongs beside this ward's estimate? ``stays`` are the ward's, in the window.

    Checked by: tests/data/demand/test_estimating.py
    """
    ward = str(stays["ward"].iloc[0])
    return (
        ADMISSIONS_NOTE,
        *_lost_notes(records, ward),
        *(hidden.notes if hidden else ()),
        *_arrival_notes(records, arrivals),
        *silence_notes(records, ward),
        *_recent_arrivals(arrivals),
        *_stay_notes(records, curve, stays),
        *_change_notes(records, stays, ward),
    )


def _lost_notes(records: Records, ward: str) -> list[str]:
    """Say how many of the ward's stays could not be read, and the beds of those not believed, where that matters."""
    lost = records.unread.get(ward, 0)
    share = lost / (lost + len(records.of_ward(ward)))
    notes, more = [], beds_doubted(records).get(ward, 0.0)
    if share > MUCH_LOST:
        lost = f"About {percent(share)} of this ward's stays could not be read or believed"
        notes.append(f"{lost}, so its demand is at least that much too low.")
    if more >= LEAST_BEDS:
        doubted = "Stays set aside because their end seems forgotten, or a year mistyped, are not in this"
        notes.append(f"{doubted}: if their dates are right, {beds_on_average(more)} more are wanted.")
    return notes


def _arrival_notes(records: Records, arrivals: Arrivals) -> list[str]:
    """Say what is missing from the rhythm, and from the file."""
    notes, days = [], int(arrivals.used.sum())
    if not arrivals.enough:
        notes.append(
            f"Only {arrivals.came.size:,} admissions in {days:,} days: too few to tell months, weekdays or hours apart, "
            f"so none is assumed; {FEWEST_STAYS} in 90 days are needed. Take the wide intervals seriously."
        )
    elif not arrivals.rhythm.has_season:
        notes.append(f"Only {days:,} days of the file count: too few to tell the seasons, so none is assumed.")
    notes.append(_drift_note(arrivals.swing.drift))
    if records.period_note:
        notes.append(records.period_note)
    if records.excluded:
        notes.append(f"{int((~records.counted_days).sum()):,} days were left out, as chosen.")
    return notes


def _drift_note(drift: Drift | None) -> str:
    """Say how far arrivals drift, how sure that is, and which way it errs."""
    if drift is None:
        return (
            f"Too few days to tell how far arrivals drift beyond season and growth: the usual {percent(USUAL)} (SD ÷ mean) "
            "is taken."
        )
    low, high = map(percent, drift.interval)
    return (
        f"Beyond season and growth arrivals drift by about {percent(drift.variation)} (SD ÷ mean; {low} to {high}, 90 %). "
        "A drift that lasts a year or longer looks like growth: in three years it is found up to a third too low, which "
        "errs towards too few beds."
    )


def _recent_arrivals(arrivals: Arrivals) -> list[str]:
    """Say whether more or fewer came lately: the rate of the last 12 months then misses the latest weeks'."""
    change = arrivals.change
    if change is None:
        return []
    word, errs = ("grew", "few") if change.share > 0 else ("fell", "many")
    usual = "usual for the time of year" if arrivals.rhythm.has_season else "usual before"
    season = "" if arrivals.rhythm.has_season else " The file is too short to tell whether that is the season."
    return [
        (
            f"Arrivals {word} by {percent(abs(change.share))} lately: in the last {change.days // 7} weeks {change.came:,} "
            f"came, where about {change.expected:,.0f} were {usual}. The rate of {arrivals.period} is used; its range reaches "
            f"to the latest level. It errs towards too {errs} beds if the change lasts: move demand then.{season}"
        )
    ]


def _stay_notes(records: Records, curve: StayCurve, stays: pd.DataFrame) -> list[str]:
    """Say what the stays rest on."""
    notes, unfinished, booked_share = [], int(stays["end"].isna().sum()), float(is_booked(stays).mean())
    if unfinished:
        notes.append(
            f"{few(unfinished).capitalize()} patients were still in; their stays are treated as unfinished, not dropped."
        )
    if curve.open_share > 0:
        notes.append(
            f"The longest stays had not ended; letting them go on as the last ten departures suggest "
            f"adds {curve.tail_days:.2f} days to the mean stay."
        )
    if booked_share >= MUCH_BOOKED:
        notes.append(
            f"{percent(booked_share)} of admissions were booked. Booked patients come more evenly than chance; a model that "
            "takes them for chance arrivals errs towards more beds."
        )
    if not records.has_times:
        notes.append("Dates without times: stays are counted in nights and no hour of the day is known.")
    return notes


def _change_notes(records: Records, stays: pd.DataFrame, ward: str) -> list[str]:
    """Say whether stays grew longer or shorter lately: the whole file's mean then misses the latest year's."""
    change = stay_change(records, stays, ward)
    if change is None:
        return []
    word = "longer" if change[1] > change[0] else "shorter"
    told = f"{change[0]:.1f} days before the latest year, {change[1]:.1f} in it"
    return [f"Stays grew {word}: {told}. The whole file's mean is used; move the stay where the change will last."]
