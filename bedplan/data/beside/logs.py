"""Logs of what was asked for and not had: refusals, bed requests, cancelled bookings."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import pandas as pd

from bedplan.data.beside.linking import is_no_ward, names_in_stays, spelled_alike, without_stays
from bedplan.data.files.columns import TELLTALES, plain, without_formula
from bedplan.data.files.headings import CANCELLATION_HEADINGS, REFUSAL_HEADINGS, REQUEST_HEADINGS
from bedplan.data.files.reading import read_table
from bedplan.data.files.source import FileLike, SourceFile, open_source
from bedplan.data.values.accounting import account
from bedplan.data.values.merged import filled_from_above
from bedplan.data.values.moments import when
from bedplan.data.values.reasons import means_no_bed, not_cancelled, plain_reason, was_given_a_bed
from bedplan.data.values.table import as_times
from bedplan.data.values.waited import WAITS, read_waits, unknown_note
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Mapping

    import numpy as np

    from bedplan.data.cleaning.records import Records
    from bedplan.data.files.report import IntakeReport
    from bedplan.data.files.texttable import TextTable

MEANT = {  # kind of log -> what its file is called in sentences
    "refusals": "patients not given a bed",
    "bed requests": "bed requests",
    "cancellations": "cancelled bookings",
}
NOT_MEANT = {  # kind of log -> why an entry of this outcome is none of it, and which outcomes say so
    "refusals": ("The outcome says that the bed was given: not a refusal", was_given_a_bed),
    "cancellations": ("The booking was not cancelled", not_cancelled),
}


@dataclass(frozen=True)
class EventLog:
    """When was each ward asked for a bed?

    ``table`` has time, ward and whichever of reason, outcome, placed, wait_hours the file had (not a number = a wait that
    is not known; ``never_given`` beside it); ``cannot`` says what such a file can't answer. ``no_bed_reasons``: which of the reasons that are not understood mean that no bed was
    free, by the planner's word; the others mean something else then. None = nobody said. ``unknown_wards``: those
    without ward stays, once :meth:`linked_to` was asked.

    Checked by: tests/data/beside/test_logs.py
    """

    kind: str
    name: str
    table: pd.DataFrame
    wards: tuple[str, ...]
    report: IntakeReport
    cannot: tuple[str, ...]
    no_bed_reasons: tuple[str, ...] | None = None
    unknown_wards: tuple[str, ...] = ()

    def of_ward(self, ward: str, window: tuple[pd.Timestamp, pd.Timestamp] | None = None) -> pd.DataFrame:
        """Which entries ask for this ward, within a window? An empty table where there are none."""
        rows = self.table[self.table["ward"] == ward]
        if window is None:
            return rows
        return rows[(rows["time"] >= window[0]) & (rows["time"] < window[1])]

    def for_lack_of_beds(self, ward: str, window: tuple[pd.Timestamp, pd.Timestamp] | None = None) -> pd.DataFrame:
        """Which of them came to nothing because there was no bed? All, where the file gives no reasons.

        Reasons that are not understood don't count unless the planner says so: see :attr:`unclear_reasons`.
        """
        rows = self.of_ward(ward, window)
        if not self._gives_reasons(ward):
            return rows
        said = {plain_reason(reason) for reason in self.no_bed_reasons or ()}
        counts = {
            reason: means_no_bed(reason) or (means_no_bed(reason) is None and plain_reason(reason) in said)
            for reason in rows["reason"].unique()
        }
        return rows[rows["reason"].map(counts).astype(bool)]

    def _gives_reasons(self, ward: str) -> bool:
        """Is there a reason beside any entry of this ward?"""
        return "reason" in self.table and bool((self.of_ward(ward)["reason"] != "").any())

    @property
    def unclear_reasons(self) -> Mapping[str, int]:
        """Which reasons are not understood, in how many entries each? Empty once the planner has said what they mean.

        Entries without a reason, on a ward that gives reasons, are among them, as "".
        """
        if self.no_bed_reasons is not None or "reason" not in self.table:
            return {}
        with_reasons = self.table.loc[self.table["reason"] != "", "ward"].unique()
        counts = self.table.loc[self.table["ward"].isin(with_reasons), "reason"].value_counts()
        return {str(reason): int(rows) for reason, rows in counts.items() if means_no_bed(str(reason)) is None}

    @property
    def notes(self) -> tuple[str, ...]:
        """What should be said beside any figure from this file?"""
        unclear = self.unclear_reasons
        if not unclear:
            return ()
        named = [f"“{reason}” ({rows:,})" if reason else f"no reason ({rows:,})" for reason, rows in unclear.items()]
        listed = ", ".join(named[:6]) + (f" and {len(named) - 6} more" if len(named) > 6 else "")
        told = (
            f"{self.name} gives reasons that are not understood: {listed}. They are not counted as lack of a bed: say"
        )
        return (f"{told} which of them are, or demand may be higher.",)

    def notes_on(self, ward: str) -> tuple[str, ...]:
        """What should be said beside a figure of this ward?"""
        return replace(self, table=self.of_ward(ward), wards=(ward,)).notes

    def linked_to(self, records: Records) -> EventLog:
        """What does this file say of the wards of these stays? Names as the stays have them, by the planner's word."""
        names = names_in_stays(self.wards, records)
        wards = tuple(sorted(set(names.values())))
        unknown = without_stays(wards, records)
        if all(old == new for old, new in names.items()):
            return replace(self, unknown_wards=unknown)
        table = self.table.assign(ward=self.table["ward"].map(names))
        return replace(self, table=table, wards=wards, unknown_wards=unknown)


def read_refusals(
    source: FileLike,
    *,
    name: str | None = None,
    columns: Mapping[str, str] | None = None,
    date_order: str | None = None,
    no_bed_reasons: tuple[str, ...] | None = None,
) -> EventLog:
    """Who was refused a bed on which ward, and when?

    Columns ward, and time or date or both; reason and outcome where there are any. ``columns`` and ``date_order`` as in
    ``read_records``; ``no_bed_reasons`` answers ``.unclear_reasons``. Entries whose outcome says that the bed was given
    after all are set aside.

    Raises:
        UnreadableRecords: no time or ward column, nothing that can be used, or dates whose order somebody must say (the
            question is in ``.question``).

    Checked by: tests/data/beside/test_logs.py
    """
    cannot = (
        "A log of refusals is rarely complete: say which share is written down, or the demand found from it is too low.",
        "It can't show patients nobody asked a bed for.",
    )
    file = open_source(source, name)
    text = _table("refusals", file, REFUSAL_HEADINGS, columns)
    log = _read("refusals", text, file.name, date_order, cannot)
    return replace(log, no_bed_reasons=no_bed_reasons)


def read_bed_requests(
    source: FileLike,
    *,
    name: str | None = None,
    columns: Mapping[str, str] | None = None,
    date_order: str | None = None,
) -> EventLog:
    """Who asked for a bed, when, and when was it given? Waits come from the two times, or from a column of hours.

    Raises:
        UnreadableRecords: as for :func:`read_refusals`.

    Checked by: tests/data/beside/test_logs.py
    """
    cannot = (
        "A log of requests shows waits, not how long patients stay once they have a bed.",
        "It holds all who asked, so nobody in it counts as not given a bed: bring the list of those who were not.",
    )
    file = open_source(source, name)
    text = _table("bed requests", file, REQUEST_HEADINGS, columns)
    return _read("bed requests", text, file.name, date_order, cannot)


def read_cancellations(
    source: FileLike,
    *,
    name: str | None = None,
    columns: Mapping[str, str] | None = None,
    date_order: str | None = None,
    no_bed_reasons: tuple[str, ...] | None = None,
) -> EventLog:
    """Which booked patients were cancelled, for which day, and why? Bookings that were kept are set aside.

    Raises:
        UnreadableRecords: as for :func:`read_refusals`.

    Checked by: tests/data/beside/test_logs.py
    """
    cannot = (
        "Official counts of cancellations leave out those made days ahead: the figure found from them is a lowest one.",
    )
    file = open_source(source, name)
    text = _table("cancellations", file, CANCELLATION_HEADINGS, columns)
    log = _read("cancellations", text, file.name, date_order, cannot)
    return replace(log, no_bed_reasons=no_bed_reasons)


def _table(
    kind: str, file: SourceFile, known: Mapping[str, tuple[str, ...]], columns: Mapping[str, str] | None
) -> TextTable:
    """Return the columns of one log, or say which it lacks."""
    text = read_table(file, known, columns)
    waits = {word for key in ("placed", *WAITS) for word in REQUEST_HEADINGS[key]} & {
        plain(heading) for heading in text.unused
    }
    fine = {MEANT[kind], MEANT["bed requests"] if "outcome" in text.columns and not waits else ""}
    text.refuse_kinds(file.name, MEANT[kind], *(other for other in TELLTALES if other not in fine))
    lacks = {"ward": "ward" not in text.columns, "time": not {"time", "date"} & set(text.columns)}
    missing = [f"a {key} column" for key, is_missing in lacks.items() if is_missing]
    if missing:
        raise UnreadableRecords(
            [
                f"{file.name} lacks {' and '.join(missing)}, so it can't be read as {MEANT[kind]}: add it, or choose another file."
            ]
        )
    return filled_from_above(text, "date", "ward")


def _read(kind: str, text: TextTable, name: str, date_order: str | None, cannot: tuple[str, ...]) -> EventLog:
    """Read one log; rows without a ward or a readable time, and those that are none of its kind, are set aside."""
    frame, day_only = _frame(text, name, date_order)
    if kind == "cancellations" and "reason" not in frame and _tells_why(frame):
        frame["reason"] = frame["outcome"]  # as in "cancelled, no bed"
    reason = pd.Series("", index=frame.index, dtype=object)
    if "outcome" in frame and kind in NOT_MEANT:
        sentence, which = NOT_MEANT[kind]
        reason[which(frame["outcome"], frame["ward"])] = sentence
    if "wait_hours" in frame:
        reason[frame["wait_hours"] < 0] = "The bed is given before it is asked for"
    reason[frame["time"].isna()] = "The time is missing or can't be read"
    reason[frame["ward"] == ""] = "No ward is named"
    table = frame[reason == ""].sort_values("time", kind="stable").reset_index(drop=True)
    repaired = int((day_only & (reason == "")).sum())
    told = "The time of day can't be read: the day alone counts"
    report = account(text, reason, name, "name a ward and write times as 2024-03-31 14:05", (told, repaired))
    report = replace(report, notes=(*report.notes, *unknown_note(table)))
    return EventLog(kind, name, table, tuple(sorted(set(table["ward"]))), report, cannot)


def _tells_why(frame: pd.DataFrame) -> bool:
    """Does any outcome hold a reason?"""
    return "outcome" in frame and any(means_no_bed(outcome) is not None for outcome in frame["outcome"].unique())


def _frame(text: TextTable, name: str, date_order: str | None) -> tuple[pd.DataFrame, np.ndarray]:
    """Return all rows, and which of them have a day but no readable time of day beside it."""
    wards = spelled_alike(text.strings("ward"))
    ward = ["" if is_no_ward(one, text.headings["ward"]) else one for one in wards]
    then = ("placed",) if "placed" in text.columns else ()
    (time, *placed), day_only = when(text, name, date_order, *then)
    frame = pd.DataFrame({"time": as_times(time), "ward": pd.Series(ward, dtype=object)})
    for key in ("reason", "outcome"):
        if key in text.columns:
            frame[key] = pd.Series([without_formula(value) for value in text.strings(key)], dtype=object)
    if placed:
        frame["placed"] = as_times(placed[0])
    if placed or set(WAITS) & set(text.columns):
        given = was_given_a_bed(frame["outcome"], frame["ward"]).to_numpy() if "outcome" in frame else None
        frame = frame.assign(**read_waits(text, time, placed[0] if placed else None, day_only, given))
    return frame, day_only
