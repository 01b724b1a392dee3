"""A census where there are no ward stays: with a mean stay that somebody knows, it says what a monthly return says."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import pandas as pd

from bedplan.data.beside.returns import MonthlyReturn
from bedplan.errors import ImpossibleFigure

if TYPE_CHECKING:
    from collections.abc import Mapping

    from bedplan.data.beside.census import Census

CANNOT = (
    "A census holds no arrivals: they follow from the patients counted and the mean stay that was typed.",
    "It shows fixed times only: day stays, and peaks between the counts, are not in it, so the beds here may be too few.",
)
LEAST_OF_A_MONTH = 0.5  # of its days that must be counted; no source
MOST_RAISED = 2.0  # by which a variance is raised for the season that was fitted to it


def clock_of(census: Census) -> str:
    """At which time of day is this census read? The one counted most often, the earliest of several."""
    times = census.table["time"].dt.strftime("%H:%M").value_counts()
    return min(times.index[times == times.max()])


def return_of_census(census: Census, mean_stay_days: Mapping[str, float]) -> MonthlyReturn:
    """What would these wards' monthly return say, if patients stay so many days on average?

    Bed-days of a month are its mean count × its days; months with fewer than half of their days counted are left out.

    Raises:
        ImpossibleFigure: a mean stay of 0 or less.
        UnreadableRecords: a ward that the census doesn't count.

    Checked by: tests/data/beside/test_census_alone.py
    """
    for ward, days in mean_stay_days.items():
        if not (math.isfinite(days) and days > 0):
            raise ImpossibleFigure(f"A mean stay of {days:g} days on {ward} is not possible: type more than 0 days.")
    parts = [_months(census, ward, days) for ward, days in mean_stay_days.items()]
    table = pd.concat(parts, ignore_index=True)
    wards = tuple(sorted(set(table["ward"])))
    return MonthlyReturn(census.name, table, wards, census.report, cannot=CANNOT, unknown_wards=wards)


def _months(census: Census, ward: str, mean_stay_days: float) -> pd.DataFrame:
    """Return one ward's months as in ``MonthlyReturn.table``."""
    clock = clock_of(census)
    counts = census.occupied(ward, clock)
    rows = census.table[(census.table["ward"] == ward) & (census.table["time"].dt.strftime("%H:%M") == clock)]
    beds = pd.Series(rows["available"].clip(lower=0).to_numpy(), index=counts.index)
    months = counts.index.to_period("M")
    table = pd.DataFrame({"occupied": counts.groupby(months).mean(), "available": beds.groupby(months).mean()})
    table["days"] = table.index.days_in_month
    table = table[counts.groupby(months).size() >= LEAST_OF_A_MONTH * table["days"]]
    table[["occupied", "available"]] = table[["occupied", "available"]].mul(table["days"], axis=0)
    table["discharges"], table["ward"] = table["occupied"] / mean_stay_days, ward
    table["month_number"] = table.index.month
    return table.rename_axis("month").reset_index()


def swing_beyond_chance(census: Census, ward: str, mean_stay_days: float) -> float:
    """How far does the count swing beyond what chance gives? SD ÷ mean, 0 where it swings no more than by chance.

    Chance gives a variance as large as the mean. Season and growth are taken out first, and the variance is raised for
    what they took up of it: counts less than two mean stays apart hold much the same patients. A ward that was often
    full swings less than its demand does.

    Source: Greenwood & Yule 1920 (variance of a count whose mean varies).
    Checked by: tests/data/beside/test_census_alone.py
    """
    level = return_of_census(census, {ward: mean_stay_days}).level(ward)
    counts = census.occupied(ward, clock_of(census))
    growth = level.bed_days_growth.per_year if level.bed_days_growth else 0.0
    years = (counts.index - counts.index[-1]).days.to_numpy() / 365.25
    shape = pd.Series(level.month_factors, range(1, 13))[counts.index.month].to_numpy() * (1.0 + growth) ** years
    expected = shape * counts.mean() / shape.mean()
    mean, variance = float(counts.mean()), float(((counts.to_numpy() - expected) ** 2).mean())
    fitted = 1 + (len(set(level.month_factors)) > 1) * 11 + (level.bed_days_growth is not None)
    worth = len(counts) / max(2.0 * mean_stay_days, 1.0)
    raised = min(worth / (worth - fitted), MOST_RAISED) if worth > fitted else MOST_RAISED
    return math.sqrt(max(variance * raised - mean, 0.0)) / mean if mean > 0 else 0.0
