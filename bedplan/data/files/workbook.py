"""Excel workbooks and Parquet files as the same table of text that a CSV file gives."""

from __future__ import annotations

import datetime as dt
import io
import zipfile
from itertools import islice
from typing import TYPE_CHECKING, TypeVar

import openpyxl
import pyarrow as pa
import pyarrow.compute as pc
from openpyxl.utils.datetime import CALENDAR_MAC_1904
from pyarrow import parquet

from bedplan.data.files.columns import match_headings, other_kind, plain
from bedplan.data.files.dates import EPOCHS_APART_DAYS
from bedplan.data.files.texttable import MOST_TITLE_LINES, Layout, Parsed, TextTable, text_table
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Mapping

    from bedplan.data.files.source import SourceFile

FIRST_DAY_NUMBER, LAST_DAY_NUMBER = 20_000, 70_000
DATE_COLUMNS = ("start", "end", "start_date", "end_date", "admitted", "discharged", "ready", "date")
MOST_ROWS = 1_048_576  # a worksheet holds no more
LARGEST_UNPACKED_BYTES = 2 * 2**30
MOST_NAMED = 12  # sheets
MOST_SWELLING = 200  # times; honest workbooks unpack to 5–30 times their size

Cells = list[tuple[object, ...]]
Found = TypeVar("Found")


def check_archive(source: SourceFile) -> None:
    """Refuse a packed file that would fill the memory, or that is no workbook, before anything is unpacked.

    Raises:
        UnreadableRecords: damaged, far larger unpacked than packed, or a zip file of something else.
    """
    try:
        with zipfile.ZipFile(io.BytesIO(source.content)) as archive:
            parts = archive.infolist()
    except zipfile.BadZipFile as problem:
        raise UnreadableRecords([f"{source.name} is a damaged Excel workbook: save it again and retry."]) from problem
    unpacked = sum(part.file_size for part in parts)
    if unpacked > LARGEST_UNPACKED_BYTES or unpacked > MOST_SWELLING * max(len(source.content), 2**20):
        raise UnreadableRecords(
            [f"{source.name} would unpack to {unpacked / 2**20:,.0f} MB, which no table needs: export it as CSV."]
        )
    if not any(part.filename.startswith("xl/") for part in parts):
        raise UnreadableRecords(
            [f"{source.name} is a packed (zip) file, not a workbook: unpack it and bring the table inside."]
        )


def read_workbook(
    source: SourceFile, known: Mapping[str, Iterable[str]], chosen: Mapping[str, str] | None = None
) -> TextTable:
    """What does this workbook hold? The sheet whose headings are known best, and those with the same ones, as text.

    Raises:
        UnreadableRecords: not a workbook, too large, or no sheet with known headings.

    Checked by: tests/data/files/test_workbook.py, tests/data/files/test_reading.py
    """
    sheets, days_apart = _sheets(source)
    layouts = {title: _layout(cells, known, chosen) for title, cells in sheets.items()}
    first, layout = max(layouts.items(), key=lambda item: len(item[1].found), default=("", Layout(0, 0, "", (), {})))
    alike = [title for title, other in layouts.items() if _are_alike(other, layout)]
    parts = {title: _parsed(sheets[title], layouts[title], days_apart) for title in alike}
    repeated = _repeated(parts, first)
    used = {title: part for title, part in parts.items() if title not in repeated}
    rows = {
        title: len(cells) - (layouts[title].line + 1 if layouts[title].found else 0) for title, cells in sheets.items()
    }
    notes = _about_sheets(rows, list(used), repeated) if layout.found else []
    headings = list(layout.found.values())

    def joined() -> Parsed:
        """Return the rows of all sheets used, one after the other."""
        return Parsed(pa.concat_tables([part.rename_columns(headings) for part in used.values()]))

    return text_table(source.name, layout, joined, notes, list(known))


def _are_alike(one: Layout, other: Layout) -> bool:
    """Do two sheets have the same headings, but for those nobody knows, and are they of one kind?"""
    known = [{key: plain(heading) for key, heading in layout.found.items()} for layout in (one, other)]
    return known[0] == known[1] and other_kind(one.headings) == other_kind(other.headings)


def _repeated(parts: Mapping[str, pa.Table], first: str) -> list[str]:
    """Return the sheets all of whose rows stand in a longer one too, such as the months beside a sheet of the whole year."""
    if len(parts) < 2:
        return []
    longest = max(parts, key=lambda title: (parts[title].num_rows, title == first))
    rows = {
        title: set(zip(*(column.to_pylist() for column in part.columns), strict=True)) for title, part in parts.items()
    }
    return [title for title, held in rows.items() if held and title != longest and held <= rows[longest]]


def _about_sheets(rows: Mapping[str, int], used: list[str], repeated: list[str]) -> list[str]:
    """Say which sheets were read and which were not, with their rows."""
    if len(rows) == 1:
        return []

    def named(titles: list[str]) -> str:
        """Name sheets with their rows."""
        shown = [f"“{title}” ({rows[title]:,} {'row' if rows[title] == 1 else 'rows'})" for title in titles]
        return ", ".join(shown[:MOST_NAMED]) + (f" and {len(shown) - MOST_NAMED:,} more" if shown[MOST_NAMED:] else "")

    told = [f"Read from the sheet {named(used)}."]
    if len(used) > 1:
        told = [f"Read from {len(used)} sheets with the same headings, as one table: {named(used)}."]
    if repeated:
        told.append(f"Not read twice, because their rows stand in another sheet too: {named(repeated)}.")
    others = [title for title in rows if title not in used and title not in repeated and rows[title]]
    if others:
        told.append(f"Left out, because the headings are others: {named(others)}.")
    return told


def sheets_as_text(source: SourceFile) -> list[list[tuple[str, ...]]]:
    """What stands in each sheet? Its rows but for blank ones, every cell as text.

    Raises:
        UnreadableRecords: not a workbook, or too large.
    """
    return [[tuple(_text(cell).strip() for cell in row) for row in cells] for cells in _sheets(source)[0].values()]


def first_rows(source: SourceFile, most: int) -> list[list[tuple[str, ...]]]:
    """What stands in the first rows of each sheet, or under the headings of a Parquet file? Every cell as text.

    Raises:
        UnreadableRecords: neither, damaged or too large.
    """
    if source.begins_with(b"PK"):
        sheets = _sheets(source, most)[0].values()
        return [[tuple(_text(cell).strip() for cell in row) for row in cells] for cells in sheets]

    def top(file: parquet.ParquetFile) -> pa.Table:
        """Return the first rows as text."""
        return _as_text(pa.Table.from_batches([*islice(file.iter_batches(most), 1)], file.schema_arrow))

    table = _from_parquet(source, top)
    columns = [[cell or "" for cell in column.to_pylist()] for column in table.columns]
    return [[tuple(table.column_names), *zip(*columns, strict=True)]]


def _sheets(source: SourceFile, most: int = MOST_ROWS + 1) -> tuple[dict[str, Cells], int]:
    """Return the cells of every sheet by its title, and how many days after 1900's its day numbers begin."""
    check_archive(source)
    try:
        book = openpyxl.load_workbook(io.BytesIO(source.content), read_only=True, data_only=True)
        days_apart = EPOCHS_APART_DAYS if book.epoch == CALENDAR_MAC_1904 else 0
        return {sheet.title: _cells(sheet, most) for sheet in book.worksheets}, days_apart
    except UnreadableRecords:
        raise
    except Exception as problem:  # openpyxl raises whatever a damaged part makes it stumble over
        raise UnreadableRecords([f"{source.name} is a damaged Excel workbook: save it again and retry."]) from problem


def _cells(sheet: object, most: int) -> Cells:
    """Return the first cells of a sheet, or say that there are too many."""
    filled = (row for row in sheet.iter_rows(values_only=True) if any(cell is not None for cell in row))
    rows = list(islice(filled, most))
    if len(rows) > MOST_ROWS:
        raise UnreadableRecords([f"The workbook has more than {MOST_ROWS:,} rows: export it as CSV."])
    return rows


def _layout(cells: Cells, known: Mapping[str, Iterable[str]], chosen: Mapping[str, str] | None) -> Layout:
    """Find the row of headings."""
    best = Layout(0, 0, "", (), {})
    for number, row in enumerate(cells[:MOST_TITLE_LINES]):
        headings = tuple(_text(cell).strip() for cell in row)
        found = match_headings([heading for heading in headings if heading], known, chosen)
        if len(found) > len(best.found):
            best = Layout(number, 0, "", headings, found)
    return best


def _parsed(cells: Cells, layout: Layout, days_apart: int) -> pa.Table:
    """Return the matched columns as text; day numbers of workbooks that count from 1904 as those that count from 1900."""
    below = cells[layout.line + 1 :]
    places = {heading: layout.headings.index(heading) for heading in layout.found.values()}
    columns = {}
    for key, heading in layout.found.items():
        place, later = places[heading], days_apart if key in DATE_COLUMNS else 0
        values = [row[place] if place < len(row) else None for row in below]
        if later:
            values = [value + later if _is_day_number(value) else value for value in values]
        columns[heading] = pa.chunked_array([[_text(value) or None for value in values]], pa.string())
    return pa.table(columns)


def _is_day_number(cell: object) -> bool:
    """May this number be a date that was never formatted as one?"""
    return isinstance(cell, int | float) and FIRST_DAY_NUMBER <= cell <= LAST_DAY_NUMBER


def _text(cell: object) -> str:
    """Return a cell as it would stand in a CSV file."""
    if cell is None:
        return ""
    if isinstance(cell, dt.datetime):
        return cell.replace(microsecond=0).isoformat(" ")
    if isinstance(cell, float) and cell.is_integer():
        return str(int(cell))
    return str(cell)


def read_parquet(
    source: SourceFile, known: Mapping[str, Iterable[str]], chosen: Mapping[str, str] | None = None
) -> TextTable:
    """What does this Parquet file hold? The matched columns only, as text.

    Raises:
        UnreadableRecords: damaged, or no known column.
    """

    def read(file: parquet.ParquetFile) -> TextTable:
        """Read the matched columns."""
        headings = tuple(file.schema_arrow.names)
        layout = Layout(0, 0, "", headings, match_headings(headings, known, chosen))
        return text_table(
            source.name, layout, lambda: Parsed(_as_text(file.read(list(layout.found.values())))), [], list(known)
        )

    return _from_parquet(source, read)


def _from_parquet(source: SourceFile, use: Callable[[parquet.ParquetFile], Found]) -> Found:
    """Return what is found in a Parquet file, or say that it is damaged."""
    try:
        return use(parquet.ParquetFile(io.BytesIO(source.content)))
    except UnreadableRecords:
        raise
    except (pa.ArrowException, OSError, ValueError, OverflowError, MemoryError) as problem:
        raise UnreadableRecords([f"{source.name} is a damaged Parquet file: write it again and retry."]) from problem


def _as_text(table: pa.Table) -> pa.Table:
    """Return every column as text; times lose fractions of a second and keep their offset from world time."""
    table.validate(full=True)  # a damaged file may hold text that is none
    columns = {}
    for name in table.column_names:
        column = table.column(name)
        if pa.types.is_dictionary(column.type):
            column = pc.cast(column, column.type.value_type)
        if pa.types.is_timestamp(column.type):
            zone = column.type.tz
            column = pc.cast(column, pa.timestamp("s", zone), safe=False)
            if zone == "UTC":  # the same as below, and faster
                column = pc.binary_join_element_wise(pc.cast(pc.local_timestamp(column), pa.string()), "Z", "")
            elif zone:
                column = pc.strftime(column, "%Y-%m-%dT%H:%M:%S%z")
        if pa.types.is_floating(column.type) and pc.all(pc.equal(column, pc.floor(column))).as_py():
            column = pc.cast(column, pa.int64())
        columns[name] = pc.cast(column, pa.string())
    return pa.table(columns)
