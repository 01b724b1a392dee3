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

    others = [name for name in case.curves if name != case.ward.model]  # whose own figure is the watched one here
    assert list(rows[0]) == ["Staffed beds", "Patients turned away", *(wording.LINES[name] for name in others)]
    assert [row[0] for row in rows[1:]] == case.curve.beds.tolist()
    assert [row[1] for row in rows[1:]] == pytest.approx(case.over_year.tolist(), abs=1e-12)
    for column, name in enumerate(others, start=2):
        shares = case.curves[name].turn_away_probability.tolist()
        assert [row[column] for row in rows[1:]] == pytest.approx(shares, abs=1e-12)


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


def test_columns_are_wide_enough(book: openpyxl.Workbook) -> None:
    """No word of a heading is cut, and a text that needs no second line gets none, up to 60 characters a line."""
    for sheet in book:
        for column in sheet.iter_cols():
            width = sheet.column_dimensions[column[0].column_letter].width
            texts = [cell.value for cell in column if isinstance(cell.value, str)]
            assert width >= max(len(word) for word in column[0].value.split())
            assert width >= min(60, max(map(len, texts[1:]), default=0))


def test_same_figures_same_bytes(justification: Justification) -> None:
    """The same justification gives the same workbook, byte for byte."""
    assert as_xlsx(justification) == as_xlsx(justification)
