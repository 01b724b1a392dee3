"""From a file's bytes to a table of text: which kind of file, encoding, separator, titles above the headings."""

from __future__ import annotations

import csv
import re
from typing import TYPE_CHECKING

import pyarrow as pa
from pyarrow import csv as arrow_csv

from bedplan.data.columns import match_headings
from bedplan.data.texttable import MOST_TITLE_LINES, Layout, TextTable, text_table
from bedplan.data.workbook import read_parquet, read_workbook
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

    from bedplan.data.source import SourceFile

LINE = re.compile(rb"[^\r\n]*(?:\r\n|\n|\r)")
SEPARATORS = (",", ";", "\t", "|")
CLEARLY_HEADINGS = 3  # known names in one line: no title holds so many
SNIFFED_BYTES = 256 * 1024
FEW_VALUES = ("ward", "class", "method", "specialty", "destination", "age_band")
BLOCK_BYTES = 4 * 2**20


def read_table(
    source: SourceFile, known: Mapping[str, Iterable[str]], chosen: Mapping[str, str] | None = None
) -> TextTable:
    """What does this file hold? Its matched columns as text, from CSV, other separated text, Excel or Parquet.

    ``known``: canonical name → headings; ``chosen``: canonical name → heading, the user's own words.

    Raises:
        UnreadableRecords: the file is no table, or has no known heading, or no rows.

    Checked by: tests/data/test_reading.py, tests/data/test_bad_files.py
    """
    if source.content.startswith(b"PK"):
        return read_workbook(source, known, chosen)
    if source.content.startswith(b"PAR1"):
        return read_parquet(source, known, chosen)
    text, encoding = as_utf8(source)
    layout = find_layout(text, known, chosen)
    notes = [] if encoding == "UTF-8" else [f"The file was written in {encoding}; check that ward names look right."]
    return text_table(source.name, layout, lambda: _parse(source.name, text, layout), notes, list(known))


def as_utf8(source: SourceFile) -> tuple[bytes, str]:
    """Return the text as UTF-8 bytes, and its encoding; tried in the order UTF-8, UTF-16, Windows-1252."""
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
            [f"{source.name} is not a text table (it holds bytes no text has): export it as CSV or Excel (.xlsx)."]
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


def find_layout(text: bytes, known: Mapping[str, Iterable[str]], chosen: Mapping[str, str] | None) -> Layout:
    """Find the line that holds the headings: the one with most known names, under the separator that shows most."""
    best = Layout(0, 0, ",", (), {})
    for number, line in enumerate(LINE.finditer(text[:SNIFFED_BYTES])):
        if number == MOST_TITLE_LINES or len(best.found) >= CLEARLY_HEADINGS:
            break
        words = line[0].decode("utf-8", errors="replace").strip("\r\n")
        for separator in SEPARATORS:
            headings = split_cells(words, separator)
            found = match_headings([heading for heading in headings if heading], known, chosen)
            if len(found) > len(best.found):
                best = Layout(number, line.end(), separator, headings, found)
    return best


def split_cells(line: str, separator: str) -> tuple[str, ...]:
    """Return the cells of one line."""
    try:
        return tuple(cell.strip() for cell in next(csv.reader([line], delimiter=separator), []))
    except csv.Error:
        return ()


def _type_of(key: str) -> pa.DataType:
    """Return how a column is held: few values, many rows in codes from the start; all else as strings."""
    return pa.dictionary(pa.int32(), pa.string()) if key in FEW_VALUES else pa.string()


def _parse(name: str, text: bytes, layout: Layout) -> tuple[pa.Table, int]:
    """Parse the lines under the headings; lines with another number of cells are counted, not guessed at."""
    misfits = 0

    def count(_: object) -> str:
        """Count a line with another number of cells, and leave it out."""
        nonlocal misfits
        misfits += 1
        return "skip"

    unique = [f"{place}\0{heading}" for place, heading in enumerate(layout.headings)]
    wanted = {heading: unique[layout.headings.index(heading)] for heading in layout.found.values()}
    try:
        table = arrow_csv.read_csv(
            pa.BufferReader(pa.py_buffer(text).slice(layout.rows_start)),
            read_options=arrow_csv.ReadOptions(column_names=unique, block_size=BLOCK_BYTES),
            parse_options=arrow_csv.ParseOptions(
                delimiter=layout.separator, newlines_in_values=b'"' in text, invalid_row_handler=count
            ),
            convert_options=arrow_csv.ConvertOptions(
                column_types={column: _type_of(key) for key, column in zip(layout.found, wanted.values(), strict=True)},
                include_columns=list(wanted.values()),
                strings_can_be_null=True,
                null_values=[""],
            ),
        )
    except pa.ArrowInvalid as problem:
        if "Empty CSV" in str(problem):
            raise UnreadableRecords([f"{name} has headings but no rows: export it again with its rows."]) from problem
        said = str(problem).splitlines()[0][:120]
        raise UnreadableRecords([f"{name} can't be read as a table ({said}): export it again as CSV."]) from problem
    return table.rename_columns(list(wanted)), misfits
