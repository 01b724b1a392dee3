"""Times of day beside a date, as people write them and as spreadsheets keep them: parts of a day, 0.604."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Collection, Mapping

DAY_MINUTES = 1_440
CLOCK = re.compile(
    r"(?:\d{4}-\d{2}-\d{2}[ T])?"  # a spreadsheet may put its first day before a time
    r"(?P<hour>\d{1,2}?)(?:[:.h]?(?P<minute>\d{2}))?(?:[:.]\d{2}(?:[.,]\d+)?)?"
    r"\s*(?:(?P<half>[ap])\.?m?\.?|h|hrs?|hours?|uhr)?",
    re.IGNORECASE | re.ASCII,
)
FRACTION = re.compile(r"0?[.,]\d+|\d(?:[.,]\d+)?e-\d+", re.IGNORECASE | re.ASCII)
HOUR, BARE = re.compile(r"\d{1,2}", re.ASCII), re.compile(r"[1-9]\d{2,3}", re.ASCII)
NO_CLOCK = re.compile(r"0?[.,](?:\d|[6-9]\d|\d{3,})|.*e.*", re.IGNORECASE | re.ASCII)  # 0.30 may be half past midnight


def minutes_of(clock: str) -> int | None:
    """How many minutes after midnight is a time such as 08:00, 0800, 8, 8.05 pm or 20:05 Uhr? None where it is no time.

    Checked by: tests/data/values/test_clocks.py
    """
    fits = CLOCK.fullmatch(clock.strip())
    if fits is None:
        return None
    hour, minute, half = int(fits["hour"]), int(fits["minute"] or 0), (fits["half"] or "").lower()
    if half:
        if not 1 <= hour <= 12:
            return None
        hour = hour % 12 + (12 if half == "p" else 0)
    return hour * 60 + minute if minute < 60 and hour * 60 + minute <= DAY_MINUTES else None


def clocks_of(cells: Collection[str]) -> Mapping[str, str]:
    """Which time of day does each cell of one column name, with parts of a day (0.604) and hours as 14:30? Cell → clock.

    0.30 is half past midnight unless another cell can only be a part of a day, or has a colon. 8 is an
    hour, beside 805 it is 8 minutes past midnight. To the minute, as spreadsheets' days are.

    Checked by: tests/data/values/test_clocks.py
    """
    parts = {cell for cell in cells if FRACTION.fullmatch(cell.strip())}
    if not any(NO_CLOCK.fullmatch(cell.strip()) for cell in parts) and not any(":" in cell for cell in cells):
        parts = set()
    bare = any(BARE.fullmatch(cell.strip()) for cell in cells)
    hours = {cell for cell in cells if HOUR.fullmatch(cell.strip())}
    as_hours = {cell: f"00:{int(cell):02d}" if bare else f"{int(cell):02d}:00" for cell in hours}
    return {cell: as_hours.get(cell) or (_as_clock(cell) if cell in parts else cell) for cell in cells}


def _as_clock(part: str) -> str:
    """Return a part of a day as a clock shows it; what rounds to the day's end is 24:00."""
    minutes = round(float(part.strip().replace(",", ".")) * DAY_MINUTES)
    return f"{minutes // 60:02d}:{minutes % 60:02d}"
