"""Ward stays as they can be used: read, cleaned, without identities, with a report of every row."""

from __future__ import annotations

import time
from dataclasses import dataclass, field, replace
from functools import cached_property
from typing import TYPE_CHECKING, NamedTuple

import numpy as np
import pandas as pd
import pyarrow as pa

from bedplan.data.cleaning import noticing, sequence, single_rows
from bedplan.data.cleaning.counting import count_rows, why_no_row
from bedplan.data.cleaning.mistyped import set_mistyped_aside
from bedplan.data.cleaning.nesting import part_nested
from bedplan.data.cleaning.places import (
    LEAVE,
    PASSED_THROUGH,
    kinds_of_places,
    leave_note,
    place_notes,
    set_places_aside,
)
from bedplan.data.cleaning.wardlinks import WardLink, propose_links
from bedplan.data.cleaning.wholeyears import set_whole_years_aside
from bedplan.data.cleaning.windows import TimesInHospital, chosen_window, find_period, seen_until, times_in_hospital
from bedplan.data.files.blocks import order_of, side_by_side, taken
from bedplan.data.files.columns import STAY_HEADINGS
from bedplan.data.files.dates import DAY_SECONDS
from bedplan.data.files.misfits import with_lines
from bedplan.data.files.reading import read_table
from bedplan.data.files.rules import RULES
from bedplan.data.files.source import FileLike, SourceFile, open_source
from bedplan.data.values.choices import AS_THEY_STAND, EXCHANGED, HELD, ROW_BY_ROW, IntakeChoices
from bedplan.data.values.table import TIMES, StayTable, as_stay_table
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    import datetime as dt
    from collections.abc import Callable, Mapping

    from numpy.typing import NDArray

    from bedplan.data.files.report import IntakeReport
    from bedplan.data.files.texttable import TextTable


@dataclass(frozen=True)
class Records:
    """The stays of one file, one row a kept stay, without identities.

    ``stays``: patient_key (a random code), spell_key, ward, start, end (NaT = unfinished), and whichever of class,
    method, specialty, age_band, destination, ready the file had, and whether it was repaired. ``set_aside``: the rows that don't count, with the
    reason and without identities. ``window``: first and last moment for which the file is complete; ``seen_until``:
    up to when unfinished stays were watched. ``links``: ward names that may mean the same ward, for a person to
    confirm. ``excluded``: periods left out of rates. ``warm_up_days``: days at the window's start in which starts are
    complete and patients present are not; ``chosen_by``: by what the export was chosen, where that can be told;
    ``period_note`` says which patients it leaves out, if any. ``places``: every place in the file → what it was taken for.
    ``ward_names``: a ward's name in the file → the name the planner gave it. ``unread``: ward → stays set aside because
    they could not be read, or their dates could not be believed.

    Checked by: tests/data/cleaning/test_records.py
    """

    name: str
    stays: pd.DataFrame
    set_aside: pd.DataFrame
    wards: tuple[str, ...]
    report: IntakeReport
    window: tuple[pd.Timestamp, pd.Timestamp]
    seen_until: pd.Timestamp
    fingerprint: str
    has_times: bool = True
    links: tuple[WardLink, ...] = ()
    excluded: tuple[tuple[pd.Timestamp, pd.Timestamp], ...] = ()
    warm_up_days: int = 0
    chosen_by: str = ""
    period_note: str = ""
    places: Mapping[str, str] = field(default_factory=dict)
    ward_names: Mapping[str, str] = field(default_factory=dict)
    unread: Mapping[str, int] = field(default_factory=dict)

    @property
    def short_fingerprint(self) -> str:
        """How do I quote this file in a footnote? The first 12 signs of its fingerprint."""
        return self.fingerprint[:12]

    @property
    def days(self) -> int:
        """How many days does the file cover?"""
        return round((self.window[1] - self.window[0]) / pd.Timedelta(days=1))

    @cached_property
    def calendar(self) -> pd.DatetimeIndex:
        """Which days does the file cover?"""
        return pd.date_range(self.window[0], periods=self.days, freq="D")

    @cached_property
    def counted_days(self) -> NDArray[np.bool_]:
        """Which of those days count towards rates? All but the excluded periods."""
        counts = np.ones(self.days, dtype=bool)
        for first, last in self.excluded:
            counts &= ~((self.calendar >= first) & (self.calendar <= last))
        return counts

    @cached_property
    def settled(self) -> Records:
        """What is left for counts of patients present? The same stays, watched from when everybody in is known."""
        if not self.warm_up_days:
            return self
        first = self.window[0] + pd.Timedelta(days=self.warm_up_days)
        return replace(self, window=(first, self.window[1]), warm_up_days=0)

    @cached_property
    def by_ward(self) -> Mapping[str, NDArray[np.int64]]:
        """Where are each ward's stays? Ward → row numbers in ``stays``."""
        codes = self.stays["ward"].cat.codes.to_numpy()
        names = self.stays["ward"].cat.categories
        order = np.argsort(codes, kind="stable")
        bounds = np.searchsorted(codes[order], np.arange(len(names) + 1))
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

    def without_repairs(self) -> Records:
        """What would be left if no row had been repaired? For showing how far the repairs carry the answer."""
        return replace(self, stays=self.stays[~self.stays["repaired"]].reset_index(drop=True))


def read_records(
    source: FileLike,
    *,
    name: str | None = None,
    columns: Mapping[str, str] | None = None,
    date_order: str | None = None,
    choices: IntakeChoices | None = None,
    progress: Callable[[float, str], None] | None = None,
) -> Records:
    """What do these ward stays say, and what was done to them before they were used?

    ``source`` is a path, bytes or an open binary file (CSV, other separated text, Excel, Parquet); ``columns`` says
    which heading means what where headings are unusual (``{"start": "Zugang"}``); ``date_order`` answers whether
    03/04 is 3 April (``"day first"``), 4 March (``"month first"``) or changes within the file (``"row by row"``), and
    whether a spreadsheet exchanged day and month (``"as they stand"``, ``"day and month exchanged up to day 12"``);
    ``choices`` holds the other answers a file can ask for. ``progress`` is told a few times how far it is: the share
    done, 0 to 1, never falling, and a few words; whatever it raises ends the reading there, and nothing has changed.
    Nothing leaves the memory of this program; keys are replaced by random codes, identity columns are not read.

    Raises:
        UnreadableRecords: the file can't be used; ``.problems`` says what is wrong, where, and what to do.

    Checked by: tests/data/cleaning/test_records.py, tests/data/test_dirt.py, tests/data/test_bad_files.py
    """
    tell = progress or _tell_nobody
    tell(0.0, "reading the file")
    file = open_source(source, name)
    chosen = choices or IntakeChoices()
    text = read_table(file, STAY_HEADINGS, columns, TIMES)
    file = replace(file, held=b"")  # what was read is in the text now: a large file need not be held three times
    tell(0.4, "dates, wards and keys")
    table = as_stay_table(text, file.name, date_order, chosen)
    text = replace(text, columns={})  # what was read is in the table now
    pa.default_memory_pool().release_unused()
    tell(0.7, "patients' ways through the wards")
    is_asked = date_order not in (ROW_BY_ROW, AS_THEY_STAND, EXCHANGED)
    seen = _clean(table, chosen, file.name, is_asked=is_asked)
    tell(0.9, "counting every row")
    records = _finished(table, text, file, chosen, seen)
    tell(1.0, "done")
    return records


def _tell_nobody(_share: float, _doing: str) -> None:
    """Stand in where nobody wants to know how far it is."""


class _Seen(NamedTuple):
    """Up to when the file was watched, when patients were in hospital, and what was noticed on the way."""

    until: int
    times: TimesInHospital
    notes: list[str]
    kinds: dict[str, str]


def _clean_dates(table: StayTable, name: str, *, is_asked: bool) -> tuple[list[str], NDArray[np.int64]]:
    """Apply the rules about one row's dates; return notes, and the longest believable stay of each ward."""
    rows, notes, wards = table.rows, [], max(len(table.wards), 1)
    single_rows.check_dates(rows, int(time.time()) + DAY_SECONDS)
    if table.has_times:
        single_rows.mend_clock_change(rows)
    notes += set_mistyped_aside(rows, wards)
    notes += set_whole_years_aside(rows, table.wards)
    mended = single_rows.mend_negative(rows, single_rows.longest_stays(rows, wards))
    notes += single_rows.note_of_swaps(rows, mended, name, is_asked=is_asked)
    return notes, single_rows.longest_stays(rows, wards)


def _clean(table: StayTable, choices: IntakeChoices, name: str, *, is_asked: bool) -> _Seen:
    """Apply every rule in its order; the file's ``name`` and ``is_asked`` are for the question about exchanged dates."""
    rows = table.rows
    notes, longest = _clean_dates(table, name, is_asked=is_asked)
    if table.has_times and not table.knows_patients:
        sequence.drop_copies(rows, [values.codes for values in table.text.values()])
    way = sequence.in_order(rows)
    kinds = kinds_of_places(rows, way.row, table.wards, choices.places, has_times=table.has_times)
    is_leave = np.array([kind == LEAVE for kind in kinds.values()])
    looked_at = sequence.to_look_at(way, is_leave)
    order = way.row[looked_at]
    if table.knows_patients:
        order = sequence.drop_repeats(rows, order)
    until = seen_until(rows, table.has_times)
    order = sequence.close_forgotten(rows, order, longest, until)
    if table.has_times:
        single_rows.drop_zero_stays(rows, order)
    order = order[rows.live[order]]
    notes += leave_note(rows, is_leave, choices.bed_on_leave)
    if table.knows_patients:
        if choices.bed_on_leave == HELD:
            sequence.hold_beds(rows, order, is_leave)
        order = sequence.join_same_ward(rows, order)
        if table.has_times:
            order = sequence.join_same_ward(rows, sequence.merge_pass_throughs(rows, order))
        has_bed = np.array([kind not in PASSED_THROUGH for kind in kinds.values()])
        order, long_nested = part_nested(rows, order, has_bed, held=choices.bed_on_leave == HELD)
        long_overlaps = sequence.part_overlaps(rows, order) + long_nested
        table.follow_parts()
    if rows.parts.size:
        way = sequence.in_order(rows)
    else:
        way.renew(rows, looked_at)
    way = way.only(taken(rows.live, way.row))
    if table.knows_patients:
        notes += noticing.sequences(way, table, long_overlaps)
    set_places_aside(rows, kinds, table.text.get("class"), choices.bed_on_leave)
    way = way.only(taken(rows.live, way.row))
    times = times_in_hospital(way, knows_patients=table.knows_patients, knows_spells=table.knows_spells)
    return _Seen(until, times, notes + place_notes(rows, kinds), kinds)


def _finished(table: StayTable, text: TextTable, file: SourceFile, choices: IntakeChoices, seen: _Seen) -> Records:
    """Build the records and their report from the cleaned rows."""
    rows = table.rows
    live = np.flatnonzero(rows.live)
    if not live.size:
        raise UnreadableRecords(why_no_row(rows, text.misfits, file.name))
    kept = rows.along(taken(live, order_of(taken(rows.start, live))))
    choices.check_days(file.name, _day(kept.start.min()), _day(seen.until - 1))
    period = find_period(seen.times, seen.until).narrowed(chosen_window(choices.window))
    about, links, changed, stays = side_by_side(
        lambda: noticing.whole_file(kept.start, kept.end, table, period),
        lambda: propose_links(table.wards, kept.ward, kept.start, period.window),
        lambda: taken(rows.changed, kept.row),
        lambda: table.frame(kept),
    )
    notes = [*choices.said(), *text.notes, *table.notes, *seen.notes, *about]
    stays["repaired"] = changed
    gone = np.flatnonzero(rows.aside[: rows.file_rows])
    removed = table.frame(rows.as_recorded(gone))
    sentences = np.array(["", *(rule.sentence for rule in RULES.values())], dtype=object)
    removed.insert(0, "reason", pd.Categorical(sentences[rows.reason[gone]]))
    report, unread = count_rows(table, text, seen.until, notes + [link.sentence for link in links])
    return Records(
        name=file.name,
        stays=stays,
        set_aside=with_lines(removed.drop(columns=["patient_key", "spell_key"], errors="ignore"), text.lines),
        wards=tuple(sorted(stays["ward"].cat.categories)),
        report=report,
        window=tuple(pd.Timestamp(int(moment), unit="s") for moment in period.window),
        seen_until=pd.Timestamp(int(seen.until), unit="s"),
        fingerprint=file.fingerprint,
        has_times=table.has_times,
        links=links,
        warm_up_days=period.warm_up_days,
        chosen_by=period.chosen_by,
        period_note=period.note if period.is_partial else "",
        excluded=tuple((pd.Timestamp(first), pd.Timestamp(last)) for first, last in choices.excluded),
        places=seen.kinds,
        ward_names=choices.ward_names,
        unread=unread,
    )


def _day(seconds: int) -> dt.date:
    """Return the day of a moment."""
    return pd.Timestamp(int(seconds), unit="s").date()
