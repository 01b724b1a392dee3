"""The workbook opens in another program, holds the same numbers as numbers, and no formula anyone typed."""

from __future__ import annotations

from io import BytesIO
from typing import TYPE_CHECKING

import openpyxl
import pytest

from bedplan import wording
from bedplan.export import as_xlsx

if TYPE_CHECKING:
    from bedplan.export import Justification


@pytest.fixture(scope="module")
def book(justification: Justification) -> openpyxl.Workbook:
    """Return the workbook as a second library reads it."""
    return openpyxl.load_workbook(BytesIO(as_xlsx(justification)))


def test_curve_sheet_is_the_curve(justification: Justification, book: openpyxl.Workbook) -> None:
    """The sheet of a ward's curve holds every bed count and each model's share, as numbers."""
    case = justification.cases[0]
    rows = list(book["Curve Curlew"].iter_rows(values_only=True))

    assert list(rows[0]) == ["Staffed beds", "Patients turned away", *(wording.LINES[name] for name in case.curves)]
    assert [row[0] for row in rows[1:]] == case.curve.beds.tolist()
    assert [row[1] for row in rows[1:]] == pytest.approx(case.over_year.tolist(), abs=1e-12)
    column = 2 + list(case.curves).index(case.ward.model)
    assert [row[column] for row in rows[1:]] == pytest.approx(case.curve.turn_away_probability.tolist(), abs=1e-12)


def test_no_cell_is_a_formula(book: openpyxl.Workbook) -> None:
    """A ward named like a formula stays a name."""
    cells = [cell for sheet in book for row in sheet.iter_rows() for cell in row]

    assert not [cell for cell in cells if cell.data_type == "f"]
    assert any(str(cell.value).startswith("=HYPERLINK") for cell in cells)


def test_decision_and_cautions_are_there(justification: Justification, book: openpyxl.Workbook) -> None:
    """The workbook says the same decision and the same cautions as the document."""
    decision = [row[0] for row in book["Decision"].iter_rows(min_row=2, values_only=True)]
    cautions = [row[1] for row in book["Cautions"].iter_rows(min_row=2, values_only=True)]

    assert decision == list(justification.decision_lines())
    assert set(wording.CAUTIONS) <= set(cautions)


def test_same_figures_same_bytes(justification: Justification) -> None:
    """The same justification gives the same workbook, byte for byte."""
    assert as_xlsx(justification) == as_xlsx(justification)
