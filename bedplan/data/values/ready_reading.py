"""When patients were ready to leave: read from a file of its own, or from a column of the ward stays."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pyarrow as pa

from bedplan.data.files.dates import DAY_SECONDS, MISSING, UNREADABLE, read_times
from bedplan.data.files.headings import READY_HEADINGS
from bedplan.data.files.reading import read_table
from bedplan.data.files.source import FileLike, open_source
from bedplan.data.values.accounting import account
from bedplan.data.values.choices import DATE_ORDERS, EXCHANGED
from bedplan.data.values.exchanged import exchanged
from bedplan.data.values.moments import when
from bedplan.data.values.ready import KEYS, ReadyDates
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from bedplan.data.values.rows import Rows

    Seconds = NDArray[np.int64]

DAY_FIRST, MONTH_FIRST, ROW_BY_ROW = DATE_ORDERS


def read_ready_dates(
    source: FileLike,
    *,
    name: str | None = None,
    columns: Mapping[str, str] | None = None,
    date_order: str | None = None,
) -> ReadyDates:
    """Since when was each patient ready to leave? A row for each stay or patient, for ``IntakeChoices.ready_dates``.

    Columns spell_key or patient_key, and date, or date and time. ``columns`` and ``date_order`` as in ``read_records``.

    Raises:
        UnreadableRecords: no key or no date, nothing that can be used, or dates whose order somebody must say (the
            question is in ``.question``).

    Checked by: tests/data/values/test_ready.py
    """
    file = open_source(source, name)
    text = read_table(file, READY_HEADINGS, columns)
    if not {"date", "time"} & set(text.columns) or not set(KEYS) & set(text.columns):
        told = f"{file.name} lacks a column of keys or of ready dates: it should have a row for each stay or patient"
        raise UnreadableRecords([f"{told}, with spell_key or patient_key and date."])
    (ready,), _ = when(text, file.name, date_order)
    reason = pd.Series("", index=range(text.rows), dtype=object)
    reason[ready == UNREADABLE] = "The ready date can't be read"
    reason[ready == MISSING] = "No ready date: the patient was not ready, or nobody noted it"
    named = [pd.Series(text.strings(key)) != "" for key in KEYS if key in text.columns]
    reason[~np.logical_or.reduce(named)] = "No patient or stay is named"
    kept = pa.array((reason == "").to_numpy())
    report = account(text, reason, file.name, "write dates as 2024-03-31 14:05")
    keys = {key: text.columns[key].filter(kept) for key in KEYS if key in text.columns}
    return ReadyDates(file.name, report, keys, ready[(reason == "").to_numpy()])


def ready_column(column: pa.ChunkedArray, rows: Rows, date_order: str | None, time_zone: str | None = None) -> Seconds:
    """When was each stay's patient ready, by a column of the stays' own file?

    Read in the order of day and month that somebody said, else the one that puts more of them within their stays.
    """
    said = date_order in (DAY_FIRST, MONTH_FIRST)
    day_first = read_times(column, date_order if said else DAY_FIRST, time_zone)
    if date_order == EXCHANGED:
        return _fitting(day_first.seconds, exchanged(day_first.seconds), rows)
    if said or not (day_first.either_order or day_first.month_first_only):
        return day_first.seconds
    first, second = day_first.seconds, read_times(column, MONTH_FIRST, time_zone).seconds
    if date_order == ROW_BY_ROW:
        return _fitting(first, second, rows)
    within = [_within(one, rows) for one in (first, second)]
    return second if within[1].sum() > within[0].sum() else first


def _fitting(first: Seconds, second: Seconds, rows: Rows) -> Seconds:
    """Return the first reading of each date, the second where only that lies within the stay."""
    return np.where(_within(second, rows) & ~_within(first, rows), second, first)


def _within(ready: Seconds, rows: Rows) -> NDArray[np.bool_]:
    """Which dates lie in their stay, from its first day to its end?"""
    ended = (rows.end > UNREADABLE) & (ready > rows.end)
    return (ready > UNREADABLE) & (ready >= rows.start - rows.start % DAY_SECONDS) & (rows.start > UNREADABLE) & ~ended
