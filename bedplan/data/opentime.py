"""The rate at which patients come while a bed is free, and whether they queue for the ward."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.dates import DAY_SECONDS
from bedplan.data.occupancy import open_beds, present

if TYPE_CHECKING:
    import pandas as pd
    from numpy.typing import NDArray

    from bedplan.data.capacity import Capacity
    from bedplan.data.records import Records

WEEK_HOURS, DAY_MINUTES = 168, 1_440
LEAST_OPEN = 0.05  # of an hour of the week, below which nothing can be told of it
SOON_MINUTES = 120  # after a full ward opens
QUEUE_RATIO = 1.5


@dataclass(frozen=True, slots=True)
class OpenTime:
    """Admissions while a bed was free: ``per_day`` with its standard error; ``full_share`` of time without a free bed.

    ``taken_soon`` admissions within two hours of a full ward's bed coming free, ``expected_soon`` what the rate at
    other times gives: far more than expected means that patients queue. ``least_open`` is the smallest share of time
    with a free bed of any hour of the week.
    """

    per_day: float
    error: float
    full_share: float
    least_open: float
    taken_soon: int
    expected_soon: float

    @property
    def patients_queue(self) -> bool:
        """Are freed beds taken at once by patients who were waiting for them?"""
        beyond = self.taken_soon - self.expected_soon
        return self.taken_soon > QUEUE_RATIO * self.expected_soon and beyond > 3.0 * max(self.expected_soon, 1.0) ** 0.5

    @property
    def can_tell(self) -> bool:
        """Was there a free bed for at least 1 minute in 20 of every hour of the week?"""
        return self.least_open >= LEAST_OPEN


def open_time(
    records: Records, ward: str, stays: pd.DataFrame, capacity: Capacity, own: pd.DataFrame | None = None
) -> OpenTime:
    """How many patients come while a bed is free? Hour of the week by hour of the week, because beds are free at night.

    ``stays`` are all stays on the ward, which say when a bed is free; ``own`` those whose arrivals are counted.
    Holds for wards whose patients go elsewhere when it is full: those who come while it is full leave no trace, those
    who come while it is open come at the true rate (arrivals see time averages).

    Source: Wolff 1982 (Poisson arrivals see time averages).
    Checked by: tests/data/test_hidden_demand.py
    """
    beds = open_beds(records, ward, capacity, DAY_MINUTES)
    is_open = present(records, stays, 60) < beds
    minute = np.arange(beds.size)
    came = _minutes_of_coming(records, stays if own is None else own)
    hour = ((minute // 60) + 24 * records.window[0].weekday()) % WEEK_HOURS
    open_minutes = np.bincount(hour[is_open], minlength=WEEK_HOURS)
    all_minutes = np.bincount(hour, minlength=WEEK_HOURS)
    admitted = np.bincount(hour[came], minlength=WEEK_HOURS)
    seen = np.maximum(open_minutes, 1)
    per_day = float((admitted / seen).mean()) * DAY_MINUTES
    error = float(np.sqrt((admitted / seen**2).sum())) / WEEK_HOURS * DAY_MINUTES
    soon, expected = _soon(is_open, came, hour % 24)
    shares = open_minutes / np.maximum(all_minutes, 1)
    least = float(shares[all_minutes > 0].min())
    return OpenTime(per_day, error, 1.0 - float(is_open.mean()), least, soon, expected)


def _minutes_of_coming(records: Records, stays: pd.DataFrame) -> NDArray[np.int64]:
    """Return the minute of the window in which each patient came."""
    start = stays["start"].to_numpy().astype("datetime64[s]").astype(np.int64) - int(records.window[0].timestamp())
    inside = (start >= 0) & (start < records.days * DAY_SECONDS)
    return start[inside] // 60


def _soon(is_open: NDArray[np.bool_], came: NDArray[np.int64], clock: NDArray[np.int64]) -> tuple[int, float]:
    """Return admissions within two hours of a full ward opening, and how many the rate at other times would give."""
    minute = np.arange(is_open.size)
    last_full = np.maximum.accumulate(np.where(is_open, -SOON_MINUTES - 1, minute))
    recent = minute - last_full <= SOON_MINUTES
    calm = is_open & ~recent
    lately = recent[np.maximum(came - 1, 0)]  # how it was when they came, not once they were in
    rate = np.bincount(clock[came[~lately]], minlength=24) / np.maximum(np.bincount(clock[calm], minlength=24), 1)
    open_lately = np.bincount(clock[recent & is_open], minlength=24)
    return int(lately.sum()), float((rate * open_lately).sum())
