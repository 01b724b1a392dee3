"""Monthly returns: averages, and nothing that averages can't hold."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pytest

from bedplan.data import read_monthly_return
from bedplan.data.returns import month_of
from bedplan.errors import ImpossibleFigure, UnreadableRecords

if TYPE_CHECKING:
    from pathlib import Path

RETURN = b"""month,ward,available_bed_days,occupied_bed_days,discharges
2024-01,Heron,310,248,62
2024-02,Heron,290,261,58
Total,,600,509,120
"""


def test_averages_worked_out_by_hand() -> None:
    """Ten beds over 60 days with 509 bed-days and 120 discharges."""
    figures = read_monthly_return(RETURN)

    assert figures.occupancy("Heron") == pytest.approx(509 / 600)
    assert figures.mean_stay_days("Heron") == pytest.approx(509 / 120)
    assert figures.turnover_interval_days("Heron") == pytest.approx((600 - 509) / 120)
    assert figures.throughput("Heron") == pytest.approx(120 / 10 / 60 * 365)
    assert (figures.report.rows_in, figures.report.used, figures.report.set_aside) == (3, 2, 1)


def test_stay_and_turnover_are_the_time_between_patients(demo_data: Path) -> None:
    """Mean stay + turnover interval = period ÷ throughput, for every ward of the demo (an identity)."""
    figures = read_monthly_return(demo_data / "monthly_return.csv")
    for ward in figures.wards:
        total = figures.mean_stay_days(ward) + figures.turnover_interval_days(ward)
        assert total == pytest.approx(365 / figures.throughput(ward))


def test_demand_from_averages_has_their_load(demo_data: Path) -> None:
    """The demand built from a return wants as many beds as were occupied, give or take the unequal months."""
    figures = read_monthly_return(demo_data / "monthly_return.csv")
    for ward in figures.wards:
        rows = figures.table[figures.table["ward"] == ward]
        assert figures.demand(ward).offered_load == pytest.approx(
            rows["occupied"].sum() / rows["days"].sum(), rel=0.005
        )
    assert figures.demand("Kestrel").month_factors[0] > 1.0


def test_a_return_says_what_it_cannot_tell() -> None:
    """How demand swings is not in it."""
    assert any("assumed" in note for note in read_monthly_return(RETURN).report.notes)


@pytest.mark.parametrize(
    ("text", "month"),
    [
        ("2024-04", (2024, 4)),
        ("2024/4", (2024, 4)),
        ("202404", (2024, 4)),
        ("2024-04-30", (2024, 4)),
        ("Apr 2024", (2024, 4)),
        ("April-24", (2024, 4)),
        ("30 April 2024", (2024, 4)),
        ("APR-2024", (2024, 4)),
        ("04/2024", (2024, 4)),
        ("30/04/2024", (2024, 4)),
        ("01/04/2024", (2024, 4)),
        ("04/30/2024", (2024, 4)),
        ("2024-13", None),
        ("Quarter 1", None),
        ("", None),
    ],
)
def test_months_in_many_spellings(text: str, month: tuple[int, int] | None) -> None:
    """A month is read, or it is said that it can't be."""
    assert month_of(text) == month


@pytest.mark.parametrize(
    "content",
    [b"month,ward\n2024-01,Heron\n", b"month,ward,occupied_bed_days,discharges\nsometime,Heron,200,50\n"],
)
def test_a_return_that_cannot_be_used_says_why(content: bytes) -> None:
    """One sentence names the file and what it lacks."""
    with pytest.raises(UnreadableRecords, match=r"return\.csv"):
        read_monthly_return(content, name="return.csv")


def test_a_ward_without_bed_days_has_no_demand() -> None:
    """No bed-days, no length of stay: the message says so."""
    figures = read_monthly_return(b"month,ward,occupied_bed_days,discharges\n2024-01,Heron,0,0\n")

    with pytest.raises(ImpossibleFigure):
        figures.demand("Heron")
