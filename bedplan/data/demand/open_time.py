"""How many patients come while a bed is free, and whether a freed bed is taken by somebody who was waiting for it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

from bedplan.data.wards.occupancy import open_beds, present

if TYPE_CHECKING:
    import pandas as pd
    from numpy.typing import NDArray

    from bedplan.data.beside.capacity import Capacity
    from bedplan.data.cleaning.records import Records

WEEK_HOURS, DAY_MINUTES, HOUR_MINUTES = 168, 1_440, 60
LEAST_OPEN = 0.05  # of some hour of the week, or of a month: below it, nothing can be told of that hour
# Left out after a full ward gets a bed: whoever comes then may have been waiting. Common practice, no source.
SETTLING_MINUTES = 240
RUSH = 2.5  # times the usual rate within that time, from which patients queue. Common practice, no source.
ROUNDS = 60


@dataclass(frozen=True, slots=True)
class OpenTime:
    """What a ward's free and full hours tell about those who ask for a bed there.

    ``per_day``: patients who ask for a bed, a day, with its standard error ``error``, from those who came while a bed
    was free. ``share_full``: of all time. ``least_open``: share of time with a free bed in the worst hour of the week
    or month. ``taken``: patients who took a bed of a full ward within four hours of its coming free;
    ``taken_usually``: as many as would have by the usual rate.
    """

    per_day: float
    error: float
    share_full: float
    least_open: float
    taken: int
    taken_usually: float

    @property
    def rush(self) -> float:
        """How many times as fast as usual is a freed bed of the full ward taken?"""
        return self.taken / self.taken_usually if self.taken_usually > 0 else 1.0

    @property
    def is_queued_for(self) -> bool:
        """Do patients wait for this ward's beds? Freed beds are taken much faster than usual, beyond chance."""
        by_chance = special.gammaincinv(max(self.taken, 1), 0.01)  # fewest on average that could give so many
        return self.rush >= RUSH and by_chance > self.taken_usually

    @property
    def can_tell(self) -> bool:
        """Was there enough open time in every hour of the week and every month?"""
        return self.least_open >= LEAST_OPEN


@dataclass(frozen=True, slots=True)
class WardMinutes:
    """Every minute of the window: is the ward full, and has a bed been free for a while; who came and left when.

    ``free`` (days, 24): beds free at half past each hour (0: full, or fuller than its beds).
    ``cell`` (minutes,): hour of the week × 12 + month, −1 on days that don't count. ``came`` and ``left``: minutes of
    the window, ascending.
    """

    first_second: int
    is_full: NDArray[np.bool_]
    free: NDArray[np.int64]
    is_open: NDArray[np.bool_]
    cell: NDArray[np.int16]
    came: NDArray[np.int64]
    left: NDArray[np.int64]

    def moments(self, times: pd.Series) -> NDArray[np.int64]:
        """In which minutes of the window were these times? Ascending."""
        return _moments(times, self.first_second, self.is_full.size)

    def per_cell(self, which: NDArray[np.int64] | NDArray[np.bool_] | slice) -> NDArray[np.int64]:
        """How many of these minutes fall in each hour of the week and each month? An array (168, 12)."""
        cells = self.cell[which]
        return np.bincount(cells[cells >= 0], minlength=WEEK_HOURS * 12).reshape(WEEK_HOURS, 12)


def _moments(times: pd.Series, first_second: int, minutes: int) -> NDArray[np.int64]:
    known = times.dropna().to_numpy().astype("datetime64[s]").astype(np.int64)
    inside = np.sort((known - first_second) // 60)
    return inside[(inside > 0) & (inside < minutes)]


def ward_minutes(
    records: Records, on_ward: pd.DataFrame, ward: str, capacity: Capacity, fewer: NDArray[np.int64] | int = 0
) -> WardMinutes:
    """When was this ward full, and when had it had a free bed for four hours? ``on_ward``: all stays on it.

    ``fewer``: so many of its stated beds, on each day or on all, are taken not to be there.
    """
    beds = open_beds(records, ward, capacity, 1) - fewer
    free = np.repeat(beds, DAY_MINUTES) - present(records, on_ward, 60)
    is_full, half_hours = free <= 0, free[HOUR_MINUTES // 2 :: HOUR_MINUTES]  # beds change hands on the hour
    minute = np.arange(is_full.size, dtype=np.int32)
    last_full = np.maximum.accumulate(np.where(is_full, minute, np.int32(-SETTLING_MINUTES - 1)))
    counts = records.counted_days
    hours = (np.arange(records.days * 24) + 24 * records.window[0].weekday()) % WEEK_HOURS
    cell = hours * 12 + np.repeat(records.calendar.month.to_numpy() - 1, 24)
    first = int(records.window[0].timestamp())
    return WardMinutes(
        first_second=first,
        is_full=is_full,
        free=np.maximum(half_hours, 0).reshape(-1, 24),
        is_open=np.repeat(counts, DAY_MINUTES) & (minute - last_full > SETTLING_MINUTES),
        cell=np.repeat(np.where(np.repeat(counts, 24), cell, -1).astype(np.int16), HOUR_MINUTES),
        came=_moments(on_ward["start"], first, is_full.size),
        left=_moments(on_ward["end"], first, is_full.size),
    )


def watch_open_time(minutes: WardMinutes, asking: pd.DataFrame) -> OpenTime:
    """How many patients ask for a bed on this ward, by those who come while it has one?

    ``asking``: the stays on it whose patients would have gone elsewhere had it been full. Counted hour of the week by
    hour of the week and month by month, because beds are free at night and in summer, when few come: rate =
    admissions ÷ time with a bed free. The four hours after a full ward gets a bed are left out, so that a patient who
    waited a little is not taken for one who has just come. Holds where patients come independently of each other and
    go elsewhere at once when the ward is full.

    Source: Wolff 1982 (Poisson arrivals see time averages); the two-way rates are the maximum likelihood fit of a
    product of hour and month (Deming & Stephan 1940).
    Checked by: tests/data/demand/test_hidden_demand.py
    """
    asked = minutes.moments(asking["start"])
    came = minutes.per_cell(asked[minutes.is_open[asked - 1]])
    open_time, all_time = minutes.per_cell(minutes.is_open), minutes.per_cell(slice(None))
    rates = _rates(came, open_time, all_time)
    days = all_time.sum() / DAY_MINUTES
    by_hour = (rates * all_time).sum(axis=1)
    seen = np.maximum(came.sum(axis=1), 1)
    taken, usually = _after_full(minutes, asked, rates)
    return OpenTime(
        per_day=float(by_hour.sum() / days),
        error=float(np.sqrt((by_hour**2 / seen).sum()) / days),
        share_full=float(minutes.is_full[minutes.cell >= 0].mean()),
        least_open=min(float(_open_shares(open_time, all_time, axis).min()) for axis in (0, 1)),
        taken=taken,
        taken_usually=usually,
    )


def _rates(came: NDArray[np.int64], open_time: NDArray[np.int64], all_time: NDArray[np.int64]) -> NDArray[np.float64]:
    """Return patients a minute for each hour of the week and month (168, 12): an hour's rate × a month's factor.

    An hour or month with hardly any open time is taken to be as busy as the busiest of the others.
    """
    told = [_open_shares(open_time, all_time, axis) >= LEAST_OPEN for axis in (0, 1)]
    month = (all_time.sum(axis=0) > 0).astype(float)
    for _ in range(ROUNDS):
        hour = came.sum(axis=1) / np.maximum(open_time @ month, 1e-9)
        month = came.sum(axis=0) / np.maximum(hour @ open_time, 1e-9)
    month, hour = (
        np.where(known | ~known.any(), factors, factors[known].max(initial=0.0))
        for known, factors in zip(told, (month, hour), strict=True)
    )
    return hour[:, None] * month


def _open_shares(part: NDArray[np.int64], whole: NDArray[np.int64], axis: int) -> NDArray[np.float64]:
    """Return the share of part in whole for the months (axis 0) or hours (axis 1); 1 for those that the file lacks."""
    seen = whole.sum(axis=axis)
    return np.where(seen > 0, part.sum(axis=axis) / np.maximum(seen, 1), 1.0)


def _after_full(minutes: WardMinutes, asked: NDArray[np.int64], rates: NDArray[np.float64]) -> tuple[int, float]:
    """Return how often the next patient came within four hours of a full ward's bed coming free, and how often usually.

    Each freed bed is watched until the next patient comes, four hours at most; usual is what the rates give over the
    time watched. A next patient who is not among those asking ends the watch but is not counted.
    """
    end = minutes.is_full.size - 1
    freed = minutes.left[minutes.is_full[minutes.left - 1] & (minutes.cell[minutes.left] >= 0)]
    soonest = np.append(minutes.came, end)[np.searchsorted(minutes.came, freed)]
    watched = np.minimum(np.minimum(soonest, freed + SETTLING_MINUTES), end)
    usual = np.concatenate(([0.0], np.cumsum(rates.ravel()[np.maximum(minutes.cell, 0)])))
    taken = (soonest <= freed + SETTLING_MINUTES) & np.isin(soonest, asked)
    return int(taken.sum()), float((usual[watched] - usual[freed]).sum())
