"""A return's level is that of its last 12 months, and growth is not taken for season."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from scipy import optimize, stats

from bedplan.data import MonthlyReturn, read_monthly_return

SEASON = np.array([1.2, 1.15, 1.05, 1.0, 0.95, 0.9, 0.9, 0.85, 0.9, 1.0, 1.0, 1.1])


def made_return(months: int, growth: float, season: np.ndarray = SEASON, swing: float = 0.0) -> MonthlyReturn:
    """Return a ward of 5 patients a day and 4-day stays that grows each year; months swing by chance at will."""
    rows, rng = ["month,ward,available_bed_days,occupied_bed_days,discharges"], np.random.default_rng(1)
    for place, month in enumerate(pd.period_range("2020-01", periods=months, freq="M")):
        a_day = 5 * season[month.month - 1] * (1 + growth) ** (place / 12) * (1 + swing * rng.uniform(-1, 1))
        patients = a_day * month.days_in_month
        rows.append(f"{month},Alder,{month.days_in_month * (30 + place)},{4 * patients:.4f},{patients:.4f}")
    return read_monthly_return("\n".join(rows).encode(), months_a_row=1)


@pytest.mark.parametrize("growth", [0.08, -0.08, 0.0])
def test_growth_is_told_from_season(growth: float) -> None:
    """A ward that grows or shrinks by 8 % a year has the season it was given, and the level of its last 12 months."""
    level, demand = made_return(48, growth).level("Alder"), made_return(48, growth).demand("Alder")
    a_day = 5 * SEASON * (1 + growth) ** (np.arange(36, 48) / 12)
    days = pd.period_range("2023-01", periods=12, freq="M").days_in_month

    assert level.month_factors == pytest.approx(SEASON / SEASON.mean(), rel=1e-4)
    assert level.bed_days_growth.per_year == pytest.approx(growth, abs=1e-4)
    assert level.discharges_per_year == pytest.approx(a_day @ days, rel=1e-4)
    assert demand.offered_load == pytest.approx(4 * a_day @ days / 365, rel=0.005)  # months weigh the same in it
    assert level.available_beds == pytest.approx((30 + np.arange(36, 48)) @ days / 365)


def test_growth_and_its_interval_are_those_of_a_regression() -> None:
    """Against the likelihood of 12 months and a trend maximised by a general optimiser, its curvature taken by steps."""
    returned = made_return(40, 0.05, swing=0.1)
    found, rows = returned.level("Alder").discharges_growth, returned.table.sort_values("month")
    figures, days = rows["discharges"].to_numpy(), rows["days"].to_numpy()
    design = np.column_stack([np.eye(12)[rows["month_number"] - 1], np.arange(40) / 12])

    def expected(effects: np.ndarray) -> np.ndarray:
        return days * np.exp(design @ effects)

    def badness(effects: np.ndarray) -> float:
        return float((expected(effects) - figures * np.log(expected(effects))).sum())

    best = optimize.minimize(badness, np.full(13, 1.0), method="BFGS", options={"gtol": 1e-4}).x
    steps = [np.eye(13)[k] * 1e-3 for k in range(13)]
    slopes = np.array(
        [[badness(best + a + b) - badness(best + a - b) - badness(best - a + b) for b in steps] for a in steps]
    )
    curvature = (slopes + [[badness(best - a - b) for b in steps] for a in steps]) / 4e-6
    off = ((figures - expected(best)) ** 2 / expected(best)).sum() / (40 - 13)
    reach = stats.t.ppf(0.975, 40 - 13) * np.sqrt(off * np.linalg.inv(curvature)[12, 12])

    wanted = np.expm1([best[12], best[12] - reach, best[12] + reach])
    assert [found.per_year, found.low, found.high] == pytest.approx(wanted, abs=2e-4)


def test_the_note_says_how_the_ward_grows_and_which_way_it_may_be_off() -> None:
    """Growth has its size; a lower last year warns of too few beds; short returns and missing months are said."""
    assert "bed-days change by +8\u00a0% a year" in made_return(48, 0.08).level("Alder").note
    assert "too few" not in made_return(48, 0.08).level("Alder").note
    assert made_return(48, -0.08).level("Alder").note.endswith("quiet year, the beds here are too few.")
    assert "18 months are too few to tell growth" in made_return(18, 0.08).level("Alder").note
    assert "7 of the twelve months are missing" in made_return(5, 0.08).level("Alder").note


def test_two_years_are_needed_for_growth() -> None:
    """With 23 months the season is that of the months, and no growth is claimed."""
    level = made_return(23, 0.0).level("Alder")

    assert level.bed_days_growth is None
    assert level.month_factors == pytest.approx(SEASON / SEASON.mean(), rel=1e-4)


def test_a_ward_closed_each_august_has_no_august() -> None:
    """A month in which nobody ever came has the factor 0, and growth is told from the others."""
    closed = np.where(np.arange(12) == 7, 0.0, 1.0)
    level = made_return(36, 0.1, closed).level("Alder")

    assert level.month_factors == pytest.approx(closed * 12 / 11, abs=1e-4)
    assert level.discharges_growth.per_year == pytest.approx(0.1, abs=1e-4)
