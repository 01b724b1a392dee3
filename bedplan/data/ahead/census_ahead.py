"""How many patients will be in beds at each reading: expected arrivals, carried through the stay curve, within the beds."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.ahead.chances import SWINGS, WhenFull, at_most, at_most_in_beds, ranked_score, variance_in_beds
from bedplan.data.ahead.outlook import Outlook, look_ahead
from bedplan.data.ahead.rhythm import YEAR_DAYS
from bedplan.data.ahead.stay_bands import fit_stay_bands, growth_of_bed_days

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from bedplan.data.ahead.outlook import PastForecast
    from bedplan.data.ahead.readings import Readings
    from bedplan.data.ahead.rhythm import Swing

    Array = NDArray[np.float64]
    Whole = NDArray[np.int64]

LOOK_BACK_DAYS = 365  # the year on which the swing of the census is measured
SCALES = np.geomspace(0.3, 5.0, 31)
SCALE_SPREAD = 0.3  # the census seldom swings further from theory than this (SD of the log of variance ÷ theory)
CLEARLY = 1.96
MOST_OVER_BEDS = 0.01  # a ward over its beds more often than this is not held by them
ROOM_FOR_TAIL = 60


@dataclass(frozen=True, slots=True, eq=False)
class CensusOutlook:
    """Patients in beds expected at each reading ahead (h,), how far they swing (variance ÷ mean), and what beds do.

    ``when_full``: what fits the ward's full days best.
    """

    mean: Array
    swing: Array
    when_full: WhenFull
    outlook: Outlook

    def chances(self, beds: Whole | None, top: int) -> Array:
        """How likely are at most 0, 1, … ``top`` patients at each reading, with so many beds? ``(h, top + 1)``."""
        return _chances(self.mean, self.swing, beds, top, self.when_full)

    @property
    def highest(self) -> int:
        """How many patients are as good as never passed?"""
        return math.ceil(float((self.mean + 10.0 * np.sqrt(self.mean * self.swing)).max())) + 10


def look_at_census(
    readings: Readings, origin: int, steps: int, past: Sequence[PastForecast], beds: Whole | None
) -> CensusOutlook:
    """How many will be in beds at the readings from ``origin`` on, told from what was known just before?

    Arrivals are those the forecast expects, before ``origin`` too: it is the distribution a plan is made on, not one
    that follows the patients in today. ``beds`` (n,) through the whole window, or None.

    Source: Eick, Massey & Whitt 1993, Management Science 39(2), in steps of a day.
    Checked by: tests/data/ahead/test_backtesting.py
    """
    outlook = look_ahead(readings.arrivals, origin, steps, past)
    curve = readings.stay_curve(origin)
    mean, squares = _carried(readings, outlook, origin, readings.still_in(origin, curve))
    mean = mean * _stay_growth(readings, origin, outlook, mean.size - steps)
    swing = 1.0 + (_clustering(outlook.trend.swing) - 1.0) * squares / np.maximum(mean, 1e-9)
    swing = np.maximum(swing, SWINGS[0])
    when_full, scale = _fit_to_past(readings, origin, (mean[:-steps], swing[:-steps]), beds)
    stay_error = (curve.mean_standard_error / max(curve.mean_days, 1e-9)) ** 2
    ahead = mean[-steps:]
    uncertain = ahead * (outlook.variance_of_rate + stay_error)
    return CensusOutlook(ahead, swing[-steps:] * scale + uncertain, when_full, outlook)


def _carried(readings: Readings, outlook: Outlook, origin: int, still_in: Array) -> tuple[Array, Array]:
    """Return the mean in beds at each reading of the year back and ahead, and the sum of squared chances to be in."""
    before = origin - min(LOOK_BACK_DAYS, origin) - still_in.shape[1]
    days = readings.arrivals.first_day + np.arange(before, origin + outlook.expected.size)
    expected = np.concatenate((outlook.trend.expected(days[: origin - before]), outlook.expected))
    keep = slice(still_in.shape[1], days.size)
    mean, squares = np.zeros(days.size), np.zeros(days.size)
    for weekday in range(7):
        came = np.where((days + 3) % 7 == weekday, expected, 0.0)
        mean += np.convolve(came, still_in[weekday])[: days.size]
        squares += np.convolve(came, still_in[weekday] ** 2)[: days.size]
    return mean[keep], squares[keep]


def _stay_growth(readings: Readings, origin: int, outlook: Outlook, back: int) -> Array:
    """Return how stays have changed at each reading against the middle of the known time: bed-days grow by stay band."""
    growth = outlook.trend.growth_per_year
    of_bed_days, _ = growth_of_bed_days(fit_stay_bands(readings, origin, growth))
    middle = float(np.flatnonzero(readings.arrivals.counted[:origin]).mean())
    years = (np.arange(-back, outlook.expected.size) + origin - middle) / YEAR_DAYS
    return ((1.0 + of_bed_days) / (1.0 + growth)) ** years


def _clustering(swing: Swing) -> float:
    """Return the clustering where it clearly differs from that of chance."""
    return swing.clustering if abs(swing.clustering - 1.0) > CLEARLY * swing.clustering_error else 1.0


def _chances(mean: Array, swing: Array, beds: Whole | None, top: int, when_full: WhenFull) -> Array:
    """Return the chances with or without a limit of beds."""
    if beds is None:
        return at_most(mean, swing, top)
    return at_most_in_beds(mean, swing, beds, top, when_full)


def _fit_to_past(
    readings: Readings, origin: int, told: tuple[Array, Array], beds: Whole | None
) -> tuple[WhenFull, float]:
    """Return what beds do when full and how much more the census swung than told: what fits the year before best."""
    back = slice(origin - told[0].size, origin)
    use = readings.arrivals.counted[back]
    if not use.any():  # closed all the year before
        return "stays anyway", 1.0
    limit = None if beds is None else beds[back][use]
    past = _Past(readings.present()[back][use], told[0][use], told[1][use], limit)
    if limit is None or (past.patients > limit).mean() > MOST_OVER_BEDS:
        return "stays anyway", past.scale("stays anyway")
    fits = [(*past.score(when_full), when_full) for when_full in ("leaves", "waits")]
    _, scale, best = min(fits)
    return best, scale


@dataclass(frozen=True, slots=True, eq=False)
class _Past:
    """A year of readings and what would have been told for them: (d,) each."""

    patients: Whole
    mean: Array
    swing: Array
    beds: Whole | None

    def score(self, when_full: WhenFull) -> tuple[float, float]:
        """Return how far the readings were from what would have been told, were this what patients do; and the scale."""
        top = int(self.patients.max()) + ROOM_FOR_TAIL
        scale = self.scale(when_full)
        return ranked_score(_chances(self.mean, self.swing * scale, self.beds, top, when_full), self.patients), scale

    def scale(self, when_full: WhenFull) -> float:
        """How much more did the census swing than told? Drawn towards 1 by how little a year can tell."""
        wrong = self.patients - self.mean
        limit = np.zeros(wrong.size, dtype=np.int64) if self.beds is None else self.beds
        told = [float(variance_in_beds(self.mean, self.swing * scale, limit, when_full).mean()) for scale in SCALES]
        rising = np.maximum.accumulate(told) + 1e-9 * np.arange(1, SCALES.size + 1)
        seen = max(float((wrong**2).mean()), 1e-9)
        found = float(np.interp(math.log(seen), np.log(rising), np.log(SCALES)))
        chance = 2.0 * _days_together(wrong) / max(wrong.size, 1)  # variance of the log of a variance
        return math.exp(found * SCALE_SPREAD**2 / (SCALE_SPREAD**2 + chance))


def _days_together(wrong: Array) -> float:
    """Return how many days say as much as one would alone: patients of today are mostly those of yesterday."""
    centred = wrong - wrong.mean()
    power = max(float(centred @ centred), 1e-12)
    follows = float(np.clip(centred[1:] @ centred[:-1] / power, 0.0, 0.97))
    return (1.0 + follows**2) / (1.0 - follows**2)  # sum of squared correlations of a first-order series
