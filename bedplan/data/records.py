"""Ward stays as they can be used: read, cleaned, without identities, with a report of every row."""

from __future__ import annotations

import time
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data import cleaning, sequence
from bedplan.data.columns import STAY_HEADINGS
from bedplan.data.dates import DAY_SECONDS, MISSING, UNREADABLE
from bedplan.data.reading import TextTable, read_text
from bedplan.data.report import IntakeReport
from bedplan.data.rows import RULES, Rows
from bedplan.data.source import FileLike, open_source
from bedplan.data.table import StayTable, as_stay_table
from bedplan.data.windows import find_window
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray


@dataclass(frozen=True)
class Records:
    """The stays of one file, one row a kept stay, without identities.

    ``stays``: patient_key (a random code), spell_key, ward, start, end (NaT = unfinished), and whichever of class,
    method, specialty, age_band, ready, destination the file had. ``set_aside``: the rows that don't count, with their
    reason and without identities. ``window``: first and last moment for which the file is complete.

    Checked by: tests/data/test_records.py
    """

    name: str
    stays: pd.DataFrame
    set_aside: pd.DataFrame
    wards: tuple[str, ...]
    report: IntakeReport
    window: tuple[pd.Timestamp, pd.Timestamp]
    fingerprint: str
    has_times: bool = True

    @property
    def short_fingerprint(self) -> str:
        """How do I quote this file in a footnote? The first 12 signs of its fingerprint."""
        return self.fingerprint[:12]

    @property
    def days(self) -> float:
        """How many days does the file cover?"""
        return (self.window[1] - self.window[0]) / pd.Timedelta(days=1)

    @cached_property
    def by_ward(self) -> Mapping[str, NDArray[np.int64]]:
        """Where are each ward's stays? Ward → row numbers in ``stays``."""
        codes = self.stays["ward"].cat.codes.to_numpy()
        order = np.argsort(codes, kind="stable")
        bounds = np.searchsorted(codes[order], np.arange(len(self.stays["ward"].cat.categories) + 1))
        names = self.stays["ward"].cat.categories
        return {name: order[bounds[place] : bounds[place + 1]] for place, name in enumerate(names)}

    def of_ward(self, ward: str) -> pd.DataFrame:
        """Which stays were on this ward?

        Raises:
            UnreadableRecords: the file has no stay on it; the message lists the wards it has.
        """
        if ward not in self.by_ward:
            known = ", ".join(self.wards[:12]) + (" …" if len(self.wards) > 12 else "")
            raise UnreadableRecords([f"There is no stay on ward “{ward}” in {self.name}. Its wards are: {known}."])
        return self.stays.iloc[self.by_ward[ward]]


def read_records(
    source: FileLike,
    *,
    name: str | None = None,
    columns: Mapping[str, str] | None = None,
    date_order: str | None = None,
) -> Records:
    """What do these ward stays say, and what was done to them before they were used?

    ``source`` is a path, bytes or an open binary file; ``columns`` says which heading means what where the headings
    are unusual (``{"start": "Zugang"}``); ``date_order`` answers the question whether 03/04 is 3 April
    (``"day first"``) or 4 March (``"month first"``). Nothing leaves the memory of this program; patient keys are
    replaced by random codes, identity columns are not read.

    Raises:
        UnreadableRecords: the file can't be used; ``.problems`` says what is wrong, where, and what to do.

    Checked by: tests/data/test_records.py, tests/data/test_bad_files.py
    """
    file = open_source(source, name)
    text = read_text(file, STAY_HEADINGS, columns)
    table = as_stay_table(text, file.name, date_order)
    until = _clean(table)
    return _finished(table, text, file.name, file.fingerprint, until)


def _clean(table: StayTable) -> int:
    """Apply every rule in its order; return the moment up to which the file was seen."""
    rows = table.rows
    now = int(time.time()) + DAY_SECONDS
    cleaning.check_dates(rows, now)
    longest = cleaning.longest_stays(rows, max(len(table.wards), 1))
    cleaning.mend_negative(rows, longest)
    longest = cleaning.longest_stays(rows, max(len(table.wards), 1))
    order = sequence.in_order(rows)
    until = _seen_until(rows, table.has_times)
    if table.knows_patients:
        order = sequence.drop_repeats(rows, order)
        order = sequence.close_forgotten(rows, order, longest, until)
    else:
        order = sequence.close_forgotten(rows, order, longest, until)
    if table.has_times:
        cleaning.drop_zero_stays(rows)
    if table.knows_patients:
        order = sequence.join_same_ward(rows, order[rows.live[order]])
        if table.has_times:
            order = sequence.merge_pass_throughs(rows, order)
        sequence.part_overlaps(rows, order)
    return until


def _seen_until(rows: Rows, has_times: bool) -> int:
    """Return the last moment anything happened, rounded up to the next midnight."""
    live = rows.live
    if not live.any():
        return 0
    last = max(int(rows.start[live].max()), int(np.where(rows.is_open, MISSING, rows.end)[live].max()))
    return -(-(last + (0 if has_times else 1)) // DAY_SECONDS) * DAY_SECONDS


def _finished(table: StayTable, text: TextTable, name: str, fingerprint: str, until: int) -> Records:
    """Build the records and their report from the cleaned rows."""
    rows = table.rows
    live = np.flatnonzero(rows.live)
    if not live.size:
        raise UnreadableRecords(_why_none(rows, name))
    live = live[np.argsort(rows.start[live], kind="stable")]
    window = find_window(rows.start[live], rows.end[live], until)
    recorded = rows.recorded_bed_days(until)
    kept = float((rows.until(until)[live] - rows.start[live]).sum() / DAY_SECONDS)
    aside = float(recorded[rows.aside].sum())
    counts = (rows.reason == 0).sum(), ((rows.reason > 0) & ~rows.aside).sum(), rows.aside.sum()
    report = IntakeReport(
        rows_in=rows.start.size,
        used=int(counts[0]),
        repaired=int(counts[1]),
        set_aside=int(counts[2]),
        findings=rows.findings(recorded),
        bed_days_in=float(recorded.sum()),
        bed_days_added=kept + aside - float(recorded.sum()),
        bed_days_used=kept,
        bed_days_set_aside=aside,
        dropped_columns=text.dropped,
        notes=(*text.notes, *table.notes, *_notes(rows, table)),
    )
    stays = table.frame(live, rows.start[live], rows.end[live])
    removed = table.frame(np.flatnonzero(rows.aside))
    sentences = np.array(["", *(rule.sentence for rule in RULES.values())], dtype=object)
    removed.insert(0, "reason", pd.Categorical(sentences[rows.reason[rows.aside]]))
    return Records(
        name=name,
        stays=stays,
        set_aside=removed.drop(columns=["patient_key", "spell_key"], errors="ignore"),
        wards=tuple(sorted(stays["ward"].cat.categories)),
        report=report,
        window=tuple(pd.Timestamp(int(moment), unit="s") for moment in window),
        fingerprint=fingerprint,
        has_times=table.has_times,
    )


def _notes(rows: Rows, table: StayTable) -> list[str]:
    """Return what a reader should know about the whole file."""
    notes = []
    unfinished = int((rows.is_open & rows.live).sum())
    if unfinished:
        notes.append(f"{unfinished:,} patients were still in; their stays are treated as unfinished, not dropped.")
    if not table.has_times:
        notes.append("The file has dates without times: stays are counted in nights, and hours of the day are unknown.")
    if not table.knows_patients:
        notes.append("No patient key was found: repeated rows, moves and overlaps of one patient can't be recognised.")
    return notes


def _why_none(rows: Rows, name: str) -> list[str]:
    """Say why no row of the file could be used."""
    reasons = sorted(rows.findings(np.zeros(rows.start.size)), key=lambda finding: -finding.rows)
    told = "; ".join(f"{finding.sentence.lower()} ({finding.rows:,} rows)" for finding in reasons[:3])
    if not told:
        return [f"{name} has headings but no rows: export it again with its rows."]
    unreadable = (rows.start == UNREADABLE).sum() > rows.start.size // 2
    advice = "write dates as 2024-03-31 14:05" if unreadable else "check the export"
    return [f"Not one of the {rows.start.size:,} rows in {name} can be used: {told}; {advice} and try again."]
