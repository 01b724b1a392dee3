"""How many patients will come next year: trend, season and weekday, with the width of past errors."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.arrivals import Arrivals, arrivals_of
from bedplan.data.projecting import as_of, expected_arrivals, steady_growth
from bedplan.data.stays import stays_in_window

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.data.records import Records

YEAR = 365
NORMAL = {80: 1.2816, 95: 1.9600}  # standard normal: the middle 80 % and 95 %


@dataclass(frozen=True)
class Forecast:
    """Arrivals of the year after the file's window.

    ``months``: start, days, expected, low_80, high_80, low_95, high_95, last_year (the same days a year before).
    ``per_year`` is (low, central, high), low and high the 80 % band of the whole year. ``change`` is the same as a
    share of the latest year. ``growth_per_year`` is what chance leaves of the measured growth. ``past_error``: SD ÷
    mean of past forecasts beyond chance, None where the file is too short to have any. ``errors``: mean absolute error
    of monthly totals of the past year as a share, "model" and "last year".

    Checked by: tests/data/test_forecasting.py
    """

    ward: str
    months: pd.DataFrame
    per_year: tuple[float, float, float]
    change: tuple[float, float, float]
    growth_per_year: float
    past_error: float | None
    errors: dict[str, float]
    method: str
    notes: tuple[str, ...]


def forecast_arrivals(records: Records, ward: str) -> Forecast:
    """How many patients will come to this ward in the year after its records, if it goes on as before?

    Level, growth, months and weekdays by one Poisson regression; the bands hold chance, drift, and what forecasts of
    the past year were off by (where there are two years or more), else what level and growth may be off by.

    Raises:
        UnreadableRecords: no stays on the ward.

    Checked by: tests/data/test_forecasting.py
    """
    arrivals = arrivals_of(records, stays_in_window(records, ward)["start"])
    ahead = pd.date_range(records.window[1], periods=YEAR, freq="D")
    expected = expected_arrivals(arrivals, ahead)
    past_error, errors = _past_errors(records, ward, arrivals)
    spread = _level_error(arrivals) if past_error is None else max(past_error, _level_error(arrivals))
    months = _months(ahead, expected, arrivals, spread)
    total = float(expected.sum())
    off = NORMAL[80] * math.sqrt(max(arrivals.swing.dispersion, 1.0) * total + (total * spread) ** 2)
    per_year = (max(total - off, 0.0), total, total + off)
    latest = max(arrivals.per_year, 1e-9)
    notes = ["It goes on as before: no new service, no new rule and no change among neighbours is foreseen."]
    if past_error is None:
        notes.append("The file is too short to look at past forecasts; the bands come from the file's own swing.")
    if not arrivals.rhythm.has_season:
        notes.append("Too few days to tell the seasons: every month is taken as average.")
    return Forecast(
        ward=ward,
        months=months,
        per_year=per_year,
        change=tuple(one / latest - 1.0 for one in per_year),
        growth_per_year=steady_growth(arrivals),
        past_error=past_error,
        errors=errors,
        method="Poisson regression on growth, month and weekday; growth drawn towards none by what chance explains.",
        notes=tuple(notes),
    )


def _level_error(arrivals: Arrivals) -> float:
    """Return what level and growth may be off by in a year's time, as a share."""
    growth = arrivals.rhythm.growth_error * math.sqrt(max(arrivals.swing.dispersion, 1.0))
    return math.hypot(max(arrivals.worth, 1.0) ** -0.5, growth, arrivals.swing.rate_variation or 0.0)


def _past_errors(records: Records, ward: str, arrivals: Arrivals) -> tuple[float | None, dict[str, float]]:
    """Forecast the file's last year from what was known before it; return the error beyond chance, and both methods'."""
    if records.days < 2 * YEAR:
        return None, {}
    known = as_of(records, records.window[1] - pd.Timedelta(days=YEAR))
    stays = known.of_ward(ward) if ward in known.by_ward else None
    if stays is None or stays.empty:
        return None, {}
    days = records.calendar[-YEAR:]
    expected = _by_month(days, expected_arrivals(arrivals_of(known, stays["start"]), days))
    came = _by_month(days, arrivals.counts[-YEAR:])
    before = _by_month(
        days, arrivals.counts[-YEAR - 364 : -364] if records.days >= YEAR + 364 else arrivals.counts[:YEAR]
    )
    relative = ((came - expected) ** 2 - came) / np.maximum(expected, 1.0) ** 2
    errors = {
        name: float(np.abs(came - one).sum() / max(came.sum(), 1.0))
        for name, one in (("model", expected), ("last year", before))
    }
    return math.sqrt(max(float(relative.mean()), 0.0)), errors


def _by_month(days: pd.DatetimeIndex, figures: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return totals of calendar months, in the order of the days."""
    place = (days.year - days[0].year).to_numpy() * 12 + days.month.to_numpy()
    return np.bincount(place - place[0], weights=figures)


def _months(ahead: pd.DatetimeIndex, expected: NDArray[np.float64], arrivals: Arrivals, spread: float) -> pd.DataFrame:
    """Return one row a calendar month, with its bands and the same days a year before."""
    totals = _by_month(ahead, expected)
    off = np.sqrt(max(arrivals.swing.clustering, 1.0) * totals + (totals * spread) ** 2)
    past = arrivals.counts[-364:] if arrivals.counts.size >= 364 else np.zeros(0)
    first = ahead[~ahead.to_period("M").duplicated()]
    frame = pd.DataFrame({"start": first, "days": _by_month(ahead, np.ones(YEAR)).astype(int), "expected": totals})
    for share, width in NORMAL.items():
        frame[f"low_{share}"] = np.maximum(totals - width * off, 0.0)
        frame[f"high_{share}"] = totals + width * off
    if past.size:
        frame["last_year"] = _by_month(ahead, np.append(past, past[:1]))
    return frame
