"""Dates and times as hospitals write them, read into whole seconds since 1970 in the hospital's own clock."""

from __future__ import annotations

import re
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.compute as pc

from bedplan.data.files.blocks import each
from bedplan.data.files.dateforms import STILL_IN, from_world_time, in_usual_form

if TYPE_CHECKING:
    from numpy.typing import NDArray

MISSING = np.iinfo(np.int64).min  # a blank cell
UNREADABLE = MISSING + 1  # something is written there, but no date
DAY_SECONDS = 86_400
EPOCHS_APART_DAYS = 1_462  # between the 1900 and the 1904 day numbers of spreadsheets
MOST_LOOKED_AT = 10_000  # to tell 23-01-31 from 31-01-23
LAST_SECOND = 253_402_300_799  # of the year 9999: what systems write where there is no end yet
MONTHS = ("jan", "feb", "mar", "apr", "may", "jun", "jul", "aug", "sep", "oct", "nov", "dec")
# The first three letters of months in English, German, French, Dutch, Italian, Spanish.
MONTH_NAMES = {
    name: number + 1
    for number, names in enumerate(
        (
            "jan gen ene jän",
            "feb fév",
            "mar mär mrz mae maa mrt",
            "apr avr abr",
            "may mai mei mag",
            "jun giu",
            "jul lug",
            "aug aoû aou ago",
            "sep set",
            "oct okt ott",
            "nov",
            "dec dez déc dic",
        )
    )
    for name in names.split()
}
BLANK_WORDS = ("", "null", "none", "na", "n/a", "nan", "nat", "-", "--", ".", "?", "still in", "open", "current")

TIME = (
    r"(?P<hour>\d{1,2})[:.h]?(?P<minute>\d{2})(?:[:.](?P<second>\d{2})(?:[.,]\d+)?)?"
    r"\s*(?P<half>[AaPp])?\.?[Mm]?\.?\s*(?:[Uu]hr|uur|h|hrs)?\s*(?P<offset>Z|[+-]\d{2}:?\d{2})?"
)
CLOCK = f"(?:[T ]+(?:at |um )?{TIME})?"
ISO = r"^(?P<year>\d{4})[-/.](?P<month>\d{1,2})[-/.](?P<day>\d{1,2})" + CLOCK + "$"
DIGITS = (
    r"^(?P<year>\d{4})(?P<month>\d{2})(?P<day>\d{2})(?:[T ]*(?P<hour>\d{2}):?(?P<minute>\d{2})"
    r"(?::?(?P<second>\d{2})(?:[.,]\d+)?)?(?P<half>)\s*(?P<offset>Z|[+-]\d{2}:?\d{2})?)?$"
)
NUMBERS = r"^(?P<first>\d{1,2})[/.\- ](?P<second_part>\d{1,2})[/.\- ](?P<year>\d{4}|\d{2})" + CLOCK + "$"
NAMED = (
    r"^(?:[^\s\d.,]{2,10}\.?,? +)?(?P<day>\d{1,2})(?:er|st|nd|rd|th)?(?:[-/ .]| de )*(?P<name>[^\s\d.,/-]{3,})"
    r"(?:[-/ .,]| de )*(?P<year>\d{4}|\d{2})" + CLOCK + "$"
)
NAME_FIRST = r"^(?P<name>[^\s\d.,/-]{3,})[-/ .]*(?P<day>\d{1,2})(?:st|nd|rd|th)?,? +(?P<year>\d{4})" + CLOCK + "$"
YEAR_FIRST = r"^\d{2}[-/.]\d{1,2}[-/.]\d{2}([T ]|$)"
PLAIN_ISO = r"^\d{4}-\d{2}-\d{2}[ T]\d{2}:\d{2}(:\d{2})?$"
OFFSET_LAST = r"(Z|[+-]\d{2}:?\d{2})\s*$"
SERIAL = r"^(?P<serial>[2-6]\d{4}(?:[.,]\d+)?)$"


@dataclass(frozen=True, slots=True)
class TimesRead:
    """One column of times: ``seconds`` (n,) with MISSING and UNREADABLE marked, and how they were written.

    Marked by row: ``serial``, a spreadsheet's day number; ``offset``, from world time; ``by_numbers``, two small numbers
    and a year. How many of those one order of day and month alone allows, and both do.
    """

    seconds: NDArray[np.int64]
    serial: NDArray[np.bool_]
    offset: NDArray[np.bool_]
    by_numbers: NDArray[np.bool_]
    day_first_only: int = 0
    month_first_only: int = 0
    either_order: int = 0


def seconds_of(
    year: NDArray[np.int64], month: NDArray[np.int64], day: NDArray[np.int64], clock_seconds: NDArray[np.int64]
) -> NDArray[np.int64]:
    """Return seconds since 1970 of calendar dates, UNREADABLE where the date is on no calendar."""
    possible = (month >= 1) & (month <= 12) & (day >= 1) & (year >= 1) & (year <= 9999) & (clock_seconds >= 0)
    safe_year, safe_month = np.where(possible, year, 2000), np.where(possible, month, 1)
    months = ((safe_year - 1970) * 12 + safe_month - 1).astype("datetime64[M]")
    first = months.astype("datetime64[D]").astype(np.int64)
    length = (months + 1).astype("datetime64[D]").astype(np.int64) - first
    possible &= day <= length
    seconds = (first + day - 1) * DAY_SECONDS + clock_seconds
    return np.where(possible, np.minimum(seconds, LAST_SECOND), UNREADABLE)


def read_times(
    column: pa.ChunkedArray | pa.Array, date_order: str | None = None, time_zone: str | None = None
) -> TimesRead:
    """When was it? One column of text read into seconds; ``date_order`` is ``"day first"``, ``"month first"`` or None.

    Times with an offset keep the clock they show, or are brought to that of ``time_zone``.

    Checked by: tests/data/files/test_dates.py
    """
    chunks = _with_century(column.chunks if isinstance(column, pa.ChunkedArray) else [column])
    parts = each(lambda chunk: _fast_iso(chunk, time_zone) or _slow(chunk, date_order, time_zone), chunks)
    none, nowhere = np.zeros(0, dtype=np.int64), np.zeros(0, dtype=bool)
    return TimesRead(
        np.concatenate([none, *(part.seconds for part in parts)]),
        np.concatenate([nowhere, *(part.serial for part in parts)]),
        np.concatenate([nowhere, *(part.offset for part in parts)]),
        np.concatenate([nowhere, *(part.by_numbers for part in parts)]),
        sum(part.day_first_only for part in parts),
        sum(part.month_first_only for part in parts),
        sum(part.either_order for part in parts),
    )


def _with_century(chunks: list[pa.Array]) -> list[pa.Array]:
    """Complete years in dates such as 23-01-31, told from 31-01-23 by which number changes least."""
    first = next((value for chunk in chunks for value in chunk[:100].to_pylist() if value), None)
    if not isinstance(first, str) or re.match(YEAR_FIRST, first.strip()) is None:
        return chunks
    texts = [pc.utf8_trim_whitespace(chunk) for chunk in chunks]
    some = [value for value in texts[0][:MOST_LOOKED_AT].to_pylist() if value and re.match(YEAR_FIRST, value)]
    outer = [{re.split(r"[-/.T ]", value)[place] for value in some} for place in (0, 2)]
    if len(outer[0]) >= len(outer[1]) or max(outer[1]) > "31":
        return chunks
    return [
        pc.replace_substring_regex(text, r"^(\d{2})([-/.]\d{1,2}[-/.]\d{2}(?:[T ]|$))", r"20\1\2") for text in texts
    ]


def _fast_iso(part: pa.Array, time_zone: str | None) -> TimesRead | None:
    """Read times that are ISO throughout, all with an offset or none, blanks allowed, in one pass, or return None."""
    try:
        stamps, is_world = pc.cast(part, pa.timestamp("s")), False
    except pa.ArrowInvalid:
        first = next((value for value in part[:100].to_pylist() if value), "")
        if re.search(OFFSET_LAST, first) is None:  # to try the whole column in vain takes long
            return None
        stamps, is_world = from_world_time(part, time_zone), True
    if stamps is None:
        return None
    seconds = pc.cast(stamps, pa.int64()).fill_null(0).to_numpy(zero_copy_only=False)
    if stamps.null_count:
        seconds = np.where(stamps.is_null().to_numpy(zero_copy_only=False), MISSING, seconds)
    serial, offset, by_numbers = np.zeros((3, seconds.size), dtype=bool)
    return TimesRead(seconds, serial, offset | (is_world & (seconds != MISSING)), by_numbers)


def _plain_iso(text: pa.Array, seconds: NDArray[np.int64]) -> NDArray[np.bool_]:
    """Read the rows written plainly as 2024-03-31 14:05 into ``seconds``, all at once; return which they are."""
    plain = pc.match_substring_regex(text, PLAIN_ISO)
    try:
        stamps = pc.cast(text.filter(plain), pa.timestamp("s"))
    except pa.ArrowInvalid:  # one of them is on no calendar: leave them to the patterns
        return np.zeros(len(text), dtype=bool)
    which = plain.to_numpy(zero_copy_only=False)
    seconds[which] = pc.cast(stamps, pa.int64()).to_numpy(zero_copy_only=False)
    return which


def _slow(column: pa.Array, date_order: str | None, time_zone: str | None) -> TimesRead:
    """Read a column row by row's pattern: each pattern takes the rows that fit it."""
    text = pc.utf8_trim_whitespace(pc.fill_null(column, ""))
    size = len(text)
    seconds = np.full(size, UNREADABLE, dtype=np.int64)
    blank = pc.is_in(pc.utf8_lower(text), value_set=pa.array((*BLANK_WORDS, *STILL_IN))).to_numpy(zero_copy_only=False)
    seconds[blank] = MISSING
    left = ~blank
    left[_plain_iso(text, seconds)] = False
    (serial, offset, by_numbers), counts = np.zeros((3, size), bool), (0, 0, 0)
    for pattern in (ISO, DIGITS, SERIAL, NUMBERS, NAMED, NAME_FIRST):
        rows = np.flatnonzero(left)
        if not rows.size:
            break
        parts = pc.extract_regex(text.take(pa.array(rows)), pattern)
        fits = pc.is_valid(parts).to_numpy(zero_copy_only=False)
        if not fits.any():
            continue
        rows, parts = rows[fits], parts.filter(pa.array(fits))
        left[rows] = False
        if pattern is SERIAL:
            seconds[rows], serial[rows] = _from_serial(parts.field("serial")), True
            continue
        if pattern is NUMBERS:
            seconds[rows], counts = _from_numbers(parts, date_order)
            by_numbers[rows] = True
        else:
            seconds[rows] = _from_names(parts) if pattern in (NAMED, NAME_FIRST) else _from_iso(parts)
        has = pc.not_equal(parts.field("offset"), "").to_numpy(zero_copy_only=False)
        moved = rows[has]
        offset[moved] = True
        if time_zone and moved.size:
            seconds[moved] = _at_home(seconds[moved], parts.field("offset").filter(pa.array(has)), time_zone)
    unread = TimesRead(seconds, serial, offset, by_numbers, *counts)
    return _read_again(unread, text, np.flatnonzero(left), date_order, time_zone)


def _read_again(
    read: TimesRead, text: pa.Array, left: NDArray[np.int64], date_order: str | None, time_zone: str | None
) -> TimesRead:
    """Read the times left over that are written in another form."""
    if not left.size:
        return read
    asked = text.take(pa.array(left))
    tidy = in_usual_form(asked)
    changed = pc.not_equal(tidy, asked).to_numpy(zero_copy_only=False)
    if not changed.any():
        return read
    again = _slow(tidy.filter(pa.array(changed)), date_order, time_zone)
    rows = left[changed]
    read.seconds[rows], read.serial[rows] = again.seconds, again.serial
    read.offset[rows], read.by_numbers[rows] = again.offset, again.by_numbers
    return replace(
        read,
        day_first_only=read.day_first_only + again.day_first_only,
        month_first_only=read.month_first_only + again.month_first_only,
        either_order=read.either_order + again.either_order,
    )


def _whole(strings: pa.Array) -> NDArray[np.int64]:
    """Return digits as whole numbers, 0 where nothing is written."""
    filled = pc.if_else(pc.equal(strings, ""), "0", strings)
    return pc.cast(filled, pa.int64()).to_numpy(zero_copy_only=False)


def _clock(parts: pa.StructArray) -> NDArray[np.int64]:
    """Return seconds after midnight, −1 where the clock shows no such time; 24:00 is the day's end."""
    hour, minute, second = (_whole(parts.field(name)) for name in ("hour", "minute", "second"))
    half = pc.utf8_lower(parts.field("half"))
    afternoon = pc.equal(half, "p").to_numpy(zero_copy_only=False)
    morning = pc.equal(half, "a").to_numpy(zero_copy_only=False)
    possible = (hour <= 24) & (minute < 60) & (second < 60) & ~((afternoon | morning) & ((hour > 12) | (hour < 1)))
    hour = np.where(afternoon & (hour < 12), hour + 12, np.where(morning & (hour == 12), 0, hour))
    seconds = hour * 3600 + minute * 60 + second
    return np.where(possible & (seconds <= DAY_SECONDS), seconds, -1)


def _whole_year(written: pa.Array) -> NDArray[np.int64]:
    """Return years; of those in two digits 00–49 are 2000–2049, 50–99 are 1950–1999."""
    year, is_short = _whole(written), pc.equal(pc.utf8_length(written), 2).to_numpy(zero_copy_only=False)
    return np.where(is_short, np.where(year < 50, year + 2000, year + 1900), year)


def _from_iso(parts: pa.StructArray) -> NDArray[np.int64]:
    year, month, day = (_whole(parts.field(name)) for name in ("year", "month", "day"))
    return seconds_of(year, month, day, _clock(parts))


def _from_names(parts: pa.StructArray) -> NDArray[np.int64]:
    name = pc.utf8_normalize(pc.utf8_lower(parts.field("name")), "NFC")
    name = pc.replace_substring_regex(name, "^jui([nl])", r"ju\1")  # juin, juillet
    found = pc.index_in(pc.utf8_slice_codeunits(name, 0, 3), value_set=pa.array(list(MONTH_NAMES)))
    numbers = np.array([*MONTH_NAMES.values(), 0])
    month = numbers[pc.fill_null(found, -1).to_numpy(zero_copy_only=False)]
    year, day = _whole_year(parts.field("year")), _whole(parts.field("day"))
    return seconds_of(year, month, day, _clock(parts))


def _from_numbers(parts: pa.StructArray, date_order: str | None) -> tuple[NDArray[np.int64], tuple[int, int, int]]:
    """Read dates of two small numbers and a year; count which orders they allow."""
    first, second = _whole(parts.field("first")), _whole(parts.field("second_part"))
    year, clock = _whole_year(parts.field("year")), _clock(parts)
    day_first_only, month_first_only = (first > 12) & (second <= 12), (second > 12) & (first <= 12)
    either = (first <= 12) & (second <= 12) & (first != second) & (np.minimum(first, second) > 0)
    counts = (int(day_first_only.sum()), int(month_first_only.sum()), int(either.sum()))
    day, month = (second, first) if date_order == "month first" else (first, second)
    return seconds_of(year, month, day, clock), counts


def _at_home(seconds: NDArray[np.int64], offset: pa.Array, time_zone: str) -> NDArray[np.int64]:
    """Bring times with an offset from world time to the clock of one zone."""
    digits = pc.replace_substring(offset, ":", "")
    sign = np.where(pc.starts_with(digits, "-").to_numpy(zero_copy_only=False), -1, 1)
    world = pc.is_in(digits, value_set=pa.array(["Z"])).to_numpy(zero_copy_only=False)
    number = _whole(pc.if_else(pa.array(world), "0000", pc.utf8_slice_codeunits(digits, 1)))
    utc = seconds - sign * (number // 100 * 3600 + number % 100 * 60)
    possible = seconds > UNREADABLE
    home = pd.DatetimeIndex(np.where(possible, utc, 0).astype("datetime64[s]"), tz="UTC").tz_convert(time_zone)
    local = home.tz_localize(None).to_numpy().astype("datetime64[s]").astype(np.int64)
    return np.where(possible, local, seconds)


def _from_serial(serial: pa.Array) -> NDArray[np.int64]:
    """Read spreadsheet day numbers: days since 30 December 1899, to the nearest minute."""
    days = pc.cast(pc.replace_substring(serial, ",", "."), pa.float64()).to_numpy(zero_copy_only=False)
    minutes = np.round((days - 25_569) * 1_440).astype(np.int64)
    return minutes * 60
