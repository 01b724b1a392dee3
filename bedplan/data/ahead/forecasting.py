"""Next year, and up to ten: how many patients will come, how many bed-days they will use, and how far that may be off."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
from scipy import special

from bedplan import wording
from bedplan.data.ahead.chances import at_most, count_at
from bedplan.data.ahead.forecast_notes import outlook_notes, why_method
from bedplan.data.ahead.outlook import DailyCounts, forecast_from, look_ahead, past_origins
from bedplan.data.ahead.readings import take_readings
from bedplan.data.ahead.stay_bands import StayBand, fit_stay_bands, growth_of_bed_days
from bedplan.data.files.dates import DAY_SECONDS
from bedplan.data.wards.silence import silence_notes, without_silences
from bedplan.errors import ImpossibleFigure

if TYPE_CHECKING:
    import datetime as dt

    from numpy.typing import ArrayLike, NDArray

    from bedplan.data.cleaning.records import Records

    Array = NDArray[np.float64]
    Range = tuple[float, float]

YEAR_DAYS = 365
MOST_DAYS = 3_653
LEAST_DAYS, FEWEST_PATIENTS = 56, 50
LEVELS = (0.80, 0.95)
EPOCH = pd.Timestamp("1970-01-01")
ADMISSIONS = (
    "Admissions are foreseen, as the records hold them. Patients who found no bed are not among them; add the demand "
    "that the records hide before planning beds on this."
)


@dataclass(frozen=True, slots=True)
class YearAhead:
    """One year ahead: admissions and bed-days, with the ranges that hold 80 % and 95 %.

    Bed-days are 0 where only counts were given.
    """

    first_day: pd.Timestamp
    admissions: float
    admissions_80: Range
    admissions_95: Range
    bed_days: float = 0.0
    bed_days_80: Range = (0.0, 0.0)
    bed_days_95: Range = (0.0, 0.0)

    @property
    def beds_in_use(self) -> float:
        """How many beds are in use on average in this year?"""
        return self.bed_days / YEAR_DAYS


@dataclass(frozen=True, slots=True, eq=False)
class Forecast:
    """What is expected to come, day by day, and how far it may be off.

    ``expected`` (h,) a day from ``first_day`` on; ``variance_of_rate`` (h,) variance ÷ square of that rate, from how
    wrong past forecasts were; ``swing`` variance ÷ mean of a day's count. ``method`` and ``why``: which method is used
    and how it did. ``errors``: mean miss of weekly totals of past forecasts, by method. ``years``: whole years of 365
    days. ``stay_bands``: how bed-days grow by days already stayed; empty where only counts were given.
    """

    ward: str
    first_day: pd.Timestamp
    expected: Array
    variance_of_rate: Array
    swing: float
    growth_per_year: float
    growth_error: float
    method: str
    why: str
    errors: dict[str, float]
    last_year: float
    years: tuple[YearAhead, ...]
    stay_bands: tuple[StayBand, ...]
    notes: tuple[str, ...]

    @property
    def growth_range(self) -> Range:
        """Between which shares does growth a year lie? 95 %."""
        off = _width(0.95) * self.growth_error
        return self.growth_per_year - off, self.growth_per_year + off

    @property
    def bed_days_growth_per_year(self) -> float:
        """By which share do bed-days grow each year, every stay band by its own growth?"""
        return growth_of_bed_days(self.stay_bands)[0]

    @property
    def verdict(self) -> str:
        """How do admissions and bed-days grow, and how far may that be off? One sentence."""
        low, high = (wording.signed_percent(share) for share in self.growth_range)
        beds = f"; bed-days {wording.signed_percent(self.bed_days_growth_per_year)}" if self.stay_bands else ""
        return f"Expected each year: admissions {wording.signed_percent(self.growth_per_year)} ({low} to {high}){beds}."

    @property
    def per_year(self) -> tuple[float, float, float]:
        """How many come in the first year: low, central, high? Low and high hold 80 %; the days foreseen if fewer."""
        low, high = self.range_of(slice(0, YEAR_DAYS), 0.80)
        return low, float(self.expected[:YEAR_DAYS].sum()), high

    @property
    def change(self) -> tuple[float, ...]:
        """The same as shares of the last 12 months: low, central, high. Only for a forecast of a year or more."""
        return tuple(one / max(self.last_year, 1e-9) - 1.0 for one in self.per_year)

    def band(self, level: float) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
        """Between which counts does each day lie, with a chance of ``level`` or a little more? Two ``(h,)``."""
        swing = self.swing + self.expected * self.variance_of_rate
        top = math.ceil(float((self.expected + 10.0 * np.sqrt(self.expected * swing)).max())) + 10
        chances = at_most(self.expected, swing, top)
        return count_at(chances, (1.0 - level) / 2.0), count_at(chances, (1.0 + level) / 2.0)

    def range_of(self, days: slice, level: float) -> Range:
        """Between which totals do these days lie, with a chance of ``level``?"""
        total = float(self.expected[days].sum())
        return _range(total, self.swing / max(total, 1e-9) + float(self.variance_of_rate[days].mean()), level)

    @property
    def months(self) -> pd.DataFrame:
        """What comes in each calendar month? start, days, expected, low_80, high_80, low_95, high_95."""
        calendar = pd.date_range(self.first_day, periods=self.expected.size)
        place = (calendar.year.to_numpy() - calendar[0].year) * 12 + calendar.month.to_numpy() - calendar[0].month
        bounds = np.searchsorted(place, np.arange(place[-1] + 2))
        rows = []
        for begin, end in pairwise(bounds):
            part = slice(int(begin), int(end))
            ranges = [edge for level in LEVELS for edge in self.range_of(part, level)]
            rows.append((calendar[begin], end - begin, float(self.expected[part].sum()), *ranges))
        return pd.DataFrame(rows, columns=["start", "days", "expected", "low_80", "high_80", "low_95", "high_95"])


def forecast_arrivals(records: Records, ward: str, *, horizon_days: int = YEAR_DAYS) -> Forecast:
    """How many patients will come to this ward in the days after its records, and how many bed-days will they use?

    Growth is carried to bed-days by how long patients have been in, not by heads: one more patient in the long tail
    takes more beds than ten who leave next day. Left out are excluded days, days in which the ward was closed or missing
    from the file, and days before its first patient.

    Raises:
        UnreadableRecords: the file has no such ward.
        ImpossibleFigure: a horizon outside 1 to 3,653 days, or too few days or patients to look ahead from.

    Checked by: tests/data/ahead/test_forecasting.py
    """
    stays, used = records.of_ward(ward), without_silences(records, ward)
    first = int(records.window[0].timestamp())
    start = stays["start"].to_numpy().astype("datetime64[s]").astype(np.int64)
    place = (start - first) // DAY_SECONDS
    inside = place[(place >= 0) & (place < records.days)]
    counted = used.counted_days.copy()
    counted[: max(int(place.min()), 0)] = False
    counts = np.bincount(inside, minlength=records.days).astype(float)
    forecast = _forecast(DailyCounts(first // DAY_SECONDS, counts, counted), horizon_days)
    readings = take_readings(records, ward)
    bands = fit_stay_bands(readings, readings.days, forecast.growth_per_year)
    years = tuple(_with_bed_days(year, place, bands, forecast) for place, year in enumerate(forecast.years))
    notes = (ADMISSIONS, *forecast.notes, *silence_notes(records, ward))
    return replace(forecast, ward=ward, stay_bands=bands, years=years, notes=notes)


def forecast_counts(
    counts: ArrayLike, first_day: dt.date, *, horizon_days: int = YEAR_DAYS, counted: ArrayLike | None = None
) -> Forecast:
    """How does a plain series of daily counts (n,) from ``first_day`` on go on? ``counted`` (n,): which days count.

    Two methods are tried on the series' own past, every four weeks: a regression on trend, season and weekday, and
    singular spectrum analysis, which is used only where it was nearer. Both are held against the same week last year.

    Raises:
        ImpossibleFigure: as for :func:`forecast_arrivals`.

    Checked by: tests/data/ahead/test_forecasting.py
    """
    numbers = np.asarray(counts, dtype=float)
    use = np.ones(numbers.size, dtype=bool) if counted is None else np.asarray(counted, dtype=bool)
    return _forecast(DailyCounts((pd.Timestamp(first_day) - EPOCH).days, numbers, use), horizon_days)


def _forecast(series: DailyCounts, horizon_days: int) -> Forecast:
    """Look ahead from the end of a series."""
    if not 1 <= horizon_days <= MOST_DAYS:
        raise ImpossibleFigure(f"A forecast of {horizon_days:,} days is not possible: give 1 to {MOST_DAYS:,} days.")
    days, patients = int(series.counted.sum()), float(series.counts[series.counted].sum())
    if days < LEAST_DAYS or patients < FEWEST_PATIENTS:
        raise ImpossibleFigure(
            f"{patients:,.0f} patients in {days:,} days are too few to look ahead from: "
            f"{FEWEST_PATIENTS} in {LEAST_DAYS} days are needed."
        )
    past = [forecast_from(series, place, YEAR_DAYS) for place in past_origins(series)]
    outlook = look_ahead(series, series.counts.size, horizon_days, past)
    latest = np.where(series.counted, series.counts, outlook.trend.expected(series.days))[-YEAR_DAYS:]
    forecast = Forecast(
        ward="",
        first_day=EPOCH + pd.Timedelta(days=series.first_day + series.counts.size),
        expected=outlook.expected,
        variance_of_rate=outlook.variance_of_rate,
        swing=max(outlook.trend.swing.clustering, 0.02),
        growth_per_year=outlook.trend.growth_per_year,
        growth_error=outlook.trend.growth_error,
        method=outlook.choice.method,
        why=why_method(outlook.choice),
        errors={name: error for name, error in outlook.choice.errors.items() if math.isfinite(error)},
        last_year=float(latest.mean()) * YEAR_DAYS,
        years=(),
        stay_bands=(),
        notes=tuple(outlook_notes(outlook, days)),
    )
    return replace(forecast, years=tuple(_years(forecast)))


def _years(forecast: Forecast) -> list[YearAhead]:
    """Return the whole years ahead."""
    years = []
    for number in range(forecast.expected.size // YEAR_DAYS):
        days = slice(number * YEAR_DAYS, (number + 1) * YEAR_DAYS)
        ranges = [forecast.range_of(days, level) for level in LEVELS]
        first = forecast.first_day + pd.Timedelta(days=days.start)
        years.append(YearAhead(first, float(forecast.expected[days].sum()), *ranges))
    return years


def _with_bed_days(year: YearAhead, number: int, bands: tuple[StayBand, ...], forecast: Forecast) -> YearAhead:
    """Return a year with its bed-days: every stay band by its own trend; as unsure as arrivals, and as its stays.

    The same patients pass from band to band, so that the bands' errors are taken to go together.
    """
    place = slice(number * YEAR_DAYS, (number + 1) * YEAR_DAYS)
    days = (forecast.first_day - EPOCH).days + np.arange(place.start, place.stop)
    by_band = [float(band.trend.expected(days).sum()) for band in bands]
    off = [math.sqrt(float(band.trend.variance_of_rate(days).mean())) for band in bands]
    total = math.fsum(by_band)
    unsure = math.fsum(beds * error for beds, error in zip(by_band, off, strict=True)) / max(total, 1e-9)
    variance = unsure**2 + float(forecast.variance_of_rate[place].mean())
    ranges = {f"bed_days_{100 * level:.0f}": _range(total, variance, level) for level in LEVELS}
    return replace(year, bed_days=total, **ranges)


def _width(level: float) -> float:
    """Return how many standard deviations each way hold this share of a normal quantity."""
    return float(special.ndtri((1.0 + level) / 2.0))


def _range(total: float, variance: float, level: float) -> Range:
    """Return what holds a total with this chance: a gamma quantity of this mean and relative variance."""
    if total <= 0 or variance <= 0:
        return total, total
    low, high = (special.gammaincinv(1.0 / variance, share) for share in ((1.0 - level) / 2.0, (1.0 + level) / 2.0))
    return total * variance * float(low), total * variance * float(high)
