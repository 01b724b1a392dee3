"""From arrivals to beds held: the share of those who came k hours ago who still hold a bed, whatever hour they leave at.

A stay ends when it ends, or at the hours the ward discharges at, or after the weekend. A bed is held for the stay and
then for its turnaround.
"""

from __future__ import annotations

from functools import lru_cache
from itertools import chain
from typing import TYPE_CHECKING, NamedTuple

import numpy as np
from numpy.lib.stride_tricks import as_strided

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models.value_objects.stay import LengthOfStay

    Array = NDArray[np.float64]

HOURS_A_WEEK = 168
HOURS_A_YEAR = 52 * HOURS_A_WEEK
_HOUR = 1.0 / 24.0
_LONGEST = 5 * HOURS_A_YEAR
_SATURDAY, _SUNDAY = 5, 6


class Leaving(NamedTuple):
    """When beds come free: discharge hours (24 shares or none), weekend slip (Saturday, Sunday), turnaround hours."""

    discharge_hours: tuple[float, ...] = ()
    weekend_slip: tuple[float, float] = (0.0, 0.0)
    turnaround_hours: float = 0.0

    @property
    def has_rhythm(self) -> bool:
        """Whether the hour or the weekday decides when patients leave, and not their stay alone."""
        return bool(self.discharge_hours) or any(self.weekend_slip)


def _horizon(stay: LengthOfStay, turnaround_days: float, period: int, longest: int, negligible: float) -> int:
    """Return how many hours to follow a patient for: whole periods, until next to nobody is left."""
    horizon = period
    while horizon < longest:
        left = stay.days_beyond(max(horizon * _HOUR - turnaround_days, 0.0))
        if left <= negligible * stay.mean_days:
            break
        horizon += period * max(1, horizon // period // 4)
    return min(horizon, longest)


def _days_beyond(stay: LengthOfStay, turnaround_days: float, days: Array) -> tuple[Array, Array]:
    """Return ∫ S and ∫∫ S from each day on, of stay and then turnaround."""
    rest = np.maximum(days - turnaround_days, 0.0)
    ahead = np.maximum(turnaround_days - days, 0.0)
    beyond, squares = stay.days_beyond(rest), stay.squared_days_beyond(rest)
    return beyond + ahead, squares + beyond * ahead + ahead**2 / 2.0


def _held_any_hour(stay: LengthOfStay, turnaround_hours: float) -> tuple[Array, Array]:
    """Return the share holding a bed k hours on, ``(1, 8736)``, where a stay ends when it ends.

    Averaged over both hours, and at the end of the later one. Those who stay longest are spread evenly over each day.
    """
    turnaround_days = turnaround_hours * _HOUR
    # one day more, for the half hour that averaging over both hours adds
    horizon = min(_horizon(stay, turnaround_days, HOURS_A_WEEK, _LONGEST, 1e-8) + 24, _LONGEST)
    beyond, squares = _days_beyond(stay, turnaround_days, np.arange(horizon + 1) * _HOUR)
    held = np.zeros((2, _LONGEST))
    held[0, 0] = (beyond[0] * _HOUR - squares[0] + squares[1]) / _HOUR**2
    held[0, 1:horizon] = (squares[:-2] - 2.0 * squares[1:-1] + squares[2:]) / _HOUR**2
    held[1, :horizon] = (beyond[:-1] - beyond[1:]) / _HOUR
    by_day, _ = _days_beyond(stay, turnaround_days, np.arange(horizon // 24, _LONGEST // 24 + 1, dtype=float))
    held[:, horizon:] = np.repeat(by_day[:-1] - by_day[1:], 24)
    rest = beyond[0] / _HOUR - held.sum(axis=1, keepdims=True)
    average, at_end = held.reshape(2, -1, HOURS_A_YEAR).sum(axis=1) + rest / HOURS_A_YEAR
    return average[None], at_end[None]


def _moved_to_discharge_hours(ends: Array, discharge_hours: tuple[float, ...]) -> Array:
    """Move ends ``(24 hours of arrival, days, 24)`` to the hours patients leave at, on the day they fall on.

    On the day of arrival only to a later hour; a stay whose hour would come before its start ends when it ends.
    """
    shares = np.array(discharge_hours)
    moved = ends.sum(axis=2, keepdims=True) * shares
    later = np.triu(np.tile(shares, (24, 1)), 1) + np.diag(shares / 2.0)
    moved[:, 0] = ends[:, 0].sum(axis=1, keepdims=True) * later + ends[:, 0] * (1.0 - later.sum(axis=1, keepdims=True))
    return moved


def _moved_past_weekend(ends: Array, weekday: int, weekend_slip: tuple[float, float]) -> Array:
    """Move ends of patients who came on this weekday: a chance of them from Saturday and Sunday to Monday."""
    moved = ends.copy()
    for day, chance, ahead in ((_SATURDAY, weekend_slip[0], 2), (_SUNDAY, weekend_slip[1], 1)):
        first = (day - weekday) % 7
        slipping = chance * ends[:, first:-2:7]
        moved[:, first:-2:7] -= slipping
        moved[:, first + ahead :: 7][:, : slipping.shape[1]] += slipping
    return moved


def _hours_of_leaving(stay: LengthOfStay, leaving: Leaving, horizon: int) -> Array:
    """Return the share who leave k hours after the hour they came in, by hour of the week, ``(168, horizon)``."""
    beyond = stay.days_beyond(np.arange(horizon + 1) * _HOUR)
    still_in = np.concatenate([[1.0], (beyond[:-1] - beyond[1:]) / _HOUR])
    days = horizon // 24 + 4
    ends = np.zeros((24, days * 24))
    for hour in range(24):
        ends[hour, hour : hour + horizon] = still_in[:-1] - still_in[1:]
    ends = ends.reshape(24, days, 24)
    if leaving.discharge_hours:
        ends = _moved_to_discharge_hours(ends, leaving.discharge_hours)
    found = np.empty((HOURS_A_WEEK, horizon))
    for weekday in range(7):
        moved = _moved_past_weekend(ends, weekday, leaving.weekend_slip)
        # one place further in each row: the hour of coming is that of the row
        found[24 * weekday : 24 * (weekday + 1)] = as_strided(
            moved, (24, horizon), (moved.strides[0] + moved.itemsize, moved.itemsize)
        )
    return found


def _held_by_hour(stay: LengthOfStay, leaving: Leaving) -> tuple[Array, Array]:
    """Return the share holding a bed k hours on by hour of the week of arrival, ``(168, whole weeks of hours)``.

    Averaged over both hours, and at the end of the later one.
    """
    horizon = _horizon(stay, leaving.turnaround_hours * _HOUR, HOURS_A_WEEK, 2 * HOURS_A_YEAR, 2e-5)
    freed = _hours_of_leaving(stay, leaving, horizon)
    whole, part = divmod(leaving.turnaround_hours, 1.0)
    if leaving.turnaround_hours > 0:
        # who left in the hour of coming was in for a third of it on average
        later = freed[:, 0] * (1.0 - 2.0 / (2.0 + min(leaving.turnaround_hours, 1.0)))
        freed[:, 0] -= later
        freed[:, 1] += later
        freed = np.hstack([np.zeros((HOURS_A_WEEK, int(whole) + 1)), freed])[:, : horizon + 1]
        freed = (1.0 - part) * freed[:, 1:] + part * freed[:, :-1]
    at_end = np.cumsum(freed, axis=1)
    np.subtract(1.0, at_end, out=at_end)
    average = np.empty_like(at_end)
    np.add(at_end[:, :-1], at_end[:, 1:], out=average[:, 1:])
    average[:, 1:] /= 2.0
    # Who comes and leaves within one hour holds a bed for a third of it on average, others for half.
    average[:, 0] = 0.5 - freed[:, 0] / 6.0
    for held in (average, at_end):
        held[:, -HOURS_A_WEEK:] += float(stay.days_beyond(horizon * _HOUR)) / _HOUR / HOURS_A_WEEK
    return average, at_end


@lru_cache(maxsize=512)
def _held(stay: LengthOfStay, leaving: Leaving) -> tuple[Array, Array]:
    """Return the share still holding a bed, averaged and at the end of the later hour."""
    both = _held_by_hour(stay, leaving) if leaving.has_rhythm else _held_any_hour(stay, leaving.turnaround_hours)
    for held in both:
        held.setflags(write=False)
    return both


def hours_held(stay: LengthOfStay, leaving: Leaving, period: int, *, at_end: bool = False) -> Array:
    """Which share of those who came k hours ago still hold a bed?

    ``(1, period)``, a week or a year, earlier ones folded onto it, where a stay ends when it ends; where leaving has a
    rhythm, by hour of the week of arrival, ``(168, k)`` for as many whole weeks as patients stay. Averaged over both
    hours, or at the end of the later one. Exact for arrivals at a steady rate within an hour, except that stays moved
    by a rhythm of leaving end evenly over their hour. Each row adds up to the mean hours a bed is held.

    Checked by: tests/models/test_year.py
    """
    held = _held(stay, leaving)[int(at_end)]
    return held if leaving.has_rhythm else held.reshape(1, -1, period).sum(axis=1)


def _weeks_on(held: Array) -> Array:
    """Return who of those in hour c of a week holds a bed in hour h, 1, 2 … weeks later, ``(weeks, 168, 168)``: a view.

    They came h − c hours and those weeks ago: one column further for each row, in weeks of ``held`` ``(168, k)``.
    """
    size, width = held.itemsize, held.shape[1]
    shape = (width // HOURS_A_WEEK - 1, HOURS_A_WEEK, HOURS_A_WEEK)
    return as_strided(held.ravel()[HOURS_A_WEEK:], shape, (HOURS_A_WEEK * size, (width - 1) * size, size))


def beds_held(arrivals: Array, held: Array) -> Array:
    """How many beds do these arrivals, ``(period,)``, hold in each hour, if the period repeats for ever?

    Source: Eick, Massey & Whitt 1993, Management Science 39(2).
    Checked by: tests/models/test_year.py
    """
    if held.shape[0] == 1:
        beds = np.fft.irfft(np.fft.rfft(arrivals) * np.fft.rfft(held[0]), arrivals.size)
        return np.maximum(beds, 0.0)
    weeks = arrivals.reshape(-1, HOURS_A_WEEK)
    first = np.pad(held[:, :HOURS_A_WEEK], ((0, 0), (HOURS_A_WEEK, 0)))
    last = np.pad(held[:, -HOURS_A_WEEK:], ((0, 0), (0, HOURS_A_WEEK)))
    beds = np.zeros_like(weeks)
    for ago, since in enumerate(chain(_weeks_on(first), _weeks_on(held), _weeks_on(last))):
        beds += np.roll(weeks, ago, axis=0) @ since
    return beds.ravel()
