"""What each whole year of the records held: admissions and beds in use, to set beside the years ahead."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import pandas as pd

from bedplan.data.ahead.readings import take_readings

if TYPE_CHECKING:
    from bedplan.data.cleaning.records import Records

YEAR_DAYS = 365
FEWEST_DAYS = 180  # counted in a year, or it is left out


@dataclass(frozen=True, slots=True)
class PastYear:
    """One year of the records: its first day, admissions brought to 365 days, and beds in use on average."""

    first_day: pd.Timestamp
    admissions: float
    beds_in_use: float


def past_years(records: Records, ward: str) -> tuple[PastYear, ...]:
    """How many came in each year of the records, and how many beds did they use? Counted back from the end, oldest first.

    Read once a day as the forecast is, so that the two join. Excluded days, and those in which the ward was closed or
    missing from the file, are left out of a year's mean; a year with too few days left, or that began before all who were in are known, is not shown.

    Raises:
        UnreadableRecords: the file has no such ward.

    Checked by: tests/data/ahead/test_past_years.py
    """
    readings = take_readings(records, ward)
    counted, present = readings.arrivals.counted, readings.present()
    years = []
    for begin in range(records.days - YEAR_DAYS, records.warm_up_days - 1, -YEAR_DAYS):
        year = slice(begin, begin + YEAR_DAYS)
        if int(counted[year].sum()) >= FEWEST_DAYS:
            came = float(readings.arrivals.counts[year][counted[year]].mean()) * YEAR_DAYS
            first = records.window[0] + pd.Timedelta(days=begin)
            years.append(PastYear(first, came, float(present[year][counted[year]].mean())))
    return tuple(reversed(years))
