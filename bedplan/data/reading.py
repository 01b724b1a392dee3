"""From a file's bytes to a table of text: encoding, separator, report titles above the headings."""

from __future__ import annotations

import csv
import io
from dataclasses import dataclass
from typing import TYPE_CHECKING

import pyarrow as pa
from pyarrow import csv as arrow_csv

from bedplan.data.columns import is_identity, match_headings
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

    from bedplan.data.source import SourceFile

SEPARATORS = (",", ";", "\t", "|")
MOST_TITLE_LINES = 60
SNIFFED_BYTES = 256 * 1024


@dataclass(frozen=True, slots=True)
class TextTable:
    """A file as text: the matched columns only, every value a string; what was skipped is in ``notes``.

    ``misfits`` counts lines that have another number of cells than the headings (report lines, broken rows).
    """

    columns: Mapping[str, pa.ChunkedArray]
    headings: Mapping[str, str]
    rows: int
    misfits: int
    dropped: tuple[str, ...]
    notes: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Layout:
    """Where the headings are and what separates them."""

    line: int
    separator: str
    headings: tuple[str, ...]
    found: Mapping[str, str]


def as_utf8(source: SourceFile) -> tuple[bytes, str]:
    """Return the text as UTF-8 bytes, and which encoding it came in; tried in the order UTF-8, UTF-16, Windows-1252."""
    content = source.content
    if content.startswith((b"\xff\xfe", b"\xfe\xff")):
        return _decoded(content, "utf-16", source.name), "UTF-16"
    if content.startswith(b"\xef\xbb\xbf"):
        content = content[3:]
    head = content[:4096]
    if head.count(b"\0") > len(head) // 4:
        guess = "utf-16-le" if head[1::2].count(b"\0") > head[0::2].count(b"\0") else "utf-16-be"
        return _decoded(content, guess, source.name), "UTF-16"
    if b"\0" in content:
        raise UnreadableRecords(
            [
                f"{source.name} is not a text table (it holds bytes no text has): export it again as CSV or Excel (.xlsx)."
            ]
        )
    if content.isascii():
        return content, "UTF-8"
    try:
        content.decode("utf-8")
    except UnicodeDecodeError:
        return content.decode("cp1252", errors="replace").encode(), "Windows-1252"
    return content, "UTF-8"


def _decoded(content: bytes, encoding: str, name: str) -> bytes:
    """Return the text in UTF-8, or say that it is not text."""
    try:
        return content.decode(encoding).encode()
    except UnicodeError as problem:
        raise UnreadableRecords(
            [f"{name} looks like UTF-16 text but is damaged: export it again as CSV in UTF-8."]
        ) from problem


def find_layout(text: bytes, known: Mapping[str, Iterable[str]], chosen: Mapping[str, str] | None) -> Layout | None:
    """Find the line that holds the headings: the one with most known names, under the separator that shows most."""
    lines = text[:SNIFFED_BYTES].decode("utf-8", errors="replace").splitlines()[:MOST_TITLE_LINES]
    best: Layout | None = None
    for number, line in enumerate(lines):
        for separator in SEPARATORS:
            headings = _cells(line, separator)
            if len(headings) < 2:
                continue
            found = match_headings(headings, known, chosen)
            if best is None or len(found) > len(best.found):
                best = Layout(number, separator, headings, found)
    return best


def _cells(line: str, separator: str) -> tuple[str, ...]:
    """Return the cells of one line."""
    try:
        return tuple(cell.strip() for cell in next(csv.reader([line], delimiter=separator), []))
    except csv.Error:
        return ()


def read_text(
    source: SourceFile, known: Mapping[str, Iterable[str]], chosen: Mapping[str, str] | None = None
) -> TextTable:
    """What does this text file hold? The matched columns as strings; identity columns are never even read.

    Raises:
        UnreadableRecords: no line of headings with a known name among the first 60 lines.
    """
    text, encoding = as_utf8(source)
    layout = find_layout(text, known, chosen)
    if layout is None or not layout.found:
        first = text[:200].decode("utf-8", errors="replace").splitlines()[0][:80]
        asked = ", ".join(list(known)[:4])
        raise UnreadableRecords(
            [
                f"{source.name} has no line of headings (it begins “{first}”): the first row should name columns: {asked}."
            ]
        )
    table, misfits = _parse(source.name, text, layout)
    notes = [] if encoding == "UTF-8" else [f"The file was written in {encoding}; check that ward names look right."]
    if layout.line:
        notes.append(f"{layout.line} lines above the headings were skipped as report titles.")
    return TextTable(
        columns={name: table.column(heading) for name, heading in layout.found.items()},
        headings=layout.found,
        rows=table.num_rows,
        misfits=misfits,
        dropped=tuple(heading for heading in layout.headings if is_identity(heading)),
        notes=tuple(notes),
    )


def _parse(name: str, text: bytes, layout: Layout) -> tuple[pa.Table, int]:
    """Parse the lines under the headings; lines with another number of cells are counted, not guessed at."""
    misfits = 0

    def count(_: object) -> str:
        nonlocal misfits
        misfits += 1
        return "skip"

    unique = [f"{place}\0{heading}" for place, heading in enumerate(layout.headings)]
    wanted = {heading: unique[layout.headings.index(heading)] for heading in layout.found.values()}
    try:
        table = arrow_csv.read_csv(
            io.BytesIO(text),
            read_options=arrow_csv.ReadOptions(skip_rows=layout.line + 1, column_names=unique, block_size=8 * 2**20),
            parse_options=arrow_csv.ParseOptions(
                delimiter=layout.separator, newlines_in_values=b'"' in text, invalid_row_handler=count
            ),
            convert_options=arrow_csv.ConvertOptions(
                column_types=dict.fromkeys(wanted.values(), pa.string()),
                include_columns=list(wanted.values()),
                strings_can_be_null=True,
                null_values=[""],
            ),
        )
    except pa.ArrowInvalid as problem:
        if "Empty CSV" in str(problem):
            raise UnreadableRecords([f"{name} has headings but no rows: export it again with its rows."]) from problem
        raise UnreadableRecords(
            [f"{name} can't be read as a table ({str(problem).splitlines()[0][:120]}): export it again as CSV."]
        ) from problem
    return table.rename_columns(list(wanted)), misfits
