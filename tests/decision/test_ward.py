"""A ward as decisions see it: its figures are checked, and it picks its model and its bed counts itself."""

from __future__ import annotations

import math

import numpy as np
import pytest

from bedplan.decision import BedChanges, Closure, Ward
from bedplan.errors import ImpossibleFigure
from bedplan.models import MODELS, BookedList, Demand, LengthOfStay

DEMAND = Demand(4.0, LengthOfStay(5.0))


@pytest.mark.parametrize(
    ("figures", "says"),
    [
        ({"beds": None}, "None beds"),
        ({"beds": "12"}, "'12' beds"),
        ({"beds": [12]}, r"\[12\] beds"),
        ({"name": None}, "name of None"),
        ({"demand": 4.0}, "demand of 4"),
        ({"admissions_per_year": "9"}, "'9' admissions"),
        ({"bed_changes": 3}, "Bed changes of 3"),
        ({"notes": 3}, "but 3 was given"),
        ({"when_full": ["leaves"]}, "not an answer"),
    ],
)
def test_what_is_no_figure_is_quoted(figures: dict[str, object], says: str) -> None:
    """Text, lists and nothing in a figure's place are refused in a sentence that quotes them."""
    with pytest.raises(ImpossibleFigure, match=says):
        Ward(**{"name": "Teal", "beds": 12, "demand": DEMAND, **figures})


@pytest.mark.parametrize("beds", [1.5, -1, 2_001, math.nan, math.inf])
def test_beds_are_whole_and_of_one_ward(beds: float) -> None:
    """Half a bed, fewer than none and more than 2,000 are refused with the figure quoted."""
    with pytest.raises(ImpossibleFigure, match=rf"^{beds:g} beds is not possible: give a whole number from 0 to 2,000"):
        Ward("Teal", beds, DEMAND)


@pytest.mark.parametrize("admissions", [-1.0, math.nan, math.inf])
def test_recorded_admissions_are_a_count(admissions: float) -> None:
    """Negative or endless admissions are refused."""
    with pytest.raises(ImpossibleFigure, match="admissions a year is not possible"):
        Ward("Teal", 12, DEMAND, admissions_per_year=admissions)


def test_patients_of_a_full_ward_leave_or_wait() -> None:
    """Each answer has its model, and anything else is refused."""
    assert Ward("Teal", 12, DEMAND).curve().when_full == "leaves"
    assert Ward("Teal", 12, DEMAND, when_full="waits").curve().when_full == "stays anyway"
    with pytest.raises(ImpossibleFigure, match="'vanishes' is not an answer"):
        Ward("Teal", 12, DEMAND, when_full="vanishes")


def test_an_unknown_model_is_named() -> None:
    """A model that isn't there is quoted beside those that are."""
    with pytest.raises(ImpossibleFigure, match="'magic' is not known: there are average_occupancy, "):
        Ward("Teal", 12, DEMAND).curve("magic")


@pytest.mark.parametrize("model", MODELS)
def test_a_ward_is_read_on_any_model_by_name(model: str) -> None:
    """A curve by another model covers the same bed counts, none to past today's."""
    curve = Ward("Teal", 40, DEMAND).curve(model)

    assert curve.model == model
    assert curve.beds[0] == 0
    assert curve.beds[-1] >= 45
    assert (np.diff(curve.beds) == 1).all()


@pytest.mark.parametrize(
    ("demand", "beds"),
    [
        (DEMAND, 12),
        (Demand(40.0, LengthOfStay(5.0), month_factors=[1.3, 1.2, 1.1] + [0.92] * 6 + [0.9, 1.0, 1.2]), 0),
        (Demand(4.0, LengthOfStay(5.0), clustering=2.0, rate_variation=0.1), 12),
        (Demand(40.0, LengthOfStay(0.5), turnaround_hours=24.0), 0),
        (Demand(0.0, LengthOfStay(5.0)), 0),
    ],
    ids=["plain", "winter", "clusters", "made ready", "nobody"],
)
def test_a_curve_reaches_past_every_usual_limit(demand: Demand, beds: int) -> None:
    """The largest count drawn turns fewer than 1 in 100 away in every month."""
    assert Ward("Teal", beds, demand).curve().by_month[:, -1].max() < 0.01


@pytest.mark.parametrize(
    ("admissions", "stay_days", "beds"),
    # 10,000 × 5 ÷ 365 ÷ 0.85 = 161.2, so 162; 3102.5 × 1 ÷ 365 ÷ 0.85 = 10 exactly
    [(10_000.0, 5.0, 162), (3_102.5, 1.0, 10), (1.0, 1.0, 1), (0.0, 5.0, 0)],
)
def test_the_average_formula_rounds_up_recorded_bed_days(admissions: float, stay_days: float, beds: int) -> None:
    """Recorded admissions × mean stay ÷ 365 ÷ 85 %, rounded up to whole beds (Farmer & Emami 1990)."""
    ward = Ward("Teal", 12, Demand(9.0, LengthOfStay(stay_days)), admissions_per_year=admissions)

    assert ward.average_formula_beds == beds


def test_the_average_formula_falls_back_on_arrivals() -> None:
    """Without recorded admissions the formula takes the demand's own, booked patients with their stays included."""
    booked = BookedList((1,) * 7, LengthOfStay(2.0))
    demand = Demand(4.0, LengthOfStay(5.0), booked=(booked,))

    # (4 × 5 + 1 × 2) ÷ 0.85 = 25.9
    assert Ward("Teal", 12, demand).average_formula_beds == 26
    assert Ward("Teal", 12, Demand(0.0, LengthOfStay(5.0))).average_formula_beds == 0


def test_closures_lengthen_the_curve() -> None:
    """Beds that may be out of use are added to the counts drawn, so that a limit can still be met."""
    plain = Ward("Teal", 12, DEMAND)
    closed = Ward("Teal", 12, DEMAND, bed_changes=BedChanges((Closure.expected(6, 4.0, 90.0),)))

    assert closed.bed_counts[-1] >= plain.bed_counts[-1] + 6
    assert closed.curve().beds.tolist() == closed.bed_counts.tolist()
