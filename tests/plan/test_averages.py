"""Wards known by averages only: from a monthly return, or from a census and a mean stay, and back from a plan file."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pandas as pd
import pytest

from bedplan import wording
from bedplan.data import read_census, read_monthly_return, read_records
from bedplan.errors import ImpossibleFigure
from bedplan.plan import SavedPlan, as_json, as_totals, from_census, from_json, from_return, from_saved_totals

if TYPE_CHECKING:
    from pathlib import Path


def test_a_monthly_return_makes_a_ward(demo_data: Path) -> None:
    """A ward has the load, beds and discharges of its return's last year, and says how it grew and what is assumed."""
    returned = read_monthly_return(demo_data / "monthly_return.csv")
    ward = from_return(returned, "Merlin")
    rows = returned.table[(returned.table["ward"] == "Merlin") & (returned.table["month"] >= "2024-04")]

    assert ward.beds == round(rows["available"].sum() / rows["days"].sum())
    assert ward.admissions_per_year == pytest.approx(rows["discharges"].sum() / rows["days"].sum() * 365)
    assert ward.demand.offered_load == pytest.approx(rows["occupied"].sum() / rows["days"].sum(), rel=0.02)
    assert any("averages only" in note for note in ward.notes)
    assert any("last 12 months" in note and "bed-days change by" in note for note in ward.notes)
    assert ward.growth_per_year == pytest.approx(returned.level("Merlin").bed_days_growth.per_year)


def test_a_season_survives_a_saved_plan(demo_data: Path) -> None:
    """A ward from a monthly return comes back from a plan file with its months, beds and origin."""
    ward = from_return(read_monthly_return(demo_data / "monthly_return.csv"), "Kestrel")
    saved = SavedPlan("", {}, {"Kestrel": as_totals(ward)})
    again = from_saved_totals("Kestrel", from_json(as_json(saved)).typed["Kestrel"])

    assert again.demand.month_factors == pytest.approx(ward.demand.month_factors)
    assert (again.beds, again.origin) == (ward.beds, ward.origin)
    assert again.demand.offered_load == pytest.approx(ward.demand.offered_load)


def test_a_return_without_beds_does_not_claim_any() -> None:
    """Beds that the return doesn't name start at the load, rounded up, and are said to be unknown, in a saved plan too."""
    rows = b"month,ward,occupied bed days,discharges\n2024-01,North,325,50\n"  # 10.48 beds in use
    ward = from_return(read_monthly_return(rows), "North")
    saved = from_json(as_json(SavedPlan("", {}, {"North": as_totals(ward)})))
    again = from_saved_totals("North", saved.typed["North"])

    assert ward.beds == again.beds == 11
    assert wording.BEDS_UNKNOWN in ward.notes
    assert wording.BEDS_UNKNOWN in again.notes


def test_a_census_and_a_mean_stay_make_a_ward(demo_data: Path) -> None:
    """The ward has the load its census shows for the last year, the stay that was typed, and beds as stated."""
    path = demo_data / "census.csv"
    census = read_census(path)
    ward = from_census(census, "Merlin", 2.5)
    rows = pd.read_csv(path)
    rows = rows[(rows["ward"] == "Merlin") & (rows["date"] >= "2024-04-01") & (rows["time"] == "00:00")]

    assert ward.demand.offered_load == pytest.approx(rows["beds_occupied"].mean(), rel=0.03)
    assert ward.demand.length_of_stay.mean_days == 2.5
    assert ward.admissions_per_year == pytest.approx(rows["beds_occupied"].mean() * 365 / 2.5, rel=0.01)
    assert ward.beds == round(rows["beds_available"].mean())
    assert any("mean stay that was typed" in note for note in ward.notes)


def test_a_wards_own_mean_stay_gives_its_admissions(demo_data: Path) -> None:
    """With the mean stay of the ward's stays, the census alone gives its yearly admissions within a tenth."""
    records = read_records(demo_data / "stays.csv")
    stays = records.of_ward("Kestrel")
    finished = stays[stays["end"].notna()]
    mean_stay = float((finished["end"] - finished["start"]).dt.total_seconds().mean()) / 86_400
    last_year = stays["start"] >= records.window[1] - pd.Timedelta(days=365)
    ward = from_census(read_census(demo_data / "census.csv"), "Kestrel", mean_stay)

    assert ward.admissions_per_year == pytest.approx(last_year.sum(), rel=0.1)


def test_the_swing_of_a_census_survives_a_saved_plan(demo_data: Path) -> None:
    """A ward from a census comes back with its swing, months and origin; an older plan without a swing has none."""
    ward = from_census(read_census(demo_data / "census.csv"), "Plover", 14.0)
    row = as_totals(ward)
    again = from_saved_totals("Plover", from_json(as_json(SavedPlan("", {}, {"Plover": row}))).typed["Plover"])
    older = {key: value for key, value in row.items() if key != "rate_variation"}
    without = from_saved_totals("Plover", from_json(as_json(SavedPlan("", {}, {"Plover": older}))).typed["Plover"])

    assert again.demand.rate_variation == pytest.approx(ward.demand.rate_variation)
    assert (again.demand.month_factors, again.origin) == (ward.demand.month_factors, ward.origin)
    assert without.demand.rate_variation == 0.0


def test_a_stay_of_no_length_is_refused(demo_data: Path) -> None:
    """A census with a mean stay of 0 is refused in a sentence."""
    with pytest.raises(ImpossibleFigure, match="more than 0 days"):
        from_census(read_census(demo_data / "census.csv"), "Plover", 0.0)
