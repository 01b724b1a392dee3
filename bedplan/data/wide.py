"""Wide census tables, a column for each ward, brought to the long form."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pyarrow as pa

from bedplan.data.columns import match_headings, plain
from bedplan.data.reading import read_table
from bedplan.data.texttable import TextTable

if TYPE_CHECKING:
    from collections.abc import Mapping

    from bedplan.data.source import SourceFile

# What a ward's column can end in: "Heron occupied", "Heron beds".
OCCUPIED = ("occupied", "occ", "patients", "census", "inuse")
AVAILABLE = ("available", "avail", "beds", "open", "staffed")


def read_wide(source: SourceFile, known: Mapping[str, tuple[str, ...]]) -> TextTable:
    """What does a table with a column for each ward say? The same as a long one, a row for each date and ward.

    Checked by: tests/data/test_census.py
    """
    first = read_table(source, {"date": known["date"], "time": known["time"]})
    wards = [heading for heading in first.unused if plain(heading)]
    text = read_table(source, {}, first.headings | {f"ward {heading}": heading for heading in wards})
    columns: dict[str, list[str]] = {key: [] for key in ("date", "time", "ward", "occupied", "available")}
    for ward, (occupied, available) in _pairs(wards).items():
        columns["date"] += text.strings("date")
        columns["time"] += text.strings("time")
        columns["ward"] += [ward] * text.rows
        columns["occupied"] += text.strings(f"ward {occupied}")
        columns["available"] += text.strings(f"ward {available}")
    if not columns["date"]:
        return first
    return TextTable(
        columns={key: pa.chunked_array([values], pa.string()) for key, values in columns.items()},
        headings=first.headings | match_headings(wards, {}),
        rows=len(columns["date"]),
        misfits=text.misfits,
        dropped=first.dropped,
        unused=(),
        notes=(*first.notes, f"A wide table: {len(_pairs(wards))} columns were read as wards."),
    )


def _pairs(headings: list[str]) -> dict[str, tuple[str, str]]:
    """Return ward → (heading of patients, heading of beds); one heading alone holds patients."""
    pairs: dict[str, tuple[str, str]] = {}
    for heading in headings:
        words = heading.replace("_", " ").split()
        ending = plain(words[-1]) if words else ""
        ward = " ".join(words[:-1])
        if len(words) > 1 and ending in AVAILABLE:
            pairs[ward] = (pairs.get(ward, ("", ""))[0], heading)
        elif len(words) > 1 and ending in OCCUPIED:
            pairs[ward] = (heading, pairs.get(ward, ("", ""))[1])
        else:
            pairs[heading] = (heading, pairs.get(heading, ("", ""))[1])
    return {ward: pair for ward, pair in pairs.items() if pair[0]}
