"""Monthly returns: bed-days and discharges, from which averages follow and nothing else."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import pandas as pd

from bedplan.data.beside.linking import is_no_ward, names_in_stays, spelled_alike, without_stays
from bedplan.data.beside.return_level import level_of
from bedplan.data.cleaning.wardlinks import bare_name
from bedplan.data.files.columns import TELLTALES, plain
from bedplan.data.files.figures import read_figures
from bedplan.data.files.headings import RETURN_HEADINGS, lacking
from bedplan.data.files.reading import read_table
from bedplan.data.files.source import FileLike, open_source
from bedplan.data.values.accounting import account
from bedplan.data.values.bedunits import (
    BED_DAYS,
    BEDS,
    MOST_OCCUPANCY,
    unit_beside,
    unit_by_months,
    unit_by_stay,
)
from bedplan.data.values.merged import filled_from_above
from bedplan.data.values.months import QUARTER, month_of, months_apart, order_of_dates, with_year
from bedplan.errors import ImpossibleFigure, UnreadableRecords
from bedplan.models import Demand, LengthOfStay

if TYPE_CHECKING:
    from collections.abc import Mapping

    from bedplan.data.beside.return_level import ReturnLevel
    from bedplan.data.cleaning.records import Records
    from bedplan.data.files.report import IntakeReport
    from bedplan.data.files.texttable import TextTable

FIGURES = ("available", "occupied", "discharges")
HOURS_ONLY = 0.25  # days of a mean stay, below which figures are hardly bed-days; common practice, no source
LEAST_RATIO = 0.2  # of occupied to available figures, from which both are taken to be of one kind; no source
CANNOT = (
    "A return holds averages only: how far demand and stays swing is assumed, not measured.",
    "It counts nights at midnight: day stays and daytime peaks are not in it.",
)


@dataclass(frozen=True)
class MonthlyReturn:
    """Bed-days and discharges by month. ``table``: month, ward, available, occupied, discharges, days.

    ``unknown_wards``: those without ward stays, once :meth:`linked_to` was asked.

    Checked by: tests/data/beside/test_returns.py
    """

    name: str
    table: pd.DataFrame
    wards: tuple[str, ...]
    report: IntakeReport
    cannot: tuple[str, ...] = CANNOT
    unknown_wards: tuple[str, ...] = ()

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

        The level is that of its last 12 months; months have factors where each of the twelve is in the file.

        Raises:
            ImpossibleFigure: no bed-days or no discharges.
        """
        level = self.level(ward)
        stay = LengthOfStay(level.mean_stay_days, variation)
        return Demand(level.discharges_per_day, stay, month_factors=level.month_factors)

    def level(self, ward: str) -> ReturnLevel:
        """At which level does the ward stand, which months are busy, and how did it grow?"""
        return level_of(self._rows(ward))

    def linked_to(self, records: Records) -> MonthlyReturn:
        """What does this file say of the wards of these stays? Names as the stays have them, by the planner's word.

        Wards that became one have the sum of their figures; one ward written two ways counts once.
        """
        names = names_in_stays(self.wards, records)
        wards = tuple(sorted(set(names.values())))
        renamed = self.table.assign(ward=self.table["ward"].map(names), bare=self.table["ward"].map(bare_name))
        table = _by_month(renamed.drop_duplicates(["ward", "month", "bare"], keep="last").drop(columns="bare"))
        return replace(self, table=table, wards=wards, unknown_wards=without_stays(wards, records))


def read_monthly_return(
    source: FileLike,
    *,
    name: str | None = None,
    columns: Mapping[str, str] | None = None,
    date_order: str | None = None,
    months_a_row: int | None = None,
) -> MonthlyReturn:
    """How many bed-days and discharges did each ward have each month?

    Months are written 2024-04, Apr 2024, April-24 or as any date within the month. ``months_a_row``: how many months
    a row holds, up to the one it names; unless it is given, rows three months apart are taken as quarters.
    ``columns`` and ``date_order`` as in ``read_records``.

    Raises:
        UnreadableRecords: no month, ward, occupied bed-days or discharges, nothing that can be used, or dates whose order
            somebody must say (the question is in ``.question``).
        ImpossibleFigure: fewer than one month a row, or more than twelve.

    Checked by: tests/data/beside/test_returns.py
    """
    if months_a_row is not None and not 1 <= months_a_row <= 12:
        raise ImpossibleFigure(f"{months_a_row} months a row is not possible: a row holds 1 to 12 months.")
    file = open_source(source, name)
    text = read_table(file, RETURN_HEADINGS, columns)
    text = filled_from_above(text, "year", "month", "ward")
    missing = [either[0] for either in lacking("monthly return", text.columns)]
    if missing:
        text.refuse_kinds(file.name, "a monthly return", *(kind for kind in TELLTALES if kind != "a monthly return"))
        wanted = "month, ward, occupied bed-days and discharges"
        raise UnreadableRecords([f"{file.name} lacks {', '.join(missing)}: a monthly return has columns {wanted}."])
    frame, reason, notes = _frame(text, file.name, date_order)
    report = account(text, reason, file.name, "write months as 2024-04 and figures as 1234.5")
    kept = frame[reason == ""]
    months, said = _months_held(kept, text.headings["month"], months_a_row)
    kept, told = _in_bed_days(kept, _days_held(kept, months), text, file.name, set(columns or ()))
    report = replace(report, notes=(*report.notes, *notes, *said, *told, *CANNOT))
    table = _by_month(_spread(kept, months))
    return MonthlyReturn(file.name, table, tuple(sorted(set(table["ward"]))), report)


def _frame(text: TextTable, name: str, date_order: str | None) -> tuple[pd.DataFrame, pd.Series, list[str]]:
    """Return every row, why it can't be used ("" = it can), and what was decided about figures."""
    cells = [with_year(*pair) for pair in zip(text.strings("month"), text.strings("year"), strict=True)]
    order = order_of_dates(cells, name, date_order)
    months = [month_of(value, order) for value in cells]
    figures, notes = read_figures({key: text.strings(_written_as(key, text)) for key in FIGURES})
    wards = spelled_alike(text.strings("ward"))
    year_and_month = [one or (1970, 1) for one in months]
    frame = pd.DataFrame(
        {
            "month": pd.PeriodIndex([pd.Period(year=y, month=m, freq="M") for y, m in year_and_month], freq="M"),
            "ward": pd.Series(wards, dtype=object),
            **figures,
        }
    )
    reason = pd.Series("", index=frame.index, dtype=object)
    repeated = frame.duplicated(keep="first")
    reason[repeated] = "The same row twice"
    reason[frame[["occupied", "discharges"]].isna().any(axis=1)] = "A figure is missing or can't be read"
    reason[[one is None for one in months]] = "The month can't be read"
    reason[[is_no_ward(ward, text.headings["ward"]) for ward in wards]] = "No ward is named, or the row is a total"
    frame[list(FIGURES)] = frame[list(FIGURES)].fillna(0.0)
    doubled = int(frame[reason == ""].duplicated(["ward", "month"], keep=False).sum())
    if doubled:
        notes.append(f"{doubled:,} rows share their ward and month with another: their figures are added.")
    return frame, reason, notes


def _months_held(kept: pd.DataFrame, heading: str, said: int | None) -> tuple[tuple[int, ...], list[str]]:
    """Return which months a row holds, counted from the one it names, and a sentence about it."""
    apart = months_apart({(month.year, month.month) for month in kept["month"]})
    is_quarterly = "quarter" in plain(heading) or (apart == QUARTER and kept["month"].nunique() > 2)
    several = said or (QUARTER if is_quarterly else 1)
    if several > 1:
        begins = several == QUARTER and bool((kept["month"].dt.month % QUARTER == 1).all())  # January, April and so on
        told = "from the one it names on" if begins else "up to the one it names"
        sentence = f"Each row is taken to hold {several} months, {told}, spread evenly over them."
        return tuple(range(several) if begins else range(1 - several, 1)), [sentence]
    if said is None and apart >= QUARTER:
        told = (
            f"The rows are {apart} months apart, and each is taken to hold one month. If a row holds {apart}, the beds"
        )
        return (0,), [f"{told} in use are {apart} times too many here: say how many months a row holds."]
    return (0,), []


def _written_as(key: str, text: TextTable) -> str:
    """Return which column holds a figure: as bed-days, or as beds on average."""
    return key if key in text.columns or f"{key}_beds" not in text.columns else f"{key}_beds"


def _days_held(kept: pd.DataFrame, months: tuple[int, ...]) -> pd.Series:
    """Return how many days each row holds."""
    return sum((kept["month"] + step).dt.days_in_month for step in months)


def _in_bed_days(
    kept: pd.DataFrame, days: pd.Series, text: TextTable, name: str, said: set[str]
) -> tuple[pd.DataFrame, list[str]]:
    """Return the figures in bed-days, and how those were read that may be beds on average.

    Raises:
        UnreadableRecords: occupied beds may be either, and nobody said which.
    """
    notes, figures = [], kept
    for key in ("occupied", "available"):
        column = _written_as(key, text)
        is_sure = column in said or (column == key and "days" in plain(text.headings.get(key, "days")))
        written = BEDS if column != key else BED_DAYS
        unit = written if is_sure else _unit(key, kept, days, figures["occupied"])
        if unit is None and column != key:
            raise _which_unit(text.headings[column], name)
        if (unit or written) == BEDS:
            figures = figures.assign(**{key: kept[key] * days})
        if not is_sure and column in text.columns:
            meant = "beds on average" if (unit or written) == BEDS else "bed-days"
            why = "as the figures show" if unit else "which the figures leave open"
            notes.append(f"“{text.headings[column]}” is read as {meant}, {why}.")
    return figures, notes + _far_too_short(figures)


def _far_too_short(figures: pd.DataFrame) -> list[str]:
    """Say so where patients would stay for a few hours: bed-days are counted at midnight."""
    totals = figures.groupby("ward")[["occupied", "discharges"]].sum()
    short = totals[(totals["occupied"] > 0) & (totals["occupied"] < HOURS_ONLY * totals["discharges"])]
    if short.empty:
        return []
    ward, row = next(short.iterrows())
    stay = row["occupied"] / row["discharges"]
    told = f"Patients of {ward} would stay {stay:.2f} days by this return"
    return [
        f"{told}: if its figures are beds on average, not bed-days, name their column so, or demand is far too low."
    ]


def _unit(key: str, kept: pd.DataFrame, days: pd.Series, in_use: pd.Series) -> str | None:
    """Return what the figures of a column are by themselves, None where they don't tell; ``in_use`` is in bed-days."""
    if key == "available":
        return unit_beside(kept["available"], in_use) or BED_DAYS
    there = unit_by_months(kept["available"], days, kept["ward"])
    if there is not None and kept["occupied"].sum() > 0:
        ratio = kept["occupied"].sum() / kept["available"].sum()
        if LEAST_RATIO <= ratio <= MOST_OCCUPANCY:
            return there
    return unit_by_stay(kept["occupied"], days, kept["discharges"], kept["ward"])


def _which_unit(heading: str, name: str) -> UnreadableRecords:
    """Ask what a column holds."""
    told = f"“{heading}” in {name} may be beds occupied on average or bed-days of the whole month, and the figures don't tell"
    problem = UnreadableRecords([f"{told} which: say so where the columns are named, or write “occupied bed-days”."])
    problem.by_columns = True  # the page shows where
    return problem


def _spread(kept: pd.DataFrame, months: tuple[int, ...]) -> pd.DataFrame:
    """Return a row for each month that a row holds; its figures are spread over them by days."""
    parts = [kept.assign(month=kept["month"] + step) for step in months]
    days = [part["month"].dt.days_in_month for part in parts]
    figures, total = list(FIGURES), sum(days)
    shares = [part.assign(**part[figures].mul(one / total, axis=0)) for part, one in zip(parts, days, strict=True)]
    return pd.concat(shares, ignore_index=True)


def _by_month(rows: pd.DataFrame) -> pd.DataFrame:
    """Return one row a ward and month, figures added."""
    table = rows.groupby(["ward", "month"], sort=True)[list(FIGURES)].sum().reset_index()
    table["days"] = table["month"].dt.days_in_month
    table["month_number"] = table["month"].dt.month
    return table[["month", "ward", *FIGURES, "days", "month_number"]]
