"""Patients present minute by minute and hour by hour, from stays: one count up at each start, one down at each end."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.files.blocks import in_blocks
from bedplan.data.files.dates import DAY_SECONDS

if TYPE_CHECKING:
    import pandas as pd
    from numpy.typing import NDArray

    from bedplan.data.beside.capacity import Capacity
    from bedplan.data.cleaning.records import Records


def present(records: Records, stays: pd.DataFrame, step_seconds: int) -> NDArray[np.int32]:
    """How many patients are in at the start of each step of the window? (steps,), by a difference array.

    A stay counts from its start until its end, its end's moment excluded; unfinished stays count to the window's end.

    Checked by: tests/data/wards/test_occupancy.py
    """
    first = int(records.window[0].timestamp())
    steps = records.days * DAY_SECONDS // step_seconds
    start = stays["start"].to_numpy().astype("datetime64[s]").astype(np.int64) - first
    end = stays["end"].to_numpy().astype("datetime64[s]").astype(np.int64)
    open_end = stays["end"].isna().to_numpy()
    # The first step at or after a moment: a patient who comes at 10:20 is first seen at 11:00.
    came = np.clip(-(-start // step_seconds), 0, steps)
    left = np.where(open_end, steps, np.clip(-(-(np.where(open_end, first, end) - first) // step_seconds), 0, steps))
    change = np.bincount(came, minlength=steps + 1) - np.bincount(left, minlength=steps + 1)
    return np.cumsum(change[:steps]).astype(np.int32)


def present_by_ward(records: Records, step_seconds: int) -> dict[str, NDArray[np.int32]]:
    """How many patients are in on each ward at the start of each step of the window? As :func:`present`, all at once.

    Checked by: tests/data/wards/test_occupancy.py
    """
    first = int(records.window[0].timestamp())
    steps = records.days * DAY_SECONDS // step_seconds
    codes, wards = records.stays["ward"].cat.codes.to_numpy(), records.stays["ward"].cat.categories

    def counted(times: NDArray[np.datetime64]) -> NDArray[np.int64]:
        """Count these moments by ward and step, (wards, steps + 1); those not known after the last step."""

        def places(block: slice) -> NDArray[np.int64]:
            """Return ward and step of one block as one number."""
            known = ~np.isnat(times[block])
            late = times[block].astype("datetime64[s]").astype(np.int64) + (step_seconds - 1 - first)
            step = np.where(known, np.clip(late // step_seconds, 0, steps), steps)
            return codes[block].astype(np.int64) * (steps + 1) + step

        found = np.concatenate(in_blocks(times.size, places))
        return np.bincount(found, minlength=len(wards) * (steps + 1)).reshape(len(wards), -1)

    came, left = (counted(records.stays[column].to_numpy()) for column in ("start", "end"))
    return dict(zip(wards, np.cumsum((came - left)[:, :steps], axis=1, dtype=np.int32), strict=True))


def open_beds(records: Records, ward: str, capacity: Capacity, steps_a_day: int) -> NDArray[np.int64]:
    """How many beds could take a patient in each step of the window? Whole numbers (steps,)."""
    return np.repeat(capacity.open_beds_by_day(ward, records.calendar).to_numpy(dtype=np.int64), steps_a_day)


def bed_days(records: Records, stays: pd.DataFrame) -> NDArray[np.float64]:
    """How many bed-days does each stay use on the window's days that count? (n,); unfinished stays run to its end.

    Checked by: tests/data/wards/test_occupancy.py, tests/data/wards/test_describing.py
    """
    first, last = (int(moment.timestamp()) for moment in records.window)
    start = stays["start"].to_numpy().astype("datetime64[s]").astype(np.int64)
    end = stays["end"].to_numpy().astype("datetime64[s]").astype(np.int64)
    end = np.where(stays["end"].isna().to_numpy(), last, end)
    begins, ends = (_counted_seconds(records, np.clip(moment - first, 0, last - first)) for moment in (start, end))
    return np.maximum(ends - begins, 0) / DAY_SECONDS


def _counted_seconds(records: Records, since_first: NDArray[np.int64]) -> NDArray[np.int64]:
    """Return how much of the time from the window's start to these seconds lies on days that count."""
    if not records.excluded:
        return since_first
    counts = np.append(records.counted_days, False).astype(np.int64)
    before = np.concatenate(([0], np.cumsum(counts[:-1])))
    day, rest = np.divmod(since_first, DAY_SECONDS)
    return before[day] * DAY_SECONDS + counts[day] * rest
