"""What the headings of a file were taken for, with three rows, so that a person can confirm or correct it."""

from __future__ import annotations

from dataclasses import dataclass, replace
from types import MappingProxyType
from typing import TYPE_CHECKING

from bedplan.data.files.columns import is_identity
from bedplan.data.files.headings import HEADINGS_OF, NEEDED, lacking, mistaken_for
from bedplan.data.files.reading import LINE, SEPARATORS, as_utf8, read_table, split_cells
from bedplan.data.files.source import FileLike, SourceFile, open_source
from bedplan.data.files.wide import one_row_of_headings, read_wide
from bedplan.data.files.workbook import parquet_headings, sheets_as_text
from bedplan.errors import ImpossibleFigure, UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Mapping

LINES_LOOKED_AT = 120
SAMPLE_ROWS = 3
MATCHED = ("ward", "start", "end", "patient_key", "spell_key", "class", "method", "specialty", "ready", "destination")


@dataclass(frozen=True, slots=True)
class ColumnPreview:
    """``headings``: every heading but those of identity columns. ``matched``: our name → heading as written.

    ``samples``: our name → the first three values under its heading. ``asked``: our names to ask a person about.
    ``lacking``: columns without which it can't be read, one of each row. ``mistaken``: a sentence, where it is clearly a file
    of another kind. ``hint``: what else to know before columns are chosen.
    """

    headings: tuple[str, ...]
    matched: Mapping[str, str]
    samples: Mapping[str, tuple[str, ...]]
    asked: tuple[str, ...] = MATCHED
    lacking: tuple[tuple[str, ...], ...] = ()
    mistaken: str = ""
    hint: str = ""


def preview_columns(
    source: FileLike,
    *,
    name: str | None = None,
    columns: Mapping[str, str] | None = None,
    kind: str = "ward stays",
) -> ColumnPreview:
    """Which heading was taken for what, and what do three rows hold? ``columns`` as in :func:`read_records`.

    Looks at the first lines only. A file without one known heading still lists its headings, so that columns can be
    chosen; one where what was chosen can't be is shown as without it. ``kind``: ``"ward stays"``, ``"staffed beds"``, ``"refusals"``, ``"bed requests"``,
    ``"cancellations"``, ``"census"``, ``"monthly return"`` or ``"ready dates"``.

    Raises:
        UnreadableRecords: the file is no table at all.
        ImpossibleFigure: a kind of file nobody knows.

    Checked by: tests/data/files/test_preview.py
    """
    if kind not in HEADINGS_OF:
        raise ImpossibleFigure(f"The kind of file {kind!r} is not known: it is one of {', '.join(HEADINGS_OF)}.")
    asked = MATCHED if kind == "ward stays" else tuple(HEADINGS_OF[kind])
    file = open_source(source, name)
    is_text = not file.begins_with(b"PK", b"PAR1")
    top = SourceFile(file.name, _first_lines(as_utf8(file).file.head)) if is_text else file
    try:
        table = read_table(top, HEADINGS_OF[kind], columns)
    except UnreadableRecords:
        if columns:  # that can't be: show how it is read without them
            return preview_columns(source, name=name, kind=kind)
        seen = ColumnPreview(_plain_headings(top), MappingProxyType({}), MappingProxyType({}), asked)
    else:
        samples = {key: _sample(key, table.strings(key)[:SAMPLE_ROWS]) for key in table.headings}
        headings = (*table.headings.values(), *table.unused)
        seen = ColumnPreview(headings, MappingProxyType(dict(table.headings)), MappingProxyType(samples), asked)
    judged = _judged(seen, file.name, kind, is_said=bool(columns))
    return _as_census(judged, top, columns) if kind == "census" and judged.lacking and not judged.mistaken else judged


def _judged(seen: ColumnPreview, name: str, kind: str, *, is_said: bool) -> ColumnPreview:
    """Say which columns are lacking, and whether the headings are those of another kind of file; not once a person chose."""
    other = None if is_said else mistaken_for(kind, seen.headings)
    told = (
        f"{name} looks like {NEEDED[other][0]}, not like {NEEDED[kind][0]}: choose another file here." if other else ""
    )
    return replace(seen, lacking=lacking(kind, seen.matched), mistaken=told)


def _as_census(seen: ColumnPreview, source: SourceFile, columns: Mapping[str, str] | None) -> ColumnPreview:
    """Look whether a table has a column for each ward: it has only its dates to be asked about, where all hold counts."""
    try:
        wide = read_wide(source, HEADINGS_OF["census"], columns)
    except UnreadableRecords:
        wide = None
    if wide is None:
        return replace(seen, hint="A table with a column for each ward needs its date only.")
    counts: dict[str, bool] = {}
    for ward, cell in zip(wide.strings("ward"), wide.strings("occupied"), strict=True):
        counts[ward] = counts.get(ward, False) or any(sign.isdigit() for sign in cell)
    told = f"Read as a table with a column for each ward: {', '.join(counts)}."
    if not all(counts.values()):
        told = f"{told} If it has a row for each ward, name the columns of wards and patients."
        return replace(seen, lacking=(), hint=told)
    samples = {key: _sample(key, wide.strings(key)[:SAMPLE_ROWS]) for key in wide.headings}
    headings = seen.headings if one_row_of_headings(source) is None else tuple(wide.headings.values())
    return ColumnPreview(headings, wide.headings, samples, ("date", "time"), hint=told)


def _sample(key: str, values: list[str]) -> tuple[str, ...]:
    """Return what may be shown of a column: a patient's or a stay's key may be a real number, so it is not."""
    return ("not shown",) if key in ("patient_key", "spell_key") else tuple(values)


def _first_lines(text: bytes) -> bytes:
    """Return the first lines of a text, whole."""
    end = 0
    for number, line in enumerate(LINE.finditer(text)):
        end = line.end()
        if number == LINES_LOOKED_AT:
            return text[:end]
    return text


def _plain_headings(source: SourceFile) -> tuple[str, ...]:
    """Return the first row with two cells or more that has another such row under it; no headings of identity columns."""
    for rows in _plain_rows(source):
        several = [row for row in rows[:LINES_LOOKED_AT] if sum(map(bool, row)) > 1]
        if len(several) > 1:
            return tuple(dict.fromkeys(cell for cell in several[0] if cell and not is_identity(cell)))
    return ()


def _plain_rows(source: SourceFile) -> list[list[tuple[str, ...]]]:
    """Return the cells of each sheet, or of a text under the separator that gives most."""
    if source.begins_with(b"PK"):
        return sheets_as_text(source)
    if source.begins_with(b"PAR1"):
        return [[parquet_headings(source)] * 2]
    lines = source.content.decode("utf-8", errors="replace").splitlines()
    tables = [[split_cells(line, separator) for line in lines] for separator in SEPARATORS]
    return [max(tables, key=lambda rows: max(map(len, rows), default=0))]
