"""From a ward's stays to its demand: arrivals, stay and rhythm, each with what it rests on."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
from scipy import special

from bedplan.data.rhythm import Rhythm, Swing, fit_rhythm, measure_swing, shrink_factors
from bedplan.data.survival import StayCurve, product_limit
from bedplan.errors import ImpossibleFigure, UnreadableRecords
from bedplan.models import Demand, LengthOfStay

if TYPE_CHECKING:
    from bedplan.data.capacity import Capacity
    from bedplan.data.records import Records

FEWEST_STAYS, FEWEST_DAYS = 200, 90
YEAR_DAYS = 365.0
ADMISSIONS_NOTE = (
    "Admissions are not arrivals: the records hold patients who got a bed here. Patients who were turned away, waited "
    "elsewhere or were cancelled are missing, so true demand may be higher."
)


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

    ``admissions_per_year`` are recorded admissions; ``demand`` holds arrivals. ``growth_per_year`` is a share with its
    standard error, not yet applied to ``demand``. ``beds_today`` is None without a capacity file.
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
    stay_curve: StayCurve
    measured_stay: LengthOfStay
    swing: Swing
    beds_today: int | None = None

    @property
    def arrivals_per_day(self) -> float:
        """How many patients come a day?"""
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


def estimate_demand(records: Records, ward: str, *, capacity: Capacity | None = None) -> DemandEstimate:
    """What is this ward asked for: how many patients a day, for how long, in which rhythm?

    Arrivals are the admissions of the last 12 months (of all days, where the file covers less than two years), freed
    from season where the period is not a whole year. Stays come from every stay of the file by the product limit.

    Raises:
        UnreadableRecords: the ward has no stays in the file's window, or none that ended.

    Checked by: tests/data/test_estimating.py
    """
    stays = _in_window(records, ward)
    curve = _stay_curve(records, stays, ward)
    starts = stays["start"].to_numpy().astype("datetime64[s]").astype(np.int64)
    first, last = (int(moment.timestamp()) for moment in records.window)
    came = starts[(starts >= first) & (starts < last)]
    days = (last - first) // 86_400
    counts = np.bincount((came - first) // 86_400, minlength=days).astype(float)[:days]
    calendar = pd.date_range(records.window[0], periods=days, freq="D")
    rhythm = fit_rhythm(counts, calendar.month.to_numpy() - 1, calendar.day_of_week.to_numpy())
    enough = came.size >= FEWEST_STAYS and days >= FEWEST_DAYS
    swing = measure_swing(counts, rhythm)
    counted = days if days < 2 * YEAR_DAYS else int(YEAR_DAYS)
    per_day, recent = _level(counts, rhythm, calendar, counted, seasonal=enough)
    stay = _fitted_stay(curve)
    hours = np.bincount(came % 86_400 // 3600, minlength=24).astype(float)
    demand = Demand(
        per_day,
        stay,
        month_factors=rhythm.month_factors if enough else (1.0,) * 12,
        weekday_factors=rhythm.weekday_factors if enough else (1.0,) * 7,
        hour_factors=_hour_factors(hours) if enough and records.has_times else (1.0,) * 24,
        clustering=_clustering(swing),
        rate_variation=min(swing.rate_variation or 0.0, 2.0),
    )
    unfinished = int(stays["end"].isna().sum())
    return DemandEstimate(
        ward=ward,
        demand=demand,
        uncertainty=_uncertainty(per_day, recent, swing, curve),
        method=_method(counted, days, curve, stay),
        notes=tuple(_notes(records, came.size, days, rhythm, curve, unfinished)),
        stays=len(stays),
        unfinished=unfinished,
        window=records.window,
        counted_from=records.window[1] - pd.Timedelta(days=counted),
        admissions_per_year=recent / counted * YEAR_DAYS,
        growth_per_year=rhythm.growth_per_year,
        growth_error=rhythm.growth_error,
        stay_curve=curve,
        measured_stay=LengthOfStay.measured(*curve.points()),
        swing=swing,
        beds_today=capacity.beds_today(ward) if capacity and ward in capacity.wards else None,
    )


def _in_window(records: Records, ward: str) -> pd.DataFrame:
    """Return the ward's stays that touch the window."""
    stays = records.of_ward(ward)
    first, last = records.window
    touching = stays[(stays["start"] < last) & ~(stays["end"] <= first)]
    if touching.empty:
        raise UnreadableRecords([f"Ward “{ward}” has no stay between {first:%d %B %Y} and {last:%d %B %Y}."])
    return touching


def _stay_curve(records: Records, stays: pd.DataFrame, ward: str) -> StayCurve:
    """Estimate the stay curve; patients in at the window's start are watched from then on only."""
    day = np.timedelta64(86_400, "s")
    start = stays["start"].to_numpy()
    finished = stays["end"].notna().to_numpy()
    end = np.where(finished, stays["end"].to_numpy(), np.datetime64(records.seen_until, "s"))
    first = np.datetime64(records.window[0], "s")
    entry = np.maximum((first - start) / day, 0.0)
    try:
        return product_limit(np.maximum((end - start) / day, 0.0), finished, entry)
    except ImpossibleFigure as problem:
        raise UnreadableRecords(
            [f"No stay on ward “{ward}” has ended, so how long patients stay can't be told: check the end column."]
        ) from problem


def _level(
    counts: np.ndarray, rhythm: Rhythm, calendar: pd.DatetimeIndex, counted: int, *, seasonal: bool
) -> tuple[float, float]:
    """Return arrivals a day in an average month and week, and the admissions counted for it."""
    recent = float(counts[-counted:].sum())
    if not seasonal:
        return recent / counted, recent
    months = np.asarray(rhythm.month_factors)[calendar.month.to_numpy()[-counted:] - 1]
    weekdays = np.asarray(rhythm.weekday_factors)[calendar.day_of_week.to_numpy()[-counted:]]
    return recent / float((months * weekdays).sum()), recent


def _hour_factors(arrivals: np.ndarray) -> tuple[float, ...]:
    """Return how busy each hour is; hours drawn towards the average by what chance alone explains."""
    level = np.log(np.maximum(arrivals, 0.5))
    return shrink_factors(level[1:] - level[0], arrivals)


def _fitted_stay(curve: StayCurve) -> LengthOfStay:
    """Return the lognormal or gamma stay of the measured mean and spread, whichever runs closer to the curve."""
    mean, variation = max(curve.mean_days, 1e-3), min(curve.variation, 20.0)
    grid = np.linspace(0.0, max(curve.longest_days, mean), 400)
    measured = curve.at(grid)
    choices = [LengthOfStay(mean, variation, shape) for shape in ("lognormal", "gamma")]
    return min(choices, key=lambda stay: float(np.abs(stay.survival(grid) - measured).sum()))


def _clustering(swing: Swing) -> float:
    """Return the clustering where it is clearly above 1; else 1.

    Below 1, a full ward has spaced its admissions out; those who came were no more even than chance.
    """
    clear = swing.clustering - 1.0 > 1.96 * swing.clustering_error
    return min(swing.clustering, 50.0) if clear else 1.0


def _uncertainty(per_day: float, recent: float, swing: Swing, curve: StayCurve) -> Uncertainty:
    """Return 95 % intervals: arrivals by the Poisson interval widened by their swing, stays by Greenwood."""
    worth = recent / max(swing.dispersion, 1.0)  # as many independent arrivals as these are worth
    low = float(special.gammaincinv(worth, 0.025)) / worth if worth > 0 else 0.0
    high = float(special.gammaincinv(worth + 1, 0.975)) / max(worth, 1e-9) if worth > 0 else 1.0
    arrivals_error, stay_error = max(worth, 1.0) ** -0.5, curve.mean_standard_error / max(curve.mean_days, 1e-9)
    spread, both = math.exp(1.96 * stay_error), math.exp(1.96 * math.hypot(arrivals_error, stay_error))
    beds = per_day * curve.mean_days
    return Uncertainty(
        arrivals_per_day=(per_day * low, per_day * high),
        mean_stay_days=(curve.mean_days / spread, curve.mean_days * spread),
        beds_wanted=(beds / both, beds * both),
        arrivals_error=arrivals_error,
        stay_error=stay_error,
    )


def _method(counted: int, days: int, curve: StayCurve, stay: LengthOfStay) -> str:
    """Say in a sentence or two how the figures were found."""
    period = "the last 12 months" if counted < days else f"all {days:,} days of the file"
    return (
        f"Arrivals: recorded admissions of {period}. Mean and spread of stay: product limit over "
        f"{int(curve.left.sum()):,} finished stays, unfinished ones counted for as long as they were seen; "
        f"shape: {stay.shape}, the closer of two with that mean and spread. "
        "Months, weekdays and growth: one Poisson regression, drawn towards no effect by what chance explains."
    )


def _notes(records: Records, came: int, days: int, rhythm: Rhythm, curve: StayCurve, unfinished: int) -> list[str]:
    """Return what does not stop the answer but belongs beside it."""
    notes = [ADMISSIONS_NOTE]
    if came < FEWEST_STAYS or days < FEWEST_DAYS:
        notes.append(
            f"Only {came:,} admissions in {days:,} days: too few to tell months, weekdays or hours apart, "
            "so none is assumed; take the wide intervals seriously."
        )
    elif not rhythm.has_season:
        notes.append(f"The file covers {days:,} days: too few to tell the seasons, so none is assumed.")
    if unfinished:
        notes.append(f"{unfinished:,} patients were still in; their stays are treated as unfinished, not dropped.")
    if curve.open_share > 0:
        notes.append(
            f"The longest stays had not ended; letting them go on as the last ten departures suggest "
            f"adds {curve.tail_days:.2f} days to the mean stay."
        )
    if not records.has_times:
        notes.append("Dates without times: stays are counted in nights and no hour of the day is known.")
    return notes
