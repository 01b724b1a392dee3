"""Growth by how long patients have been in: bed-days of the first days, of later days, and of the long tail."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

from bedplan.data.ahead.readings import STILL_IN
from bedplan.data.ahead.trend import Trend, fit_trend

if TYPE_CHECKING:
    from collections.abc import Iterator

    from bedplan.data.ahead.readings import Readings

EDGES = (0, 2, 7, 21, STILL_IN)
NAMES = ("first 2 days", "days 3 to 7", "days 8 to 21", "after day 21")
GROWTH_APART = 0.03  # a year: bands seldom grow further apart from arrivals than this
FEWEST_BED_DAYS = 50
RUN_IN_DAYS = 90  # a file chosen by admission date shows too few long stays at first
LEVEL_DAYS = 365


@dataclass(frozen=True, slots=True, eq=False)
class StayBand:
    """Beds used by patients who have been in so long: on average over the last 12 months, and how that grows."""

    name: str
    beds_in_use: float
    trend: Trend

    @property
    def growth_per_year(self) -> float:
        """By which share do this band's bed-days grow each year?"""
        return self.trend.growth_per_year

    @property
    def growth_error(self) -> float:
        """How far may that be off? Its standard error."""
        return self.trend.growth_error


def fit_stay_bands(readings: Readings, origin: int, arrivals_growth: float) -> tuple[StayBand, ...]:
    """How many beds do patients in their first days, later days and long tail use, and how does each grow?

    Counted by days already stayed, so unfinished stays count in full and none has to end to be known. Each band's
    growth is drawn towards that of arrivals. Bands with fewer than 50 bed-days are left out.

    Checked by: tests/data/ahead/test_readings.py
    """
    return tuple(_bands(readings, origin, arrivals_growth))


def _bands(readings: Readings, origin: int, arrivals_growth: float) -> Iterator[StayBand]:
    """Yield the bands that hold enough."""
    counted = readings.arrivals.counted[:origin].copy()
    if not (readings.first < 0).any():
        counted[: min(RUN_IN_DAYS, origin // 2)] = False
    days = readings.arrivals.days[:origin][counted]
    for name, begin, end in zip(NAMES, EDGES[:-1], EDGES[1:], strict=True):
        beds = readings.present(begin, end)[:origin][counted].astype(float)
        if beds.sum() >= FEWEST_BED_DAYS:
            trend = fit_trend(beds, days, usual_growth=arrivals_growth, growth_spread=GROWTH_APART)
            yield StayBand(name, float(beds[-LEVEL_DAYS:].mean()), trend)


def growth_of_bed_days(bands: tuple[StayBand, ...], arrivals_error: float = 0.0) -> tuple[float, float]:
    """How fast do bed-days grow a year, all bands together, and how far may that be off? (share, standard error).

    The same patients pass from band to band, so that the bands' errors are taken to go together; to them comes
    ``arrivals_error``, that of the growth towards which each band was drawn, by as much as it was.

    Checked by: tests/data/ahead/test_readings.py
    """
    total = math.fsum(band.beds_in_use for band in bands)
    if total <= 0:
        return 0.0, 0.0
    share = [band.beds_in_use / total for band in bands]
    growth = math.fsum(part * band.growth_per_year for part, band in zip(share, bands, strict=True))
    error = math.fsum(part * band.growth_error for part, band in zip(share, bands, strict=True))
    drawn = [min((band.growth_error / GROWTH_APART) ** 2, 1.0) for band in bands]
    return growth, math.hypot(error, arrivals_error * math.fsum(p * d for p, d in zip(share, drawn, strict=True)))
