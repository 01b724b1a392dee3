"""Beds by ward and date: how many were funded, staffed, closed; what the ward could really use on a day."""

from __future__ import annotations

import re
from dataclasses import dataclass, field, replace
from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pyarrow as pa

from bedplan.data.beside.linking import is_no_ward, names_in_stays, spelled_alike, without_stays
from bedplan.data.beside.periods import merged, periods_that_count
from bedplan.data.files.columns import TELLTALES, without_formula
from bedplan.data.files.dates import BLANK_WORDS, UNREADABLE
from bedplan.data.files.headings import CAPACITY_HEADINGS
from bedplan.data.files.reading import read_table
from bedplan.data.files.report import IntakeReport
from bedplan.data.files.source import FileLike, open_source
from bedplan.data.values.accounting import account
from bedplan.data.values.dateorder import read_ordered
from bedplan.data.values.merged import filled_from_above
from bedplan.data.values.table import as_times
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from bedplan.data.cleaning.records import Records
    from bedplan.data.files.texttable import TextTable

BEDS_WORD = re.compile(r"(?<=\d)\s*(?:beds?|betten|bett|lits?|camas?|letti|bedden)$")
MOST_NAMED = 10  # cells nobody can read that are named one by one
OPEN_ENDS = ("1990-01-01", "2100-12-31")  # of a period without a first or a last day


@dataclass(frozen=True)
class Capacity:
    """The beds of each ward through time. ``table``: ward, from, to (last day, included), funded, staffed, closed.

    Open beds = staffed beds that are not closed, none where more are closed than staffed. Where periods overlap, the
    one that starts later counts, of two that start together the shorter. Days no period covers take the one before,
    else the first. ``unknown_wards``: those without ward stays, once :meth:`linked_to` was asked.

    Checked by: tests/data/beside/test_capacity.py
    """

    name: str
    table: pd.DataFrame
    wards: tuple[str, ...]
    notes: tuple[str, ...] = ()
    report: IntakeReport = field(default_factory=lambda: IntakeReport(0, 0, 0, 0))
    unknown_wards: tuple[str, ...] = ()

    def _rows(self, ward: str) -> pd.DataFrame:
        """Return the rows of one ward, oldest first."""
        rows = self.table[self.table["ward"] == ward]
        if rows.empty:
            raise UnreadableRecords([f"Ward “{ward}” is not in {self.name}; it lists {', '.join(self.wards[:12])}."])
        return rows

    def beds_today(self, ward: str) -> int:
        """How many staffed beds does this ward have in its latest period?"""
        rows = self._rows(ward)
        return int(rows["staffed"].iloc[periods_that_count(rows)[1][-1]])

    def funded_today(self, ward: str) -> int:
        """How many funded beds does this ward have in its latest period?"""
        rows = self._rows(ward)
        return int(rows["funded"].iloc[periods_that_count(rows)[1][-1]])

    def open_beds_by_day(self, ward: str, days: pd.DatetimeIndex | None = None) -> pd.Series:
        """How many beds could take a patient on each day? Staffed less closed, whole numbers, by date."""
        rows = self._rows(ward)
        if days is None:
            days = pd.date_range(rows["from"].min(), rows["to"].max(), freq="D")
        starts, counts = periods_that_count(rows)
        place = np.searchsorted(starts, days.to_numpy().astype("datetime64[s]"), side="right") - 1
        beds = (rows["staffed"] - rows["closed"]).clip(lower=0).to_numpy()
        return pd.Series(beds[counts[np.maximum(place, 0)]], index=days, name=ward)

    def closures(self, ward: str) -> pd.DataFrame:
        """When were beds closed, how many, and why?"""
        rows = self._rows(ward)
        return rows[rows["closed"] > 0].reset_index(drop=True)

    def linked_to(self, records: Records) -> Capacity:
        """What does this file say of the wards of these stays? Names as the stays have them, by the planner's word.

        Wards that were merged to one, and had beds side by side, have the sum of their beds.
        """
        names = names_in_stays(self.wards, records)
        wards = tuple(sorted(set(names.values())))
        unknown = without_stays(wards, records)
        if all(old == new for old, new in names.items()):
            return replace(self, unknown_wards=unknown)
        return replace(self, table=merged(self.table, names), wards=wards, unknown_wards=unknown)


@lru_cache(maxsize=4_096)
def beds_in_text(text: str | None) -> tuple[int, int] | None:
    """How many beds does a cell such as ``24 (+2)`` name? (regular, extra); *closed* = 0; None where it says nothing.

    ``24/2`` is 24 and 2 more; ``20/24`` may be 20 of 24, so it says nothing: without a plus, extra beds are at most
    half of the regular ones (common practice, no source).

    Checked by: tests/data/beside/test_capacity.py
    """
    cell = BEDS_WORD.sub("", (text or "").strip().lower())
    if cell in ("closed", "shut"):
        return 0, 0
    fits = re.fullmatch(r"(\d{1,5})(?:[.,]0+)?(?:\s*([(/+]+\s*\+?)(\d{1,4})\)?)?", cell, re.ASCII)
    if fits is None:
        return None
    regular, extra = int(fits[1]), int(fits[3] or 0)
    unclear = extra > regular / 2 and "+" not in fits[2]
    return None if unclear else (regular, extra)


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
    ``columns`` and ``date_order`` as in ``read_records``.

    Raises:
        UnreadableRecords: no ward or no bed column, nothing that can be used, or dates whose order somebody must say (the
            question is in ``.question``).

    Checked by: tests/data/beside/test_capacity.py
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
    return _capacity(filled_from_above(text, "ward"), file.name, date_order)


def _capacity(text: TextTable, name: str, date_order: str | None) -> Capacity:
    """Keep the rows that say something, and account for the others."""
    frame, reason, unread = _frame(text, name, date_order)
    if unread and not (reason == "").any():
        raise UnreadableRecords(unread)
    report = account(
        text, reason, name, "name a ward and a number of beds in each: check the columns ward and staffed_beds"
    )
    kept = frame[reason == ""]
    kept = kept.sort_values(["ward", "from", "to"], ascending=[True, True, False], kind="stable").reset_index(drop=True)
    left_out = ["Where a row is left out, the period before it stands for its days."] if unread else []
    notes = (*text.notes, *unread, *left_out, *_notes(text, kept))
    report = replace(report, notes=notes)
    table = kept.drop(columns="funded_told")
    return Capacity(name, table, tuple(sorted(set(table["ward"]))), notes, report)


def _frame(text: TextTable, name: str, date_order: str | None) -> tuple[pd.DataFrame, pd.Series, list[str]]:
    """Return every row, why it can't be used ("" = it can), and the cells nobody can read."""
    wards = spelled_alike(text.strings("ward"))
    counts = {key: [beds_in_text(cell) for cell in text.strings(key)] for key in ("funded", "staffed", "closed")}
    regular = counts["staffed"] if "staffed" in text.columns else counts["funded"]
    funded = counts["funded"] if "funded" in text.columns else regular
    (since, until), bad_dates = _dates(text, name, date_order)
    frame = pd.DataFrame(
        {
            "ward": pd.Series(wards, dtype=object),
            "from": since,
            "to": until,
            "funded": [(one or other or (0, 0))[0] for one, other in zip(funded, regular, strict=True)],
            "staffed": [sum(cell) if cell else 0 for cell in regular],
            "closed": [cell[0] if cell else 0 for cell in counts["closed"]],
            "reason": [without_formula(reason) for reason in text.strings("reason")],
            "funded_told": [cell is not None for cell in funded],
        }
    )
    reason = pd.Series("", index=frame.index, dtype=object)
    reason[frame.duplicated(keep="first")] = "The same row twice"
    reason[frame["to"] < frame["from"]] = "The period ends before it starts"
    reason[[cell is None for cell in regular]] = "No number of beds is named"
    no_ward = [is_no_ward(ward, text.headings["ward"]) for ward in wards]
    unread = {row: told for row, told in (bad_dates | _bad_cells(text, counts, name)).items() if not no_ward[row]}
    reason[list(unread)] = "A date or a number of beds can't be read"
    reason[no_ward] = "No ward is named, or the row is a total"
    return frame, reason, list(unread.values())[:MOST_NAMED]


def _notes(text: TextTable, table: pd.DataFrame) -> list[str]:
    """Return what was taken for granted, and which wards' periods overlap."""
    notes = []
    if "staffed" not in text.columns:
        notes.append("The file names funded beds only; they are taken as staffed.")
    untold = int((~table["funded_told"]).sum())
    if untold:
        notes.append(f"{_rows_say(untold)} no funded beds: the staffed ones are taken as funded there.")
    shut = int((table["closed"] > table["staffed"]).sum())
    if shut:
        notes.append(
            f"{_rows_say(shut)} more closed beds than staffed ones: no bed counts as open there. If the staffed beds are "
            "already without the closed ones, leave that column out."
        )
    overlapping = [ward for ward, rows in table.groupby("ward", sort=True) if _overlap(rows)]
    if overlapping:
        told = ", ".join(overlapping[:5]) + (" and others" if len(overlapping) > 5 else "")
        notes.append(f"Periods overlap on {told}: on such days the row that starts later counts.")
    gaps = [(ward, *gap) for ward, rows in table.groupby("ward", sort=True) for gap in _gaps(rows)]
    if gaps:
        told = ", ".join(f"{ward} from {first:%Y-%m-%d} to {last:%Y-%m-%d}" for ward, first, last in gaps[:5])
        notes.append(
            f"No row names the beds of {told}{' and others' if len(gaps) > 5 else ''}: those of the row before are taken. "
            "If a ward was closed then, add a row with 0 beds."
        )
    return notes


def _overlap(rows: pd.DataFrame) -> bool:
    """Do periods of one ward, oldest first, overlap? One without a last day runs to the next that has none either."""
    last_day = pd.Timestamp(OPEN_ENDS[1])
    since, is_open = rows["from"].to_numpy(), (rows["to"] == last_day).to_numpy()
    ended = rows["to"].where(~is_open, pd.Timestamp(OPEN_ENDS[0]) - pd.Timedelta(days=1)).cummax().to_numpy()
    after_open = np.logical_or.accumulate(is_open)[:-1]
    return bool(((since[1:] <= ended[:-1]) | (after_open & (~is_open[1:] | (since[1:] == since[:-1])))).any())


def _gaps(rows: pd.DataFrame) -> list[tuple[pd.Timestamp, pd.Timestamp]]:
    """Return first and last day of each time between periods of one ward, oldest first, that none of them covers."""
    day = pd.Timedelta(days=1)
    reach = rows["to"].cummax().shift()
    return [
        (last + day, first - day) for last, first in zip(reach[1:], rows["from"][1:], strict=True) if first > last + day
    ]


def _rows_say(rows: int) -> str:
    """Begin a sentence about so many rows."""
    return "1 row names" if rows == 1 else f"{rows:,} rows name"


def _bad_cells(text: TextTable, counts: Mapping[str, list[tuple[int, int] | None]], name: str) -> dict[int, str]:
    """Name the cells that hold something, but no number of beds: row → sentence."""
    bad = {}
    for key, cells in counts.items():
        for row, (cell, given) in enumerate(zip(cells, text.strings(key), strict=True)):
            if cell is None and given.lower() not in BLANK_WORDS:
                several = re.search(r"\d", given)
                advice = "write one number, or 20 (+4) for extra beds" if several else "write a whole number"
                bad[row] = f"“{given[:20]}” in row {row + 1} of {name} is no number of {key} beds: {advice}."
    return bad


def _dates(text: TextTable, name: str, date_order: str | None) -> tuple[list[np.ndarray], dict[int, str]]:
    """Return first and last days, blanks and the year 9999 open-ended, in one order of day and month; and bad cells."""
    blank = pa.chunked_array([pa.nulls(text.rows, pa.string())])
    both = read_ordered(name, date_order, *(text.columns.get(key, blank) for key in ("from", "to")))
    days, bad = [], {}
    for key, seconds, open_end in zip(("from", "to"), both, OPEN_ENDS, strict=True):
        written = text.strings(key)
        for row in np.flatnonzero(seconds == UNREADABLE).tolist():
            if "9999" not in written[row]:
                bad[row] = f"“{written[row][:20]}” in row {row + 1} of {name} is no date: write 2024-03-31."
        known = np.where(seconds > UNREADABLE, _day_of(seconds), np.datetime64(open_end, "s"))
        days.append(np.clip(known, *(np.datetime64(end, "s") for end in OPEN_ENDS)))
    return days, bad


def _day_of(seconds: NDArray[np.int64]) -> NDArray[np.datetime64]:
    """Return the midnight at which each moment's day begins."""
    return as_times(seconds).astype("datetime64[D]").astype("datetime64[s]")
