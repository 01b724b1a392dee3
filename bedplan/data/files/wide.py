"""Wide census tables, a column or a few for each ward, brought to the long form."""

from __future__ import annotations

import csv
import io
from itertools import accumulate
from typing import TYPE_CHECKING

import pyarrow as pa

from bedplan.data.files.columns import match_headings, plain
from bedplan.data.files.reading import SEPARATORS, as_utf8, read_table, split_cells
from bedplan.data.files.source import SourceFile
from bedplan.data.files.texttable import MOST_TITLE_LINES, TextTable
from bedplan.data.files.workbook import sheets_as_text

if TYPE_CHECKING:
    from collections.abc import Mapping

# What a ward's column can end in, "Heron occupied", "Heron beds", or hold in a second row of headings under its name.
ENDINGS = {
    "occupied": ("occupied", "occ", "patients", "census", "inuse", "bedsoccupied", "occupiedbeds", "inpatients"),
    "available": ("available", "avail", "beds", "open", "staffed", "bedsavailable", "availablebeds", "openbeds"),
    "closed": ("closed", "bedsclosed", "closedbeds"),
}
Rows = list[tuple[str, ...]]


def read_wide(
    source: SourceFile, known: Mapping[str, tuple[str, ...]], chosen: Mapping[str, str] | None = None
) -> TextTable | None:
    """What does a table with columns for each ward say? The same as a long one, a row for each date and ward.

    Two rows of headings, wards above and what is counted below, are read as one. None where it is no such table: where
    a time stands in two rows or more, each is of a ward, whatever the headings.

    Checked by: tests/data/beside/test_census.py
    """
    source = one_row_of_headings(source) or source
    days = {key: known[key] for key in ("date", "time")}
    first = read_table(source, known | days, chosen)
    if "date" not in first.columns:
        return None
    first = read_table(source, days, {key: heading for key, heading in (chosen or {}).items() if key in days})
    wards = [heading for heading in first.unused if plain(heading)]
    text = read_table(source, {}, first.headings | {f"ward {heading}": heading for heading in wards})
    moments = set(zip(text.strings("date"), text.strings("time"), strict=True))
    if 2 * len(moments) <= len(set(zip(*(text.strings(key) for key in text.headings), strict=True))):
        return None
    groups = _groups(wards)
    columns: dict[str, list[str]] = {key: [] for key in ("date", "time", "ward", *ENDINGS)}
    for ward, headings in groups.items():
        columns["date"] += text.strings("date")
        columns["time"] += text.strings("time")
        columns["ward"] += [ward] * text.rows
        for key in ENDINGS:
            columns[key] += text.strings(f"ward {headings.get(key, '')}")
    if not columns["date"]:
        return None
    return TextTable(
        columns={key: pa.chunked_array([values], pa.string()) for key, values in columns.items()},
        headings=first.headings | match_headings(wards, {}),
        rows=len(columns["date"]),
        misfits=text.misfits,
        dropped=first.dropped,
        unused=(),
        notes=(*first.notes, f"A wide table: {len(groups)} columns were read as wards."),
    )


def _measure(heading: str) -> str:
    """Return what a heading says is counted, "" where it doesn't say."""
    return next((key for key, endings in ENDINGS.items() if plain(heading) in endings), "")


def _groups(headings: list[str]) -> dict[str, dict[str, str]]:
    """Return ward → what is counted → heading; a heading that doesn't say what is counted holds patients."""
    groups: dict[str, dict[str, str]] = {}
    for heading in headings:
        *ward, last = heading.replace("_", " ").split() or [""]
        measure = _measure(last) if ward else ""
        groups.setdefault(" ".join(ward) if measure else heading, {})[measure or "occupied"] = heading
    return {ward: group for ward, group in groups.items() if "occupied" in group}


def one_row_of_headings(source: SourceFile) -> SourceFile | None:
    """Return a table with two rows of headings as one with "Heron occupied", "Heron available"; None where it has one."""
    table: Rows = []
    for rows in _rows_of(source):
        for place in range(1, min(len(rows), MOST_TITLE_LINES)):
            headings = tuple(_joined(rows[place - 1], rows[place]))
            if headings and (not table or headings == table[0]):  # a sheet a month is one table
                table += [*(() if table else (headings,)), *rows[place + 1 :]]
                break
    if not table:
        return None
    written = io.StringIO()
    csv.writer(written).writerows(table)
    return SourceFile(source.name, written.getvalue().encode(), digest=source.digest)


def _rows_of(source: SourceFile) -> list[Rows]:
    """Return the rows of each sheet, or of a text file under the separator that shows most."""
    if source.begins_with(b"PK"):
        return sheets_as_text(source)
    if source.begins_with(b"PAR1"):
        return []
    lines = as_utf8(source).file.content.decode("utf-8", errors="replace").splitlines()
    top = lines[:MOST_TITLE_LINES]
    separator = max(SEPARATORS, key=lambda sign: sum(line.count(sign) for line in top))
    return [[split_cells(line, separator) for line in lines]]


def _joined(above: tuple[str, ...], below: tuple[str, ...]) -> list[str]:
    """Return one row of headings for two, empty unless the lower one counts the same things under several wards."""
    measures = [_measure(cell) for cell in below]
    above = (*above, *[""] * (len(below) - len(above)))[: len(below)]
    under = list(accumulate(above, lambda last, cell: cell or last))  # a merged cell holds its name once
    counted = [(under[place], measure) for place, measure in enumerate(measures) if measure]
    wards = {ward for ward, _ in counted}
    if len(wards) < 2 or "" in wards or len(set(counted)) < len(counted):
        return []
    return [
        f"{under[place]} {measure}" if measure else below[place] or above[place]
        for place, measure in enumerate(measures)
    ]
