"""The level and the season of a monthly return: what its last 12 months say, and what is growth, not season."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.stats import t as student

from bedplan import wording

if TYPE_CHECKING:
    import pandas as pd
    from numpy.typing import NDArray

    Array = NDArray[np.float64]

YEAR_MONTHS = 12
LEAST_FOR_GROWTH = 24  # months: each of the twelve twice
ROUNDS, MOST = 60, 3.0  # a ward that grows or shrinks faster (in logs a year) opened or closed
NO_SEASON = (1.0,) * YEAR_MONTHS


@dataclass(frozen=True, slots=True)
class Growth:
    """By which share figures grow a year, net of the month of the year, with its 95 % interval."""

    per_year: float
    low: float
    high: float

    @property
    def told(self) -> str:
        """How is it written?"""
        low, high = (wording.signed_percent(bound) for bound in (self.low, self.high))
        return f"{wording.signed_percent(self.per_year)} a year ({low} to {high})"


@dataclass(frozen=True, slots=True)
class ReturnLevel:
    """What one ward's months say of a year like the last 12 of them.

    ``discharges_per_day`` in a mean month; ``mean_stay_days`` bed-days ÷ discharges; ``month_factors`` of discharges,
    January first, net of growth, all 1 where one of the twelve is missing; ``available_beds`` on average; growth of
    bed-days and of discharges over all months, None where they are too few to tell it from season.
    """

    discharges_per_day: float
    discharges_per_year: float
    mean_stay_days: float
    available_beds: float
    month_factors: tuple[float, ...]
    bed_days_growth: Growth | None
    discharges_growth: Growth | None
    months: int
    note: str


def level_of(rows: pd.DataFrame) -> ReturnLevel:
    """At which level does a ward stand, by its monthly figures? That of its last 12 months, its season that of all.

    ``rows``: one ward's months as in ``MonthlyReturn.table``. A trend over the years is taken out of the season, or a
    ward that grows would seem to have busy autumns.

    Checked by: tests/data/beside/test_return_level.py
    """
    rows = rows.sort_values("month")
    since = rows["month"].max() - YEAR_MONTHS
    last, before = rows[rows["month"] > since], rows[(rows["month"] > since - YEAR_MONTHS) & (rows["month"] <= since)]
    factors, grows = NO_SEASON, {"occupied": None, "discharges": None}
    if len(rows) >= LEAST_FOR_GROWTH:
        grows = {key: _net_of_season(rows, key)[1] for key in grows}
    if rows["month_number"].nunique() == YEAR_MONTHS and rows["discharges"].sum() > 0:
        factors = _net_of_season(rows, "discharges")[0] if grows["discharges"] else _shares_of_months(rows)
    days, discharges = float(last["days"].sum()), float(last["discharges"].sum())
    busy = float((last["days"] * np.asarray(factors)[last["month_number"] - 1]).sum())
    return ReturnLevel(
        discharges_per_day=discharges / (busy or days),
        discharges_per_year=discharges / days * 365.0,
        mean_stay_days=float(last["occupied"].sum()) / max(discharges, 1.0),
        available_beds=float(last["available"].sum()) / days,
        month_factors=factors,
        bed_days_growth=grows["occupied"],
        discharges_growth=grows["discharges"],
        months=len(rows),
        note=_note(rows, last, before, grows["occupied"]),
    )


def _shares_of_months(rows: pd.DataFrame) -> tuple[float, ...]:
    """Return how busy each month of the year is, where growth can't be told."""
    daily = rows.groupby("month_number")[["discharges", "days"]].sum()
    rates = (daily["discharges"] / daily["days"]).to_numpy()
    return tuple(rates / rates.mean())


def _net_of_season(rows: pd.DataFrame, key: str) -> tuple[tuple[float, ...], Growth | None]:
    """Return how busy each month of the year is net of growth, and growth net of it.

    A Poisson regression on the month of the year and on time, its error from how far months lie off it, as if each
    were off by itself: where good and bad months come in rows, the interval is too narrow.

    Source: Nelder & Wedderburn 1972.
    """
    figures, days = rows[key].to_numpy(dtype=float), rows["days"].to_numpy(dtype=float)
    month = rows["month_number"].to_numpy() - 1
    years = (rows["month"] - rows["month"].max()).map(lambda step: step.n).to_numpy() / YEAR_MONTHS
    growth = information = 0.0
    for _ in range(ROUNDS):
        weight = days * np.exp(growth * years)
        busy = _sums(month, figures) / np.maximum(_sums(month, weight), 1e-300)
        expected = weight * busy[month]
        middle = _sums(month, expected * years) / np.maximum(_sums(month, expected), 1e-300)
        information = float((expected * (years - middle[month]) ** 2).sum())
        step = float(years @ (figures - expected)) / information if information > 0 else 0.0
        growth += min(max(step, -0.5), 0.5)
        if abs(step) < 1e-10:
            break
    if information <= 0 or busy.mean() <= 0:
        return NO_SEASON, None
    freedom = len(rows) - YEAR_MONTHS - 1
    off = float(((figures - expected) ** 2 / np.maximum(expected, 1e-9)).sum()) / freedom
    reach = float(student.ppf(0.975, freedom)) * math.sqrt(off / information)
    return tuple(busy / busy.mean()), Growth(
        *(math.expm1(min(max(growth + side, -MOST), MOST)) for side in (0.0, -reach, reach))
    )


def _sums(month: NDArray[np.int64], figures: Array) -> Array:
    """Return the sum for each month of the year."""
    return np.bincount(month, weights=figures, minlength=YEAR_MONTHS)


def _note(rows: pd.DataFrame, last: pd.DataFrame, before: pd.DataFrame, growth: Growth | None) -> str:
    """Say which level is planned, and which way it may be off."""
    if rows["month_number"].nunique() < YEAR_MONTHS:
        missing = YEAR_MONTHS - rows["month_number"].nunique()
        return f"{missing} of the twelve months are missing from the return: if they are busier, the beds here are too few."
    if growth is None:
        return (
            f"Planned is the level of its last 12 months: {len(rows)} months are too few to tell growth from season "
            f"({LEAST_FOR_GROWTH} are needed)."
        )
    now, then = (float(part["occupied"].sum()) / max(float(part["days"].sum()), 1.0) for part in (last, before))
    change = f", {wording.signed_percent(now / then - 1.0)} against the 12 months before" if then > 0 else ""
    quiet = " If the last 12 were a quiet year, the beds here are too few." if now < then else ""
    return (
        f"Planned is the level of its last 12 months: {wording.beds_on_average(now)} in use{change}. Over all {len(rows)} "
        f"months, net of season, bed-days change by {growth.told}; growth from here on is yours to set.{quiet}"
    )
