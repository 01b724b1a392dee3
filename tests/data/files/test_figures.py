"""Figures in columns, as tables of several countries write them."""

from __future__ import annotations

import math

import pytest

from bedplan.data.files.figures import read_figures


@pytest.mark.parametrize(
    ("cells", "figures"),
    [
        (["1.234", "987"], [1234, 987]),
        (["1.234,5", "1.000"], [1234.5, 1000]),
        (["1,234.5", "1.125"], [1234.5, 1.125]),
        (["12,5", "1,250"], [12.5, 1.25]),
        (["1,250", "12"], [1250, 12]),
        (["733.125", "466"], [733.125, 466]),
        (["1.234.567", "1.000"], [1_234_567, 1000]),
        (["0.125", "3"], [0.125, 3]),
        (["1 234", "1'234"], [1234, 1234]),
        (["", "n/a"], [math.nan, math.nan]),
        (["-3", "1,23,4"], [math.nan, math.nan]),
        (["\u00b2", "1e400"], [math.nan, math.nan]),
    ],
)
def test_thousands_and_decimals_are_told_apart(cells: list[str], figures: list[float]) -> None:
    """By the other cells of the table; what is no figure is not one."""
    read, _ = read_figures({"beds": cells})

    assert read["beds"].tolist() == pytest.approx(figures, nan_ok=True)
