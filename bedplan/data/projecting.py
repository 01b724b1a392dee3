"""How many patients will be present at one time of day, from earlier records alone."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
from scipy import special

from bedplan.data.arrivals import Arrivals, arrivals_of
from bedplan.data.dates import DAY_SECONDS
from bedplan.data.occupancy import present
from bedplan.data.stays import stays_in_window
from bedplan.data.survival import product_limit

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.data.records import Records

YEAR_DAYS = 365.25
MOST_DAYS_IN = 730  # a stay's effect on the count is followed for two years


def as_of(records: Records, moment: pd.Timestamp) -> Records:
    """What did the file look like at this moment? Later starts are gone, later ends not yet known."""
    known = records.stays[records.stays["start"] < moment].copy()
    known.loc[known["end"] >= moment, "end"] = pd.NaT
    return replace(records, stays=known, window=(records.window[0], moment), seen_until=moment)


@dataclass(frozen=True)
class CensusOutlook:
    """Patients present at one time of day, day by day: ``mean`` and ``deviation`` (days,), ``beds`` or None.

    Counts are whole: the chance of at most n is that of a normal variable below n + ½, and 1 from ``beds`` on.
    """

    mean: NDArray[np.float64]
    deviation: NDArray[np.float64]
    beds: NDArray[np.int64] | None

    def chance_of_at_most(self, counts: NDArray[np.float64]) -> NDArray[np.float64]:
        """With which chance are at most so many present on each day?"""
        chance = special.ndtr((counts + 0.5 - self.mean) / self.deviation)
        return chance if self.beds is None else np.where(counts >= self.beds, 1.0, chance)

    def quantile(self, share: float) -> NDArray[np.int64]:
        """Which count is not exceeded with this chance on each day?"""
        level = np.maximum(np.ceil(self.mean - 0.5 + self.deviation * special.ndtri(share)), 0.0)
        return (level if self.beds is None else np.minimum(level, self.beds)).astype(np.int64)

    def expected_coverage(self, share: float) -> float:
        """Which share of days should lie in the band of this share? More than the share, because counts are whole."""
        low, high = self.band(share)
        inside = self.chance_of_at_most(high.astype(float)) - self.chance_of_at_most(low - 1.0)
        return float(np.where(low > 0, inside, self.chance_of_at_most(high.astype(float))).mean())

    def band(self, share: float) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
        """Between which counts does the middle share of outcomes lie?"""
        return self.quantile((1 - share) / 2), self.quantile((1 + share) / 2)


def expected_arrivals(arrivals: Arrivals, days: pd.DatetimeIndex) -> NDArray[np.float64]:
    """How many patients come on each of these days, past or to come? Level, growth, month and weekday.

    Growth is drawn towards none by what chance explains of it (positive-part shrinkage).

    Source: James & Stein 1961 (shrinkage).
    """
    rhythm, growth = arrivals.rhythm, steady_growth(arrivals)
    past = _pattern(arrivals, arrivals.calendar, growth)
    used = arrivals.used
    level = float(arrivals.counts[used].sum()) / max(float(past[used].sum()), 1e-9)
    return level * _pattern(arrivals, days, growth) if rhythm.expected.size else np.zeros(len(days))


def steady_growth(arrivals: Arrivals) -> float:
    """Which yearly growth is left once chance is taken out of it?"""
    growth = arrivals.rhythm.growth_per_year
    error = arrivals.rhythm.growth_error * math.sqrt(max(arrivals.swing.dispersion, 1.0))
    return growth * max(1.0 - (error / growth) ** 2, 0.0) if growth != 0 else 0.0


def _pattern(arrivals: Arrivals, days: pd.DatetimeIndex, growth: float) -> NDArray[np.float64]:
    """Return growth × month × weekday of days, without the level."""
    middle = arrivals.calendar[0] + (arrivals.calendar[-1] - arrivals.calendar[0]) / 2
    years = ((days - middle) / pd.Timedelta(days=1)).to_numpy() / YEAR_DAYS
    months = np.asarray(arrivals.rhythm.month_factors)[days.month.to_numpy() - 1]
    weekdays = np.asarray(arrivals.rhythm.weekday_factors)[days.day_of_week.to_numpy()]
    return (1.0 + growth) ** years * (months * weekdays if arrivals.enough else 1.0)


def outlook(records: Records, ward: str, days: int, clock_hour: int) -> CensusOutlook:
    """How many patients will be present at this hour on each of the days after the file's window?

    Arrivals by their rhythm, each present at the day's clock as long as the file's patients were (product limit over
    the clock strokes they stayed for). The spread is that of the past around the same rule, plus what level, growth
    and length of stay may be off by.

    Raises:
        UnreadableRecords: no stays on the ward.

    Checked by: tests/data/test_backtesting.py
    """
    stays = stays_in_window(records, ward)
    arrivals = arrivals_of(records, stays["start"])
    staying, stay_error = _strokes_stayed(records, stays, clock_hour)
    past_days = records.days
    calendar = pd.date_range(
        records.window[0] - pd.Timedelta(days=MOST_DAYS_IN), periods=MOST_DAYS_IN + past_days + days
    )
    by_day = expected_arrivals(arrivals, calendar)
    early = float((arrivals.came % DAY_SECONDS < clock_hour * 3_600).mean()) if arrivals.came.size else 0.0
    by_stroke = early * by_day + (1 - early) * np.concatenate(([by_day[0]], by_day[:-1]))
    mean = np.maximum(np.convolve(by_stroke, staying)[MOST_DAYS_IN : MOST_DAYS_IN + past_days + days], 1e-6)
    seen = present(records, stays, 3_600).reshape(past_days, 24)[:, clock_hour]
    used = records.counted_days
    swing = float(((seen - mean[:past_days])[used] ** 2).sum() / mean[:past_days][used].sum())
    ahead = np.arange(1, days + 1) / YEAR_DAYS
    growth_error = arrivals.rhythm.growth_error * math.sqrt(max(arrivals.swing.dispersion, 1.0))
    off = 1.0 / max(arrivals.worth, 1.0) + stay_error**2 + (growth_error * ahead) ** 2
    future = mean[past_days:]
    return CensusOutlook(future, np.sqrt(max(swing, 0.02) * future + off * future**2), None)


def _strokes_stayed(records: Records, stays: pd.DataFrame, clock_hour: int) -> tuple[NDArray[np.float64], float]:
    """Return the share of patients present at their first, second, … stroke of the clock, and the mean's error as a share."""
    offset = clock_hour * 3_600
    start, end = (stays[key].to_numpy().astype("datetime64[s]").astype(np.int64) - offset for key in ("start", "end"))
    first, last = (int(moment.timestamp()) - offset for moment in (records.window[0], records.seen_until))
    finished = stays["end"].notna().to_numpy()
    end = np.where(finished, end, last)
    begun = -(-start // DAY_SECONDS)
    strokes = (-(-end // DAY_SECONDS) - begun).clip(min=0)
    entered = np.maximum(-(-first // DAY_SECONDS) - begun, 0)
    # Half a stroke keeps those apart who were seen to leave after n strokes from those seen for n and no further.
    curve = product_limit(strokes + np.where(finished, 1.0, 0.5), finished, np.minimum(entered, strokes) + 0.25)
    share = curve.at(np.arange(1, MOST_DAYS_IN + 1, dtype=float))
    return share, curve.mean_standard_error / max(curve.mean_days, 1e-9)
