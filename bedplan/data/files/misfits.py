"""Lines of a text file that are no rows of its table, and rows that a stray quotation mark would swallow."""

from __future__ import annotations

import csv
import re
from collections import Counter
from typing import TYPE_CHECKING, NamedTuple

import numpy as np
import pandas as pd

from bedplan.data.files.rules import RULES

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from bedplan.data.files.source import SourceFile

QUOTE = b'"'
MOST_LISTED = 10_000  # lines; all are counted
FEW_SEARCHED = 20  # lines looked for one by one; for more, the file is cut into its lines
MOST_LINES_OF_A_CELL = 100
MOST_NAMED = 5


class Misfit(NamedTuple):
    """A line with another number of cells than the headings; ``line``: its number in the file, 0 where not known."""

    cells: int
    text: str
    line: int = 0


class Mended(NamedTuple):
    """The lines under the headings without stray quotation marks; numbers of lines mended; lines nobody can mend."""

    body: bytes
    mended: tuple[int, ...]
    left_out: tuple[Misfit, ...]

    @property
    def notes(self) -> list[str]:
        """Say what was done."""
        told = []
        if self.mended:
            told.append(f"A quotation mark that nothing closes was taken out of {named_lines(self.mended)}")
        if self.left_out:
            told.append(
                f"{named_lines([one.line for one in self.left_out])} can't be read for one and {_are(self.left_out)} set aside"
            )
        why = "it would have hidden the rows after it"
        return [f"{text[0].upper()}{text[1:]}: {why}." for text in told]


def named_lines(lines: Sequence[int]) -> str:
    """Name the first few lines."""
    if len(lines) == 1:
        return f"line {lines[0]:,}"
    shown = ", ".join(f"{line:,}" for line in lines[:MOST_NAMED])
    return f"{len(lines):,} lines ({shown}{' …' if len(lines) > MOST_NAMED else ''})"


def _are(several: Sequence) -> str:
    return "is" if len(several) == 1 else "are"


def lines_under(text: SourceFile, start: int) -> int:
    """How many lines are there from this byte on? Blank ones count, so that rows may be fewer and never more."""
    ends, first = [0, 0], 0
    for block in text.blocks():
        signs = np.frombuffer(block, dtype=np.uint8)[max(start - first, 0) :]
        ends[0] += int(np.count_nonzero(signs == ord("\n")))
        ends[1] += int(np.count_nonzero(signs == ord("\r")))
        first += len(block)
    closed = bytes(text.block(max(text.size - 1, 0))) in (b"\n", b"\r")
    return max(ends) + (not closed)


def mend_quotes(body: bytes, separator: str, cells: int, first_line: int) -> Mended | None:
    """Which lines hold a quotation mark that swallows the rows after it? They are mended, or left out; None: no line.

    A cell in quotation marks may go on over several lines where the lines together give one row of the right number
    of cells and none but the first is a whole row by itself.

    Checked by: tests/data/files/test_misfits.py
    """
    lines, sign = body.splitlines(), separator.encode()
    odd = [place for place, line in enumerate(lines) if line.count(QUOTE) % 2]
    mended, left_out, at = [], [], 0
    while at < len(odd):
        place, until = odd[at], odd[at + 1] if at + 1 < len(odd) else None
        if until is not None and _one_row(lines[place : until + 1], separator, cells):
            at += 2
            continue
        plain = lines[place].replace(QUOTE, b"")
        if plain.count(sign) == cells - 1:
            mended.append(first_line + place)
            lines[place] = plain
        else:
            written = lines[place].decode("utf-8", errors="replace")
            left_out.append(Misfit(lines[place].count(sign) + 1, written, first_line + place))
            lines[place] = b""
        at += 1
    if not mended and not left_out:
        return None
    return Mended(b"\n".join([*lines, b""]), tuple(mended), tuple(left_out))


def _one_row(lines: list[bytes], separator: str, cells: int) -> bool:
    """Do these lines make one row, of which a cell goes on over several lines?"""
    if len(lines) > MOST_LINES_OF_A_CELL or any(line.count(separator.encode()) == cells - 1 for line in lines[1:]):
        return False
    try:
        joined = b"\n".join(lines).decode("utf-8", errors="replace").splitlines(keepends=True)
        rows = list(csv.reader(joined, delimiter=separator, strict=True))
    except csv.Error:
        return False
    return len(rows) == 1 and len(rows[0]) == cells


def numbered(misfits: Sequence[Misfit], body: bytes, first_line: int) -> tuple[Misfit, ...]:
    """Where in the file are these lines? The same with their numbers, in the file's order."""
    if not misfits:
        return ()
    places = _searched(misfits, body) if len(misfits) <= FEW_SEARCHED else _cut(misfits, body)
    return tuple(
        one._replace(line=first_line + place if place >= 0 else 0)
        for place, one in sorted(places, key=lambda found: found[0])
    )


def _searched(misfits: Sequence[Misfit], body: bytes) -> list[tuple[int, Misfit]]:
    """Look for a few lines, each after the last one like it."""
    last: dict[str, int] = {}
    starts = []
    for one in misfits:
        fits = re.compile(rb"(?:\A|[\r\n])" + re.escape(one.text.encode())).search(body, last.get(one.text, 0))
        starts.append(-1 if fits is None else fits.end() - len(one.text.encode()))
        last[one.text] = len(body) if fits is None else fits.end()
    place, reached, found = 0, 0, []
    for start, one in sorted(zip(starts, misfits, strict=True), key=lambda item: item[0]):
        if start < 0:
            found.append((-1, one))
            continue
        between = body[reached:start]
        place += between.count(b"\n") or between.count(b"\r")
        reached = start
        found.append((place, one))
    return found


def _cut(misfits: Sequence[Misfit], body: bytes) -> list[tuple[int, Misfit]]:
    """Go through all lines."""
    wanted: dict[bytes, list[Misfit]] = {}
    for one in misfits:
        wanted.setdefault(one.text.encode(), []).append(one)
    found = [(place, wanted[line].pop()) for place, line in enumerate(body.splitlines()) if wanted.get(line)]
    return found + [(-1, one) for left in wanted.values() for one in left]


def commonest_cells(misfits: Iterable[Misfit]) -> int:
    """Return how many cells most of these lines have."""
    return Counter(one.cells for one in misfits).most_common(1)[0][0]


def with_lines(aside: pd.DataFrame, misfits: Sequence[Misfit]) -> pd.DataFrame:
    """Which lines were set aside, beside the rows? The table with a column ``line``; what stands in them may name a person."""
    sentence, size = RULES["misfit"].sentence, len(aside)
    whole = aside.reset_index(drop=True).reindex(range(size + len(misfits)))
    if sentence not in whole["reason"].cat.categories and misfits:
        whole["reason"] = whole["reason"].cat.add_categories([sentence])
    if misfits:
        whole.loc[size:, "reason"] = sentence
    lines = [*[pd.NA] * size, *(one.line or pd.NA for one in misfits)]
    whole.insert(1, "line", pd.array(lines, dtype="Int64"))
    return whole
