"""The first rows of a file of any kind as text, and what of them may be shown to the person who brought it."""

from __future__ import annotations

import csv
import io
import re
from typing import TYPE_CHECKING

from bedplan.data.files.columns import is_identity
from bedplan.data.files.reading import LINE, SEPARATORS, as_utf8, split_cells
from bedplan.data.files.source import SourceFile
from bedplan.data.files.workbook import first_rows

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

LINES_LOOKED_AT = 120
SAMPLE_ROWS = 3
NOT_SHOWN = ("not shown",)
SHORT_NUMBER = re.compile(r"\d{1,4}([.,]\d{1,3})?", re.ASCII)
DATE_OR_TIME = re.compile(r"\d{1,4}[-/.]\d{1,2}[-/.]\d{2,4}([ T].*)?|\d{1,2}:\d{2}(:\d{2})?", re.ASCII)


def tops_of(file: SourceFile) -> list[SourceFile]:
    """What stands in the first rows? As separated text: one table, or one for each sheet of a workbook.

    Raises:
        UnreadableRecords: the file is no table at all.

    Checked by: tests/data/files/test_preview.py
    """
    if file.begins_with(b"PK", b"PAR1"):
        return [SourceFile(file.name, _as_csv(rows)) for rows in first_rows(file, LINES_LOOKED_AT) if rows]
    return [SourceFile(file.name, _first_lines(as_utf8(file).file.head))]


def _as_csv(rows: Iterable[tuple[str, ...]]) -> bytes:
    """Return rows as separated text, a row a line, all of one length."""
    rows = [[" ".join(cell.split()) for cell in row] for row in rows]
    longest = max(map(len, rows), default=0)
    written = io.StringIO()
    csv.writer(written).writerows([*row, *[""] * (longest - len(row))] for row in rows)
    return written.getvalue().encode()


def _first_lines(text: bytes) -> bytes:
    """Return the first lines of a text, whole."""
    end = 0
    for number, line in enumerate(LINE.finditer(text)):
        end = line.end()
        if number == LINES_LOOKED_AT:
            return text[:end]
    return text


def plain_headings(top: SourceFile) -> tuple[str, ...]:
    """Which row could be headings that nobody knows? The first with two cells or more, and another such row under it.

    Identity columns are left out.
    """
    lines = top.content.decode("utf-8", errors="replace").splitlines()
    tables = [[split_cells(line, separator) for line in lines] for separator in SEPARATORS]
    rows = max(tables, key=lambda rows: max(map(len, rows), default=0))
    several = [row for row in rows if sum(map(bool, row)) > 1]
    if len(several) < 2:
        return ()
    return tuple(dict.fromkeys(cell for cell in several[0] if cell and not is_identity(cell)))


def sample(key: str, values: Sequence[str]) -> tuple[str, ...]:
    """What may be shown of a column that is known? A patient's or a stay's key may be a real number, so it is not."""
    return NOT_SHOWN if key in ("patient_key", "spell_key") else tuple(values[:SAMPLE_ROWS])


def unknown_sample(values: Sequence[str]) -> tuple[str, ...]:
    """What may be shown of a column nobody knows? Dates, times, short numbers, and words that come again and again.

    Whatever else stands in it may be a name or a number of a person.

    Checked by: tests/data/files/test_preview.py
    """
    filled = [value for value in values if value]
    harmless = all(SHORT_NUMBER.fullmatch(value) or DATE_OR_TIME.fullmatch(value) for value in filled)
    return tuple(filled[:SAMPLE_ROWS]) if harmless or 2 * len(set(filled)) <= len(filled) else NOT_SHOWN
