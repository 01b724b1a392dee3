"""From a file's bytes to a table of text: which kind of file, encoding, separator, titles above the headings."""

from __future__ import annotations

import codecs
import csv
import re
from dataclasses import replace
from itertools import islice
from typing import TYPE_CHECKING, NamedTuple

import numpy as np
import pyarrow as pa
from pyarrow import csv as arrow_csv

from bedplan.data.files.blocks import each
from bedplan.data.files.columns import match_headings
from bedplan.data.files.misfits import MOST_LISTED, QUOTE, Misfit, commonest_cells, lines_under, mend_quotes, numbered
from bedplan.data.files.source import BLOCK_BYTES, HEAD_BYTES, SourceFile
from bedplan.data.files.texttable import MOST_TITLE_LINES, Layout, Parsed, TextTable, text_table
from bedplan.data.files.workbook import read_parquet, read_workbook
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

LINE = re.compile(rb"[^\r\n]*(?:\r\n|\n|\r)")
SEPARATORS = (",", ";", "\t", "|")
CLEARLY_HEADINGS = 3  # known names in one line: no title holds so many
FEW_VALUES = ("ward", "class", "method", "specialty", "destination", "age_band")
LAST_ASCII = 127
PARSED_BYTES = 4 * 2**20  # at once


def read_table(
    source: SourceFile,
    known: Mapping[str, Iterable[str]],
    chosen: Mapping[str, str] | None = None,
    times: Iterable[str] = (),
) -> TextTable:
    """What does this file hold? Its matched columns as text, from CSV, other separated text, Excel or Parquet.

    ``known``: canonical name → headings; ``chosen``: canonical name → heading, the user's own words. ``times``: columns
    that come as times and not as text where a CSV file writes every one of them like 2024-03-31 14:05.

    Raises:
        UnreadableRecords: the file is no table, or has no known heading, or no rows.

    Checked by: tests/data/files/test_reading.py, tests/data/test_bad_files.py
    """
    if source.begins_with(b"PK"):
        return read_workbook(source, known, chosen)
    if source.begins_with(b"PAR1"):
        return read_parquet(source, known, chosen)
    text = as_utf8(source)
    layout, encoding = find_layout(text.file.head, known, chosen), text.encoding
    notes = [] if encoding == "UTF-8" else [f"The file was written in {encoding}; check that ward names look right."]
    line = next(islice(LINE.finditer(text.file.head), layout.line, None), None)
    if layout.found and line is not None and line[0].count(QUOTE) % 2:
        notes.append(f"A quotation mark that nothing closes was taken out of the headings, line {layout.line + 1:,}.")
    return text_table(source.name, layout, lambda: _parse(text, layout, times), notes, list(known))


class Text(NamedTuple):
    """A file in UTF-8; how it was written; whether it holds any quotation mark: where none, every line is a row."""

    file: SourceFile
    encoding: str
    quoted: bool


def as_utf8(source: SourceFile) -> Text:
    """Return the file as UTF-8 text; encodings are tried in the order UTF-8, UTF-16, Windows-1252."""
    head = source.head
    if head.startswith((codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE)):
        return _decoded(source, "utf-16")
    if head.startswith(codecs.BOM_UTF8):
        source = SourceFile(source.name, source.content[len(codecs.BOM_UTF8) :])
    head = head[:4096]
    if head.count(b"\0") > len(head) // 4:
        guess = "utf-16-le" if head[1::2].count(b"\0") > head[0::2].count(b"\0") else "utf-16-be"
        return _decoded(source, guess)
    looks = each(lambda first: _look(source.block(first)), range(0, source.size, BLOCK_BYTES))
    quoted = any(quoted for _, _, quoted in looks)
    if min(low for low, _, _ in looks) == 0:
        raise UnreadableRecords(
            [f"{source.name} is not a text table (it holds bytes no text has): export it as CSV or Excel (.xlsx)."]
        )
    try:
        if max(high for _, high, _ in looks) > LAST_ASCII:
            check = codecs.getincrementaldecoder("utf-8")()
            for block in source.blocks():
                check.decode(block)
            check.decode(b"", final=True)
    except UnicodeDecodeError:
        text = source.content.decode("cp1252", errors="replace").encode()
        return Text(SourceFile(source.name, text), "Windows-1252", quoted)
    return Text(source, "UTF-8", quoted)


def _look(block: bytes | memoryview) -> tuple[int, int, bool]:
    """Return the lowest and the highest byte, and whether there is a quotation mark."""
    signs = np.frombuffer(block, dtype=np.uint8)
    return int(signs.min()), int(signs.max()), QUOTE in bytes(block)


def _decoded(source: SourceFile, encoding: str) -> Text:
    """Return the text in UTF-8, or say that it is not text."""
    try:
        text = source.content.decode(encoding).encode()
        return Text(SourceFile(source.name, text), "UTF-16", QUOTE in text)
    except UnicodeError as problem:
        raise UnreadableRecords(
            [f"{source.name} looks like UTF-16 text but is damaged: export it again as CSV in UTF-8."]
        ) from problem


def find_layout(text: bytes, known: Mapping[str, Iterable[str]], chosen: Mapping[str, str] | None) -> Layout:
    """Find the line that holds the headings: the one with most known names, under the separator that shows most."""
    best = Layout(0, 0, ",", (), {})
    for number, line in enumerate(LINE.finditer(text)):
        if number == MOST_TITLE_LINES or len(best.found) >= CLEARLY_HEADINGS:
            break
        words = line[0].decode("utf-8", errors="replace").strip("\r\n")
        if words.count('"') % 2:  # one that nothing closes would make one heading of several
            words = words.replace('"', "")
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


def _type_of(key: str, times: Iterable[str]) -> pa.DataType:
    """Return how a column is held: few values, many rows in codes from the start; times; all else as strings."""
    if key in times:
        return pa.timestamp("s")
    return pa.dictionary(pa.int32(), pa.string()) if key in FEW_VALUES else pa.string()


def _parse(whole: Text, layout: Layout, times: Iterable[str]) -> Parsed:
    """Parse the lines under the headings, stray quotation marks undone, or say why they are no table."""
    text, quoted = whole.file, whole.quoted
    try:
        try:
            parsed = _tried(text, layout, times, quoted=quoted)
        except pa.ArrowInvalid:
            if not quoted:
                raise
            parsed = None
        if quoted and (
            parsed is None or parsed.table.num_rows + parsed.misfits != lines_under(text, layout.rows_start)
        ):
            body = text.content[layout.rows_start :]
            mended = mend_quotes(body, layout.separator, len(layout.headings), layout.line + 2)
            if mended is not None:
                body = SourceFile(text.name, mended.body)
                found = _tried(body, replace(layout, rows_start=0), times, quoted=QUOTE in mended.body)
                lines = tuple(sorted((*found.lines, *mended.left_out), key=lambda one: one.line))
                return Parsed(found.table, found.misfits + len(mended.left_out), lines, tuple(mended.notes))
        return parsed or _tried(text, layout, times, quoted=quoted)
    except (pa.ArrowInvalid, OSError) as problem:
        if "Empty CSV" in str(problem):
            told = f"{text.name} has headings but no rows: export it again with its rows."
            raise UnreadableRecords([told]) from problem
        said = str(problem).splitlines()[0][:120]
        raise UnreadableRecords(
            [f"{text.name} can't be read as a table ({said}): export it again as CSV."]
        ) from problem


def _tried(text: SourceFile, layout: Layout, times: Iterable[str], *, quoted: bool) -> Parsed:
    """Parse the lines with as many cells as the headings have, or as most lines have where the rest are blank."""
    parsed = _with_times(text, layout, times, quoted=quoted)
    if parsed.misfits > parsed.table.num_rows:
        cells, known = commonest_cells(parsed.lines), len(layout.headings)
        more = layout.separator * (cells - known)
        headings = layout.headings[:cells]
        if more and all(one.text.rstrip("\r\n").endswith(more) for one in parsed.lines if one.cells == cells):
            headings = (*layout.headings, *[""] * (cells - known))
        if len(headings) > known or (len(headings) < known and not any(layout.headings[cells:])):
            parsed = _with_times(text, replace(layout, headings=headings), times, quoted=quoted)
    if not parsed.lines:
        return parsed
    return parsed._replace(lines=numbered(parsed.lines, text.content[layout.rows_start :], layout.line + 2))


def _with_times(text: SourceFile, layout: Layout, times: Iterable[str], *, quoted: bool) -> Parsed:
    """Parse with times as times; else as text."""
    try:
        if text.size > HEAD_BYTES:  # most files whose times are written otherwise show it at once
            _parsed(SourceFile(text.name, text.head.rpartition(b"\n")[0]), layout, times, quoted=quoted)
        return _parsed(text, layout, times, quoted=quoted)
    except pa.ArrowInvalid:  # most likely a time that is written otherwise: those columns are looked at as text
        return _parsed(text, layout, (), quoted=quoted)


def _parsed(text: SourceFile, layout: Layout, times: Iterable[str], *, quoted: bool) -> Parsed:
    """Parse the lines; those with another number of cells are counted, not guessed at."""
    misfits, lines = 0, []

    def count(row: arrow_csv.InvalidRow) -> str:
        """Count a line with another number of cells, and leave it out."""
        nonlocal misfits
        misfits += 1
        if len(lines) < MOST_LISTED:
            lines.append(Misfit(row.actual_columns, row.text))
        return "skip"

    unique = [f"{place}\0{heading}" for place, heading in enumerate(layout.headings)]
    wanted = {heading: unique[layout.headings.index(heading)] for heading in layout.found.values()}
    table = arrow_csv.read_csv(
        text.stream(layout.rows_start),
        read_options=arrow_csv.ReadOptions(column_names=unique, block_size=PARSED_BYTES),
        parse_options=arrow_csv.ParseOptions(
            delimiter=layout.separator,
            quote_char=QUOTE.decode() if quoted else False,
            newlines_in_values=quoted,
            invalid_row_handler=count,
        ),
        convert_options=arrow_csv.ConvertOptions(
            column_types={
                column: _type_of(key, times) for key, column in zip(layout.found, wanted.values(), strict=True)
            },
            include_columns=list(wanted.values()),
            check_utf8=False,  # the whole file was looked at before
            strings_can_be_null=True,
            null_values=[""],
        ),
    )
    return Parsed(table.rename_columns(list(wanted)), misfits, tuple(lines))
