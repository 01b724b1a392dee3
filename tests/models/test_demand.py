"""What a ward is asked for: figures are checked once, factors are brought to mean 1, the load adds up."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bedplan.errors import ImpossibleFigure
from bedplan.models import BookedList, Demand, LengthOfStay

STAY = LengthOfStay(4.0)
FLAT = {"month_factors": 12, "weekday_factors": 7, "hour_factors": 24}


def test_a_plain_ward_is_steady_and_neutral() -> None:
    """Without a word about rhythm, drift or booked lists there is none."""
    demand = Demand(3.0, STAY)

    assert demand.is_steady
    assert demand.offered_load == pytest.approx(12.0)
    assert demand.total_arrivals_per_day == 3.0
    assert (demand.clustering, demand.rate_variation, demand.turnaround_hours) == (1.0, 0.0, 0.0)
    assert (demand.booked, demand.discharge_hours, demand.weekend_slip) == ((), (), (0.0, 0.0))


def test_booked_patients_who_come_count_in_the_load() -> None:
    """Lists of 8, 7, 5, 1, 1 a week, 19 in 20 of whom come for 3.5 days: 22 × 0.95 ÷ 7 × 3.5 = 10.45 beds."""
    booked = BookedList((8, 7, 5, 1, 1, 0, 0), LengthOfStay(3.5), attends=0.95)
    demand = Demand(2.0, STAY, booked=(booked,))

    assert booked.arrivals_per_day == pytest.approx(22 * 0.95 / 7)
    assert booked.offered_load == pytest.approx(10.45)
    assert demand.offered_load == pytest.approx(18.45)
    assert demand.arrivals_per_day == 2.0
    assert demand.total_arrivals_per_day == pytest.approx(2.0 + 22 * 0.95 / 7)
    assert not demand.is_steady


@settings(max_examples=50)
@given(data=st.data())
def test_factors_near_mean_one_are_brought_to_it(data: st.DataObject) -> None:
    """Factors up to 5 % off keep their ratios and average exactly 1."""
    name = data.draw(st.sampled_from(sorted(FLAT)))
    raw = data.draw(st.lists(st.floats(0.1, 2.0), min_size=FLAT[name], max_size=FLAT[name]))
    drift = data.draw(st.floats(0.951, 1.049))
    mean = math.fsum(raw) / len(raw)
    given_factors = [one / mean * drift for one in raw]

    factors = getattr(Demand(1.0, STAY, **{name: given_factors}), name)

    assert math.fsum(factors) / len(factors) == pytest.approx(1.0, abs=1e-12)
    assert [one * drift for one in factors] == pytest.approx(given_factors, rel=1e-12)


@pytest.mark.parametrize("name", FLAT)
@pytest.mark.parametrize(
    ("spoil", "says"),
    [
        (lambda flat: flat[:-1], "need .* numbers, but"),
        (lambda flat: [1.06 * one for one in flat], r"average 1\.060: they must average 1, give or take 5 %"),
        (lambda flat: [0.94 * one for one in flat], r"average 0\.940"),
        (lambda flat: [-1.0, *flat[1:]], "factor of -1 among .* factors is not possible: each factor"),
        (lambda flat: [math.nan, *flat[1:]], "factor of nan among"),
    ],
    ids=["too few", "too high", "too low", "negative", "nan"],
)
def test_factors_that_mean_nothing_are_refused(name: str, spoil: object, says: str) -> None:
    """Factors of the wrong number, far from mean 1, negative or not a number are told apart."""
    with pytest.raises(ImpossibleFigure, match=says):
        Demand(1.0, STAY, **{name: spoil([1.0] * FLAT[name])})


@pytest.mark.parametrize(
    ("figure", "value", "allowed"),
    [
        ("arrivals_per_day", -0.1, "0 or more patients a day"),
        ("arrivals_per_day", math.nan, "0 or more patients a day"),
        ("arrivals_per_day", math.inf, "0 or more patients a day"),
        ("clustering", 0.0, "between 0.01 and 100"),
        ("clustering", 101.0, "between 0.01 and 100"),
        ("rate_variation", -0.01, "between 0 and 2"),
        ("rate_variation", 2.5, "between 0 and 2"),
        ("turnaround_hours", -1.0, "between 0 and 240 hours"),
        ("turnaround_hours", 241.0, "between 0 and 240 hours"),
        ("weekend_slip", (0.3, 1.2), "between 0 and 1"),
        ("weekend_slip", (0.3,), "two chances"),
        ("discharge_hours", (1.0,) * 23, "24 shares"),
        ("discharge_hours", (0.0,) * 24, "all 24 given are 0"),
        ("discharge_hours", (-1.0, *(1.0,) * 23), "0 or more"),
        ("discharge_hours", None, "24 shares of 0 or more.*None was given"),
        ("arrivals_per_day", "4", "arrival rate of '4' is not possible"),
        ("arrivals_per_day", None, "arrival rate of None"),
        ("arrivals_per_day", [4.0], r"arrival rate of \[4.0\]"),
        ("length_of_stay", 4.0, "length of stay of 4 is not possible"),
        ("month_factors", None, "need 12 numbers, but None"),
        ("hour_factors", "1" * 24, "need 24 numbers, but '1111"),
        ("weekday_factors", (1, 1, 1, 1, 1, 1, "1"), "factor of '1' among the weekday factors"),
        ("booked", 3, "tuple of BookedList, but 3"),
        ("booked", (LengthOfStay(1.0),), "tuple of BookedList, but LengthOfStay"),
        ("weekend_slip", None, "two chances, for Saturday and for Sunday, but None"),
    ],
)
def test_each_figure_says_what_is_allowed(figure: str, value: object, allowed: str) -> None:
    """A figure outside its meaning is refused in a sentence that says what it may be."""
    with pytest.raises(ImpossibleFigure, match=allowed):
        Demand(**{"arrivals_per_day": 1.0, "length_of_stay": STAY, figure: value})


def test_a_load_beyond_any_hospital_is_questioned() -> None:
    """20,000 beds wanted is the most; above it the arrivals or the stay are probably in another unit."""
    assert Demand(5_000.0, STAY).offered_load == 20_000.0
    with pytest.raises(ImpossibleFigure, match="20,004 beds wanted on average is more than"):
        Demand(5_001.0, STAY)


def test_discharge_hours_become_shares() -> None:
    """Discharge counts by hour are brought to shares that add up to 1."""
    hours = Demand(1.0, STAY, discharge_hours=(0.0,) * 12 + (3.0,) + (1.0,) + (0.0,) * 10).discharge_hours

    assert Demand(1.0, STAY, discharge_hours=np.array(hours)).discharge_hours == hours
    assert Demand(1.0, STAY, discharge_hours=[]).discharge_hours == ()
    assert hours[12:14] == (0.75, 0.25)
    assert math.fsum(hours) == 1.0


def test_a_copy_with_changes_is_checked_again() -> None:
    """Changing a figure gives a new demand with its own load, checked like the first; the old one stays."""
    first = Demand(3.0, STAY)
    second = first.with_changes(arrivals_per_day=6.0)

    assert (first.offered_load, second.offered_load) == (12.0, 24.0)
    with pytest.raises(ImpossibleFigure, match="-1"):
        first.with_changes(arrivals_per_day=-1.0)


@pytest.mark.parametrize("figure", FLAT)
def test_any_rhythm_ends_steadiness(figure: str) -> None:
    """A season, a weekly or a daily rhythm each make a demand unsteady."""
    rhythm = [1.0] * FLAT[figure]
    rhythm[0], rhythm[1] = 1.01, 0.99

    assert not Demand(1.0, STAY, **{figure: rhythm}).is_steady


@pytest.mark.parametrize(
    ("changes", "says"),
    [
        ({"per_weekday": (1,) * 6}, "7 weekday counts, Monday first, but 6"),
        ({"per_weekday": (1, 1, 1, 1, 1, -2, 0)}, "-2 booked patients"),
        ({"per_weekday": (1, 1, 1, 1, 1, 0.5, 0)}, "0.5 booked patients"),
        ({"per_weekday": (math.nan,) * 7}, "nan booked patients"),
        ({"hour": 24}, "Hour 24 is not possible: give a whole hour from 0 to 23"),
        ({"hour": 8.5}, "Hour 8.5 is not possible"),
        ({"attends": 1.1}, "between 0 and 1"),
        ({"attends": None}, "attending of None"),
        ({"hour": "9"}, "Hour '9' is not possible"),
        ({"per_weekday": None}, "7 weekday counts, Monday first, but None"),
        ({"per_weekday": ("1",) * 7}, "'1' booked patients"),
        ({"length_of_stay": 2.0}, "length of stay of 2"),
    ],
)
def test_a_booked_list_says_what_is_wrong(changes: dict[str, object], says: str) -> None:
    """Counts, hour and chance of attending are each checked and quoted."""
    with pytest.raises(ImpossibleFigure, match=says):
        BookedList(**{"per_weekday": (1,) * 7, "length_of_stay": STAY, **changes})


def test_a_booked_list_of_nobody_adds_nothing() -> None:
    """An empty list brings nobody and uses no beds."""
    nobody = BookedList((0,) * 7, STAY)

    assert (nobody.arrivals_per_day, nobody.offered_load) == (0.0, 0.0)
