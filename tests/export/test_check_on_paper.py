"""The check on last year in documents: verdict, figures, bands and their picture, and a plain word where a ward failed."""

from __future__ import annotations

from dataclasses import replace
from io import BytesIO
from typing import TYPE_CHECKING

import openpyxl
import pytest

from bedplan import wording
from bedplan.data import Backtest
from bedplan.errors import UnreadableRecords
from bedplan.export import Justification, as_html, as_xlsx, with_check

if TYPE_CHECKING:
    from bedplan.export import WardCase

LEVELS, HELD = (0.5, 0.8, 0.95), (0.41, 0.60, 0.83)


@pytest.fixture(scope="module")
def failed() -> Backtest:
    """Return the check of a ward whose bands were passed too often, mostly upwards."""
    return Backtest(
        "Curlew",
        checked=True,
        reading_hour=11,
        coverage_80=0.60,
        coverage_80_range=(0.50, 0.69),
        coverage_95=0.83,
        coverage_95_range=(0.75, 0.89),
        year_ahead_80=0.5,
        above_80=0.3,
        calibration=tuple(zip(LEVELS, HELD, strict=True)),
        calibration_ranges=((0.33, 0.49), (0.50, 0.69), (0.75, 0.89)),
        score=2.0,
        middle_error=2.8,
        same_week_error=4.0,
        average_formula_error=2.5,
        average_formula_beds=24,
        days_above_average_formula=100,
        methods=("trend, season and weekday regression",),
    )


@pytest.fixture(scope="module")
def paper(justification: Justification, failed: Backtest) -> Justification:
    """Return a justification of two wards: the first failed its check, the second has none."""
    first, second = justification.cases
    return replace(justification, cases=(with_check(first, lambda: failed), second))


def no_records() -> Backtest:
    """Stand for a check that can't be made."""
    raise UnreadableRecords(["Ward “Curlew” is not in stays.csv."])


def test_what_a_case_takes_from_its_check(justification: Justification, failed: Backtest) -> None:
    """A check made is kept with its verdict; one that can't be made leaves its reason, and nothing to draw."""
    case: WardCase = justification.cases[0]
    short = Backtest("Curlew", checked=False, reason="its records cover 500 days, and two years (730) are needed.")

    assert with_check(case, lambda: failed).check is failed
    assert with_check(case, lambda: failed).checked == failed.verdict
    assert with_check(case, lambda: short).check is None
    assert with_check(case, lambda: short).checked == short.verdict
    refused = with_check(case, no_records)
    assert refused.check is None
    assert refused.checked == f"{wording.NOT_YET_CHECKED} Ward “Curlew” is not in stays.csv."


def test_a_failed_ward_is_said_so_in_the_decision(paper: Justification) -> None:
    """The decision box says that the ward failed, what to do, and that its widest band failed too."""
    line = paper.decision_lines()[1]

    assert line.startswith("Curlew, check on last year: Failed: ")
    assert "plan this ward with more room" in line
    assert "the 95\u00a0% band held 83\u00a0%, fewer than promised" in line


def test_the_document_holds_the_check(paper: Justification, failed: Backtest) -> None:
    """Every figure of the check, its sentence, a row and a dot a band are in the document; the other ward says why not."""
    page = as_html(paper).decode()

    for what, figure, beside in failed.figures:
        assert f"<tr><td>{what}</td><td>{figure}</td><td>{beside}</td></tr>" in page
    assert f'<p class="lead">{failed.promise}</p>' in page
    for level, held in failed.calibration:
        assert f"<tr><td>{wording.percent(level)}</td><td>{wording.percent(held)}</td>" in page
    for note in failed.notes:
        assert note.replace("'", "&#x27;") in page
    assert page.count("<svg ") == 5
    assert f'aria-label="Curlew: {failed.promise}"' in page
    assert "fewer than promised</text>" in page
    assert page.count("<h3>Check on last year</h3>") == 2
    assert f"<h3>Check on last year</h3><p>{wording.NOT_YET_CHECKED}</p>" in page.replace("\n", "")


def test_the_workbook_holds_the_check(paper: Justification, failed: Backtest) -> None:
    """The workbook has the same verdict and figures, and the bands as numbers."""
    book = openpyxl.load_workbook(BytesIO(as_xlsx(paper)))
    rows = [
        tuple(cell or "" for cell in row) for row in book["Check on last year"].iter_rows(min_row=2, values_only=True)
    ]
    bands = list(book["Bands kept"].iter_rows(min_row=2, values_only=True))

    assert ("Curlew", "Verdict", failed.verdict, "") in rows
    assert [row[1:] for row in rows if row[0] == "Curlew"][1:] == list(failed.figures)
    assert rows[-1][2] == wording.NOT_YET_CHECKED
    assert [row[1:3] for row in bands] == [pytest.approx(pair) for pair in failed.calibration]
    assert [row[3:5] for row in bands] == [pytest.approx(pair) for pair in failed.calibration_ranges]
    assert [row[5] for row in bands] == ["fewer", "fewer", "fewer"]


def test_without_any_check_there_are_no_bands(justification: Justification) -> None:
    """A workbook of wards that could not be checked says so and has no empty sheet of bands."""
    book = openpyxl.load_workbook(BytesIO(as_xlsx(justification)))

    assert "Bands kept" not in book.sheetnames
    assert book["Check on last year"]["C2"].value == wording.NOT_YET_CHECKED


def test_the_fingerprint_moves_with_the_check(paper: Justification, failed: Backtest) -> None:
    """Another score or another share held is another document."""
    first, second = paper.cases
    for other in (
        replace(failed, middle_error=2.9),
        replace(
            failed, calibration=((0.5, 0.55), *failed.calibration[1:]), calibration_ranges=failed.calibration_ranges
        ),
    ):
        changed = replace(paper, cases=(with_check(first, lambda other=other: other), second))
        assert changed.fingerprint() != paper.fingerprint()
