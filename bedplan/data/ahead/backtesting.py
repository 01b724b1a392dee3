"""Would this have told last year? Each ward predicted from earlier records alone, held against what happened."""

from __future__ import annotations

import math
from dataclasses import replace
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.ahead.accuracy import coverage_range
from bedplan.data.ahead.census_ahead import CensusOutlook, look_at_census
from bedplan.data.ahead.chances import count_at, ranked_score, share_above, share_within
from bedplan.data.ahead.last_year import BAND, WIDE_BAND
from bedplan.data.ahead.outlook import forecast_from, past_origins
from bedplan.data.ahead.plain_ways import SAME_WEEKDAY_DAYS, average_chances, ended_at, same_week_chances
from bedplan.data.ahead.readings import take_readings
from bedplan.data.ahead.verdicts import Backtest
from bedplan.data.wards.silence import silence_notes, without_silences
from bedplan.models import average_beds

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.data.ahead.readings import Readings
    from bedplan.data.beside.capacity import Capacity
    from bedplan.data.cleaning.records import Records

    Array = NDArray[np.float64]
    Whole = NDArray[np.int64]

MONTHS = 12
LEAST_DAYS = 730
FEWEST_EARLIER_ARRIVALS = 100
YEAR_DAYS = 365
SILENT_DAYS = 28
LEVELS = (0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9, 0.95, 0.99)
TOP_OF_BAND, TOP_OF_WIDE = (1.0 + BAND) / 2.0, (1.0 + WIDE_BAND) / 2.0
USUAL_OCCUPANCY = 0.85


def backtest(records: Records, ward: str, *, capacity: Capacity | None = None) -> Backtest:
    """Would a prediction from earlier records alone have told this ward's last year?

    Each month of the last year is predicted from what was known when it began, twelve times in all: patients in beds
    at 11:00 (at midnight where records hold dates alone) as a distribution, not as one number. With ``capacity``,
    the band ends at the staffed beds; closures of the year itself are not known to it. Days in which the ward was
    closed or missing from the file, and those after them until it had filled up again, are left out. Needs two years of
    records; with less, the answer says so.

    Raises:
        UnreadableRecords: the file has no such ward.

    Source: rolling origin: Tashman 2000, International Journal of Forecasting 16(4).
    Checked by: tests/data/ahead/test_backtesting.py
    """
    whole, records = records.settled, without_silences(records.settled, ward, settled=True)
    readings = take_readings(records, ward)
    beds = capacity and capacity.linked_to(records)
    trial = _Trial(records, readings, beds if beds and ward in beds.wards else None)
    reason = trial.why_not()
    return Backtest(ward, checked=False, reason=reason) if reason else replace(trial.judged(), **_left_out(whole, ward))


def _left_out(records: Records, ward: str) -> dict[str, tuple[str, ...]]:
    """Return why days are left out, in words: when nobody came, and which were chosen."""
    chosen = ("as chosen for this file",) if records.excluded else ()
    silent = silence_notes(records, ward)
    filling = ("because nobody came then or the ward filled up again after",) if silent else ()
    return {"left_out_because": (*chosen, *filling), "silences": tuple(silent)}


class _Trial:
    """One ward's last year, told again."""

    def __init__(self, records: Records, readings: Readings, capacity: Capacity | None) -> None:
        self.records, self.readings = records, readings
        self.census = readings.present()
        end = records.window[1]
        starts = [end - pd.DateOffset(months=months) for months in range(MONTHS, 0, -1)]
        self.origins = [round((start - records.window[0]) / pd.Timedelta(days=1)) for start in starts]
        self.beds = self.open = None
        if capacity is not None:
            planned = replace(capacity, table=capacity.table.assign(closed=0))  # nobody knew of closures beforehand
            self.beds = planned.open_beds_by_day(readings.ward, records.calendar).to_numpy().astype(np.int64)
            self.open = capacity.open_beds_by_day(readings.ward, records.calendar).to_numpy().astype(np.int64)

    def why_not(self) -> str:
        """Say why the last year can't be checked; nothing where it can."""
        series = self.readings.arrivals
        opened = max(int(self.readings.first.min()), 0)
        seen = self.records.days - opened
        if seen < LEAST_DAYS:
            return f"its records cover {seen:,} days, and two years ({LEAST_DAYS}) are needed."
        start = self.origins[0]
        earlier = int(series.counts[:start][series.counted[:start]].sum())
        if earlier < FEWEST_EARLIER_ARRIVALS:
            return f"{earlier:,} patients before {self._date(start):%B %Y} are too few ({FEWEST_EARLIER_ARRIVALS} are needed)."
        if int(series.counted[start:].sum()) < LEAST_DAYS // 4 or int(series.counted[:start].sum()) < YEAR_DAYS - 7:
            return "too many of its days are left out."
        if not (self.readings.last < start - 1).any():
            return f"no stay had ended before {self._date(start):%B %Y}."
        if not self.census[-SILENT_DAYS:].any():
            return "nobody is on the ward at the end of the file."
        return ""

    def judged(self) -> Backtest:
        """Predict, hold against what happened, and say what came of it."""
        days = self.readings.days
        series = self.readings.arrivals
        past = [forecast_from(series, place, YEAR_DAYS) for place in past_origins(series)]
        ends = [*self.origins[1:], days]
        months = [
            look_at_census(self.readings, begin, end - begin, past, self.beds)
            for begin, end in zip(self.origins, ends, strict=True)
        ]
        start = self.origins[0]
        whole = look_at_census(self.readings, start, days - start, past, self.beds)
        top = max(int(self.census[start:].max()), *(month.highest for month in (*months, whole)))
        chances = np.vstack([self._told(month, begin, top) for month, begin in zip(months, self.origins, strict=True)])
        return self._measured(chances, self._told(whole, start, top), months)

    def _told(self, month: CensusOutlook, begin: int, top: int) -> Array:
        """Return the chances told for one stretch of days."""
        return month.chances(None if self.beds is None else self.beds[begin : begin + month.mean.size], top)

    def _date(self, place: int) -> pd.Timestamp:
        """Return the date of a reading."""
        return self.records.calendar[place]

    def _measured(self, chances: Array, ahead: Array, months: list[CensusOutlook]) -> Backtest:
        """Hold what was told against what happened."""
        start = self.origins[0]
        counted = self.readings.arrivals.counted[start:]
        actual, days = self.census[start:], self._picture(chances)
        inside = {level: share_within(chances, actual, level)[counted] for level in LEVELS}
        happened = days[counted]
        return Backtest(
            ward=self.readings.ward,
            checked=True,
            reading_hour=self.readings.hour,
            coverage_80=float(inside[BAND].mean()),
            coverage_95=float(inside[WIDE_BAND].mean()),
            drawn_80=float(happened["present"].between(happened["low"], happened["high"]).mean()),
            coverage_80_range=coverage_range(inside[BAND]),
            coverage_95_range=coverage_range(inside[WIDE_BAND]),
            year_ahead_80=float(share_within(ahead, actual, BAND)[counted].mean()),
            year_ahead_95=float(share_within(ahead, actual, WIDE_BAND)[counted].mean()),
            above_80=float(share_above(chances, actual, TOP_OF_BAND)[counted].mean()),
            above_95=float(share_above(chances, actual, TOP_OF_WIDE)[counted].mean()),
            year_ahead_above_80=float(share_above(ahead, actual, TOP_OF_BAND)[counted].mean()),
            calibration=tuple((level, float(inside[level].mean())) for level in LEVELS),
            calibration_ranges=tuple(coverage_range(inside[level]) for level in LEVELS),
            **self._beside_plainer_ways(chances, days),
            days_left_out=int((~counted).sum()),
            full_share=None
            if self.open is None
            else float((self.census >= self.open)[:start][self.records.counted_days[:start]].mean()),
            when_full=months[0].when_full,
            methods=tuple(sorted({month.outlook.choice.method for month in months})),
            months=self._by_month(share_within(chances, actual, BAND)),
            days=days,
        )

    def _picture(self, chances: Array) -> pd.DataFrame:
        """Return a row a day: what happened, and the band told."""
        start = self.origins[0]
        marks = {"low": 0.1, "middle": 0.5, "high": 0.9, "low_95": 0.025, "high_95": 0.975}
        return pd.DataFrame(
            {
                "date": self.records.calendar[start:],
                "present": self.census[start:],
                **{name: count_at(chances, share) for name, share in marks.items()},
                "same_week_last_year": self.census[start - SAME_WEEKDAY_DAYS : -SAME_WEEKDAY_DAYS],
                "counted": self.readings.arrivals.counted[start:],
            }
        )

    def _beside_plainer_ways(self, chances: Array, days: pd.DataFrame) -> dict[str, float]:
        """Return how near the band and its middle were, and how near plainer ways were with bands of their own."""
        start, counted = self.origins[0], self.readings.arrivals.counted
        beds = None if self.beds is None else self.beds[start:]
        average, formula_beds = self._average_formula()
        both = counted[start:] & counted[start - SAME_WEEKDAY_DAYS : -SAME_WEEKDAY_DAYS]
        which = both if both.any() else counted[start:]
        told = {
            "": chances,
            "same_week_": ended_at(same_week_chances(self.census, counted, self.origins), beds),
            "average_formula_": ended_at(average_chances(average, len(days), int(self.census.max())), beds),
        }
        numbers = {"middle": days["middle"], "same_week": days["same_week_last_year"], "average_formula": average}
        happened = self.census[start:][which]
        return {
            **{f"{name}score": ranked_score(one[which], happened) for name, one in told.items()},
            **{f"{name}_error": float((days["present"] - one)[which].abs().mean()) for name, one in numbers.items()},
            "average_formula_beds": formula_beds,
            "days_above_average_formula": int((days["present"] > formula_beds)[days["counted"]].sum()),
        }

    def _by_month(self, inside: Array) -> tuple[tuple[pd.Timestamp, float], ...]:
        """Return the share of days that count inside the band, month by month; months without such days are left out."""
        start = self.origins[0]
        bounds, counted = [*self.origins, self.readings.days], self.readings.arrivals.counted
        return tuple(
            (self._date(begin), float(inside[begin - start : end - start][counted[begin:end]].mean()))
            for begin, end in pairwise(bounds)
            if counted[begin:end].any()
        )

    def _average_formula(self) -> tuple[float, int]:
        """Return what the average formula says for the year: patients in beds on average, and beds."""
        start = self.records.window[0] + pd.Timedelta(days=self.origins[0])
        stays = self.records.of_ward(self.readings.ward)
        recent = stays[(stays["end"] < start) & (stays["end"] >= start - pd.Timedelta(days=YEAR_DAYS))]
        mean_days = float(((recent["end"] - recent["start"]) / pd.Timedelta(days=1)).mean()) if len(recent) else 0.0
        place = (stays["start"] - self.records.window[0]).dt.days
        year = np.arange(max(self.origins[0] - YEAR_DAYS, 0), self.origins[0])
        year = year[self.records.counted_days[year]]
        if mean_days <= 0 or not year.size:
            return 0.0, 0
        admissions = int(place.isin(year).sum()) / year.size * YEAR_DAYS
        return admissions * mean_days / YEAR_DAYS, math.ceil(average_beds(admissions, mean_days, USUAL_OCCUPANCY))
