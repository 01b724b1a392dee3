"""A ward read once a day: who is in, for how many readings already, who came and who left since the last one."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.ahead.outlook import DailyCounts
from bedplan.data.ahead.rhythm import shrink_factors
from bedplan.data.wards.silence import without_silences
from bedplan.data.wards.survival import StayCurve, product_limit

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.data.cleaning.records import Records

    Array = NDArray[np.float64]
    Places = NDArray[np.int64]

DAY_SECONDS = 86_400
READING_HOUR = 11  # late morning; records of dates alone are read at midnight
STILL_IN = 2**40
MOST_READINGS = 900  # of one stay
READINGS_BEYOND = 60  # past the longest stay seen


@dataclass(frozen=True, slots=True, eq=False)
class Readings:
    """One ward at one hour of every day of the file's window.

    ``first`` and ``last`` (stays,) are the places of the first and last reading each patient was in for, negative
    before the window; ``last`` is before ``first`` for those who came and went between two readings. ``arrivals``:
    how many came since the reading before.
    """

    ward: str
    hour: int
    arrivals: DailyCounts
    first: Places
    last: Places

    @property
    def days(self) -> int:
        """How many readings are there?"""
        return self.arrivals.counts.size

    def present(self, from_readings: int = 0, to_readings: int = STILL_IN) -> Places:
        """How many were in at each reading who had been at so many before (from, up to but not including to)?"""
        comes = self.first + from_readings
        goes = np.minimum(self.last, self.first + to_readings - 1) + 1
        stays = goes > comes
        size = self.days + 1
        change = np.bincount(comes[stays].clip(0, self.days), minlength=size)
        change = change - np.bincount(goes[stays].clip(0, self.days), minlength=size)
        return np.cumsum(change)[: self.days]

    def stay_curve(self, origin: int) -> StayCurve:
        """For how many readings do patients stay, as far as it was known just before reading ``origin``?

        Those in at the window's start are watched from then on only; those still in just before ``origin`` count for
        the readings they had shown, and no more.

        Raises:
            ImpossibleFigure: nobody had left by then.
        """
        # Of those who came before the first reading, only who stayed until it is known for sure.
        known = (self.first < origin) & ((self.first > 0) | ((self.first < 0) & (self.last >= 0)))
        first, last = self.first[known], self.last[known]
        finished = last < origin - 1
        seen = np.where(finished, last - first + 1.0, origin - first - 0.5)
        return product_limit(seen, finished, np.maximum(-first, 0))

    def still_in(self, origin: int, curve: StayCurve) -> Array:
        """Which share is still in after so many readings, by weekday of the first one? ``(7, n)``, Monday first.

        The curve's chances of leaving, times how busy each weekday is with leaving.
        """
        readings = int(min(curve.longest_days + READINGS_BEYOND, MOST_READINGS))
        left = np.concatenate(([1.0], curve.at(np.arange(readings))))
        leaving = 1.0 - left[1:] / np.maximum(left[:-1], 1e-12)
        busy = self._leaving_by_weekday(origin, leaving)
        weekdays = np.add.outer(np.arange(7), np.arange(readings)) % 7
        return np.cumprod(1.0 - np.clip(leaving * busy[weekdays], 0.0, 1.0), axis=1)

    def _leaving_by_weekday(self, origin: int, leaving: Array) -> Array:
        """Return how many left before each weekday's reading against how many the curve expects; mean about 1."""
        known = (self.first < origin) & (self.first > -leaving.size)
        first, last = self.first[known], self.last[known]
        begin, end = np.maximum(first, 1), np.minimum(last + 1, origin - 1)
        spans = np.maximum(end - begin + 1, 0)
        reading = np.repeat(begin - np.cumsum(spans) + spans, spans) + np.arange(spans.sum())
        stayed = reading - np.repeat(first, spans)
        weekday = (self.arrivals.first_day + reading + 3) % 7  # 1 January 1970 was a Thursday
        inside = stayed < leaving.size
        expected = np.bincount(weekday[inside], weights=leaving[stayed[inside]], minlength=7)
        gone = inside & (reading == np.repeat(last + 1, spans))
        left = np.bincount(weekday[gone], minlength=7).astype(float)
        level = np.log(np.maximum(left, 0.5) / np.maximum(expected, 0.5))
        busy = np.asarray(shrink_factors(level[1:] - level[0], left))
        return busy * left.sum() / max(float(busy @ expected), 1e-9)


def take_readings(records: Records, ward: str) -> Readings:
    """What does this ward look like once a day: at 11:00, or at midnight where the records hold dates alone?

    Days before the first patient was in don't count, nor those in which the ward was closed or missing from the file, nor
    those after them in which it filled up again.

    Checked by: tests/data/ahead/test_readings.py
    """
    stays = records.of_ward(ward)
    hour = READING_HOUR if records.has_times else 0
    begin = int(records.window[0].timestamp())
    first = _places(stays["start"].to_numpy(), begin + hour * 3600)
    unfinished = stays["end"].isna().to_numpy()
    last = np.where(unfinished, STILL_IN, _places(stays["end"].to_numpy(), begin + hour * 3600) - 1)
    days = records.days
    inside = (first >= 0) & (first < days)
    counts = np.bincount(first[inside], minlength=days).astype(float)
    used = without_silences(records, ward, settled=True).counted_days
    counted = used.copy()
    counted[1:] &= used[:-1]  # a reading's day begins at the reading before
    counted[0] &= hour == 0
    counted[: max(int(first.min()), 0)] = False
    return Readings(ward, hour, DailyCounts(begin // DAY_SECONDS, counts, counted), first, last)


def _places(moments: NDArray[np.datetime64], begin: int) -> Places:
    """Return the place of the first reading at or after each moment; nonsense where there is no moment."""
    seconds = moments.astype("datetime64[s]").astype(np.int64)
    return -(-(seconds - begin) // DAY_SECONDS)
