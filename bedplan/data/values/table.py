"""From a table of text to columns with meaning: codes for patients, names for wards, seconds for times."""

from __future__ import annotations

import functools
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.files.blocks import BLOCK_ROWS, side_by_side, taken
from bedplan.data.files.dates import DAY_SECONDS, MISSING, UNREADABLE
from bedplan.data.values import codes
from bedplan.data.values.dateorder import start_and_end
from bedplan.data.values.grain import what_rows_are
from bedplan.data.values.keys import read_keys
from bedplan.data.values.ready_reading import ready_column
from bedplan.data.values.rows import Rows
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from bedplan.data.files.dates import TimesRead
    from bedplan.data.files.texttable import TextTable
    from bedplan.data.values.choices import IntakeChoices
    from bedplan.data.values.keys import Keys
    from bedplan.data.values.rows import Way

TIMES = ("start", "end", "admitted", "discharged", "ready")
FEWEST_DATES = 20  # without a time of day, to say that none has one
KEPT_TEXT = ("class", "method", "specialty", "destination")
BESIDE_STAYS = ("staffed beds", "a census", "a monthly return")  # what no column of ward stays can be
TOTAL_WORDS = ("total", "grand total", "sub-total", "subtotal", "sum", "all wards", "run on", "page")


@dataclass(slots=True)
class StayTable:
    """A stay file in columns; ``rows`` is what the rules work on.

    ``random_keys``: patient_key, spell_key → number of a key in ``rows`` → the random code shown for it.
    """

    rows: Rows
    wards: tuple[str, ...]
    text: Mapping[str, pd.Categorical]
    ready: NDArray[np.int64] | None
    random_keys: Mapping[str, NDArray[np.int64]]
    has_times: bool
    knows_patients: bool
    knows_spells: bool
    dropped: tuple[str, ...]
    notes: tuple[str, ...]

    def frame(self, way: Way) -> pd.DataFrame:
        """Return some rows as a table for people."""
        columns: dict[str, object] = {"patient_key": self._keys("patient_key", way.patient)}
        if self.knows_spells:
            columns["spell_key"] = self._keys("spell_key", way.spell)
        columns["ward"] = codes.categorical(way.ward, self.wards)
        columns["start"], columns["end"] = as_times(way.start), as_times(way.end)
        for name, values in self.text.items():
            columns[name] = pd.Categorical.from_codes(taken(values.codes, way.row), dtype=values.dtype)
        if self.ready is not None:
            columns["ready"] = as_times(taken(self.ready, way.row))
        return pd.DataFrame(columns, copy=False)

    def follow_parts(self) -> None:
        """Give the second parts of stays the text of their first parts."""
        parts = self.rows.parts
        if parts.size:
            self.text = {
                name: pd.Categorical.from_codes(np.concatenate((values.codes, values.codes[parts])), dtype=values.dtype)
                for name, values in self.text.items()
            }
            self.ready = None if self.ready is None else np.concatenate((self.ready, self.ready[parts]))

    def _keys(self, name: str, numbers: NDArray[np.int32]) -> NDArray[np.int64]:
        """Return the random codes of some rows' keys; without keys, the rows' own numbers."""
        return taken(self.random_keys[name], numbers) if name in self.random_keys else numbers.astype(np.int64)


def as_times(seconds: NDArray[np.int64]) -> NDArray[np.datetime64]:
    """Return seconds as times, missing and unreadable ones as "not a time"."""
    unreadable = seconds == UNREADABLE
    return (np.where(unreadable, MISSING, seconds) if unreadable.any() else seconds).view("datetime64[s]")


def as_stay_table(text: TextTable, name: str, date_order: str | None, choices: IntakeChoices) -> StayTable:
    """Read every column by its meaning.

    Raises:
        UnreadableRecords: no ward column, no start or end column, or dates whose order somebody must say (the
            question is in ``.question``).
    """
    _check_columns(text, name)
    named = [key for key in ("patient_key", "spell_key") if key in text.columns]
    (start, end, notes), wards, *read = side_by_side(
        lambda: start_and_end(text, name, date_order, choices.time_zone),
        lambda: codes.read_wards(text.columns["ward"], choices.ward_names),
        *(functools.partial(read_keys, text.columns[key]) for key in named),
    )
    keys = dict(zip(named, read, strict=True))
    has_times, start, end, told = _clocks(start, end)
    notes += told + what_rows_are(text)
    rows = _numbered(text.rows, keys, wards.codes, (start.seconds, end.seconds))
    kept, dropped = _text_columns(text, rows)
    _mark_report_lines(rows, text, wards.names)
    for key in keys.values():
        rows.mark(key.tests, "test patient")
        if key.looks_real:
            notes.append("Keys in the file look like real persons' numbers; they were replaced by random codes.")
    rows.mark(wards.renamed, "ward renamed")
    rows.mark(wards.respelled, "ward spelling")
    rows.mark(np.union1d(np.flatnonzero(start.serial), np.flatnonzero(end.serial)), "serial date")
    ready, told = _ready(text, rows, date_order, choices)
    notes += told
    return StayTable(
        rows=rows,
        wards=wards.names,
        text=kept,
        ready=ready,
        random_keys=_random_keys(keys),
        has_times=has_times,
        knows_patients=bool(keys),
        knows_spells="spell_key" in keys,
        dropped=dropped,
        notes=tuple(notes),
    )


def _numbered(
    size: int, keys: Mapping[str, Keys], ward: NDArray[np.int32], times: tuple[NDArray[np.int64], NDArray[np.int64]]
) -> Rows:
    """Return the rows by numbers: patients by their key, else by their hospital stay's, else each row its own."""
    whose, spell = keys.get("patient_key", keys.get("spell_key")), keys.get("spell_key")
    return Rows(
        patient=np.arange(size, dtype=np.int32) if whose is None else whose.codes,
        spell=np.full(size, -1, dtype=np.int32) if spell is None else spell.codes,
        ward=ward,
        start=times[0],
        end=times[1],
    )


def _random_keys(keys: Mapping[str, Keys]) -> dict[str, NDArray[np.int64]]:
    """Return the random codes of each key; patients without one of their own go by their hospital stay's."""
    random = {key: read.random for key, read in keys.items()}
    return {"patient_key": random["spell_key"]} | random if "spell_key" in random else random


def _ready(
    text: TextTable, rows: Rows, date_order: str | None, choices: IntakeChoices
) -> tuple[NDArray[np.int64] | None, list[str]]:
    """Return when each stay's patient was ready to leave, None where no column and no file says so; and what to say."""
    ready, told = None, []
    if "ready" in text.columns:
        ready = ready_column(text.columns["ready"], rows, date_order, choices.time_zone)
    if choices.ready_dates is not None:
        joined, told = choices.ready_dates.joined(text, rows, knows_spells="spell_key" in text.columns)
        ready = joined if ready is None else np.where(joined > UNREADABLE, joined, ready)
    return ready, told


def _check_columns(text: TextTable, name: str) -> None:
    """Say which columns the file lacks, all at once."""
    text.refuse_kinds(name, "ward stays", *(() if {"start", "end"}.isdisjoint(text.columns) else BESIDE_STAYS))
    read = ", ".join(f"“{heading}”" for heading in text.headings.values())
    problems = []
    if "ward" not in text.columns:
        problems.append(f"{name} has no ward column (recognised: {read}): name the ward's column “ward”.")
    for key, other, word in (("start", "admitted", "arrival on"), ("end", "discharged", "departure from")):
        if not {key, f"{key}_date", other} & set(text.columns):
            problems.append(
                f"{name} has no column for the {word} the ward (recognised: {read}): name it “{key}”, with date and time."
            )
    if problems:
        raise UnreadableRecords(problems)


def _text_columns(text: TextTable, rows: Rows) -> tuple[dict[str, pd.Categorical], tuple[str, ...]]:
    """Return the text columns worth keeping, and the headings dropped because of what is in them."""
    kept: dict[str, pd.Categorical] = {}
    dropped = list(text.dropped)
    for key in KEPT_TEXT:
        if key in text.columns:
            values = codes.read_category(text.columns[key])
            if values is None:
                dropped.append(text.headings[key])
            else:
                kept[key] = values
    for key in ("age_band", "age"):
        if key in text.columns and "age_band" not in kept:
            values, impossible = codes.age_bands(text.columns[key])
            rows.mark(impossible, "test patient")
            if values is None:
                dropped.append(text.headings[key])
            else:
                kept["age_band"] = values
    return kept, tuple(dropped)


def _mark_report_lines(rows: Rows, text: TextTable, wards: tuple[str, ...]) -> None:
    """Set aside totals, footers and repeated headings: lines without a ward and dates."""
    heading = text.headings["ward"].casefold()
    furniture = [
        place
        for place, ward in enumerate(wards)
        if ward.casefold() == heading or ward.casefold().startswith(TOTAL_WORDS)
    ]
    no_date = np.flatnonzero((rows.start <= UNREADABLE) & (rows.end <= UNREADABLE))
    rows.mark(no_date[np.isin(rows.ward[no_date], [-1, *furniture])], "misfit")


def _clocks(start: TimesRead, end: TimesRead) -> tuple[bool, TimesRead, TimesRead, list[str]]:
    """Are there times of day? Where only starts or only ends have them, they are left out: stays are counted in nights.

    An end without a time would lie at midnight, hours before its patient left.
    """
    has = [_has_times(times.seconds) for times in (start, end)]
    bare = end.seconds if has[0] else start.seconds
    if has[0] == has[1] or int((bare > UNREADABLE).sum()) < FEWEST_DATES:
        return any(has), start, end, []
    start, end = (
        replace(one, seconds=np.where(one.seconds > UNREADABLE, one.seconds // DAY_SECONDS * DAY_SECONDS, one.seconds))
        for one in (start, end)
    )
    with_times, without = ("Starts", "ends") if has[0] else ("Ends", "starts")
    return False, start, end, [f"{with_times} have a time of day and {without} have none: only the dates are used."]


def _has_times(times: NDArray[np.int64]) -> bool:
    """Does any readable time differ from midnight? Mostly the first rows show it."""
    return any(bool(((some > UNREADABLE) & (some % DAY_SECONDS != 0)).any()) for some in (times[:BLOCK_ROWS], times))
