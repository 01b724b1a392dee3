"""The justification as an Excel workbook with the same numbers, each as a number."""

from __future__ import annotations

import datetime as dt
from io import BytesIO
from typing import TYPE_CHECKING

import xlsxwriter

from bedplan import wording
from bedplan.export.justification import count_or_withheld

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from bedplan.export.justification import Justification, WardCase

Cell = str | int | float
NARROWEST, WIDEST = 10, 60  # columns, in characters
_FORBIDDEN = str.maketrans(dict.fromkeys("[]:*?/\\'", " "))


class _Book:
    """A workbook whose sheets are a heading and plain rows, set up to print."""

    def __init__(self, created: dt.date) -> None:
        self._bytes = BytesIO()
        options = {"in_memory": True, "strings_to_formulas": False, "strings_to_urls": False}
        self._book = xlsxwriter.Workbook(self._bytes, options)
        midnight = dt.datetime.combine(created, dt.time(), tzinfo=dt.UTC).replace(tzinfo=None)
        self._book.set_properties({"title": "Bed-count justification", "created": midnight})
        self._bold = self._book.add_format({"bold": True, "bottom": 1, "text_wrap": True, "valign": "top"})
        self._text = self._book.add_format({"text_wrap": True, "valign": "top"})
        self._share = self._book.add_format({"num_format": "0.00%", "valign": "top"})
        self._whole = self._book.add_format({"num_format": "#,##0", "valign": "top"})
        self._number = self._book.add_format({"num_format": "#,##0.0", "valign": "top"})
        self._names: set[str] = set()

    def sheet(
        self, name: str, heading: Sequence[str], rows: Iterable[Sequence[Cell]], shares: Sequence[int] = ()
    ) -> None:
        """Write one sheet; columns numbered in ``shares`` show percent."""
        sheet = self._book.add_worksheet(self._free_name(name))
        sheet.freeze_panes(1, 1)
        sheet.repeat_rows(0)
        sheet.set_paper(9)
        sheet.fit_to_pages(1, 0)
        lines = list(rows)
        for column, title in enumerate(heading):
            sheet.write_string(0, column, title, self._bold)
            sheet.set_column(column, column, _width(title, [line[column] for line in lines if len(line) > column]))
        for at, row in enumerate(lines, start=1):
            for column, cell in enumerate(row):
                self._write(sheet, at, column, cell, share=column in shares)

    def _write(self, sheet: xlsxwriter.worksheet.Worksheet, row: int, column: int, cell: Cell, *, share: bool) -> None:
        if isinstance(cell, str):
            sheet.write_string(row, column, cell, self._text)
        else:
            kind = self._share if share else self._whole if isinstance(cell, int) else self._number
            sheet.write_number(row, column, cell, kind)

    def _free_name(self, name: str) -> str:
        plain = name.translate(_FORBIDDEN).strip()[:28] or "Sheet"
        free, count = plain, 2
        while free.lower() in self._names:
            free, count = f"{plain} {count}", count + 1
        self._names.add(free.lower())
        return free

    def bytes(self) -> bytes:
        """Close the workbook and return it."""
        self._book.close()
        return self._bytes.getvalue()


def _width(title: str, cells: Iterable[Cell]) -> int:
    """Return a column's width in characters: that of its longest text, up to where lines wrap; no word of its title is cut."""
    texts = (len(cell) for cell in cells if isinstance(cell, str))
    return min(max(NARROWEST, *texts, *map(len, title.split())) + 2, WIDEST)


def as_xlsx(justification: Justification) -> bytes:
    """How does the justification read as a workbook? The same numbers as the document, as numbers.

    Checked by: tests/export/test_workbook.py
    """
    book = _Book(justification.prepared)
    book.sheet("Decision", ("Decision",), [(line,) for line in justification.decision_lines()])
    book.sheet("Wards", _WARDS, [_ward_row(case) for case in justification.cases], shares=(6, 7, 8, 9))
    for case in justification.cases:
        heading = ("Staffed beds", case.words[2], *(wording.LINES[name] for name in case.compared))
        book.sheet(f"Curve {case.ward.name}", heading, _curve_rows(case), shares=range(1, len(heading)))
        months = ("Staffed beds", *wording.MONTHS)
        rows = [(int(beds), *map(float, case.by_month[:, at])) for at, beds in enumerate(case.curve.beds)]
        book.sheet(f"Months {case.ward.name}", months, rows, shares=range(1, 13))
    assumptions = [(case.ward.name, *row) for case in justification.cases for row in case.assumptions]
    settings = [(case.ward.name, *row, "set by the planner") for case in justification.cases for row in case.settings]
    book.sheet("Assumptions", ("Ward", "Assumption", "Value", "From"), [*assumptions, *settings])
    _check_sheets(book, justification)
    _source_sheets(book, justification)
    return book.bytes()


_WARDS = (
    "Ward",
    "Staffed beds today",
    "Average formula",
    "By the limit",
    "What is counted",
    "A year, with today's beds (patients, or days over-full)",
    "As a share, today",
    "In the worst month, today",
    "As a share, by the limit",
    "Occupancy that results",
)


def _ward_row(case: WardCase) -> tuple[Cell, ...]:
    chosen = case.decision
    return (
        case.ward.name,
        case.ward.beds,
        case.ward.average_formula_beds,
        "out of reach" if chosen is None else chosen.beds,
        case.words[2],
        case.count_a_year(case.ward.beds),
        case.share_at(case.ward.beds),
        float(case.months_at(case.ward.beds).max()),
        "" if chosen is None else case.share_at(chosen.beds),
        "" if chosen is None else chosen.point.occupancy,
    )


def _curve_rows(case: WardCase) -> list[tuple[Cell, ...]]:
    columns = [case.over_year, *(case.curves[name].turn_away_probability for name in case.compared)]
    return [(int(beds), *(float(column[at]) for column in columns)) for at, beds in enumerate(case.curve.beds)]


def _check_sheets(book: _Book, justification: Justification) -> None:
    """Write what came of the check on last year, and how each width of band kept its promise."""
    cases = justification.cases
    rows = [
        (case.ward.name, *row)
        for case in cases
        for row in (("Verdict", case.checked, ""), *(() if case.check is None else case.check.figures))
    ]
    book.sheet("Check on last year", ("Ward", "What was checked", "Last year", "Held against"), rows)
    bands = [
        (case.ward.name, one.promised, one.held, one.low, one.high, one.outcome)
        for case in cases
        if case.check is not None
        for one in case.check.kept
    ]
    if bands:
        heading = ("Ward", "Days the band promised", "Days it held", "Allowing for chance, from", "to", "Promise")
        book.sheet("Bands kept", heading, bands, shares=range(1, 5))


def _source_sheets(book: _Book, justification: Justification) -> None:
    source = justification.source
    reasons = [
        (reason, "*", "*") if count_or_withheld(count) == "*" else (reason, count, float(bed_days))
        for reason, count, bed_days in source.reasons
    ]
    if source.withholds:
        reasons.append(("* counts of 1 to 7 are withheld.", "", ""))
    book.sheet(
        "Data", ("What was done, and why", "Rows", "Bed-days"), [*((line,) for line in source.sentences()), *reasons]
    )
    if source.checks:
        book.sheet("Does it add up", ("What must agree", "Figures", "Verdict"), source.checks)
    notes = [(case.ward.name, note) for case in justification.cases for note in case.notes()]
    book.sheet("Cautions", ("About", "Caution"), [*(("All wards", line) for line in wording.CAUTIONS), *notes])
    book.sheet("Same figures again", ("What", "Value"), justification.reproducibility())
