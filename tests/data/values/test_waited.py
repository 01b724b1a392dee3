"""Hours of waiting, in the ways lists write them."""

from __future__ import annotations

import pytest

from bedplan.data.values.waited import hours_of


@pytest.mark.parametrize(
    ("cell", "hours"),
    [
        ("6.5", 6.5),
        ("6,5", 6.5),
        ("6:30", 6.5),
        ("06:30:00", 6.5),
        ("30:15", 30.25),
        ("6.5 h", 6.5),
        ("2 hrs", 2.0),
        ("390 min", 6.5),
        ("1 day, 2:30:00", 26.5),
        ("-1", -1.0),
        ("-1 day, 23:00:00", -1.0),
        ("", None),
        ("long", None),
        ("6:75", None),
        ("2024-01-01", None),
    ],
)
def test_hours_as_lists_write_them(cell: str, hours: float | None) -> None:
    """Decimals, clocks, minutes and spreadsheets' durations are hours; anything else is not known."""
    assert hours_of(cell) == (hours if hours is None else pytest.approx(hours))
