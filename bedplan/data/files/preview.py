"""What the headings of a file were taken for, with three rows, so that a person can confirm or correct it."""

from __future__ import annotations

from dataclasses import dataclass
from types import MappingProxyType
from typing import TYPE_CHECKING

from bedplan.data.files.columns import is_identity
from bedplan.data.files.headings import HEADINGS_OF
from bedplan.data.files.reading import LINE, SEPARATORS, as_utf8, read_table, split_cells
from bedplan.data.files.source import FileLike, SourceFile, open_source
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
    """

    headings: tuple[str, ...]
    matched: Mapping[str, str]
    samples: Mapping[str, tuple[str, ...]]
    asked: tuple[str, ...] = MATCHED


def preview_columns(
    source: FileLike,
    *,
    name: str | None = None,
    columns: Mapping[str, str] | None = None,
    kind: str = "ward stays",
) -> ColumnPreview:
    """Which heading was taken for what, and what do three rows hold? ``columns`` as in :func:`read_records`.

    Looks at the first lines only. A file without one known heading still lists its headings, so that the ward, start
    and end columns can be chosen. ``kind``: ``"ward stays"``, ``"staffed beds"``, ``"refusals"``, ``"bed requests"``,
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
    top = SourceFile(file.name, _first_lines(as_utf8(file)[0].head)) if is_text else file
    try:
        table = read_table(top, HEADINGS_OF[kind], columns)
    except UnreadableRecords:
        if not is_text:
            raise
        return ColumnPreview(_plain_headings(top.content), MappingProxyType({}), MappingProxyType({}), asked)
    samples = {key: _sample(key, table.strings(key)[:SAMPLE_ROWS]) for key in table.headings}
    headings = (*table.headings.values(), *table.unused)
    return ColumnPreview(headings, MappingProxyType(dict(table.headings)), MappingProxyType(samples), asked)


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


def _plain_headings(text: bytes) -> tuple[str, ...]:
    """Return the cells of the first line that has two or more, under the separator that gives most."""
    for line in text.decode("utf-8", errors="replace").splitlines():
        cells = max((split_cells(line, separator) for separator in SEPARATORS), key=len)
        if len(cells) > 1:
            return tuple(cell for cell in cells if cell and not is_identity(cell))
    return ()
