"""Start and end of every stay, and the question whether 03/04 is in April or in March."""

from __future__ import annotations

import re
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.compute as pc

from bedplan.data.files.columns import plain
from bedplan.data.files.dates import DAY_SECONDS, EPOCHS_APART_DAYS, UNREADABLE, TimesRead, read_times
from bedplan.data.values.choices import AS_THEY_STAND, DATE_ORDERS, EXCHANGED, DateQuestion, check_date_order
from bedplan.data.values.clocks import DAY_MINUTES, clocks_of, minutes_of
from bedplan.data.values.exchanged import ask_about_cells, put_right
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from bedplan.data.files.texttable import TextTable

DAY_FIRST, MONTH_FIRST, ROW_BY_ROW = DATE_ORDERS
CLOCK_HEADING = re.compile("(?<!date)time$")  # beside a column of dates
# A date of noughts: 0, 0.0, 00/00/0000, 0000-00-00 00:00:00, 1900-01-00, or the midnight that a workbook has for day 0.
NOUGHT = r"^\s*(?:0+(?:[.,]0+)?|0+[-/.]0+[-/.]0+|1900-0?1-0?0|0?1/0?0/1900|0?0/0?1/1900|00:00(?::00)?)(?:[T ]+0{1,2}:00(?::00)?)?\s*$"
SPREADSHEETS_DAY_0 = -25_569 * DAY_SECONDS  # 30 December 1899
IN_ORDER = 0.99  # rank correlation of row number and time, from which a file counts as sorted by time


def start_and_end(
    text: TextTable, name: str, date_order: str | None, time_zone: str | None
) -> tuple[TimesRead, TimesRead, list[str]]:
    """When did each stay start and end? From one column each, or a date and a time column, or the hospital's dates.

    Raises:
        UnreadableRecords: dates whose order somebody must say; the question is in ``.question``.
    """
    check_date_order(date_order)
    columns, notes = _columns(text)
    row_by_row = date_order == ROW_BY_ROW
    read = _row_by_row(name, columns) if row_by_row else _read_all(name, columns, date_order, time_zone)
    for key, column in columns.items():
        _read_zeros(read[key].seconds, column)
    start, end, moved = _one_epoch(read["start"], read["end"])
    return start, end, [*notes, *moved, *_how_written(read, date_order, time_zone)]


def _read_zeros(seconds: NDArray[np.int64], column: pa.ChunkedArray) -> None:
    """Read a nought, or a date of noughts, as the day before all days of a spreadsheet: no date at all."""
    unread = np.flatnonzero(seconds == UNREADABLE)
    if unread.size:
        zeros = pc.match_substring_regex(pc.cast(column.take(pa.array(unread)), pa.string()), NOUGHT)
        seconds[unread[zeros.to_numpy()]] = SPREADSHEETS_DAY_0


def _how_written(read: Mapping[str, TimesRead], date_order: str | None, time_zone: str | None) -> list[str]:
    """Say how times were read that could have been read otherwise, and in how many rows they stand."""
    told = []
    by_numbers, offset = (
        int(np.count_nonzero(np.logical_or.reduce([getattr(times, kind) for times in read.values()])))
        for kind in ("by_numbers", "offset")
    )
    if by_numbers:
        shown = {
            DAY_FIRST: sum(times.day_first_only for times in read.values()),
            MONTH_FIRST: sum(times.month_first_only for times in read.values()),
        }
        order = date_order if date_order in DATE_ORDERS else max(shown, key=shown.get)
        why = "as you said" if date_order == order else f"because {shown[order]:,} dates can be read no other way"
        told.append(f"Dates such as 03/04/2024 were read {order} in {_rows(by_numbers)}, {why}.")
    if offset:
        done = f"brought to the clock of {time_zone}" if time_zone else "the clock shown was kept"
        told.append(f"Times carried an offset from world time in {_rows(offset)}; {done}.")
    if date_order == EXCHANGED:
        told.append("Day and month were exchanged in dates up to day 12, as you said.")
    return told


def _rows(count: int) -> str:
    """Return how many rows."""
    return "1 row" if count == 1 else f"{count:,} rows"


def read_ordered(name: str, date_order: str | None, *columns: pa.ChunkedArray) -> list[NDArray[np.int64]]:
    """When was it? One column, or two of which the second comes after the first, in one order of day and month.

    Asks which way round dates are written where that is open.

    Raises:
        UnreadableRecords: dates whose order somebody must say; the question is in ``.question``.
    """
    check_date_order(date_order)
    named = dict(zip(("start", "end"), columns, strict=False))
    if date_order == ROW_BY_ROW:
        read = _row_by_row(name, named)
    else:
        read = _read_all(name, named, date_order, None, are_stays=False)
    return [times.seconds for times in read.values()]


def _read_all(
    name: str,
    columns: Mapping[str, pa.ChunkedArray],
    date_order: str | None,
    time_zone: str | None,
    *,
    are_stays: bool = True,
) -> dict[str, TimesRead]:
    """Read columns that share one order of day and month; the order comes from the answer or from the dates."""
    read = {key: read_times(column, date_order, time_zone) for key, column in columns.items()}
    day_only = sum(times.day_first_only for times in read.values())
    month_only = sum(times.month_first_only for times in read.values())
    unsure = sum(times.either_order for times in read.values())
    if date_order is None and ((day_only and month_only) or (unsure and not day_only and not month_only)):
        unsure_first = columns if are_stays else {"start": columns[max(read, key=lambda key: read[key].either_order)]}
        raise _question(name, unsure_first)
    if date_order not in DATE_ORDERS and month_only > day_only:
        read = {key: read_times(column, MONTH_FIRST, time_zone) for key, column in columns.items()}
    if date_order not in (AS_THEY_STAND, EXCHANGED) and not (day_only and month_only):
        ask_about_cells(name, columns, read, are_stays=are_stays)
    return put_right(columns, read) if date_order == EXCHANGED else read


def _columns(text: TextTable) -> tuple[dict[str, pa.ChunkedArray], list[str]]:
    """Return the text of starts and ends, wherever the file keeps them."""
    columns, notes = {}, []
    for key, other in (("start", "admitted"), ("end", "discharged")):
        day, clock = text.columns.get(f"{key}_date"), text.columns.get(f"{key}_time")
        if key in text.columns and day is not None and CLOCK_HEADING.search(plain(text.headings[key])):
            columns[key] = _joined(day, text.columns[key])
        elif key in text.columns:
            columns[key] = text.columns[key]
        elif day is not None:
            columns[key] = day if clock is None else _joined(day, clock)
        else:
            clock = text.columns.get(f"{other}_time")
            columns[key] = text.columns[other] if clock is None else _joined(text.columns[other], clock)
            notes.append(
                f"The hospital's “{text.headings[other]}” stands in for the {key} on the ward: moves between wards are hidden."
            )
    return columns, notes


def _joined(day: pa.ChunkedArray, clock: pa.ChunkedArray) -> pa.ChunkedArray:
    """Return days and times of day as one text; a spreadsheet's day comes with midnight, its time with a day or as 0905.

    A spreadsheet's day number becomes one with a part of a day; a part of a day beside a date becomes a clock.
    """
    day = pc.replace_substring_regex(pc.cast(day, pa.string()), r"[T ]+0{1,2}:00(:00(\.0*)?)?\s*$", "")
    clock = pc.replace_substring_regex(
        pc.cast(clock, pa.string()), r"^\s*\d{1,4}[-/.]\d{1,2}[-/.]\d{2,4}[T ]+(\d)", r"\1"
    )
    written = [cell or "" for cell in pc.unique(clock).to_pylist()]
    clocks = clocks_of(written)
    clock = _looked_up(pc.fill_null(clock, ""), clocks)
    joined = pc.binary_join_element_wise(day, clock, " ")
    numbers = pc.fill_null(pc.match_substring_regex(day, r"^\s*[2-6]\d{4}\s*$"), False)
    if not pc.any(numbers).as_py():
        return joined
    minutes = {shown: minutes_of(shown) for shown in clocks.values()}
    parts = {
        shown: f".{min(round(many / DAY_MINUTES * 1e6), 999_999):06d}"
        for shown, many in minutes.items()
        if many is not None
    }
    part = _looked_up(clock, {shown: parts.get(shown, f" {shown}" if shown else "") for shown in minutes})
    return pc.if_else(numbers, pc.binary_join_element_wise(pc.utf8_trim_whitespace(day), part, ""), joined)


def _looked_up(cells: pa.ChunkedArray, meaning: Mapping[str, str]) -> pa.ChunkedArray:
    """Return each cell's meaning."""
    if all(cell == meant for cell, meant in meaning.items()):
        return cells
    place = pc.index_in(cells, value_set=pa.array(list(meaning), pa.string()))
    return pc.take(pa.array(list(meaning.values()), pa.string()), place)


def _question(name: str, columns: Mapping[str, pa.ChunkedArray]) -> UnreadableRecords:
    """Build the question which way round dates are written, with both readings of three rows."""
    read = {
        order: tuple(read_times(column, order).seconds for column in columns.values())
        for order in (DAY_FIRST, MONTH_FIRST)
    }
    negative = {order: int(((both[-1] < both[0]) & (both[-1] > UNREADABLE)).sum()) for order, both in read.items()}
    day, month = read[DAY_FIRST][0], read[MONTH_FIRST][0]
    rows = np.flatnonzero((day != month) & (day > UNREADABLE) & (month > UNREADABLE))[:3]
    examples = tuple((str(columns["start"][int(row)].as_py()), _day(day[row]), _day(month[row])) for row in rows)
    shown = "; ".join(f"“{written}” is {first} or {second}" for written, first, second in examples)
    told = f"The dates in {name} can be read day first or month first ({shown}). Say which it is"
    if len(columns) == 1:
        negative, told = {}, f"{told}."
    else:
        told += f": day first, {negative[DAY_FIRST]:,} stays would end before they start; month first, {negative[MONTH_FIRST]:,}."
    problem = UnreadableRecords([told])
    problem.question = DateQuestion(examples, negative, DATE_ORDERS)
    return problem


def _day(seconds: np.int64) -> str:
    """Return a day in words."""
    return f"{pd.Timestamp(int(seconds), unit='s'):%d %B %Y}"


def _row_by_row(name: str, columns: Mapping[str, pa.ChunkedArray]) -> dict[str, TimesRead]:
    """Read each start the way that fits the rows around it, each end the way that fits its start."""
    day = {key: read_times(column, DAY_FIRST) for key, column in columns.items()}
    month = {key: read_times(column, MONTH_FIRST) for key, column in columns.items()}
    first, second = day["start"].seconds, month["start"].seconds
    if all(np.array_equal(day[key].seconds, month[key].seconds) for key in columns):
        return day  # no date can be read two ways
    sure = np.flatnonzero((first == second) & (first > UNREADABLE) | (first <= UNREADABLE) ^ (second <= UNREADABLE))
    known = np.where(first > UNREADABLE, first, second)
    if sure.size < 10 or np.corrcoef(np.argsort(np.argsort(known[sure])), np.arange(sure.size))[0, 1] < IN_ORDER:
        raise UnreadableRecords(
            [f"{name} is not sorted by start, so its dates can't be read row by row: answer day first or month first."]
        )
    around = np.interp(np.arange(first.size), sure, known[sure])
    start = _nearer(first, second, around)
    if "end" not in columns:
        return {"start": replace(day["start"], seconds=start)}
    end = _nearer(day["end"].seconds, month["end"].seconds, start.astype(float), not_before=start)
    return {"start": replace(day["start"], seconds=start), "end": replace(day["end"], seconds=end)}


def _nearer(
    first: NDArray[np.int64],
    second: NDArray[np.int64],
    wanted: NDArray[np.float64],
    not_before: NDArray[np.int64] | None = None,
) -> NDArray[np.int64]:
    """Return whichever reading is a date, keeps the order of start and end, and lies nearer."""

    def distance(times: NDArray[np.int64]) -> NDArray[np.float64]:
        """Return how far a reading lies from what is wanted; endless where it is no date."""
        far = np.abs(times.astype(float) - wanted)
        early = 0.0 if not_before is None else np.where(times < not_before, 1e12, 0.0)
        return np.where(times > UNREADABLE, far + early, np.inf)

    return np.where(distance(second) < distance(first), second, first)


def _one_epoch(start: TimesRead, end: TimesRead) -> tuple[TimesRead, TimesRead, list[str]]:
    """Move spreadsheet day numbers by four years where that, and only that, puts them among the other dates."""
    serial = start.seconds[start.serial]
    plain = start.seconds[~start.serial & (start.seconds > UNREADABLE)] if serial.size else serial
    if not plain.size:
        return start, end, []
    shift, middle = EPOCHS_APART_DAYS * DAY_SECONDS, float(np.median(serial))
    if plain.min() <= middle <= plain.max() or not plain.min() <= middle + shift <= plain.max():
        return start, end, []
    moved = [replace(one, seconds=np.where(one.serial, one.seconds + shift, one.seconds)) for one in (start, end)]
    return *moved, ["Spreadsheet day numbers were counted from 1904, as the other dates show."]
