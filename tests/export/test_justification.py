"""What a justification says: the figures of its objects, nothing small that points at a person, nothing unsaid."""

from __future__ import annotations

import datetime as dt
import io
from dataclasses import replace
from typing import TYPE_CHECKING

import openpyxl
import pytest

from bedplan import wording
from bedplan.data import Check, adds_up, read_records
from bedplan.decision import TurnAwayLimit, Ward
from bedplan.errors import ImpossibleFigure
from bedplan.export import Justification, Source, as_html, as_xlsx, case_for
from bedplan.export.justification import count_or_withheld
from bedplan.models import LengthOfStay
from bedplan.plan import from_totals

if TYPE_CHECKING:
    from pathlib import Path


def test_decision_says_beds_limit_and_that_last_year_is_unchecked(justification: Justification) -> None:
    """The decision box asks for the beds the limit takes and says that last year was not checked yet."""
    first, last, *_ = justification.decision_lines()

    assert f"approve {justification.cases[0].decision.beds} staffed beds (today 20)" in first
    assert "every month within 5.0\u00a0% (1\u00a0in\u00a020) turned away" in first
    assert last == f"Curlew, check on last year: {wording.NOT_YET_CHECKED}"


def test_beds_that_nobody_stated_are_called_assumed(justification: Justification) -> None:
    """Where today's beds are not known, no line of the document claims them, nor what is spared against them."""
    case = justification.cases[0]
    unknown = replace(case, ward=replace(case.ward, notes=(wording.BEDS_UNKNOWN,)))
    paper = replace(justification, cases=(unknown,))

    assert "(today not known, 20 assumed)" in paper.decision_lines()[0]
    assert "instead of" not in paper.decision_lines()[0]
    assert dict(paper.reproducibility())["Settings, Curlew"].startswith("Staffed beds today: 20, assumed;")
    assert unknown.sentence().startswith("Curlew's staffed beds today are not known;")
    assert unknown.table()[0][""] == "Today, assumed"
    assert wording.BEDS_UNKNOWN in unknown.notes()


def test_wards_that_wait_are_not_said_to_turn_away(justification: Justification) -> None:
    """The line of a ward whose patients wait speaks of finding it full."""
    line = justification.decision_lines()[2]

    assert "finding the ward full" in line
    assert "turned away" not in line


def test_table_holds_the_curve(justification: Justification) -> None:
    """Each row of the table is the curve's own point at that bed count."""
    case = justification.cases[0]
    for row in case.table():
        point = case.curve.at(int(row["Staffed beds"]))

        assert row["As a share"] == wording.percent(point.turn_away_probability)
        assert row["Occupancy that results"] == wording.percent(point.occupancy, 0)


@pytest.mark.parametrize(("count", "shown"), [(0, "0"), (1, "*"), (7, "*"), (8, "8"), (1234, "1,234")])
def test_small_counts_are_withheld(count: int, shown: str) -> None:
    """Counts of 1 to 7 rows are withheld in documents."""
    assert count_or_withheld(count) == shown


def test_fingerprint_moves_with_any_figure(justification: Justification) -> None:
    """Another setting, limit or records file gives another fingerprint; another date does not."""
    case = justification.cases[0]
    other_setting = replace(justification, cases=(replace(case, settings=(("Demand", "+6 %"),)),))
    same = replace(justification, cases=(case,))

    assert other_setting.fingerprint() != same.fingerprint()
    assert replace(same, source=replace(same.source, fingerprint="cd" * 32)).fingerprint() != same.fingerprint()
    assert replace(same, prepared=dt.date(2030, 1, 1)).fingerprint() == same.fingerprint()


def test_typed_totals_say_so() -> None:
    """A justification from typed totals never pretends that a file was read."""
    assert "no file of ward stays was read" in Source("Totals typed by the planner").sentences()[0]


def test_needs_a_ward() -> None:
    """A justification of no ward is refused in a sentence."""
    with pytest.raises(ImpossibleFigure, match="no ward to justify"):
        Justification((), Source("x"), dt.date(2026, 1, 1))


def test_demo_source_balances(demo_data: Path) -> None:
    """The demo's rows in are its rows used, repaired and set aside, and the fingerprint is the file's SHA-256."""
    import hashlib  # noqa: PLC0415

    from bedplan.data import read_records  # noqa: PLC0415

    source = Source.from_records(read_records(demo_data / "stays.csv"))

    assert source.rows_in == source.used + source.repaired + source.set_aside
    assert source.fingerprint == hashlib.sha256((demo_data / "stays.csv").read_bytes()).hexdigest()
    assert source.window == "1 April 2022 to 31 March 2025"


def test_figures_that_add_up_are_in_the_document(demo_data: Path) -> None:
    """Every check is printed with its verdict, in the page and in the workbook; figures of a few patients are withheld."""
    records = read_records(demo_data / "stays.csv")
    checks = (*adds_up(records), Check("Odd patients", "3 against 4", "do not agree", points_at_few=True))
    source = Source.from_records(records, checks=checks)
    ward = from_totals("Annex", 1000.0, LengthOfStay(5.0), 14)
    paper = Justification(
        (case_for(Ward("Annex", 14, ward.demand), TurnAwayLimit(0.05)),), source, dt.date(2026, 12, 1)
    )
    page = as_html(paper).decode()
    book = openpyxl.load_workbook(io.BytesIO(as_xlsx(paper)))
    cells = list(book["Does it add up"].iter_rows(min_row=2, values_only=True))

    for check in checks[:-1]:
        assert f"<td>{check.what}</td><td>{check.figures}</td><td>{check.verdict}</td>" in page
        assert (check.what, check.figures, check.verdict) in cells
    assert "<td>Odd patients</td><td>*</td><td>do not agree</td>" in page
    assert ("Odd patients", "*", "do not agree") in cells
    assert "counts of 1 to 7 are withheld" in page
