"""When it was, written in one column, or as a day and a time of day in two."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.files.dates import BLANK_WORDS, DAY_SECONDS, UNREADABLE
from bedplan.data.values.clocks import clocks_of, minutes_of
from bedplan.data.values.dateorder import read_ordered

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.data.files.texttable import TextTable

DATED = re.compile(
    r"\d{1,4}[-/.]\d{1,2}[-/.]\d|(?<![\d.,])\d{5}|\d[-/. ]+[a-z]{3,}[-/. ,]+\d", re.IGNORECASE | re.ASCII
)


def when(
    text: TextTable, name: str, date_order: str | None, *then: str
) -> tuple[list[NDArray[np.int64]], NDArray[np.bool_]]:
    """When was each row, from its columns ``date`` and ``time`` or one of them, and its columns ``then``?

    Returns the seconds of each, and in which rows a time of day beside the date can't be read: they have the date alone.

    Raises:
        UnreadableRecords: dates whose order somebody must say; the question is in ``.question``.
    """
    written = {key: text.strings(key) for key in ("date", "time") if key in text.columns}
    both = len(written) == 2 and not _are_dated(written["time"])
    first = "date" if both or "time" not in written else "time"
    columns = [text.columns[key] for key in (first, *then)]
    seconds = read_ordered(name, date_order, *columns)
    if not both:
        return seconds, np.zeros(text.rows, dtype=bool)
    clocks = clocks_of(set(written["time"]))
    found = {cell: 0 if cell.lower() in BLANK_WORDS else minutes_of(clock) for cell, clock in clocks.items()}
    minutes = np.array([-1 if found[cell] is None else found[cell] for cell in written["time"]], dtype=np.int64)
    day_alone = (seconds[0] > UNREADABLE) & (seconds[0] % DAY_SECONDS == 0)
    seconds[0] = np.where(day_alone & (minutes > 0), seconds[0] + 60 * minutes, seconds[0])
    return seconds, day_alone & (minutes < 0)


def _are_dated(cells: list[str]) -> bool:
    """Do most of these times hold a date of their own?"""
    filled = [cell for cell in cells if cell]
    dated = sum(DATED.search(cell) is not None and not cell.startswith(("1899-", "1900-", "1904-")) for cell in filled)
    return dated > len(filled) / 2
