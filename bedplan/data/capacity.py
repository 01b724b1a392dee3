"""Beds by ward and date: how many were funded, staffed, closed; what the ward could really use on a day."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pyarrow as pa

from bedplan.data.columns import TELLTALES, without_formula, words
from bedplan.data.dateorder import read_ordered
from bedplan.data.dates import MISSING, UNREADABLE
from bedplan.data.reading import read_table
from bedplan.data.source import FileLike, open_source
from bedplan.data.table import as_times
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Mapping

    from bedplan.data.texttable import TextTable

CAPACITY_HEADINGS: dict[str, tuple[str, ...]] = {
    "ward": words("ward wardcode wardname location unit"),
    "from": words("from start startdate datefrom fromdate validfrom date since"),
    "to": words("to end enddate dateto todate validto until"),
    "funded": words("fundedbeds funded established establishment budgetedbeds beds"),
    "staffed": words("staffedbeds staffed openbeds available bedsavailable availablebeds"),
    "closed": words("closedbeds closed bedsclosed"),
    "reason": words("reason comment note notes why"),
}
OPEN_ENDS = ("1990-01-01", "2100-12-31")  # of a period without a first or a last day


@dataclass(frozen=True)
class Capacity:
    """The beds of each ward through time. ``table``: ward, from, to (last day, included), funded, staffed, closed.

    Open beds = staffed beds that are not closed. Days no row covers take the nearest earlier row, else the first.

    Checked by: tests/data/test_capacity.py
    """

    name: str
    table: pd.DataFrame
    wards: tuple[str, ...]
    notes: tuple[str, ...] = ()

    def _rows(self, ward: str) -> pd.DataFrame:
        """Return the rows of one ward, oldest first."""
        rows = self.table[self.table["ward"] == ward]
        if rows.empty:
            raise UnreadableRecords([f"Ward “{ward}” is not in {self.name}; it lists {', '.join(self.wards[:12])}."])
        return rows

    def beds_today(self, ward: str) -> int:
        """How many staffed beds does this ward have by its latest row?"""
        return int(self._rows(ward)["staffed"].iloc[-1])

    def funded_today(self, ward: str) -> int:
        """How many funded beds does this ward have by its latest row?"""
        return int(self._rows(ward)["funded"].iloc[-1])

    def open_beds_by_day(self, ward: str, days: pd.DatetimeIndex | None = None) -> pd.Series:
        """How many beds could take a patient on each day? Staffed less closed, whole numbers, by date."""
        rows = self._rows(ward)
        if days is None:
            days = pd.date_range(rows["from"].min(), rows["to"].max(), freq="D")
        starts = rows["from"].to_numpy().astype("datetime64[s]")
        place = np.searchsorted(starts, days.to_numpy().astype("datetime64[s]"), side="right") - 1
        beds = (rows["staffed"] - rows["closed"]).to_numpy()
        return pd.Series(beds[np.maximum(place, 0)], index=days, name=ward)

    def closures(self, ward: str) -> pd.DataFrame:
        """When were beds closed, how many, and why?"""
        rows = self._rows(ward)
        return rows[rows["closed"] > 0].reset_index(drop=True)


def beds_in_text(text: str | None) -> tuple[int, int] | None:
    """How many beds does a cell such as ``24 (+2)`` name? (regular, extra); *closed* = 0; None where it says nothing.

    Checked by: tests/data/test_capacity.py
    """
    cell = (text or "").strip().lower()
    if cell in ("closed", "shut"):
        return 0, 0
    fits = re.fullmatch(r"(\d{1,5})(?:[.,]0+)?(?:\s*[(/+]+\s*\+?(\d{1,4})\)?)?", cell)
    return (int(fits[1]), int(fits[2] or 0)) if fits else None


def read_capacity(
    source: FileLike,
    *,
    name: str | None = None,
    columns: Mapping[str, str] | None = None,
    date_order: str | None = None,
) -> Capacity:
    """How many beds did each ward have, from when to when?

    Columns ward, from, to, funded_beds, staffed_beds, closed_beds, reason; only ward and one of the bed counts are
    needed. Without staffed beds the funded ones stand in, and a note says so. ``24 (+2)`` is 24 funded and 26 staffed.

    Raises:
        UnreadableRecords: no ward or no bed column, cells that name no number of beds, or dates whose order somebody must
            say (the question is in ``.question``).

    Checked by: tests/data/test_capacity.py
    """
    file = open_source(source, name)
    text = read_table(file, CAPACITY_HEADINGS, columns)
    if "ward" not in text.columns or not {"funded", "staffed"} & set(text.columns):
        text.refuse_kinds(
            file.name, "staffed beds", *(kind for kind in TELLTALES if kind not in ("staffed beds", "a census"))
        )
        lacks = "ward" if "ward" not in text.columns else "staffed or funded beds"
        raise UnreadableRecords(
            [f"{file.name} lacks a column of {lacks}: it should have a row for each ward and period, with both."]
        )
    frame, notes = _frame(text, file.name, date_order)
    return Capacity(file.name, frame, tuple(sorted(set(frame["ward"]))), tuple(notes))


def _frame(text: TextTable, name: str, date_order: str | None) -> tuple[pd.DataFrame, list[str]]:
    """Build the table of periods, one ward after another, oldest first."""
    notes: list[str] = list(text.notes)
    wards = [without_formula(ward or "") for ward in text.columns["ward"].to_pylist()]
    counts = {key: _counts(text.columns.get(key), text.rows) for key in ("funded", "staffed", "closed")}
    problems = _bad_cells(text, counts, name)
    if problems:
        raise UnreadableRecords(problems)
    regular = counts["staffed"] if "staffed" in text.columns else counts["funded"]
    staffed = [cell and cell[0] + cell[1] for cell in regular]
    funded = [cell and cell[0] for cell in (counts["funded"] if "funded" in text.columns else regular)]
    if "staffed" not in text.columns:
        notes.append("The file names funded beds only; they are taken as staffed.")
    since, until = _dates(text, name, date_order)
    frame = pd.DataFrame(
        {
            "ward": wards,
            "from": since,
            "to": until,
            "funded": funded,
            "staffed": staffed,
            "closed": [cell[0] if cell else 0 for cell in counts["closed"]],
            "reason": _reasons(text),
        }
    )
    frame = frame[(frame["ward"] != "") & frame["staffed"].notna()]
    if frame.empty:
        raise UnreadableRecords(
            [f"{name} names no ward with a number of beds: check the columns ward and staffed_beds."]
        )
    frame = frame.astype({"funded": int, "staffed": int, "closed": int})
    return frame.sort_values(["ward", "from"], kind="stable").reset_index(drop=True), notes


def _counts(column: pa.ChunkedArray | None, rows: int) -> list[tuple[int, int] | None]:
    """Return (regular, extra) beds for each row."""
    return [None] * rows if column is None else [beds_in_text(cell) for cell in column.to_pylist()]


def _bad_cells(text: TextTable, counts: Mapping[str, list[tuple[int, int] | None]], name: str) -> list[str]:
    """Name the cells that hold something, but no number of beds."""
    problems = []
    for key, cells in counts.items():
        if key not in text.columns:
            continue
        written = text.columns[key].to_pylist()
        for row, (cell, given) in enumerate(zip(cells, written, strict=True)):
            if cell is None and given and given.strip().lower() not in ("n/a", "na", "-", ""):
                problems.append(
                    f"“{given[:20]}” in row {row + 1} of {name} is no number of {key} beds: write a whole number."
                )
    return problems[:10]


def _dates(text: TextTable, name: str, date_order: str | None) -> list[np.ndarray]:
    """Return first and last days, blanks open-ended; both columns are written in one order of day and month."""
    blank = pa.chunked_array([pa.nulls(text.rows, pa.string())])
    columns = [text.columns.get(key, blank) for key in ("from", "to")]
    together = pa.chunked_array([chunk for column in columns for chunk in column.chunks], pa.string())
    both = read_ordered(together, name, date_order)
    if (both == UNREADABLE).any():
        row = int(np.flatnonzero(both == UNREADABLE)[0])
        written = together[row].as_py()[:20]
        raise UnreadableRecords([f"“{written}” in row {row % text.rows + 1} of {name} is no date: write 2024-03-31."])
    parts = zip(np.split(both, 2), OPEN_ENDS, strict=True)
    return [np.where(part == MISSING, np.datetime64(end, "s"), as_times(part)) for part, end in parts]


def _reasons(text: TextTable) -> list[str]:
    """Return why beds differ, tidy."""
    if "reason" not in text.columns:
        return [""] * text.rows
    return [without_formula(reason or "") for reason in text.columns["reason"].to_pylist()]
