"""Next year's arrivals, against wards whose next year is known."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from bedplan.data import forecast_arrivals, read_records
from bedplan.data.arrivals import arrivals_of
from bedplan.data.projecting import steady_growth

MONTHS = np.array([1.24, 1.15, 1.02, 0.95, 0.92, 0.88, 0.86, 0.84, 0.92, 1.00, 1.06, 1.16])


def rates(per_day: float, growth: float, first: str, days: int) -> np.ndarray:
    """Return the true arrivals a day from a date on; growth counts from 1 January 2021."""
    calendar = pd.date_range(first, periods=days)
    years = ((calendar - pd.Timestamp("2021-01-01")) / pd.Timedelta(days=365.25)).to_numpy()
    return per_day * MONTHS[calendar.month - 1] * (1 + growth) ** years


def ward(per_day: float, growth: float, days: int, seed: int):  # noqa: ANN201
    """Return the records of a ward with that rhythm, from 1 January 2021."""
    rng = np.random.default_rng(seed)
    counts = rng.poisson(rates(per_day, growth, "2021-01-01", days))
    rows = []
    for day, count in zip(pd.date_range("2021-01-01", periods=days), counts, strict=True):
        for minute in rng.integers(0, 1_300, count):
            start = day + pd.Timedelta(minutes=int(minute))
            end = start + pd.Timedelta(minutes=90)
            rows.append(f"p{len(rows)},Heron,{start:%Y-%m-%d %H:%M},{end:%Y-%m-%d %H:%M}")
    return read_records("\n".join(["patient_key,ward,start,end", *rows]).encode())


@pytest.mark.parametrize("seed", range(4))
def test_next_year_lies_in_its_band(seed: int) -> None:
    """Three years with 4 % growth foresee the fourth: its months lie in the 95 % bands, give or take one."""
    forecast = forecast_arrivals(ward(6.0, 0.04, 1_096, seed), "Heron")
    truth = rates(6.0, 0.04, "2024-01-02", 365)
    place = pd.date_range("2024-01-02", periods=365)
    months = pd.Series(truth, index=place).groupby(place.to_period("M")).sum().to_numpy()
    table = forecast.months

    inside = (months >= table["low_95"]) & (months <= table["high_95"])
    assert inside.sum() >= len(table) - 1
    assert forecast.per_year[1] == pytest.approx(truth.sum(), rel=0.06)
    assert table["expected"].sum() == pytest.approx(forecast.per_year[1])
    assert table["days"].sum() == 365
    assert (table["low_95"] <= table["low_80"]).all()


def test_the_season_is_foreseen() -> None:
    """January is foreseen busier than August, by about their true ratio."""
    table = forecast_arrivals(ward(8.0, 0.0, 1_096, 9), "Heron").months
    daily = (table["expected"] / table["days"]).to_numpy()

    assert daily[0] / daily[7] == pytest.approx(1.24 / 0.84, rel=0.15)


def test_growth_that_chance_explains_is_not_promised() -> None:
    """Over many wards without growth, what is promised is closer to none than what was measured; true growth is kept."""
    measured, promised = [], []
    for seed in range(6):
        records = ward(1.5, 0.0, 1_096, 20 + seed)
        arrivals = arrivals_of(records, records.stays["start"])
        measured.append(arrivals.rhythm.growth_per_year)
        promised.append(steady_growth(arrivals))

    assert np.abs(promised).mean() < 0.6 * np.abs(measured).mean()
    records = ward(12.0, 0.10, 1_096, 30)
    assert steady_growth(arrivals_of(records, records.stays["start"])) == pytest.approx(0.10, abs=0.03)


def test_short_files_say_what_they_lack() -> None:
    """Under two years there are no past forecasts to learn from, and under a year no season."""
    forecast = forecast_arrivals(ward(5.0, 0.0, 200, 1), "Heron")

    assert forecast.past_error is None
    assert forecast.errors == {}
    assert any("too short" in note for note in forecast.notes)
    assert any("seasons" in note for note in forecast.notes)
    assert forecast.months["expected"].std() / forecast.months["expected"].mean() < 0.35


def test_the_model_is_held_against_the_same_days_last_year() -> None:
    """Both errors are told; with chance alone in last year's counts, the model is nearer."""
    forecast = forecast_arrivals(ward(4.0, 0.0, 1_461, 2), "Heron")

    assert forecast.errors["model"] < forecast.errors["last year"]
    assert forecast.past_error < 0.1
