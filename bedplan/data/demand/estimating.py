"""From a ward's stays to its demand: arrivals, stay and rhythm, each with what it rests on."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.ahead.arrivals import Arrivals, arrivals_asked, arrivals_of, booked_list, is_booked
from bedplan.data.ahead.drift import USUAL
from bedplan.data.ahead.readings import take_readings
from bedplan.data.ahead.stay_bands import fit_stay_bands, growth_of_bed_days
from bedplan.data.demand.asked import by_hour
from bedplan.data.demand.demand_notes import demand_notes
from bedplan.data.wards.silence import without_silences
from bedplan.data.wards.stays import fitted_stay, stay_curve, stays_in_window
from bedplan.models import Demand, LengthOfStay

if TYPE_CHECKING:
    import pandas as pd
    from numpy.typing import NDArray

    from bedplan.data.ahead.rhythm import Swing
    from bedplan.data.beside.capacity import Capacity
    from bedplan.data.cleaning.records import Records
    from bedplan.data.demand.hidden_demand import HiddenDemand
    from bedplan.data.wards.survival import StayCurve
    from bedplan.models import BookedList

FEWEST_BOOKED = 100


@dataclass(frozen=True, slots=True)
class Uncertainty:
    """How far the main figures may be off by chance: 95 % intervals (low, high), and standard errors as shares."""

    arrivals_per_day: tuple[float, float]
    mean_stay_days: tuple[float, float]
    beds_wanted: tuple[float, float]
    arrivals_error: float
    stay_error: float


@dataclass(frozen=True, slots=True)
class DemandEstimate:
    """What a ward is asked for, as its records show it, with the facts behind it.

    ``admissions_per_year`` are recorded admissions; ``demand`` holds arrivals. ``growth_per_year`` (of admissions) and
    ``bed_days_growth_per_year`` (of bed-days, by how long patients have been in: what beds follow) are shares with
    their standard errors, not yet applied to ``demand``; 0 where the file is too short. ``booked_share`` is the share of admissions that were booked.
    ``beds_today`` is None without a capacity file.
    """

    ward: str
    demand: Demand
    uncertainty: Uncertainty
    method: str
    notes: tuple[str, ...]
    stays: int
    unfinished: int
    window: tuple[pd.Timestamp, pd.Timestamp]
    counted_from: pd.Timestamp
    admissions_per_year: float
    growth_per_year: float
    growth_error: float
    bed_days_growth_per_year: float
    bed_days_growth_error: float
    stay_curve: StayCurve
    measured_stay: LengthOfStay
    swing: Swing
    booked_share: float = 0.0
    beds_today: int | None = None

    @property
    def arrivals_per_day(self) -> float:
        """How many patients come a day, booked ones included?"""
        return self.demand.total_arrivals_per_day

    @property
    def arrivals_interval(self) -> tuple[float, float]:
        """Between which figures do arrivals a day lie? 95 %."""
        return self.uncertainty.arrivals_per_day

    @property
    def mean_stay_days(self) -> float:
        """How long do they stay on average?"""
        return self.stay_curve.mean_days

    @property
    def mean_stay_interval(self) -> tuple[float, float]:
        """Between which figures does the mean stay lie? 95 %."""
        return self.uncertainty.mean_stay_days

    @property
    def variation(self) -> float:
        """How spread out are stays? SD ÷ mean."""
        return self.demand.length_of_stay.variation

    @property
    def month_factors(self) -> tuple[float, ...]:
        """How busy is each month against the average one? January first."""
        return self.demand.month_factors

    @property
    def weekday_factors(self) -> tuple[float, ...]:
        """How busy is each weekday against the average one? Monday first."""
        return self.demand.weekday_factors

    @property
    def hour_factors(self) -> tuple[float, ...]:
        """How busy is each hour of the day against the average one? From midnight."""
        return self.demand.hour_factors

    @property
    def beds_wanted(self) -> float:
        """How many beds do patients want on average?"""
        return self.demand.offered_load


def estimate_demand(
    records: Records,
    ward: str,
    *,
    capacity: Capacity | None = None,
    hidden: HiddenDemand | None = None,
    booked_apart: bool = False,
) -> DemandEstimate:
    """What is this ward asked for: how many patients a day, for how long, in which rhythm?

    Arrivals are the admissions of the last 12 months (of all days, where the file covers less than two years), freed
    from season where the period is not a whole year; with ``hidden`` demand they are those who asked for a bed, hour by
    hour, so that seasons, weekdays and growth are theirs, not those of the beds. Stays come from every stay of the file by the product limit.
    ``booked_apart`` puts booked patients into a :class:`~bedplan.models.BookedList` instead of among the arrivals.

    Raises:
        UnreadableRecords: the ward has no stays in the file's window, or none that ended.

    Checked by: tests/data/demand/test_estimating.py
    """
    whole, records = records, without_silences(records, ward)
    stays, beds = stays_in_window(records, ward), capacity and capacity.linked_to(records)
    booked = is_booked(stays)
    every = arrivals_of(records, stays["start"])
    curve = stay_curve(records, stays, ward)
    lists = _booked_lists(records, stays, booked, ward) if booked_apart else ()
    wanted = every if hidden is None else arrivals_asked(every, hidden.asked.by_hour, hidden.asked.by_chance)
    arrivals = _unbooked(records, stays["start"], booked, hidden) if lists else wanted
    own_curve = stay_curve(records, stays[~booked], ward) if lists and not booked.all() else curve
    stay = fitted_stay(own_curve)
    if hidden is not None and hidden.mean_stay_days > 0:
        stay = LengthOfStay(hidden.mean_stay_days, stay.variation, stay.shape)
    demand = _demand(records, arrivals, stay, lists).with_changes(rate_variation=_drift(arrivals, wanted))
    growth, bed_days = _growth(whole, ward, wanted)
    return DemandEstimate(
        ward=ward,
        demand=demand,
        uncertainty=_uncertainty(wanted, curve, demand.offered_load, hidden),
        method=_method(every, demand, hidden),
        notes=demand_notes(whole, wanted, curve, stays, hidden),
        stays=len(stays),
        unfinished=int(stays["end"].isna().sum()),
        window=records.window,
        counted_from=every.calendar[every.counted][0],
        admissions_per_year=every.per_year,
        growth_per_year=growth[0],
        growth_error=growth[1],
        bed_days_growth_per_year=bed_days[0],
        bed_days_growth_error=bed_days[1],
        stay_curve=curve,
        measured_stay=LengthOfStay.measured(*curve.points()),
        swing=arrivals.swing,
        booked_share=float(booked.mean()),
        beds_today=beds.beds_today(ward) if beds and ward in beds.wards else None,
    )


def _growth(records: Records, ward: str, arrivals: Arrivals) -> tuple[tuple[float, float], tuple[float, float]]:
    """Return by which share admissions, then bed-days, grow a year, each with its standard error; 0 if too short."""
    growth, error = arrivals.growth
    if error == 0:
        return (0.0, 0.0), (0.0, 0.0)
    readings = take_readings(records, ward)
    return (growth, error), growth_of_bed_days(fit_stay_bands(readings, readings.days, growth), error)


def _booked_lists(
    records: Records, stays: pd.DataFrame, booked: NDArray[np.bool_], ward: str
) -> tuple[BookedList, ...]:
    """Return the weekly list that booked patients come from, where there are enough of them and they come by one."""
    if int(booked.sum()) < FEWEST_BOOKED:
        return ()
    stay = fitted_stay(stay_curve(records, stays[booked], ward))
    found = booked_list(arrivals_of(records, stays["start"][booked]), stay)
    return () if found is None else (found,)


def _unbooked(records: Records, start: pd.Series, booked: NDArray[np.bool_], hidden: HiddenDemand | None) -> Arrivals:
    """Return who came, or wanted to, without being booked."""
    arrivals = arrivals_of(records, start[~booked])
    if hidden is None:
        return arrivals
    listed = by_hour(records, start[booked])[-hidden.asked.by_hour.size :]
    return arrivals_asked(arrivals, np.maximum(hidden.asked.by_hour - listed, 0.0), hidden.asked.by_chance)


def _demand(records: Records, arrivals: Arrivals, stay: LengthOfStay, lists: tuple[BookedList, ...]) -> Demand:
    """Put arrivals, stay and rhythm together."""
    flat, rhythm = not arrivals.enough, arrivals.rhythm
    return Demand(
        arrivals.per_day,
        stay,
        month_factors=(1.0,) * 12 if flat else rhythm.month_factors,
        weekday_factors=(1.0,) * 7 if flat else rhythm.weekday_factors,
        hour_factors=(1.0,) * 24 if flat or not records.has_times else arrivals.hour_factors,
        clustering=arrivals.swing.clear_clustering,
        booked=lists,
    )


def _drift(*best_first: Arrivals) -> float:
    """Return the drift of the first of these that can tell it, or what is usual: none at all would ask for too few beds."""
    told = (arrivals.swing.rate_variation for arrivals in best_first)
    return next((drift for drift in told if drift is not None), USUAL)


def _uncertainty(arrivals: Arrivals, curve: StayCurve, beds: float, hidden: HiddenDemand | None) -> Uncertainty:
    """Return 95 % intervals; with hidden demand they reach from the lowest method's to the highest one's.

    Where arrivals changed lately, they reach to the latest level.
    """
    per_day, (low, high) = arrivals.per_day, arrivals.interval()
    arrivals_error = max(arrivals.worth, 1.0) ** -0.5
    if arrivals.lately is not None:
        low, high = min(low, arrivals.lately[0]), max(high, arrivals.lately[1])
        arrivals_error = max(arrivals_error, math.log(high / per_day) / 1.96, math.log(per_day / low) / 1.96)
    if hidden is not None and hidden.demand_per_day > 0:
        # Its bounds are those of 90 %, for the whole file; taken here to 95 %, and to the level of the latest year.
        bounds = [per_day * (bound / hidden.demand_per_day) ** (1.96 / 1.645) for bound in hidden.spread]
        low, high = min(low, bounds[0]), max(high, bounds[1])
        # A range that reaches far up must not look narrow because it hardly reaches down.
        width = max(math.log(max(high / max(low, 1e-9), 1.0)) / 2, math.log(max(bounds[1] / per_day, 1.0)))
        arrivals_error = max(arrivals_error, width / 1.96)
    spread = curve.mean_spread
    stay_error = math.log(spread) / 1.96
    both = math.exp(1.96 * math.hypot(arrivals_error, stay_error))
    return Uncertainty(
        arrivals_per_day=(low, high),
        mean_stay_days=(curve.mean_days / spread, curve.mean_days * spread),
        beds_wanted=(beds / both, beds * both),
        arrivals_error=arrivals_error,
        stay_error=stay_error,
    )


def _method(arrivals: Arrivals, demand: Demand, hidden: HiddenDemand | None) -> str:
    """Say in a few sentences how the figures were found."""
    raised = "" if hidden is None else f", changed to what was asked for by {hidden.method}"
    return (
        f"Arrivals: recorded admissions of {arrivals.period}{raised}. Mean and spread of stay: product limit over "
        "finished stays, unfinished ones counted for as long as they were seen; "
        f"shape: {demand.length_of_stay.shape}, the closer of two with that mean and spread. "
        "Months, weekdays and growth: one Poisson regression, drawn towards no effect by what chance explains."
    )
