"""Bed counts by date, as capacity files write them."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pandas as pd
import pytest

from bedplan.data import read_capacity
from bedplan.data.capacity import beds_in_text

if TYPE_CHECKING:
    from pathlib import Path

BEDS = b"""ward,from,to,funded_beds,staffed_beds,closed_beds,reason
Kestrel,2024-01-01,2024-01-10,28,28,0,
Kestrel,2024-01-11,2024-01-20,28,32,6,=outbreak
Kestrel,2024-01-21,,28,30,0,
Teal,2024-01-01,,12,12,0,
"""


def test_open_beds_are_staffed_and_not_closed() -> None:
    """Each day has the beds of its own period."""
    capacity = read_capacity(BEDS)
    days = pd.DatetimeIndex(["2024-01-10", "2024-01-11", "2024-01-20", "2024-01-21", "2026-01-01", "2023-01-01"])

    assert capacity.open_beds_by_day("Kestrel", days).tolist() == [28, 26, 26, 30, 30, 28]
    assert capacity.wards == ("Kestrel", "Teal")


def test_todays_beds_are_the_latest() -> None:
    """The last row says how many beds there are now."""
    capacity = read_capacity(BEDS)

    assert capacity.beds_today("Kestrel") == 30
    assert capacity.funded_today("Kestrel") == 28


def test_closures_are_listed_with_their_reason() -> None:
    """When, how many, why; and a reason is never a formula."""
    closures = read_capacity(BEDS).closures("Kestrel")

    assert closures["closed"].tolist() == [6]
    assert closures["reason"].tolist() == ["'=outbreak"]


@pytest.mark.parametrize(
    ("text", "beds"),
    [
        ("24", (24, 0)),
        ("24 (+2)", (24, 2)),
        ("24/2", (24, 2)),
        ("24+2", (24, 2)),
        ("24.0", (24, 0)),
        ("closed", (0, 0)),
        ("Closed", (0, 0)),
        ("n/a", None),
        ("", None),
        (None, None),
        ("many", None),
        ("-3", None),
    ],
)
def test_what_a_cell_can_say(text: str | None, beds: tuple[int, int] | None) -> None:
    """Core and extra beds in one cell are told apart; closed is none."""
    assert beds_in_text(text) == beds


def test_extra_beds_in_a_cell_are_staffed() -> None:
    """24 (+2) is 24 funded and 26 staffed beds."""
    capacity = read_capacity(b"ward,from,beds\nTeal,2024-01-01,24 (+2)\n")

    assert (capacity.funded_today("Teal"), capacity.beds_today("Teal")) == (24, 26)
    assert any("funded beds only" in note for note in capacity.notes)


def test_the_demo_hospitals_beds(demo_data: Path) -> None:
    """The winter bay and the four closures of the demo come out on the days they were written for."""
    capacity = read_capacity(demo_data / "capacity.csv")
    kestrel = capacity.open_beds_by_day("Kestrel")

    assert kestrel[pd.Timestamp("2024-01-25")] == 28 + 4 - 6
    assert kestrel[pd.Timestamp("2023-12-15")] == 28
    assert kestrel[pd.Timestamp("2023-12-16")] == 32
    assert capacity.open_beds_by_day("Plover")[pd.Timestamp("2024-02-13")] == 30 - 12
