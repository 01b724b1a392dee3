"""Counts of patients and beds at fixed times, from long or wide tables: daily occupancy, but no stays."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.capacity import beds_in_text
from bedplan.data.columns import TELLTALES, plain, without_formula, words
from bedplan.data.dateorder import read_ordered
from bedplan.data.dates import DAY_SECONDS, UNREADABLE
from bedplan.data.logs import WARD_WORDS
from bedplan.data.reading import read_table
from bedplan.data.report import REPAIRED, SET_ASIDE, Finding, IntakeReport, why_none
from bedplan.data.source import FileLike, open_source
from bedplan.data.table import TOTAL_WORDS, as_times
from bedplan.data.wide import read_wide
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from bedplan.data.texttable import TextTable

CENSUS_HEADINGS: dict[str, tuple[str, ...]] = {
    "date": words("date day censusdate datetime snapshot snapshottime when"),
    "time": words("time censustime clock hour"),
    "ward": WARD_WORDS,
    "available": words("bedsavailable available beds availablebeds openbeds staffedbeds bedsopen staffed"),
    "occupied": words("bedsoccupied occupied occupiedbeds patients census inpatients bedsinuse inuse"),
    "closed": words("bedsclosed closed closedbeds"),
}
CANNOT = (
    "A census shows how many patients were in, not how long each stayed: the length of stay can't be found from it.",
    "It shows fixed times only: peaks between them, and how many came and went, stay hidden.",
)
BUSY = 5.0  # patients on average, below which an empty ward is nothing odd
RARE = 0.05  # zeros expected by chance in the whole file, below which a zero is taken for a missing figure


@dataclass(frozen=True)
class Census:
    """Patients present at stated times. ``table``: time, ward, available, extra, occupied, one row a ward and time.

    ``over_full`` counts rows with more patients than beds: they are real and kept. ``cannot`` says what such a file
    can't answer.

    Checked by: tests/data/test_census.py
    """

    name: str
    table: pd.DataFrame
    wards: tuple[str, ...]
    report: IntakeReport
    over_full: int
    cannot: tuple[str, ...] = CANNOT

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


def read_census(
    source: FileLike, *, name: str | None = None, date_order: str | None = None, zeros_are_real: bool = False
) -> Census:
    """How many patients were on each ward at the stated times?

    Long tables have a row for each time and ward; wide ones a column for each ward. A 0 in a ward that is otherwise
    busy is set aside as missing unless ``zeros_are_real``; more patients than beds is kept, because it happens.

    Raises:
        UnreadableRecords: no date, no counts, or nothing that can be used.

    Checked by: tests/data/test_census.py
    """
    file = open_source(source, name)
    text = read_table(file, CENSUS_HEADINGS)
    if "date" in text.columns and not {"ward", "occupied"} <= set(text.columns):
        text = read_wide(file, CENSUS_HEADINGS)
    missing = [key for key in ("date", "ward", "occupied") if key not in text.columns]
    if missing:
        text.refuse_kinds(file.name, "a census", *(kind for kind in TELLTALES if kind != "a census"))
        columns = "date, ward and occupied, or date and one for each ward"
        raise UnreadableRecords([f"{file.name} lacks {', '.join(missing)}: a census has columns {columns}."])
    return _census(text, file.name, date_order, zeros_are_real)


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
    counts = reason[reason != ""].value_counts()
    split = int((frame["extra"] > 0)[reason == ""].sum())
    findings = [Finding(SET_ASIDE, sentence, int(rows), 0.0) for sentence, rows in counts.items()]
    if kept.empty:
        raise UnreadableRecords([why_none(name, findings, "write dates as 2024-03-31 and patients as whole numbers")])
    if split:
        findings.append(Finding(REPAIRED, "Regular and extra beds stood in one cell, as in 24 (+2)", split, 0.0))
    if text.misfits:
        findings.append(Finding(SET_ASIDE, "A line with another number of cells", text.misfits, 0.0))
    report = IntakeReport(
        rows_in=len(frame) + text.misfits,
        used=len(kept) - split,
        repaired=split,
        set_aside=int(counts.sum()) + text.misfits,
        findings=tuple(findings),
        dropped_columns=text.dropped,
        notes=text.notes,
    )
    beds = kept["available"] + kept["extra"]
    over_full = int(((kept["occupied"] > beds) & (kept["available"] >= 0)).sum())
    table = kept[["time", "ward", "available", "extra", "occupied"]]
    return Census(name, table, tuple(sorted(set(table["ward"]))), report, over_full)


def _frame(text: TextTable, name: str, date_order: str | None) -> tuple[pd.DataFrame, pd.Series]:
    """Return every row, and why it can't be used ("" = it can). ``available`` −1 = not told."""
    moment = read_ordered(text.columns["date"], name, date_order)
    clock = [_minutes(value) for value in text.strings("time")]
    moment = np.where(moment > UNREADABLE, moment + 60 * np.array(clock, dtype=np.int64), moment)
    wards = pd.Series([without_formula(value) for value in text.strings("ward")], dtype=object)
    occupied = [beds_in_text(value) for value in text.strings("occupied")]
    available = [beds_in_text(value) for value in text.strings("available")]
    frame = pd.DataFrame(
        {
            "time": as_times(moment),
            "ward": wards,
            "available": [cell[0] if cell else -1 for cell in available],
            "extra": [cell[1] if cell else 0 for cell in available],
            "occupied": [sum(cell) if cell else 0 for cell in occupied],
            "shut": [value.strip().lower() in ("closed", "shut", "0") for value in text.strings("available")],
        }
    )
    reason = pd.Series("", index=frame.index, dtype=object)
    reason[[cell is None for cell in occupied]] = "The number of patients is missing or can't be read"
    reason[frame["time"].isna()] = "The date is missing or can't be read"
    total = [ward == "" or plain(ward).startswith(tuple(plain(word) for word in TOTAL_WORDS)) for ward in wards]
    reason[total] = "No ward is named, or the row is a total"
    return frame, reason


def _minutes(clock: str) -> int:
    """Return minutes after midnight of a census time; 0 where none is written."""
    parts = clock.replace(".", ":").split(":")
    whole = [int(part) for part in parts[:2] if part.strip().isdigit()]
    if len(whole) == 1 and whole[0] > 23:
        return (whole[0] // 100 * 60 + whole[0] % 100) % (DAY_SECONDS // 60)
    return (whole[0] * 60 + (whole[1] if len(whole) > 1 else 0)) % (DAY_SECONDS // 60) if whole else 0


def _is_sum(frame: pd.DataFrame, usable: pd.Series) -> pd.Series:
    """Which rows hold, at nearly every time, the sum of all other wards?"""
    counts = frame[usable].pivot_table(index="time", columns="ward", values="occupied", aggfunc="last")
    if counts.shape[1] < 3 or len(counts) < 3:
        return pd.Series(False, index=frame.index)
    others = counts.sum(axis=1)
    totals = [ward for ward in counts if ((2 * counts[ward] - others).abs() < 0.5).mean() > 0.9]
    return frame["ward"].isin(totals)
