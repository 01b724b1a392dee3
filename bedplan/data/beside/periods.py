"""Periods with a number of beds: which of them counts on a day, and the beds of wards that became one."""

from __future__ import annotations

from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.cleaning.wardlinks import bare_name

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

DAY = np.timedelta64(86_400, "s")
BED_COUNTS = ("funded", "staffed", "closed")


def periods_that_count(rows: pd.DataFrame) -> tuple[NDArray[np.datetime64], NDArray[np.int64]]:
    """From which days on does which row count? One ward's rows, oldest first; of those that cover a day the last one.

    Days no row covers take the row before, else the first. Returns first days, and the place of the row from each on.
    """
    first, end = (rows[key].to_numpy().astype("datetime64[s]") for key in ("from", "to"))
    starts = np.unique(np.concatenate((first, end + DAY)))
    counts = np.full(starts.size, -1, dtype=np.int64)
    for place, (begin, last) in enumerate(zip(first, end, strict=True)):
        counts[(starts >= begin) & (starts <= last)] = place
    covered = np.flatnonzero(counts >= 0)
    before = np.searchsorted(covered, np.arange(starts.size), side="right") - 1
    return starts, counts[covered[np.maximum(before, 0)]]


def merged(table: pd.DataFrame, names: Mapping[str, str]) -> pd.DataFrame:
    """Return the periods under other names; wards that get one name and had beds side by side have the sum of them."""
    renamed = table.assign(ward=table["ward"].map(names))
    parts = []
    for ward, rows in renamed.groupby("ward", sort=True):
        wards = table.loc[rows.index, "ward"]
        by_ward = [rows[wards == name] for name in wards.unique()]
        separate = len({bare_name(name) for name in wards.unique()}) > 1
        parts.append(_side_by_side(by_ward, str(ward)) if separate and _overlap(by_ward) else rows)
    return pd.concat(parts).sort_values(
        ["ward", "from", "to"], ascending=[True, True, False], kind="stable", ignore_index=True
    )


def _overlap(by_ward: list[pd.DataFrame]) -> bool:
    """Were two of these wards there at once?"""
    lives = sorted((rows["from"].min(), rows["to"].max()) for rows in by_ward)
    return any(later[0] <= earlier[1] for earlier, later in pairwise(lives))


def _side_by_side(by_ward: list[pd.DataFrame], ward: str) -> pd.DataFrame:
    """Add the beds of several wards, period by period; each counts from its first day to its last."""
    every = [(rows, *periods_that_count(rows)) for rows in by_ward]
    starts = np.unique(np.concatenate([begins for _, begins, _ in every]))
    total = np.zeros((starts.size, len(BED_COUNTS)), dtype=np.int64)
    there = np.zeros(starts.size, dtype=bool)
    why = np.full(starts.size, "", dtype=object)
    for rows, begins, counts in every:
        last = rows["to"].max().to_datetime64()
        inside = (starts >= begins[0]) & (starts <= last)
        place = counts[np.searchsorted(begins, starts[inside], side="right") - 1]
        total[inside] += rows[list(BED_COUNTS)].to_numpy(dtype=np.int64)[place]
        why[inside] = [
            " ".join(part for part in pair if part)
            for pair in zip(why[inside], rows["reason"].to_numpy()[place], strict=True)
        ]
        there |= inside
    ends = np.append(starts[1:] - DAY, starts[-1:])
    columns = dict(zip(BED_COUNTS, total[there].T, strict=True))
    return pd.DataFrame({"ward": ward, "from": starts[there], "to": ends[there], **columns, "reason": why[there]})
