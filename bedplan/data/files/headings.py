"""Headings of the files beside the ward stays, as hospitals write them: canonical name -> headings, in `plain` letters."""

from __future__ import annotations

from typing import TYPE_CHECKING

from bedplan.data.files.columns import STAY_HEADINGS, match_headings, words

if TYPE_CHECKING:
    from collections.abc import Collection, Iterable, Mapping

CAPACITY_HEADINGS: dict[str, tuple[str, ...]] = {
    "ward": words("ward wardcode wardname location unit"),
    "from": words("from start startdate datefrom fromdate validfrom date since"),
    "to": words("to end enddate dateto todate validto until"),
    "funded": words("fundedbeds funded established establishment budgetedbeds beds"),
    "staffed": words("staffedbeds staffed openbeds available bedsavailable availablebeds"),
    "closed": words("closedbeds closed bedsclosed"),
    "reason": words("reason comment note notes why"),
}
WARD_WORDS = words("ward wardcode wardname wardrequested requestedward location unit wardaskedfor")
DAY_WORDS = words("date day eventdate dateofevent")
CLOCK_WORDS = words("clock timeofday hour")
REFUSAL_HEADINGS: dict[str, tuple[str, ...]] = {
    "ward": WARD_WORDS,
    "time": (
        *words("time datetime when refusedat requestedat asked requested refusaltime requesttime timestamp"),
        *CLOCK_WORDS,
    ),
    "date": (*DAY_WORDS, *words("refusaldate daterefused requestdate dateofrefusal refused")),
    "reason": words("reason why cause refusalreason reasoncode reasonforrefusal"),
    "outcome": words("outcome result whathappened destination status"),
}
REQUEST_HEADINGS: dict[str, tuple[str, ...]] = {
    "ward": WARD_WORDS,
    "time": (
        *words("requestedat requested asked time requesttime decisiontoadmit dta bedrequested requestedtime"),
        *CLOCK_WORDS,
    ),
    "date": (*DAY_WORDS, *words("requestdate requesteddate daterequested")),
    "placed": words("placedat placed given bedgiven allocated admittedat placedtime arrived"),
    "wait_hours": words("waithours wait waitinhours hourswaited waithrs waitedhours"),
    "wait_minutes": words("waitminutes waitmins waitmin waitinminutes minuteswaited minswaited"),
    "outcome": words("outcome result"),
}
CANCELLATION_HEADINGS: dict[str, tuple[str, ...]] = {
    "ward": WARD_WORDS,
    "time": (*words("plannedtime operationtime tcitime time datetime"), *CLOCK_WORDS),
    "date": (
        *words("planneddate planned operationdate tcidate admissiondate cancelledfor bookeddate tci"),
        *DAY_WORDS,
    ),
    "reason": words("reason cancellationreason why cause cancelreason reasonforcancellation reasoncode"),
    "outcome": words("cancelled canceled cancelledyn iscancelled cancelledflag cancelflag status outcome result"),
}
CENSUS_HEADINGS: dict[str, tuple[str, ...]] = {
    "date": words("date day censusdate datetime snapshot snapshottime when"),
    "time": words("time censustime clock hour"),
    "ward": WARD_WORDS,
    "available": words("bedsavailable available beds availablebeds openbeds staffedbeds bedsopen staffed"),
    "occupied": words("bedsoccupied occupied occupiedbeds patients census inpatients bedsinuse inuse"),
    "closed": words("bedsclosed closed closedbeds"),
}
RETURN_HEADINGS: dict[str, tuple[str, ...]] = {
    "year": words("year calendaryear"),
    "month": words("month period date periodend yearmonth monthending monthend quarter quarterend quarterending"),
    "ward": (*WARD_WORDS, *words("specialty specialtygroup site sector group")),
    "available": words("availablebeddays beddaysavailable available staffedbeddays"),
    "occupied": words("occupiedbeddays obd beddaysoccupied occupied beddays"),
    "available_beds": words("availablebeds bedsavailable availablebed staffedbeds averageavailablebeds"),
    "occupied_beds": words("occupiedbeds bedsoccupied bedsinuse averageoccupiedbeds averagebedsoccupied"),
    "discharges": words("discharges discharged dischargesanddeaths dischargesincldeaths separations admissions spells"),
}
READY_HEADINGS: dict[str, tuple[str, ...]] = {
    "spell_key": STAY_HEADINGS["spell_key"],
    "patient_key": STAY_HEADINGS["patient_key"],
    "date": words(
        "date ready readydate drd mffd nctr dischargereadydate readyfordischarge medicallyfit datemedicallyready readyat "
        "dischargeready mffddate nctrdate medicallyfitdate fitdate dateready readyon dateoptimised"
    ),
    "time": words("time readytime clock hour"),
}
HEADINGS_OF: Mapping[str, Mapping[str, tuple[str, ...]]] = {  # kind of file -> its headings
    "ward stays": STAY_HEADINGS,
    "staffed beds": CAPACITY_HEADINGS,
    "refusals": REFUSAL_HEADINGS,
    "bed requests": REQUEST_HEADINGS,
    "cancellations": CANCELLATION_HEADINGS,
    "census": CENSUS_HEADINGS,
    "monthly return": RETURN_HEADINGS,
    "ready dates": READY_HEADINGS,
}

# Kind of file -> what it is called, and the columns it can't be without: one of each row. The more telling kinds come first.
NEEDED: Mapping[str, tuple[str, tuple[tuple[str, ...], ...]]] = {
    "monthly return": ("a monthly return", (("month",), ("ward",), ("occupied", "occupied_beds"), ("discharges",))),
    "census": ("a census", (("date", "time"), ("ward",), ("occupied",))),
    "staffed beds": ("a file of staffed beds", (("ward",), ("staffed", "funded"))),
    "ward stays": (
        "a file of ward stays",
        (("ward",), ("start", "start_date", "admitted"), ("end", "end_date", "discharged")),
    ),
    "bed requests": ("a list of bed requests", (("ward",), ("time", "date"))),
    "ready dates": ("a file of ready dates", (("spell_key", "patient_key"), ("date", "time"))),
    "refusals": ("a list of patients not given a bed", (("ward",), ("time", "date"))),
    "cancellations": ("a list of cancelled bookings", (("ward",), ("date", "time"))),
}
# What else shows that a file is of a kind, where what it can't be without is common: one of these.
SHOWN_BY: Mapping[str, tuple[str, ...]] = {
    "bed requests": ("placed", "wait_hours", "wait_minutes"),
    "refusals": ("reason",),
    "cancellations": ("reason",),
}


def lacking(kind: str, matched: Iterable[str]) -> tuple[tuple[str, ...], ...]:
    """Which columns does a file of this kind still need? One of each row would do."""
    found = set(matched)
    return tuple(either for either in NEEDED[kind][1] if not found & set(either))


def mistaken_for(kind: str, headings: Collection[str]) -> str | None:
    """Which other kind of file are these the headings of, where they don't do for this one?

    Checked by: tests/data/files/test_preview.py
    """
    if not lacking(kind, match_headings(headings, HEADINGS_OF[kind])):
        return None
    for other in NEEDED:
        found = match_headings(headings, HEADINGS_OF[other])
        if not lacking(other, found) and (other not in SHOWN_BY or set(SHOWN_BY[other]) & set(found)):
            return other
    return None
