"""A file's matched columns as text, whatever kind of file they came from."""

from __future__ import annotations

import functools
from dataclasses import dataclass
from typing import TYPE_CHECKING, NamedTuple

import pyarrow.compute as pc

from bedplan.data.files.columns import is_identity, other_kind
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Mapping

    import pyarrow as pa

    from bedplan.data.files.misfits import Misfit

MOST_TITLE_LINES = 60


@dataclass(frozen=True, slots=True)
class TextTable:
    """The matched columns of a file, every value a string, a time (where times were asked for) or null, by canonical name.

    ``headings``: canonical name → heading as written. ``misfits``: lines with another number of cells than the
    headings, the first of them in ``lines``. ``dropped``: identity columns that were never read. ``unused``: other headings nothing was made of.
    """

    columns: Mapping[str, pa.ChunkedArray]
    headings: Mapping[str, str]
    rows: int
    misfits: int
    dropped: tuple[str, ...]
    unused: tuple[str, ...]
    notes: tuple[str, ...]
    lines: tuple[Misfit, ...] = ()

    def strings(self, key: str) -> list[str]:
        """Return one column as tidy strings, blanks where it is missing."""
        if key not in self.columns:
            return [""] * self.rows
        return [(value or "").strip() for value in self.columns[key].to_pylist()]

    def refuse_kinds(self, name: str, mine: str, *kinds: str) -> None:
        """Refuse a file whose headings show that it is one of these other kinds.

        Raises:
            UnreadableRecords: it is; the sentence names the heading that shows it.
        """
        found = other_kind((*self.headings.values(), *self.unused), *kinds)
        if found is not None:
            kind, heading = found
            told = f"{name} has a column “{heading}”, so it looks like {kind}, not like {mine}"
            raise UnreadableRecords([f"{told}: choose another file here, or leave that column out."])


class Parsed(NamedTuple):
    """What parsing gave: the rows; how many lines were none, the first of them; and what to say."""

    table: pa.Table
    misfits: int = 0
    lines: tuple[Misfit, ...] = ()
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Layout:
    """Where the headings are (line, and where the rows under it start), what separates them, which are known."""

    line: int
    rows_start: int
    separator: str
    headings: tuple[str, ...]
    found: Mapping[str, str]


def text_table(
    name: str,
    layout: Layout,
    parse: Callable[[], Parsed],
    notes: Iterable[str],
    asked: list[str],
) -> TextTable:
    """Parse the rows under the headings and build the table; wholly empty rows are left out.

    Raises:
        UnreadableRecords: no known heading, or no row under them.
    """
    if not layout.found:
        names = ", ".join(asked[:5])
        told = f"{name} has no line of headings that is understood: its first row should name the columns, such as {names}."
        raise UnreadableRecords([told])
    table, misfits, lines, told = parse()
    if all(column.null_count for column in table.columns):
        table = table.filter(functools.reduce(pc.or_, [pc.is_valid(column) for column in table.columns]))
    if table.num_rows + misfits == 0:
        raise UnreadableRecords([f"{name} has headings but no rows: export it again with its rows."])
    said = [*notes, *told]
    if layout.line:
        said.append(f"{layout.line} lines above the headings were skipped as report titles.")
    known = set(layout.found.values())
    dropped = tuple(heading for heading in layout.headings if is_identity(heading) and heading not in known)
    return TextTable(
        columns={key: table.column(heading) for key, heading in layout.found.items()},
        headings=layout.found,
        rows=table.num_rows,
        misfits=misfits,
        dropped=dropped,
        unused=tuple(heading for heading in layout.headings if heading and heading not in {*known, *dropped}),
        notes=tuple(said),
        lines=lines,
    )
