"""What is counted on a simulated ward."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import TYPE_CHECKING

import numpy as np

from bedplan.models.rhythm.year import HOURS_A_YEAR, month_of_hour
from bedplan.models.simulation.events import BOOKED, CLOSURE

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models.simulation.beds import Passage
    from bedplan.models.simulation.events import Comers
    from bedplan.models.simulation.run import Extent

    Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Counts:
    """What was counted in some replications."""

    came: Array
    found_full: Array
    came_by_month: Array
    full_by_month: Array
    booked: float
    booked_full: float
    gave_up: float
    patient_days: float
    waited_days: Array


def _month_of(days: Array, extent: Extent) -> NDArray[np.int64]:
    """In which month of the 52-week year does each counted day lie?"""
    return month_of_hour[((days - extent.warm_up_days) * 24.0).astype(np.int64) % HOURS_A_YEAR]


def is_patient_in(comers: Comers, end_day: float) -> NDArray[np.bool_]:
    """Tell patients from shut beds and empty cells.

    Checked by: tests/models/test_simulation.py
    """
    is_patient = comers.at < end_day
    return is_patient if comers.kind is None else is_patient & (comers.kind < CLOSURE)


def patient_days_of(comers: Comers, passage: Passage, extent: Extent, is_patient: NDArray[np.bool_]) -> float:
    """Add up the counted days that patients spent in beds.

    Checked by: tests/models/test_simulation.py
    """
    start = passage.bed_ready if comers.ahead_days is None else passage.bed_ready + comers.ahead_days
    first, last = extent.warm_up_days, extent.end_day
    days = np.clip(passage.left, first, last) - np.clip(start, first, last)
    latest = comers.latest_start
    got_a_bed = is_patient if latest is None else is_patient & (passage.bed_ready <= latest)
    return float(np.sum(days, where=got_a_bed))


def counts_of(comers: Comers, passage: Passage, extent: Extent, *, by_month: bool) -> Counts:
    """Count everybody who came in the counted days; by month of coming only where months differ.

    Checked by: tests/models/test_simulation.py
    """
    is_patient = is_patient_in(comers, extent.end_day)
    full = passage.found_full & is_patient
    places = np.flatnonzero(full)
    at, ready = comers.at.ravel()[places], passage.bed_ready.ravel()[places]
    patience = np.broadcast_to(comers.patience_days, full.shape).reshape(-1)[places]
    waited = patience > 0.0
    is_booked = is_patient & (comers.kind == BOOKED) if comers.kind is not None else np.zeros(full.shape, dtype=bool)
    none = np.zeros(0, dtype=np.int64)
    month = _month_of(at, extent) if by_month else np.zeros(at.size, dtype=np.int64)
    month_of_all = _month_of(comers.at[is_patient], extent) if by_month else none
    return Counts(
        came=np.count_nonzero(is_patient, axis=0).astype(float),
        found_full=np.count_nonzero(full, axis=0).astype(float),
        came_by_month=np.bincount(month_of_all, minlength=12).astype(float),
        full_by_month=np.bincount(month, minlength=12).astype(float),
        booked=float(is_booked.sum()),
        booked_full=float((full & is_booked).sum()),
        gave_up=float(np.count_nonzero(waited & (ready > at + patience))),
        patient_days=patient_days_of(comers, passage, extent, is_patient),
        waited_days=np.minimum(ready - at, patience)[waited],
    )


def joined(blocks: list[Counts]) -> Counts:
    """Put the blocks of replications together.

    Checked by: tests/models/test_simulation.py
    """
    side_by_side = {"came", "found_full", "waited_days"}
    return Counts(
        **{
            one.name: np.concatenate([getattr(block, one.name) for block in blocks])
            if one.name in side_by_side
            else sum(getattr(block, one.name) for block in blocks)
            for one in fields(Counts)
        }
    )
