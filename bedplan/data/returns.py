"""Monthly returns: bed-days and discharges, from which averages follow and nothing else."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.columns import TELLTALES, without_formula
from bedplan.data.dates import MONTHS
from bedplan.data.headings import RETURN_HEADINGS
from bedplan.data.reading import read_table
from bedplan.data.report import SET_ASIDE, Finding, IntakeReport
from bedplan.data.source import FileLike, open_source
from bedplan.errors import UnreadableRecords
from bedplan.models import Demand, LengthOfStay

if TYPE_CHECKING:
    from bedplan.data.texttable import TextTable

MONTH_PATTERNS = (
    r"(?P<year>\d{4})[-/. ]?(?P<month>\d{1,2})(?!\d)",  # 2024-04, 2024-04-30
    r"(?:\d{1,2}[-/. ])?(?P<name>[a-z]{3})[a-z]*[-/., ']*(?P<year>\d{4}|\d{2})$",  # Apr 2024, 30 April 2024, April-24
    r"(?P<month>\d{1,2})[-/.](?P<year>\d{4})$",  # 04/2024
    r"(?:1[3-9]|2\d|3[01])[-/.](?P<month>\d{1,2})[-/.](?P<year>\d{4})$",  # 30/04/2024, the month's last day
    r"0?1[-/.](?P<month>\d{1,2})[-/.](?P<year>\d{4})$",  # 01/04/2024, the month's first day
    r"(?P<month>\d{1,2})[-/.](?:1[3-9]|2\d|3[01])[-/.](?P<year>\d{4})$",  # 04/30/2024
)
CANNOT = (
    "A return holds averages only: how far demand and stays swing is assumed, not measured.",
    "It counts nights at midnight: day stays and daytime peaks are not in it.",
)


@dataclass(frozen=True)
class MonthlyReturn:
    """Bed-days and discharges by month. ``table``: month, ward, available, occupied, discharges, days.

    Checked by: tests/data/test_returns.py
    """

    name: str
    table: pd.DataFrame
    wards: tuple[str, ...]
    report: IntakeReport
    cannot: tuple[str, ...] = CANNOT

    def _rows(self, ward: str) -> pd.DataFrame:
        """Return one ward's months."""
        rows = self.table[self.table["ward"] == ward]
        if rows.empty:
            raise UnreadableRecords([f"{self.name} has no month of “{ward}”; it lists {', '.join(self.wards[:12])}."])
        return rows

    def occupancy(self, ward: str) -> float:
        """Which share of available bed-days was occupied at midnight?"""
        rows = self._rows(ward)
        return float(rows["occupied"].sum() / rows["available"].sum()) if rows["available"].sum() > 0 else 0.0

    def mean_stay_days(self, ward: str) -> float:
        """How many nights does a patient stay? Occupied bed-days ÷ discharges."""
        rows = self._rows(ward)
        return float(rows["occupied"].sum() / max(rows["discharges"].sum(), 1))

    def turnover_interval_days(self, ward: str) -> float:
        """How long is a bed empty between patients? Below 0: more patients than bed-days, a sign of miscounted beds."""
        rows = self._rows(ward)
        return float((rows["available"].sum() - rows["occupied"].sum()) / max(rows["discharges"].sum(), 1))

    def throughput(self, ward: str) -> float:
        """How many patients does a bed take in a year?"""
        rows = self._rows(ward)
        beds = rows["available"].sum() / rows["days"].sum()
        return float(rows["discharges"].sum() / beds / rows["days"].sum() * 365) if beds > 0 else 0.0

    def demand(self, ward: str, variation: float = 1.0) -> Demand:
        """What is the ward asked for, as far as averages tell? Spread of stay and chance arrivals are assumed.

        Months have factors where each of the twelve is in the file.

        Raises:
            ImpossibleFigure: no bed-days or no discharges.
        """
        rows = self._rows(ward)
        daily = rows.groupby("month_number")[["discharges", "days"]].sum()
        rates = (daily["discharges"] / daily["days"]).to_numpy()
        whole = len(rates) == 12 and rates.mean() > 0
        return Demand(
            float(rates.mean() if whole else rows["discharges"].sum() / rows["days"].sum()),
            LengthOfStay(self.mean_stay_days(ward), variation),
            month_factors=tuple(rates / rates.mean()) if whole else (1.0,) * 12,
        )


def read_monthly_return(source: FileLike, *, name: str | None = None) -> MonthlyReturn:
    """How many bed-days and discharges did each ward have each month?

    Months are written 2024-04, Apr 2024, April-24 or as any date within the month.

    Raises:
        UnreadableRecords: no month, ward, occupied bed-days or discharges, or nothing that can be used.

    Checked by: tests/data/test_returns.py
    """
    file = open_source(source, name)
    text = read_table(file, RETURN_HEADINGS)
    missing = [key for key in ("month", "ward", "occupied", "discharges") if key not in text.columns]
    if missing:
        text.refuse_kinds(file.name, "a monthly return", *(kind for kind in TELLTALES if kind != "a monthly return"))
        columns = "month, ward, occupied bed-days and discharges"
        raise UnreadableRecords([f"{file.name} lacks {', '.join(missing)}: a monthly return has columns {columns}."])
    frame, bad = _frame(text)
    if bad.all():
        told = f"No row of {file.name} names a ward, a month, occupied bed-days and discharges"
        raise UnreadableRecords([f"{told}: write months as 2024-04 and figures as numbers."])
    table = frame[~bad].reset_index(drop=True)
    aside = int(bad.sum()) + text.misfits
    sentence = "A total, a footer, or a row whose month or figures can't be read"
    report = IntakeReport(
        rows_in=len(frame) + text.misfits,
        used=len(table),
        repaired=0,
        set_aside=aside,
        findings=(Finding(SET_ASIDE, sentence, aside, 0.0),) if aside else (),
        dropped_columns=text.dropped,
        notes=(*text.notes, *CANNOT),
    )
    return MonthlyReturn(file.name, table, tuple(sorted(set(table["ward"]))), report)


def _frame(text: TextTable) -> tuple[pd.DataFrame, np.ndarray]:
    """Return every row, and which can't be used."""
    months = [month_of(value) for value in text.strings("month")]
    figures = {key: _numbers(text.strings(key)) for key in ("available", "occupied", "discharges")}
    frame = pd.DataFrame(
        {
            "month": pd.PeriodIndex(
                [pd.Period(year=y, month=m, freq="M") for y, m in (one or (1970, 1) for one in months)]
            ),
            "ward": pd.Series([without_formula(value) for value in text.strings("ward")], dtype=object),
            **figures,
        }
    )
    frame["days"] = frame["month"].dt.days_in_month
    frame["month_number"] = frame["month"].dt.month
    bad = np.array([one is None for one in months]) | (frame["ward"] == "").to_numpy()
    bad |= np.isnan(figures["occupied"]) | np.isnan(figures["discharges"])
    frame[["available", "occupied", "discharges"]] = frame[["available", "occupied", "discharges"]].fillna(0.0)
    return frame, bad | frame["ward"].str.lower().str.startswith("total").to_numpy()


def month_of(text: str) -> tuple[int, int] | None:
    """Which year and month does this name? None where it names none.

    Checked by: tests/data/test_returns.py
    """
    word = text.strip().lower()
    for pattern in MONTH_PATTERNS:
        fits = re.match(pattern, word)
        if fits:
            parts = fits.groupdict()
            year, month = int(parts["year"]), parts.get("month")
            number = int(month) if month else MONTHS.index(parts["name"]) + 1 if parts["name"] in MONTHS else 0
            return (year + 2000 if year < 100 else year, number) if 1 <= number <= 12 else None
    return None


def _numbers(cells: list[str]) -> np.ndarray:
    """Return cells as figures of 0 or more, not-a-number where they hold none; thousands may carry commas or spaces."""
    series = pd.Series(cells, dtype=object).str.replace(r"[, \u00a0](?=\d{3}\b)", "", regex=True)
    numbers = pd.to_numeric(series, errors="coerce").to_numpy(dtype=float)
    return np.where(numbers >= 0, numbers, np.nan)
