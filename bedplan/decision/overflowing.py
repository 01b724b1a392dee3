"""Sharing some beds: overflow from one ward to another, a shared overflow bay, beds held back for emergencies.

Each month is taken as steady at its own mean load and the months are weighed by the patients who come in them, so
weekday and hour rhythms, clusters and drift are left out; before and after are read the same way.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from bedplan.decision.changing_beds import arrivals_by_month
from bedplan.decision.comparing import DAYS_PER_YEAR, Refused
from bedplan.decision.sharing import named_once
from bedplan.errors import ImpossibleFigure
from bedplan.models import erlang_b, offered_load_by_hour
from bedplan.models.rhythm.year import (
    MONTHS,
    booked_load_in_week,
    month_of_hour,
    unbooked_by_hour,
    unbooked_load_by_hour,
)
from bedplan.models.sharing.overflow import overflow_pair, shared_overflow
from bedplan.models.sharing.reservation import beds_held_back

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable

    from numpy.typing import NDArray

    from bedplan.decision.ward import Ward
    from bedplan.models import Demand

    Array = NDArray[np.float64]

# beyond this many states a chain that tells two kinds of stay apart takes too long to solve for twelve months
_MOST_STATES_A_MONTH = 5_000
STEADY_MONTHS_NOTE = (
    "Each month is taken as steady: weekdays, hours, clusters, drift and closed beds are left out, and with any of them "
    "more patients usually find no bed than this says, before and after alike."
)
STAYS_ALIKE_NOTE = (
    "These wards are too large to tell their two kinds of stay apart, so both stay alike here: where those who overflow "
    "stay the shorter time, up to a quarter more of them find no bed than this says; where they stay the longer time, "
    "up to a twentieth more of the host ward's own."
)
BAY_STAYS_NOTE = (
    "Shared overflow beds take all stays as alike. Where one ward's mean stay is twice another's, up to 1 in 20 more of "
    "its patients with the shorter stays find no bed than this says, where it is five times another's 1 in 10; of all "
    "patients together up to 1 in 80 and 1 in 25 more."
)


@dataclass(frozen=True, slots=True, eq=False)
class OverflowEffect:
    """What overflow from ``home`` into ``host`` does to both wards' patients.

    ``outliers``: home patients in the host's beds, on average; × 365 are outlier bed-days a year.
    """

    home: Ward
    host: Ward
    home_patients: Refused
    host_patients: Refused
    outliers: float
    notes: tuple[str, ...]


def overflow_effect(home: Ward, host: Ward) -> OverflowEffect:
    """What happens to both wards' patients if the home ward, when full, sends its patients to the host ward?

    Both sides are shown: the home's patients gain, the host's lose. Exact within steady months for exponential stays.
    Without overflow patients of a full ward are counted as finding no bed, whatever they do then.

    Raises:
        ImpossibleFigure: twice the same ward, or wards too large to be solved together (about 140 beds each).

    Source: balance of a Markov chain; the check on it is Wilkinson 1956.
    Checked by: tests/decision/test_overflowing.py
    """
    named_once((home, host))
    stays = (_held_days(home.demand), _held_days(host.demand))
    states = (home.beds + 1) * (host.beds + 1) * (host.beds + 2) / 2
    is_alike = math.isclose(*stays, rel_tol=0.01)
    told_apart = stays if states <= _MOST_STATES_A_MONTH and not is_alike else (1.0, 1.0)
    loads = np.stack([_load_by_month(offered_load_by_hour(ward.demand)) for ward in (home, host)], axis=1)
    months = _each_month(loads, lambda both: overflow_pair(tuple(both), (home.beds, host.beds), told_apart))
    at_home, at_host = arrivals_by_month(home.demand), arrivals_by_month(host.demand)
    return OverflowEffect(
        home=home,
        host=host,
        home_patients=Refused(
            _patients(home.demand),
            float(at_home @ [month.sent for month in months]),
            float(at_home @ [month.lost for month in months]),
        ),
        host_patients=Refused(
            _patients(host.demand),
            float(at_host @ erlang_b(loads[:, 1], host.beds)),
            float(at_host @ [month.host_lost for month in months]),
        ),
        outliers=float(np.bincount(month_of_hour) / month_of_hour.size @ [month.outliers for month in months]),
        notes=(STEADY_MONTHS_NOTE,) if is_alike or told_apart == stays else (STEADY_MONTHS_NOTE, STAYS_ALIKE_NOTE),
    )


@dataclass(frozen=True, slots=True, eq=False)
class BayEffect:
    """What a bay of shared overflow beds does for the patients of each of its wards, and of all together."""

    wards: tuple[Ward, ...]
    bay_beds: int
    by_ward: tuple[Refused, ...]
    notes: tuple[str, ...]

    @property
    def patients(self) -> Refused:
        """All wards' patients together."""
        return Refused.together(self.by_ward)


def overflow_bay_effect(wards: Iterable[Ward], bay_beds: int) -> BayEffect:
    """How many patients of each ward find no bed, if those who find their own ward full share a bay of more beds?

    Within steady months, for exponential stays that are alike; a note says how far unlike stays may be off.

    Raises:
        ImpossibleFigure: no ward, two of one name, beds not whole or below 0.

    Source: Kuczura 1973, Bell System Technical Journal 52; for hospital beds Litvak et al. 2008, European Journal of
        Operational Research 185.
    Checked by: tests/decision/test_overflowing.py
    """
    wards = named_once(wards)
    beds = [ward.beds for ward in wards]
    loads = np.stack([_load_by_month(offered_load_by_hour(ward.demand)) for ward in wards], axis=1)
    after = np.array(_each_month(loads, lambda month: shared_overflow(month, beds, bay_beds)))
    before = erlang_b(loads, np.array(beds))
    by_ward = tuple(
        Refused(_patients(ward.demand), float(months @ before[:, place]), float(months @ after[:, place]))
        for place, ward in enumerate(wards)
        for months in [arrivals_by_month(ward.demand)]
    )
    stays = [_held_days(ward.demand) for ward in wards if ward.demand.total_arrivals_per_day > 0]
    alike = not stays or math.isclose(min(stays), max(stays), rel_tol=0.01)
    return BayEffect(
        wards, int(bay_beds), by_ward, (STEADY_MONTHS_NOTE,) if alike else (STEADY_MONTHS_NOTE, BAY_STAYS_NOTE)
    )


@dataclass(frozen=True, slots=True, eq=False)
class HoldBackEffect:
    """What holding beds back does to emergencies, who gain, and to booked patients, who lose."""

    ward: Ward
    held_back: int
    emergencies: Refused
    booked: Refused
    notes: tuple[str, ...]


def hold_back_effect(ward: Ward, held_back: int) -> HoldBackEffect:
    """What happens if the last so many free beds are kept for emergencies, and booked patients only get the others?

    Emergencies are the ward's unbooked arrivals. Booked patients are taken as coming independently, not on their
    days, which overstates how much both swing. Exact for that within steady months and exponential stays.

    Raises:
        ImpossibleFigure: a ward without booked patients, beds held back outside 0 and the ward's beds.

    Source: balance of a Markov chain.
    Checked by: tests/decision/test_overflowing.py
    """
    demand = ward.demand
    booked_a_day = demand.total_arrivals_per_day - demand.arrivals_per_day
    if booked_a_day <= 0:
        raise ImpossibleFigure(f"{ward.name} has no booked patients to hold beds back from.")
    booked_load = float(booked_load_in_week(demand).mean())
    stays = (demand.length_of_stay.mean_days + demand.turnaround_hours / 24.0, booked_load / booked_a_day)
    told_apart = stays if (ward.beds + 1) * (ward.beds + 2) / 2 <= _MOST_STATES_A_MONTH else (1.0, 1.0)
    loads = _load_by_month(unbooked_load_by_hour(demand))[:, None]
    arrivals = np.bincount(month_of_hour, weights=unbooked_by_hour(demand), minlength=MONTHS)
    emergency_months = arrivals / max(arrivals.sum(), 1e-300)
    booked_months = np.bincount(month_of_hour) / month_of_hour.size

    def refused(kept: int) -> tuple[float, float]:
        """Return the share of emergencies and of booked patients who find no bed."""
        first, others = np.transpose(
            _each_month(loads, lambda load: beds_held_back((*load, booked_load), ward.beds, kept, told_apart))
        )
        return float(emergency_months @ first), float(booked_months @ others)

    (first_before, booked_before), (first_after, booked_after) = refused(0), refused(held_back)
    return HoldBackEffect(
        ward=ward,
        held_back=int(held_back),
        emergencies=Refused(demand.arrivals_per_day * DAYS_PER_YEAR, first_before, first_after),
        booked=Refused(booked_a_day * DAYS_PER_YEAR, booked_before, booked_after),
        notes=(STEADY_MONTHS_NOTE,),
    )


def _load_by_month(load_by_hour: Array) -> Array:
    """Return the mean beds wanted in each month ``(12,)``, to 9 digits so that equal months are solved once."""
    sums = np.bincount(month_of_hour, weights=np.broadcast_to(load_by_hour, month_of_hour.shape), minlength=MONTHS)
    return np.round(sums / np.bincount(month_of_hour), 9)


def _each_month(loads: Array, solve: Callable[[list[float]], Any]) -> list[Any]:
    """Return the answer to each month's loads, ``(12, wards)``; equal months are solved once."""
    different, month_is = np.unique(loads, axis=0, return_inverse=True)
    found = [solve(month) for month in different.tolist()]
    return [found[place] for place in month_is.ravel()]


def _patients(demand: Demand) -> float:
    return demand.total_arrivals_per_day * DAYS_PER_YEAR


def _held_days(demand: Demand) -> float:
    """Return the days a bed is held for one patient, turnaround included; 1 when nobody comes."""
    load = float(offered_load_by_hour(demand).mean())
    return load / demand.total_arrivals_per_day if load > 0 else 1.0
