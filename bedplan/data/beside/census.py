"""Counts of patients and beds at fixed times, from long or wide tables: daily occupancy, but no stays."""

from __future__ import annotations

import re
from dataclasses import dataclass, replace
from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.beside.capacity import beds_in_text
from bedplan.data.beside.linking import is_no_ward, names_in_stays, spelled_alike, without_stays
from bedplan.data.cleaning.wardlinks import bare_name
from bedplan.data.files.columns import TELLTALES
from bedplan.data.files.headings import CENSUS_HEADINGS
from bedplan.data.files.reading import read_table
from bedplan.data.files.source import FileLike, open_source
from bedplan.data.files.wide import read_wide
from bedplan.data.values.accounting import account
from bedplan.data.values.merged import filled_from_above
from bedplan.data.values.moments import when
from bedplan.data.values.table import as_times
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Mapping

    from bedplan.data.cleaning.records import Records
    from bedplan.data.files.report import IntakeReport
    from bedplan.data.files.texttable import TextTable

CANNOT = (
    "A census shows how many patients were in, not how long each stayed: the length of stay can't be found from it.",
    "It shows fixed times only: peaks between them, and how many came and went, stay hidden.",
)
BUSY = 5.0  # patients on average, below which an empty ward is nothing odd
DECIMALS = re.compile(r"\d{1,5}[.,]\d{1,4}", re.ASCII)
TWO_NUMBERS = re.compile(r"\d+ ?[/(] ?\d+\)?", re.ASCII)
RARE = 0.05  # zeros expected by chance in the whole file, below which a zero is taken for a missing figure


@dataclass(frozen=True)
class Census:
    """Patients present at stated times. ``table``: time, ward, available, extra, closed, occupied, a row a ward and time.

    ``available`` is −1 where no beds are told; it is taken to be without the ``closed`` beds. ``over_full`` counts rows
    with more patients than beds: they are real and kept. ``cannot`` says what such a file can't answer.
    ``unknown_wards``: those without ward stays, once :meth:`linked_to` was asked.

    Checked by: tests/data/beside/test_census.py
    """

    name: str
    table: pd.DataFrame
    wards: tuple[str, ...]
    report: IntakeReport
    over_full: int
    cannot: tuple[str, ...] = CANNOT
    unknown_wards: tuple[str, ...] = ()

    def occupied(self, ward: str, clock: str = "00:00") -> pd.Series:
        """How many patients were on this ward each day at this time? By date; days without a count are left out.

        Raises:
            UnreadableRecords: no count for this ward at this time.
        """
        rows = self.table[(self.table["ward"] == ward) & (self.table["time"].dt.strftime("%H:%M") == clock)]
        if rows.empty:
            times = ", ".join(sorted(set(self.table["time"].dt.strftime("%H:%M")))[:6])
            raise UnreadableRecords(
                [
                    f"{self.name} has no count of ward “{ward}” at {clock}; its wards are {', '.join(self.wards[:12])}, its times {times}."
                ]
            )
        return pd.Series(rows["occupied"].to_numpy(), index=pd.DatetimeIndex(rows["time"]).normalize(), name=ward)

    def variance_over_mean(self, ward: str, clock: str = "00:00") -> float:
        """How far does the daily count swing? 1 = as much as chance alone in a ward that never turns away."""
        counts = self.occupied(ward, clock)
        return float(counts.var() / counts.mean()) if len(counts) > 1 and counts.mean() > 0 else 0.0

    def month_index(self, ward: str, clock: str = "00:00") -> pd.Series:
        """How full is each month against the average month? Months 1 to 12 that the file has."""
        counts = self.occupied(ward, clock)
        months = counts.groupby(counts.index.month).mean()
        return months / months.mean()

    def linked_to(self, records: Records) -> Census:
        """What does this file say of the wards of these stays? Names as the stays have them, by the planner's word.

        Wards that became one have the sum of their counts.
        """
        names = names_in_stays(self.wards, records)
        wards = tuple(sorted(set(names.values())))
        unknown = without_stays(wards, records)
        if all(old == new for old, new in names.items()):
            return replace(self, unknown_wards=unknown)
        return replace(self, table=_added(self.table, names), wards=wards, unknown_wards=unknown)


def _added(table: pd.DataFrame, names: Mapping[str, str]) -> pd.DataFrame:
    """Return the counts under other names, those of wards that get one name added; one ward written two ways counts once."""
    renamed = table.assign(ward=table["ward"].map(names), bare=table["ward"].map(bare_name))
    once = renamed.drop_duplicates(["time", "ward", "bare"], keep="last")
    groups = once.drop(columns="bare").groupby(["time", "ward"], sort=True)
    summed = groups.sum()
    summed["available"] = np.where(groups["available"].min() < 0, -1, summed["available"])
    return summed.reset_index()[list(table.columns)]


def read_census(
    source: FileLike,
    *,
    name: str | None = None,
    columns: Mapping[str, str] | None = None,
    date_order: str | None = None,
    zeros_are_real: bool = False,
) -> Census:
    """How many patients were on each ward at the stated times?

    Long tables have a row for each time and ward; wide ones a column for each ward, or several under its name. A 0 in
    a ward that is otherwise busy is set aside as missing unless ``zeros_are_real``; more patients than beds is kept,
    because it happens. ``columns`` and ``date_order`` as in ``read_records``.

    Raises:
        UnreadableRecords: no date, no counts, nothing that can be used, or dates whose order somebody must say (the
            question is in ``.question``).

    Checked by: tests/data/beside/test_census.py
    """
    file = open_source(source, name)
    text = read_table(file, CENSUS_HEADINGS, columns)
    if _lacks(text):
        text = read_wide(file, CENSUS_HEADINGS, columns) or text
    missing = _lacks(text)
    if missing:
        text.refuse_kinds(file.name, "a census", *(kind for kind in TELLTALES if kind != "a census"))
        wanted = "date, ward and occupied, or date and one for each ward"
        raise UnreadableRecords([f"{file.name} lacks {', '.join(missing)}: a census has columns {wanted}."])
    return _census(filled_from_above(text, "date", "ward"), file.name, date_order, zeros_are_real)


def _lacks(text: TextTable) -> list[str]:
    """Return what is missing of a census; a column of times may hold the dates too."""
    found = {*text.columns, *(("date",) if "time" in text.columns else ())}
    return [key for key in ("date", "ward", "occupied") if key not in found]


def _census(text: TextTable, name: str, date_order: str | None, zeros_are_real: bool) -> Census:
    """Build the table; totals, blanks and missing zeros are set aside and counted."""
    frame, reason = _frame(text, name, date_order)
    busy = frame.loc[reason == ""].groupby("ward")["occupied"].transform("mean").reindex(frame.index).fillna(0.0)
    rows = frame.loc[reason == ""].groupby("ward")["occupied"].transform("size").reindex(frame.index).fillna(0.0)
    by_chance = np.exp(-busy) * rows  # zeros that a ward so busy shows by chance, were its count a Poisson one
    most = frame.loc[reason == ""].groupby("time")["occupied"].agg(["max", "size"]).reindex(frame["time"])
    all_zero = (most["max"].to_numpy() == 0) & (most["size"].to_numpy() >= 3)
    odd = (busy >= BUSY) & (by_chance < RARE) | all_zero
    empty = (reason == "") & (frame["occupied"] == 0) & odd & ~frame["shut"]
    if not zeros_are_real:
        reason[empty] = "0 patients in a ward that is otherwise busy: taken as a missing count, not as an empty ward"
    reason[(reason == "") & _is_sum(frame, reason == "")] = "A row that adds up the others"
    repeated = (reason == "") & frame.duplicated(["time", "ward"], keep="last")
    reason[repeated] = "An earlier count of the same ward and time"
    kept = frame[reason == ""].sort_values(["time", "ward"], kind="stable").reset_index(drop=True)
    split = int((frame["extra"] > 0)[reason == ""].sum())
    told = "Regular and extra beds stood in one cell, as in 24 (+2)"
    report = account(text, reason, name, "write dates as 2024-03-31 and patients as whole numbers", (told, split))
    report = replace(report, notes=(*report.notes, *_notes(kept)))
    beds = kept["available"] + kept["extra"]
    over_full = int(((kept["occupied"] > beds) & (kept["available"] >= 0)).sum())
    table = kept[["time", "ward", "available", "extra", "closed", "occupied"]]
    return Census(name, table, tuple(sorted(set(table["ward"]))), report, over_full)


def _frame(text: TextTable, name: str, date_order: str | None) -> tuple[pd.DataFrame, pd.Series]:
    """Return every row, and why it can't be used ("" = it can). ``available`` −1 = not told."""
    (moment,), clock_unread = when(text, name, date_order)
    wards = spelled_alike(text.strings("ward"))
    occupied = [patients_in_text(value) for value in text.strings("occupied")]
    available = [beds_in_text(value) for value in text.strings("available")]
    closed = [beds_in_text(value) for value in text.strings("closed")]
    patients = np.array([cell or 0.0 for cell in occupied])
    frame = pd.DataFrame(
        {
            "time": as_times(moment),
            "ward": pd.Series(wards, dtype=object),
            "available": [cell[0] if cell else -1 for cell in available],
            "extra": [cell[1] if cell else 0 for cell in available],
            "closed": [cell[0] if cell else 0 for cell in closed],
            "occupied": patients if (patients % 1).any() else patients.astype(np.int64),
            "shut": [value.lower() in ("closed", "shut", "0") for value in text.strings("available")],
        }
    )
    reason = pd.Series("", index=frame.index, dtype=object)
    reason[[cell is None for cell in occupied]] = "The number of patients is missing or can't be read"
    two = [
        cell is None and TWO_NUMBERS.fullmatch(value) is not None
        for cell, value in zip(occupied, text.strings("occupied"), strict=True)
    ]
    reason[two] = "Two numbers stand for the patients, as in 20/24: which of them is meant can't be told"
    reason[clock_unread] = "The time of day can't be read"
    reason[frame["time"].isna()] = "The date is missing or can't be read"
    reason[[is_no_ward(ward, text.headings.get("ward", "ward")) for ward in wards]] = (
        "No ward is named, or the row is a total"
    )
    return frame, reason


def _notes(kept: pd.DataFrame) -> list[str]:
    """Return what was taken for granted."""
    notes = []
    shut = int(((kept["closed"] > 0) & (kept["available"] >= 0)).sum())
    if shut:
        notes.append(
            f"{'1 row names' if shut == 1 else f'{shut:,} rows name'} closed beds: the available ones are taken to be without them."
        )
    if (kept["occupied"] % 1).any():
        notes.append("Some counts have decimals, so they are averages, not counts at a moment: they swing too little.")
    return notes


@lru_cache(maxsize=4_096)
def patients_in_text(text: str) -> float | None:
    """How many patients does a cell name? ``24 (+2)`` are 26; averages have decimals; None where it says nothing.

    Checked by: tests/data/beside/test_census.py
    """
    beds = beds_in_text(text)
    if beds is not None:
        return float(sum(beds))
    return float(text.replace(",", ".")) if DECIMALS.fullmatch(text) else None


def _is_sum(frame: pd.DataFrame, usable: pd.Series) -> pd.Series:
    """Which rows hold, at nearly every time, the sum of all other wards?"""
    counts = frame[usable].pivot_table(index="time", columns="ward", values="occupied", aggfunc="last")
    if counts.shape[1] < 3 or len(counts) < 3:
        return pd.Series(False, index=frame.index)
    others = counts.sum(axis=1)
    totals = [ward for ward in counts if ((2 * counts[ward] - others).abs() < 0.5).mean() > 0.9]
    return frame["ward"].isin(totals)
