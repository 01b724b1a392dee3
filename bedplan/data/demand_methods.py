"""Four ways from what a ward could do to what was asked of it, each with its range or the reason why it can't tell."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import optimize

from bedplan.data.arrivals import is_booked
from bedplan.data.occupancy import bed_days, open_beds, present
from bedplan.data.opentime import OpenTime, open_time
from bedplan.data.specialty import HomeWards, find_home_wards
from bedplan.data.stays import stay_curve, stays_in_window
from bedplan.errors import ImpossibleFigure
from bedplan.models import erlang_b

if TYPE_CHECKING:
    import pandas as pd
    from numpy.typing import ArrayLike

    from bedplan.data.capacity import Capacity
    from bedplan.data.records import Records

LOG, HOME, RATE, LOAD = (
    "the log of refusals",
    "the patients' own specialty",
    "the rate while a bed was free",
    "the carried load",
)
LEAST_SLOPE = 0.15  # of carried load against demand: below, a full ward hides too much
LEAST_SHARE_AWAY = 0.01  # of a ward's beds: below, patients on other wards don't matter
MOSTLY_BOOKED = 0.5


@dataclass(frozen=True, slots=True)
class DemandFigure:
    """One method's answer: arrivals a day with a 95 % range, or None and in ``sentence`` the reason why it can't tell."""

    method: str
    arrivals_per_day: float | None
    low: float
    high: float
    sentence: str


@dataclass(frozen=True)
class WardEvidence:
    """What the records show of one ward: its stays, those of its own patients, and the time it was full.

    ``recorded_beds`` in use on average; ``guest_beds`` of them by other specialties' patients; ``away_beds`` that its
    own patients use elsewhere. ``own_arrivals`` counts its own patients once each, wherever they lay.
    """

    records: Records
    ward: str
    stays: pd.DataFrame
    own_on_ward: pd.DataFrame
    admitted: int
    own_arrivals: int
    recorded_beds: float
    guest_beds: float
    away_beds: float
    knows_specialty: bool
    mean_stay_days: float
    booked_share: float
    capacity: Capacity | None
    opening: OpenTime | None

    @property
    def matters(self) -> bool:
        """Do enough patients lie on the wrong ward to matter?"""
        return self.guest_beds + self.away_beds >= LEAST_SHARE_AWAY * max(self.recorded_beds, 1e-9)


def gather(records: Records, ward: str, capacity: Capacity | None) -> WardEvidence:
    """What do the records show of this ward?

    Raises:
        UnreadableRecords: no stays on it, or none that ended.
    """
    stays = stays_in_window(records, ward)
    homes = find_home_wards(records)
    own, own_on_ward = _own(homes, ward, stays)
    beds_of = [float(bed_days(records, some).sum()) / records.days for some in (stays, own_on_ward, own)]
    known = capacity if capacity is not None and ward in capacity.wards else None
    return WardEvidence(
        records=records,
        ward=ward,
        stays=stays,
        own_on_ward=own_on_ward,
        admitted=_in_window(records, stays),
        own_arrivals=_in_window(records, _first_stays(own) if len(own) != len(stays) else stays),
        recorded_beds=beds_of[0],
        guest_beds=beds_of[0] - beds_of[1],
        away_beds=beds_of[2] - beds_of[1],
        knows_specialty=homes is not None,
        mean_stay_days=_mean_stay(records, own_on_ward, stays, ward),
        booked_share=float(is_booked(stays).mean()),
        capacity=known,
        opening=None if known is None else open_time(records, ward, stays, known, own_on_ward),
    )


def _own(homes: HomeWards | None, ward: str, stays: pd.DataFrame) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Return the stays of the ward's own patients, everywhere and on the ward; all on it where there is no telling."""
    if homes is None or ward in homes.through or ward not in homes.home.values():
        return stays, stays
    own = homes.own_patients(ward)
    return own, own[own["ward"] == ward]


def _mean_stay(records: Records, own: pd.DataFrame, stays: pd.DataFrame, ward: str) -> float:
    """Return the mean stay of the ward's own patients on it, or of all where none of its own has left."""
    return stay_curve(records, own if own["end"].notna().any() else stays, ward).mean_days


def _first_stays(own: pd.DataFrame) -> pd.DataFrame:
    """Return the first of each patient's stays, in each stay in hospital where the file tells them apart."""
    keys = [key for key in ("patient_key", "spell_key") if key in own]
    return own.sort_values("start", kind="stable").drop_duplicates(keys)


def _in_window(records: Records, stays: pd.DataFrame) -> int:
    """Return how many of these stays started within the window."""
    return int(((stays["start"] >= records.window[0]) & (stays["start"] < records.window[1])).sum())


def cannot(method: str, sentence: str) -> DemandFigure:
    """Return the answer of a method that can't tell, and why."""
    return DemandFigure(method, None, 0.0, 0.0, sentence)


def logged_demand(evidence: WardEvidence, refused: int | None, recorded_share: float) -> DemandFigure:
    """How many came, by those admitted and the refusals written down? Divided by the share that gets written down."""
    if refused is None:
        return cannot(LOG, "No log of refusals was given.")
    if refused == 0:
        return cannot(LOG, f"No refusal is written down for {evidence.ward}: none happened, or none was noted.")
    came, days = evidence.own_arrivals, evidence.records.days
    per_day = (came + refused / recorded_share) / days
    error = 1.96 * math.sqrt(came + refused / recorded_share**2) / days
    share = "all of them" if recorded_share == 1 else f"{recorded_share:.0%} of them"
    told = f"{came:,} admitted and {refused:,} refusals written down ({share}): {per_day:.2f} a day."
    return DemandFigure(LOG, per_day, per_day - error, per_day + error, told)


def home_demand(evidence: WardEvidence) -> DemandFigure:
    """How many came, by counting the ward's own patients wherever they lay, and leaving out others who lay on it?"""
    if not evidence.knows_specialty:
        return cannot(HOME, "The file has no column for the patients' specialty.")
    if not evidence.matters:
        return cannot(HOME, "Hardly any patient lies on another specialty's ward.")
    days, ward, here = evidence.records.days, evidence.ward, evidence.recorded_beds - evidence.guest_beds
    per_day, error = evidence.own_arrivals / days, 1.96 * math.sqrt(max(evidence.own_arrivals, 1)) / days
    told = (
        f"{ward}'s own patients use {here + evidence.away_beds:.1f} beds on average, {here:.1f} of them on {ward}; "
        f"{per_day:.2f} come a day."
    )
    return DemandFigure(HOME, per_day, per_day - error, per_day + error, told)


def full_ward_demand(evidence: WardEvidence) -> list[DemandFigure]:
    """How many came, by the time with a free bed and by the beds in use? Refused where patients queue or are booked."""
    opening, ward = evidence.opening, evidence.ward
    refusal = ""
    if opening is None:
        refusal = "Needs the ward's beds by date: bring a capacity file."
    elif evidence.booked_share > MOSTLY_BOOKED:
        refusal = f"{evidence.booked_share:.0%} of {ward}'s patients are booked: they come by list, not by chance."
    elif opening.patients_queue:
        refusal = (
            f"Patients queue for {ward}: {opening.taken_soon:,} came within two hours of a bed coming free, where "
            f"{opening.expected_soon:,.0f} would by chance. Each freed bed is taken at once, so this method would "
            "count the queue as arrivals."
        )
    if refusal or opening is None:
        return [cannot(method, refusal) for method in (RATE, LOAD)]
    return [_open_rate(opening), _carried(evidence)]


def _open_rate(opening: OpenTime) -> DemandFigure:
    """Return the rate while a bed was free."""
    if not opening.can_tell:
        return cannot(RATE, f"In some hours of the week a bed was free only {opening.least_open:.0%} of the time.")
    share, error = 1 - opening.full_share, 1.96 * opening.error
    told = f"A bed was free {share:.0%} of the time; {opening.per_day:.2f} a day came while there was one."
    return DemandFigure(RATE, opening.per_day, opening.per_day - error, opening.per_day + error, told)


def _carried(evidence: WardEvidence) -> DemandFigure:
    """Return the demand behind the beds in use, less the beds of other wards' patients."""
    beds = open_beds(evidence.records, evidence.ward, evidence.capacity, 24)
    in_use = float(present(evidence.records, evidence.stays, 3_600).mean())
    # The mean of a count that forgets itself within about a stay, over so many days.
    error = 1.96 * math.sqrt(2.0 * in_use * max(evidence.mean_stay_days, 0.1) / evidence.records.days)
    too_full = cannot(LOAD, f"{in_use:.1f} beds in use of {beds.mean():.1f} on average: too full to tell.")
    try:
        load, less, more = (
            demand_behind_carried_load(max(one, 0.0), beds) for one in (in_use, in_use - error, in_use + error)
        )
    except ImpossibleFigure:
        return too_full
    if 2 * error < LEAST_SLOPE * (more - less):
        return too_full
    told = f"{in_use:.1f} beds in use of {beds.mean():.1f} on average: {load:.1f} would be, if nobody were turned away."
    rates = [(one - evidence.guest_beds) / max(evidence.mean_stay_days, 1e-9) for one in (load, less, more)]
    return DemandFigure(LOAD, rates[0], rates[1], rates[2], told)


def demand_behind_carried_load(carried_beds: float, beds: ArrayLike) -> float:
    """How many beds are wanted on average where so many are in use on average, and patients leave when it is full?

    Solves carried = a(1 − B(beds, a)) for a; ``beds`` (n,) may differ from time to time, each time counting alike.

    Raises:
        ImpossibleFigure: more carried than there are beds, or so near that the demand can't be told.

    Source: inverse of Erlang 1917.
    Checked by: tests/data/test_hidden_demand.py
    """
    counts, times = np.unique(np.asarray(beds), return_counts=True)
    shares, most = times / times.sum(), float((counts * times).sum() / times.sum())

    def carried(load: float) -> float:
        return float((shares * load * (1.0 - erlang_b(load, counts))).sum())

    if carried_beds <= 0:
        return 0.0
    top = max(most, 1.0)
    while top < 1_000.0 * max(most, 1.0) and carried(top) < carried_beds:
        top *= 2.0
    if carried(top) < carried_beds:
        raise ImpossibleFigure(f"{carried_beds:.1f} beds in use of {most:.1f} are too near full to tell the demand.")
    return float(optimize.brentq(lambda load: carried(load) - carried_beds, 0.0, top, xtol=1e-9))
