"""From a table of text to cleaned-up columns: codes for patients, names for wards, seconds for times."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.compute as pc

from bedplan.data.columns import without_formula
from bedplan.data.dates import DAY_SECONDS, MISSING, UNREADABLE, TimesRead, read_times
from bedplan.data.rows import Rows
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from bedplan.data.reading import TextTable

KEPT_TEXT = ("class", "method", "specialty", "age_band", "destination")


@dataclass(slots=True)
class StayTable:
    """A stay file in columns; ``rows`` is what the rules work on."""

    rows: Rows
    wards: tuple[str, ...]
    text: Mapping[str, pd.Categorical]
    ready: NDArray[np.int64] | None
    has_times: bool
    knows_patients: bool
    knows_spells: bool
    notes: tuple[str, ...]

    def frame(
        self,
        which: NDArray[np.int64],
        start: NDArray[np.int64] | None = None,
        end: NDArray[np.int64] | None = None,
    ) -> pd.DataFrame:
        """Return some rows as a table for people; times as recorded unless given."""
        rows = self.rows
        columns: dict[str, object] = {"patient_key": rows.patient[which]}
        if self.knows_spells:
            columns["spell_key"] = rows.spell[which]
        columns["ward"] = pd.Categorical.from_codes(rows.ward[which], categories=list(self.wards))
        columns["start"] = as_times(rows.first_start[which] if start is None else start)
        columns["end"] = as_times(rows.first_end[which] if end is None else end)
        columns |= {name: values[which] for name, values in self.text.items()}
        if self.ready is not None:
            columns["ready"] = as_times(self.ready[which])
        frame = pd.DataFrame(columns)
        frame["ward"] = frame["ward"].cat.remove_unused_categories()
        return frame


def as_times(seconds: NDArray[np.int64]) -> NDArray[np.datetime64]:
    """Return seconds as times, missing and unreadable ones as "not a time"."""
    return np.where(seconds > UNREADABLE, seconds, MISSING).astype("datetime64[s]")


def as_stay_table(text: TextTable, name: str, date_order: str | None) -> StayTable:
    """Read every column by its meaning.

    Raises:
        UnreadableRecords: no ward column, no start or end column, or dates whose order somebody must say.
    """
    problems = _missing_columns(text, name)
    if problems:
        raise UnreadableRecords(problems)
    start = _times(text, "start", date_order)
    end = _times(text, "end", date_order)
    if date_order is None and (start.order_is_open or end.order_is_open):
        raise UnreadableRecords([_order_question(name, start, end)])
    ward, wards = _wards(text.columns["ward"])
    patient, knows_patients = _codes(text, "patient_key")
    spell, knows_spells = _codes(text, "spell_key")
    rows = Rows(patient=patient, spell=spell, ward=ward, start=start.seconds, end=end.seconds)
    rows.mark(start.serial | end.serial, "serial date")
    offset = ("Times carried an offset; the clock shown in the file is used.",)
    ready = _times(text, "ready", date_order or "day first").seconds if "ready" in text.columns else None
    return StayTable(
        rows=rows,
        wards=wards,
        text={key: _category(text.columns[key]) for key in KEPT_TEXT if key in text.columns},
        ready=ready,
        has_times=_has_times(start.seconds, end.seconds),
        knows_patients=knows_patients or knows_spells,
        knows_spells=knows_spells,
        notes=offset if start.had_offset or end.had_offset else (),
    )


def _missing_columns(text: TextTable, name: str) -> list[str]:
    """Say which columns the file lacks."""
    problems = []
    read = ", ".join(f"“{heading}”" for heading in text.headings.values())
    if "ward" not in text.columns:
        problems.append(f"{name} has no ward column (recognised: {read}): name the ward's column “ward”.")
    for key, word in (("start", "arrival on the ward"), ("end", "departure from the ward")):
        if key not in text.columns and f"{key}_date" not in text.columns:
            problems.append(
                f"{name} has no column for the {word} (recognised: {read}): name it “{key}”, with date and time."
            )
    return problems


def _order_question(name: str, start: TimesRead, end: TimesRead) -> str:
    """Ask which way round the dates are written."""
    shown = ", ".join((start.examples or end.examples)[:3])
    return (
        f"The dates in {name} can be read day first or month first (for example {shown}): "
        "say which, so that nothing is guessed."
    )


def _times(text: TextTable, key: str, date_order: str | None) -> TimesRead:
    """Read one time, from one column or from a date and a time column."""
    if key in text.columns:
        return read_times(text.columns[key], date_order)
    day, clock = text.columns[f"{key}_date"], text.columns.get(f"{key}_time")
    if clock is None:
        return read_times(day, date_order)
    both = pc.binary_join_element_wise(day, pc.fill_null(clock, ""), " ", null_handling="emit_null")
    return read_times(both, date_order)


def _has_times(start: NDArray[np.int64], end: NDArray[np.int64]) -> bool:
    """Does any readable time differ from midnight?"""
    return bool(((start > UNREADABLE) & (start % DAY_SECONDS != 0)).any()) or bool(
        ((end > UNREADABLE) & (end % DAY_SECONDS != 0)).any()
    )


def _coded(column: pa.ChunkedArray) -> tuple[NDArray[np.int64], list[str]]:
    """Return a code for each row (−1 = blank) and the distinct values."""
    encoded = pc.dictionary_encode(column).combine_chunks()
    encoded = encoded.combine_chunks() if isinstance(encoded, pa.ChunkedArray) else encoded
    codes = pc.fill_null(pc.cast(encoded.indices, pa.int64()), -1).to_numpy(zero_copy_only=False)
    return codes, encoded.dictionary.to_pylist()


def _wards(column: pa.ChunkedArray) -> tuple[NDArray[np.int64], tuple[str, ...]]:
    """Return a code for each row and the wards' names, tidy."""
    codes, written = _coded(column)
    tidy = [without_formula(name) for name in written]
    names = sorted({name for name in tidy if name})
    place = {name: number for number, name in enumerate(names)}
    translate = np.array([*(place.get(name, -1) for name in tidy), -1], dtype=np.int64)
    return translate[codes], tuple(names)


def _codes(text: TextTable, key: str) -> tuple[NDArray[np.int64], bool]:
    """Replace keys by random codes; the way back is forgotten here. Blank keys get a code each."""
    if key not in text.columns:
        return np.arange(text.rows, dtype=np.int64), False
    column = pc.utf8_trim_whitespace(text.columns[key])
    encoded = pc.dictionary_encode(column).combine_chunks()
    encoded = encoded.combine_chunks() if isinstance(encoded, pa.ChunkedArray) else encoded
    codes = pc.fill_null(pc.cast(encoded.indices, pa.int64()), -1).to_numpy(zero_copy_only=False)
    blank = codes < 0
    known = len(encoded.dictionary)
    shuffled = np.random.default_rng().permutation(known + int(blank.sum()))
    result = np.empty(codes.size, dtype=np.int64)
    result[~blank] = shuffled[codes[~blank]]
    result[blank] = shuffled[known:]
    return result, known > 0


def _category(column: pa.ChunkedArray) -> pd.Categorical:
    """Return a text column as categories, tidy."""
    codes, written = _coded(column)
    tidy = [without_formula(value) for value in written]
    names = sorted(set(tidy) - {""})
    place = {name: number for number, name in enumerate(names)}
    translate = np.array([*(place.get(value, -1) for value in tidy), -1], dtype=np.int64)
    return pd.Categorical.from_codes(translate[codes], categories=names)
