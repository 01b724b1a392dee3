"""Months as returns write them, and how many of them a row holds."""

from __future__ import annotations

import calendar
import datetime as dt
import math
import re
import unicodedata
from itertools import pairwise
from typing import TYPE_CHECKING

import pyarrow as pa

from bedplan.data.files.dates import MONTHS
from bedplan.data.values.choices import DATE_ORDERS, check_date_order
from bedplan.data.values.dateorder import read_ordered

if TYPE_CHECKING:
    from collections.abc import Iterable

DAY_FIRST, MONTH_FIRST, _ = DATE_ORDERS
QUARTER = 3
FIRST_YEAR, LAST_YEAR = 1990, 2100
SPREADSHEET_EPOCH = dt.date(1899, 12, 30)
# First letters of months in other languages of Europe -> number; "jui" is longer because two months begin so.
OTHER_MONTHS = dict(
    pair
    for number, starts in enumerate(
        (
            "gen ene",
            "fev",
            "maa mrt mrz",
            "avr abr",
            "mai maj mei mag",
            "juin giu",
            "juil lug",
            "aou ago",
            "set",
            "okt ott out",
            "",
            "dez dic des",
        ),
        1,
    )
    for pair in ((start, number) for start in starts.split())
)
MONTH_PATTERNS = (
    r"(?P<year>\d{4})(?:[-/. ]|[-/. ]?m)(?P<month>\d{1,2})(?!\d)",  # 2024-04, 2024-04-30, 2024M04
    r"(?P<year>\d{4})(?P<month>\d{2})(?:\d{2})?(?!\d)",  # 202404, 20240430
    r"(?:\d{1,2}[-/. ]*)?(?P<name>[a-z]{3,})[-/., ']*(?P<year>\d{4}|\d{2})$",  # Apr 2024, 30 April 2024, April-24
    r"(?P<year>\d{4})[-/. ]*(?P<name>[a-z]{3,})$",  # 2024 April
    r"(?P<month>\d{1,2})[-/.](?P<year>\d{4})$",  # 04/2024
)
DATE = re.compile(r"(\d{1,2})[-/. ](\d{1,2})[-/. ](\d{4}|\d{2})(?: .*)?", re.ASCII)
SERIAL = re.compile(r"([2-6]\d{4})(?:[.,]\d+)?", re.ASCII)  # a spreadsheet's day number


def month_of(text: str, date_order: str | None = None) -> tuple[int, int] | None:
    """Which year and month does this name? None where it names none.

    Of dates such as 01/04/2024 the first or last day of a month is believed, unless ``date_order`` says otherwise.

    Checked by: tests/data/beside/test_returns.py
    """
    decomposed = unicodedata.normalize("NFKD", text.strip().lower())
    word = "".join(sign for sign in decomposed if not unicodedata.combining(sign))
    found = _of_date(word, date_order) or _of_serial(word) or _of_words(word)
    return found if found and FIRST_YEAR <= found[0] <= LAST_YEAR else None


def with_year(month: str, year: str) -> str:
    """What does a month name together with the year in a column of its own? As it stands where it names a year itself."""
    if not re.fullmatch(r"(?:19|20)\d\d", year, re.ASCII):
        return month
    if re.fullmatch(r"\d\d?", month, re.ASCII):
        return f"{year}-{month}"
    return f"{month} {year}" if re.fullmatch(r"[^\W\d_]+\.?", month) else month


def _of_words(word: str) -> tuple[int, int] | None:
    """Return year and month of 2024-04, Apr 2024, April-24 or 04/2024."""
    for pattern in MONTH_PATTERNS:
        fits = re.match(pattern, word, re.ASCII)
        if fits:
            parts = fits.groupdict()
            number = int(parts["month"]) if parts.get("month") else _number_of(parts["name"])
            return (_whole_year(parts["year"]), number) if 1 <= number <= 12 else None
    return None


def _number_of(name: str) -> int:
    """Return the number of a month by its name, 0 where it is none."""
    if name[:3] in MONTHS:
        return MONTHS.index(name[:3]) + 1
    return next((number for start, number in OTHER_MONTHS.items() if name.startswith(start)), 0)


def _whole_year(year: str) -> int:
    """Return a year with its century."""
    return int(year) + (2000 if len(year) == 2 else 0)


def _of_serial(word: str) -> tuple[int, int] | None:
    """Return year and month of a spreadsheet's day number."""
    fits = SERIAL.fullmatch(word)
    day = SPREADSHEET_EPOCH + dt.timedelta(days=int(fits[1])) if fits else None
    return (day.year, day.month) if day else None


def _readings(word: str) -> dict[str, tuple[int, int, bool]]:
    """Return how a date can be read: order → year, month, and whether it is the first or last day of the month."""
    fits = DATE.fullmatch(word)
    if fits is None:
        return {}
    first, second, year = int(fits[1]), int(fits[2]), _whole_year(fits[3])
    found = {}
    for order, day, month in ((DAY_FIRST, first, second), (MONTH_FIRST, second, first)):
        last = calendar.monthrange(year, month)[1] if 1 <= month <= 12 and 1 <= year <= 9999 else 0
        if 1 <= day <= last:
            found[order] = (year, month, day in (1, last))
    return found


def _of_date(word: str, date_order: str | None) -> tuple[int, int] | None:
    """Return year and month of a date such as 30/04/2024."""
    read = _readings(word)
    orders = [date_order] if date_order in read else sorted(read, key=lambda order: not read[order][2])
    if not orders or (len(orders) == 2 and not read[orders[0]][2]):
        return None
    return read[orders[0]][:2]


def order_of_dates(cells: list[str], name: str, date_order: str | None) -> str | None:
    """Which way round are the dates of a return: as somebody said, else as makes each the first or last day of a month?

    Raises:
        UnreadableRecords: neither does; the question is in ``.question``.
    """
    check_date_order(date_order)
    read = [one for one in (_readings(cell.strip()) for cell in cells) if one]
    if date_order is not None or not read:
        return date_order
    for order in (DAY_FIRST, MONTH_FIRST):
        if all(order in one and one[order][2] for one in read):
            return order
    dates = [cell for cell in cells if DATE.fullmatch(cell.strip())]
    read_ordered(name, None, pa.chunked_array([dates], pa.string()))
    return next((order for order in (DAY_FIRST, MONTH_FIRST) if all(order in one for one in read)), None)


def months_apart(months: Iterable[tuple[int, int]]) -> int:
    """How many months lie between the months of a return? 3 = its rows are quarters; 0 = there is one month only."""
    numbers = sorted({year * 12 + month for year, month in months})
    return math.gcd(*(later - earlier for earlier, later in pairwise(numbers)))
