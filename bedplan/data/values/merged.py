"""Cells left blank because the one above them counts for them too, as merged cells of a sheet come out."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import pyarrow as pa

if TYPE_CHECKING:
    from bedplan.data.files.texttable import TextTable

LEAST_SHARE = (
    1 / 3
)  # of the rows that hold figures have such a blank cell: two wards a date leave every second one blank
FEWEST = 2


def filled_from_above(text: TextTable, *keys: str) -> TextTable:
    """What stands in these columns, where each value is written once for all rows below it? A note says what was filled.

    Only where a third or more of the rows that hold something in other columns are blank there, and no value is the same
    as the one before: blanks here and there in a column that repeats its values are missing, and stay so.

    Checked by: tests/data/values/test_merged.py
    """
    others = [text.strings(key) for key in text.columns if key not in keys]
    holds = [any(cells) for cells in zip(*others, strict=True)] or [False] * text.rows
    columns, notes = dict(text.columns), list(text.notes)
    for key in keys:
        cells, filled, last, repeats, many = text.strings(key), [], "", False, 0
        for cell, is_row in zip(cells, holds, strict=True):
            repeats |= bool(cell) and cell.casefold() == last.casefold()
            last = cell or last
            fills = not cell and is_row and bool(last)
            many += fills
            filled.append(last if fills else cell)
        if repeats or many < max(FEWEST, LEAST_SHARE * sum(holds)):
            continue
        columns[key] = pa.chunked_array([filled], pa.string())
        notes.append(f"{many:,} blank cells under “{text.headings[key]}” count as the one above, as in merged cells.")
    return replace(text, columns=columns, notes=tuple(notes))
