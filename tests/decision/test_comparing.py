"""Wards side by side, by what the next bed spares; against shares worked out in exact fractions."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest

from bedplan.decision import TurnAwayLimit, Ward, compare_wards, patients_per_year, spared_by_next_bed
from bedplan.errors import ImpossibleFigure
from bedplan.models import Demand, LengthOfStay, erlang_loss
from tests.erlang_sum import exact_share

# name: (beds, arrivals a day, mean stay in days)
WARDS = {"Merlin": (8, 1.25, 4), "Curlew": (20, 3.75, 4), "Dunlin": (12, 2.5, 3), "Heron": (60, 2.0, 2)}


def exact_patients(name: str, more: int = 0) -> float:
    """Return patients a year turned away from one of the wards, with some beds more."""
    beds, arrivals, stay_days = WARDS[name]
    arrivals = Fraction(arrivals)
    return float(365 * arrivals * exact_share(arrivals * stay_days, beds + more))


def wards() -> list[Ward]:
    """Return the wards above, with steady demand."""
    return [Ward(name, beds, Demand(rate, LengthOfStay(stay))) for name, (beds, rate, stay) in WARDS.items()]


def test_rows_come_in_order_of_what_the_next_bed_spares() -> None:
    """Each row holds the exact patients a year, today and spared, and the largest gain comes first."""
    rows = compare_wards(wards(), TurnAwayLimit(0.05))
    spared = {name: exact_patients(name) - exact_patients(name, 1) for name in WARDS}

    assert [row.ward.name for row in rows] == sorted(WARDS, key=lambda name: -spared[name])
    for row in rows:
        assert row.patients_today == pytest.approx(exact_patients(row.ward.name), rel=1e-6, abs=1e-9)
        assert row.spared_by_next_bed == pytest.approx(spared[row.ward.name], rel=1e-6, abs=1e-9)
        assert row.today.beds == row.ward.beds


def test_each_row_carries_the_rule_and_the_average_formula() -> None:
    """A row holds the fewest beds for 5 % in every month and the average formula's beds."""
    for row in compare_wards(wards(), TurnAwayLimit(0.05)):
        beds, arrivals, stay_days = WARDS[row.ward.name]
        load = Fraction(arrivals) * stay_days
        assert exact_share(load, row.decision.beds) <= 0.05 < exact_share(load, row.decision.beds - 1)
        assert row.average_formula_beds == -(-load * 100 // 85)
        assert row.curve.at(beds).beds == beds


def test_a_ward_no_bed_count_helps_still_has_its_row() -> None:
    """Where no count meets the rule the row says so by holding no decision."""
    (row,) = compare_wards([Ward("Teal", 3, Demand(2.0, LengthOfStay(4.0)))], TurnAwayLimit(1e-12))

    assert row.decision is None
    assert row.patients_today > 0


def test_the_worst_month_is_read_at_todays_beds() -> None:
    """A row names the month in which most patients find no free bed today, and waiting wards are compared too."""
    winter = [1.0, 1.0, 1.5, 1.0, 1.0, 1.0, 0.5, 1.0, 1.0, 1.0, 1.0, 1.0]
    demand = Demand(4.0, LengthOfStay(3.0), month_factors=winter)
    rows = compare_wards([Ward("Teal", 12, demand), Ward("Heron", 12, demand, "waits")], TurnAwayLimit(0.05))

    assert {row.worst_month for row in rows} == {2}
    assert {row.curve.when_full for row in rows} == {"leaves", "stays anyway"}


def test_patients_a_year_are_daily_arrivals_times_365() -> None:
    """No beds turn everyone away: 2 a day is 730 a year; two beds at load 1 turn 1 in 5 away."""
    curve = erlang_loss(Demand(2.0, LengthOfStay(0.5)), [0, 1, 2])

    assert patients_per_year(curve, 0) == pytest.approx(730.0)
    # load 1 on 2 beds: (1/2) ÷ (1 + 1 + 1/2) = 1/5 (Erlang 1917)
    assert patients_per_year(curve, 2) == pytest.approx(146.0)
    assert spared_by_next_bed(curve, 1) == pytest.approx(365.0 - 146.0)


def test_the_next_bed_must_be_on_the_curve() -> None:
    """Nothing is guessed beyond the last count."""
    with pytest.raises(ImpossibleFigure, match="3 beds is not on this curve"):
        spared_by_next_bed(erlang_loss(Demand(2.0, LengthOfStay(0.5)), np.arange(3)), 2)
