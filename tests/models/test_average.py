"""The average formula as hospitals use it, and the no-chance curve that follows from it."""

from __future__ import annotations

import math

import pytest

from bedplan.errors import ImpossibleFigure
from bedplan.models import BookedList, Demand, LengthOfStay, average_beds, average_occupancy


def test_ten_thousand_admissions() -> None:
    """10,000 admissions of 5 days at 85 % need 161.2 beds, so 162."""
    # common practice, no source; 10,000 × 5 ÷ 365 ÷ 0.85 = 161.16
    assert average_beds(10_000, 5.0) == pytest.approx(161.2, abs=0.05)
    assert math.ceil(average_beds(10_000, 5.0, occupancy=0.85)) == 162


def test_full_beds_hold_the_bed_days() -> None:
    """At an occupancy of 1 the beds are the bed-days a year over 365; no admissions need no beds."""
    assert average_beds(3650, 2.5, occupancy=1.0) == pytest.approx(25.0, rel=1e-15)
    assert average_beds(0, 2.5) == 0.0


@pytest.mark.parametrize(
    ("admissions", "stay", "occupancy", "words"),
    [
        (-1, 5, 0.85, "-1 admissions"),
        (math.nan, 5, 0.85, "nan admissions"),
        (10, 0, 0.85, "mean stay of 0"),
        (10, math.inf, 0.85, "mean stay of inf"),
        (10, 5, 0.0, "occupancy of 0"),
        (10, 5, 85, "occupancy of 85"),
    ],
)
def test_impossible_figures(admissions: float, stay: float, occupancy: float, words: str) -> None:
    """A figure outside its meaning is refused in a sentence that quotes it."""
    with pytest.raises(ImpossibleFigure, match=words):
        average_beds(admissions, stay, occupancy)


def test_curve_without_chance() -> None:
    """Below the load the share turned away is what can't fit; from the load on nobody is, and the note says why not."""
    demand = Demand(5.0, LengthOfStay(4.0), booked=(BookedList((1,) * 7, LengthOfStay(2.0), attends=0.5),))
    curve = average_occupancy(demand, [0, 7, 14, 21, 42])

    assert demand.offered_load == pytest.approx(21.0)
    assert curve.when_full == "no chance"
    assert curve.turn_away_probability == pytest.approx([1.0, 2 / 3, 1 / 3, 0.0, 0.0], abs=1e-15)
    assert curve.occupancy == pytest.approx([0.0, 1.0, 1.0, 1.0, 0.5])
    assert (curve.by_month == curve.turn_away_probability).all()
    assert "leaves chance out" in curve.notes[0]


def test_beds_made_ready_count_in_the_line_and_not_in_the_formula() -> None:
    """Half a day's turnaround raises the line's load to 22.5 beds and not its patients; a note says what is left out."""
    curve = average_occupancy(Demand(5.0, LengthOfStay(4.0), turnaround_hours=12.0), [18, 30])

    assert curve.turn_away_probability == pytest.approx([0.2, 0.0], abs=1e-12)
    assert curve.occupancy == pytest.approx([5 * 4 * 0.8 / 18, 20 / 30])
    assert "too low for it" in curve.notes[1]


def test_nobody_wants_a_bed() -> None:
    """Where nobody comes nobody is turned away and every bed stays empty."""
    curve = average_occupancy(Demand(0.0, LengthOfStay(4.0)), [0, 3])
    assert curve.turn_away_probability.tolist() == [0.0, 0.0]
    assert curve.occupancy.tolist() == [0.0, 0.0]
