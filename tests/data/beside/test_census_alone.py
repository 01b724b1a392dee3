"""A census without stays: months add up by hand, and the swing of a simulated ward is found."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from bedplan.data import read_census
from bedplan.data.beside.census_alone import clock_of, return_of_census, swing_beyond_chance
from bedplan.errors import ImpossibleFigure, UnreadableRecords


def written(days: pd.DatetimeIndex, counts: np.ndarray, *, ward: str = "Alder", beds: int = 30) -> bytes:
    """Return a midnight census as a file."""
    table = pd.DataFrame({"date": days.strftime("%Y-%m-%d"), "ward": ward, "occupied": counts, "available": beds})
    return table.to_csv(index=False).encode()


def simulated(seed: int, drift: float, *, load: float = 40.0, stay: int = 3, days: int = 1_095) -> np.ndarray:
    """Return midnight counts of a ward that turns nobody away: geometric stays, a level that wanders every 60 days."""
    rng = np.random.default_rng(seed)
    run_in = 100
    levels = rng.gamma(drift**-2, drift**2, (days + run_in) // 60 + 1) if drift else np.ones((days + run_in) // 60 + 1)
    present, counts = 0, []
    for day in range(days + run_in):
        came = rng.poisson(load / stay * levels[day // 60])
        present = rng.binomial(present, 1.0 - 1.0 / stay) + came
        counts.append(present)
    return np.array(counts[run_in:])


def test_months_add_up_by_hand() -> None:
    """Bed-days are mean count × days of the month, discharges follow from the stay typed, a hardly counted month is out."""
    days = pd.date_range("2024-01-01", "2024-03-09")
    census = read_census(written(days, np.where(days.month == 1, 20, 24)), name="census.csv")
    found = return_of_census(census, {"Alder": 4.0})
    january, february = found.table.iloc[0], found.table.iloc[1]
    assert len(found.table) == 2  # 9 of 31 days of March
    assert (january["occupied"], january["discharges"], january["available"]) == (20 * 31, 20 * 31 / 4.0, 30 * 31)
    assert (february["occupied"], february["days"]) == (24 * 29, 29)
    assert found.mean_stay_days("Alder") == pytest.approx(4.0)
    assert found.demand("Alder").offered_load == pytest.approx((20 * 31 + 24 * 29) / 60)


def test_the_commonest_time_of_day_is_read() -> None:
    """Of several times a day the one counted most often is read."""
    rows = [f"2024-01-{day:02d} 08:00,Alder,{10 + day}" for day in range(1, 29)]
    rows += [f"2024-01-{day:02d} 00:00,Alder,{day}" for day in range(1, 20)]
    census = read_census("\n".join(["date,ward,occupied", *rows]).encode(), name="census.csv")
    assert clock_of(census) == "08:00"
    assert return_of_census(census, {"Alder": 2.0}).table["occupied"].sum() == pytest.approx(
        31 * np.mean(range(11, 39))
    )


@pytest.mark.parametrize("drift", [0.05, 0.12])
def test_the_swing_of_a_ward_is_found(drift: float) -> None:
    """Over thirty simulated wards the swing found is, on average, within a fifth of the wandering that was put in."""
    found = []
    for seed in range(30):
        counts = simulated(seed, drift)
        days = pd.date_range("2022-01-01", periods=len(counts))
        census = read_census(written(days, counts, beds=90), name="census.csv")
        found.append(swing_beyond_chance(census, "Alder", 3.0) ** 2)
    # a level that holds 60 days and a stay of 3 days: the load follows it all but the first days of each 60
    assert np.sqrt(np.mean(found)) == pytest.approx(drift, rel=0.2)


def test_a_steady_ward_swings_by_chance_only() -> None:
    """Where nothing but chance moves a ward, what is found is what the counts of three years can't tell from nothing."""
    found = []
    for seed in range(20):
        counts = simulated(seed, 0.0)
        census = read_census(written(pd.date_range("2022-01-01", periods=len(counts)), counts, beds=90), name="c.csv")
        found.append(swing_beyond_chance(census, "Alder", 3.0))
    # a variance from n independent counts is off by sqrt(2 / n) of itself, here with n = 1,095 days ÷ (2 × 3 days)
    one_error = np.sqrt(40.0 * np.sqrt(2 / (1_095 / 6))) / 40.0
    assert np.mean(np.array(found) > one_error) <= 0.35  # 16 in 100 by chance, drawn up by the season that is fitted
    assert max(found) < 2 * one_error


def test_what_is_wrong_is_said() -> None:
    """A stay of no length and a ward that isn't counted are refused in a sentence."""
    days = pd.date_range("2024-01-01", "2024-02-29")
    census = read_census(written(days, np.full(len(days), 20)), name="census.csv")
    with pytest.raises(ImpossibleFigure, match="mean stay of 0 days on Alder"):
        return_of_census(census, {"Alder": 0.0})
    with pytest.raises(UnreadableRecords, match="no count of ward “Birch”"):
        return_of_census(census, {"Birch": 3.0})
