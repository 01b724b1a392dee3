"""Who came when: daily counts of a ward's admissions, booked patients apart, and the level of the latest year."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

from bedplan.data.ahead.lately import level_change
from bedplan.data.ahead.rhythm import Rhythm, Swing, fit_rhythm, measure_swing, shrink_factors
from bedplan.data.files.columns import plain
from bedplan.data.files.dates import DAY_SECONDS
from bedplan.models import BookedList

if TYPE_CHECKING:
    import pandas as pd
    from numpy.typing import NDArray

    from bedplan.data.ahead.lately import LevelChange
    from bedplan.data.cleaning.records import Records
    from bedplan.models import LengthOfStay

YEAR_DAYS, NORMAL_95 = 365, 1.96
DEFAULT_TIME_SHARE = 1 / 3  # of arrivals in one minute of the day; common practice, no source
FEWEST_STAYS, FEWEST_DAYS = 200, 90
# Methods of admission that mean a booked patient. Codes 11 to 13 are the English elective ones.
BOOKED_METHODS = ("11", "12", "13", "booked", "elective", "waitinglist", "planned", "electivebooked", "electiveplanned")


@dataclass(frozen=True)
class Arrivals:
    """A ward's admissions in the file's window, day by day, with their rhythm.

    ``counts`` (days,) of all admissions; ``came`` (n,) seconds; ``hours`` (24,) how many in each hour of the day. ``used`` (days,) marks the days outside excluded
    periods, ``counted`` those of the latest year among them (all, where the file has less than two).
    """

    came: NDArray[np.int64]
    hours: NDArray[np.float64]
    counts: NDArray[np.float64]
    calendar: pd.DatetimeIndex
    counted: NDArray[np.bool_]
    used: NDArray[np.bool_]
    rhythm: Rhythm
    swing: Swing

    @property
    def enough(self) -> bool:
        """Are there enough admissions to tell a rhythm?"""
        return self.came.size >= FEWEST_STAYS and self.counts.size >= FEWEST_DAYS

    @property
    def recent(self) -> float:
        """How many admissions were there in the days counted?"""
        return float(self.counts[self.counted].sum())

    @property
    def per_day(self) -> float:
        """How many come a day in an average month and week, at the level of the days counted?"""
        return self._per_day(self.counted)

    def _per_day(self, days: NDArray[np.bool_]) -> float:
        """Return how many come a day in an average month and week, at the level of these days."""
        if not self.enough:
            return float(self.counts[days].sum()) / int(days.sum())
        months = np.asarray(self.rhythm.month_factors)[self.calendar.month.to_numpy() - 1]
        weekdays = np.asarray(self.rhythm.weekday_factors)[self.calendar.day_of_week.to_numpy()]
        return float(self.counts[days].sum()) / float((months * weekdays)[days].sum())

    @cached_property
    def change(self) -> LevelChange | None:
        """Did arrivals change lately: far more or fewer in the last 4 to 26 weeks than trend and season before them gave?

        None where chance explains it, or where the file is too short or too empty to tell.
        """
        numbers = self.calendar.to_numpy().astype("datetime64[D]").astype(np.int64)
        found = level_change(self.counts[self.used], numbers[self.used])
        return found if found is not None and found.is_clear else None

    @property
    def lately(self) -> tuple[float, float] | None:
        """If arrivals changed: between which figures a day does the latest level lie, 95 %? None if they did not."""
        if self.change is None:
            return None
        days = np.zeros(self.counts.size, dtype=bool)
        days[np.flatnonzero(self.used)[-self.change.days :]] = True
        level, off = self._per_day(days), math.exp(NORMAL_95 * self.change.error)
        return level / off, level * off

    @property
    def per_year(self) -> float:
        """How many are admitted in 365 days like those counted?"""
        return self.recent / int(self.counted.sum()) * YEAR_DAYS

    @property
    def period(self) -> str:
        """From which days does the rate come, in words?"""
        days = int(self.counted.sum())
        if days == self.counts.size:
            return f"all {days:,} days of the file"
        if self.counts.size < 2 * YEAR_DAYS or self.counted[:-YEAR_DAYS].any():
            return f"the {days:,} days of the file that count"
        return "the last 12 months" if days == YEAR_DAYS else f"the {days:,} days of the last 12 months that count"

    @property
    def hour_factors(self) -> tuple[float, ...]:
        """How busy is each hour of the day? Drawn towards the average by what chance alone explains.

        All alike where a third or more came in one and the same minute: that is a default time, not a rhythm.
        """
        minutes = np.bincount(self.came % DAY_SECONDS // 60, minlength=1_440)
        if minutes.max() >= DEFAULT_TIME_SHARE * max(self.came.size, 1):
            return (1.0,) * 24
        level = np.log(np.maximum(self.hours, 0.5))
        return shrink_factors(level[1:] - level[0], self.hours)

    @property
    def worth(self) -> float:
        """As many independent arrivals as these are worth, given how they swing and drift."""
        if self.swing.drift is None:
            return self.recent / max(self.swing.dispersion, 1.0)
        drift = self.swing.drift.variance_of_mean(int(self.counted.sum()))
        return self.recent / (max(self.swing.clustering, 1.0) + drift * self.recent)

    @property
    def growth(self) -> tuple[float, float]:
        """By which share do they grow a year, and how far may that be off? Its standard error, drift included; 0 if too short."""
        growth, drift = self.rhythm.growth_per_year, self.swing.drift
        if self.rhythm.growth_error == 0.0:
            return 0.0, 0.0
        if drift is None:
            return growth, self.rhythm.growth_error * math.sqrt(max(self.swing.dispersion, 1.0))
        return growth, float(drift.effect_errors[-1]) * (1.0 + growth)

    def interval(self, share: float = 0.95) -> tuple[float, float]:
        """Between which figures do arrivals a day lie? The exact Poisson interval, widened by their swing and drift."""
        tail, worth, per_day = (1 - share) / 2, self.worth, self.per_day
        if worth <= 0:
            return 0.0, float(special.gammaincinv(1.0, 1 - tail)) / int(self.counted.sum())
        low = float(special.gammaincinv(worth, tail)) / worth
        return per_day * low, per_day * float(special.gammaincinv(worth + 1, 1 - tail)) / worth


def arrivals_of(records: Records, start: pd.Series | NDArray[np.datetime64]) -> Arrivals:
    """Who came when? From the starts of stays; those before or after the window are left out."""
    seconds = np.asarray(start).astype("datetime64[s]").astype(np.int64)
    first, last = (int(moment.timestamp()) for moment in records.window)
    came = seconds[(seconds >= first) & (seconds < last)]
    counts = np.bincount((came - first) // DAY_SECONDS, minlength=records.days).astype(float)[: records.days]
    calendar, use = records.calendar, records.counted_days
    rhythm = fit_rhythm(counts, calendar.month.to_numpy() - 1, calendar.day_of_week.to_numpy(), use)
    recent = use.copy()
    if records.days >= 2 * YEAR_DAYS:
        recent[:-YEAR_DAYS] = False
    if not recent.any():
        recent = use if use.any() else np.ones(records.days, dtype=bool)
    return Arrivals(
        came=came,
        hours=np.bincount(came % DAY_SECONDS // 3600, minlength=24).astype(float),
        counts=counts,
        calendar=calendar,
        counted=recent,
        used=use if use.any() else ~use,
        rhythm=rhythm,
        swing=measure_swing(counts, rhythm, use),
    )


def arrivals_asked(arrivals: Arrivals, asked: NDArray[np.float64], by_chance: tuple[float, float]) -> Arrivals:
    """Who wanted to come when, where admissions are known and, hour by hour, those who ``asked`` (hours,)?

    These end with the admissions; where they begin later, admissions before them are raised by the same share as after.
    ``by_chance`` as for :func:`measure_swing`.
    """
    by_day = asked.reshape(-1, 24)
    before, after = np.split(arrivals.counts, [arrivals.counts.size - by_day.shape[0]])
    counts = np.concatenate((before * by_day.sum() / max(float(after.sum()), 1e-9), by_day.sum(axis=1)))
    months, weekdays = arrivals.calendar.month.to_numpy() - 1, arrivals.calendar.day_of_week.to_numpy()
    rhythm = fit_rhythm(counts, months, weekdays, arrivals.used)
    swing = measure_swing(counts, rhythm, arrivals.used, by_chance)
    return replace(arrivals, counts=counts, hours=by_day.sum(axis=0), rhythm=rhythm, swing=swing)


def is_booked(stays: pd.DataFrame) -> NDArray[np.bool_]:
    """Which stays were booked, by their method of admission? None where the file has no such column."""
    if "method" not in stays:
        return np.zeros(len(stays), dtype=bool)
    method = stays["method"].cat
    booked = [code for code, name in enumerate(method.categories) if plain(name) in BOOKED_METHODS]
    return np.isin(method.codes.to_numpy(), booked)


def booked_list(arrivals: Arrivals, stay: LengthOfStay) -> BookedList | None:
    """Which weekly list do booked admissions come from? None where they swing as much as chance alone.

    With n places a weekday, each taken with chance p, the number who come has variance ÷ mean 1 − p: the swing gives
    p, the mean gives n.
    """
    weekday = arrivals.calendar.day_of_week.to_numpy()[arrivals.counted]
    counts = arrivals.counts[arrivals.counted]
    weeks = np.maximum(np.bincount(weekday, minlength=7), 1)
    means = np.bincount(weekday, weights=counts, minlength=7) / weeks
    squares = np.bincount(weekday, weights=counts**2, minlength=7) / weeks
    swing = float((squares - means**2).sum()) / max(float(means.sum()), 1e-9)
    if swing >= 0.9 or means.sum() <= 0:
        return None
    places = np.maximum(np.round(means / (1.0 - swing)), (means > 0.05).astype(float))
    hour = int(np.bincount(arrivals.came % DAY_SECONDS // 3600, minlength=24).argmax())
    attends = min(float(means.sum() / places.sum()), 1.0)
    return BookedList(tuple(int(place) for place in places), stay, hour=hour, attends=attends)
