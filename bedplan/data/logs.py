"""Logs of what was asked for and not had: refusals, bed requests, cancelled bookings."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.columns import TELLTALES, without_formula, words
from bedplan.data.dateorder import read_ordered
from bedplan.data.dates import DAY_SECONDS, UNREADABLE
from bedplan.data.reading import read_table
from bedplan.data.report import SET_ASIDE, Finding, IntakeReport, why_none
from bedplan.data.source import FileLike, open_source
from bedplan.data.table import as_times
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Mapping

    from bedplan.data.texttable import TextTable

WARD_WORDS = words("ward wardcode wardname wardrequested requestedward location unit wardaskedfor")
REFUSAL_HEADINGS: dict[str, tuple[str, ...]] = {
    "ward": WARD_WORDS,
    "time": words("time datetime when date refusedat requestedat asked requested refusaltime refusaldate"),
    "reason": words("reason why cause refusalreason"),
    "outcome": words("outcome result whathappened destination"),
}
REQUEST_HEADINGS: dict[str, tuple[str, ...]] = {
    "ward": WARD_WORDS,
    "time": words("requestedat requested asked time requesttime decisiontoadmit dta bedrequested requestedtime"),
    "placed": words("placedat placed given bedgiven allocated admittedat placedtime arrived"),
    "wait_hours": words("waithours wait waitinhours hourswaited"),
    "outcome": words("outcome result"),
}
CANCELLATION_HEADINGS: dict[str, tuple[str, ...]] = {
    "ward": WARD_WORDS,
    "time": words("planneddate planned date operationdate tcidate admissiondate cancelledfor bookeddate"),
    "reason": words("reason cancellationreason why cause"),
}
MEANT = {  # kind of log -> what its file is called in sentences
    "refusals": "patients not given a bed",
    "bed requests": "bed requests",
    "cancellations": "cancelled bookings",
}
NO_BED = r"no (?:ward )?bed|beds? unavailable|lack of bed|ward full|beds? not available|no icu|no critical care"


@dataclass(frozen=True)
class EventLog:
    """When was each ward asked for a bed?

    ``table`` has time, ward and whichever of reason, outcome, placed, wait_hours the file had; ``cannot`` says what
    such a file can't answer.

    Checked by: tests/data/test_logs.py
    """

    kind: str
    name: str
    table: pd.DataFrame
    wards: tuple[str, ...]
    report: IntakeReport
    cannot: tuple[str, ...]

    def of_ward(self, ward: str, window: tuple[pd.Timestamp, pd.Timestamp] | None = None) -> pd.DataFrame:
        """Which entries ask for this ward, within a window? An empty table where there are none."""
        rows = self.table[self.table["ward"] == ward]
        if window is None:
            return rows
        return rows[(rows["time"] >= window[0]) & (rows["time"] < window[1])]

    def for_lack_of_beds(self, ward: str, window: tuple[pd.Timestamp, pd.Timestamp] | None = None) -> pd.DataFrame:
        """Which of them came to nothing because there was no bed? All, where the file gives no reasons."""
        rows = self.of_ward(ward, window)
        if "reason" not in rows or (rows["reason"] == "").all():
            return rows
        return rows[rows["reason"].str.contains(NO_BED, case=False, regex=True)]


def read_refusals(source: FileLike, *, name: str | None = None, date_order: str | None = None) -> EventLog:
    """Who was refused a bed on which ward, and when?

    Columns time and ward; reason and outcome where there are any.

    Raises:
        UnreadableRecords: no time or ward column, or nothing that can be used.

    Checked by: tests/data/test_logs.py
    """
    cannot = (
        "A log of refusals is rarely complete: say which share is written down, or the demand found from it is too low.",
        "It can't show patients nobody asked a bed for.",
    )
    return _read("refusals", source, name, REFUSAL_HEADINGS, date_order, cannot)


def read_bed_requests(source: FileLike, *, name: str | None = None, date_order: str | None = None) -> EventLog:
    """Who asked for a bed, when, and when was it given? Waits come from the two times, or from a column of hours.

    Raises:
        UnreadableRecords: no time or ward column, or nothing that can be used.

    Checked by: tests/data/test_logs.py
    """
    cannot = ("A log of requests shows waits, not how long patients stay once they have a bed.",)
    return _read("bed requests", source, name, REQUEST_HEADINGS, date_order, cannot)


def read_cancellations(source: FileLike, *, name: str | None = None, date_order: str | None = None) -> EventLog:
    """Which booked patients were cancelled, for which day, and why?

    Raises:
        UnreadableRecords: no date or ward column, or nothing that can be used.

    Checked by: tests/data/test_logs.py
    """
    cannot = (
        "Official counts of cancellations leave out those made days ahead: the figure found from them is a lowest one.",
    )
    return _read("cancellations", source, name, CANCELLATION_HEADINGS, date_order, cannot)


def _read(
    kind: str,
    source: FileLike,
    name: str | None,
    known: Mapping[str, tuple[str, ...]],
    date_order: str | None,
    cannot: tuple[str, ...],
) -> EventLog:
    """Read one log; rows without a ward or a readable time are set aside and counted."""
    file = open_source(source, name)
    text = read_table(file, known)
    text.refuse_kinds(file.name, MEANT[kind], *(other for other in TELLTALES if other != MEANT[kind]))
    missing = [f"a {key} column" for key in ("ward", "time") if key not in text.columns]
    if missing:
        raise UnreadableRecords(
            [
                f"{file.name} lacks {' and '.join(missing)}, so it can't be read as {MEANT[kind]}: add it, or choose another file."
            ]
        )
    frame, no_ward, no_time = _frame(text, file.name, date_order)
    early = (frame["wait_hours"] < 0).to_numpy() if "wait_hours" in frame else np.zeros(len(frame), dtype=bool)
    bad = no_ward | no_time | early
    table = frame[~bad].sort_values("time", kind="stable").reset_index(drop=True)
    findings = [
        Finding(SET_ASIDE, sentence, rows, 0.0)
        for sentence, rows in (
            ("No ward is named", int(no_ward.sum())),
            ("The time is missing or can't be read", int((no_time & ~no_ward).sum())),
            ("The bed is given before it is asked for", int((early & ~no_time & ~no_ward).sum())),
            ("A title, total or footer, or a line with another number of cells", text.misfits),
        )
        if rows
    ]
    if table.empty:
        raise UnreadableRecords([why_none(file.name, findings, "name a ward and write times as 2024-03-31 14:05")])
    report = IntakeReport(
        rows_in=len(frame) + text.misfits,
        used=len(table),
        repaired=0,
        set_aside=int(bad.sum()) + text.misfits,
        findings=tuple(findings),
        dropped_columns=text.dropped,
        notes=text.notes,
    )
    return EventLog(kind, file.name, table, tuple(sorted(set(table["ward"]))), report, cannot)


def _frame(text: TextTable, name: str, date_order: str | None) -> tuple[pd.DataFrame, np.ndarray, np.ndarray]:
    """Return all rows, which of them name no ward, and which no time."""
    ward = pd.Series([without_formula(value) for value in text.strings("ward")], dtype=object)
    time = read_ordered(text.columns["time"], name, date_order)
    frame = pd.DataFrame({"time": as_times(time), "ward": ward})
    for key in ("reason", "outcome"):
        if key in text.columns:
            frame[key] = pd.Series([without_formula(value) for value in text.strings(key)], dtype=object)
    if "placed" in text.columns:
        placed = read_ordered(text.columns["placed"], name, date_order)
        frame["placed"] = as_times(placed)
        known = (placed > UNREADABLE) & (time > UNREADABLE)
        frame["wait_hours"] = np.where(known, placed - np.where(known, time, 0), 0) / (DAY_SECONDS / 24)
    elif "wait_hours" in text.columns:
        hours = pd.to_numeric(pd.Series(text.strings("wait_hours")).str.replace(",", "."), errors="coerce")
        frame["wait_hours"] = hours.fillna(0.0).clip(lower=0.0)
    return frame, (frame["ward"] == "").to_numpy(), frame["time"].isna().to_numpy()
