"""Cells left blank below the one that counts for them, in files beside the stays."""

from __future__ import annotations

import pytest

from bedplan.data import read_bed_requests, read_capacity, read_census, read_monthly_return, read_refusals


@pytest.mark.parametrize(
    "rows",
    [
        ["2024-01-01,Heron,20", ",Teal,9", "2024-01-02,Heron,21", ",Teal,8"],
        ["2024-01-01,Heron,20", "2024-01-02,,21", "2024-01-01,Teal,9", "2024-01-02,,8"],
    ],
)
def test_a_census_with_merged_cells(rows: list[str]) -> None:
    """A date written once for its wards, or a ward once for its dates, counts for the rows below, and a note says so."""
    census = read_census("\n".join(["date,ward,occupied", *rows, "Total,,58"]).encode())

    assert census.occupied("Heron").tolist() == [20, 21]
    assert census.occupied("Teal").tolist() == [9, 8]
    assert any("2 blank cells under" in note or "3 blank cells under" in note for note in census.report.notes)


def test_beds_of_a_ward_named_once() -> None:
    """Three periods of a ward whose name is written once are three periods."""
    rows = ["Heron,2023-04-01,2023-09-30,28", ",2023-10-01,2023-12-31,30", ",2024-01-01,2024-03-31,26"]
    beds = read_capacity("\n".join(["ward,from,to,staffed", *rows]).encode())

    assert beds.open_beds_by_day("Heron").value_counts().to_dict() == {28: 183, 30: 92, 26: 91}


def test_what_is_missing_here_and_there_stays_missing() -> None:
    """In a column that repeats its values a blank is a missing value: the row is set aside, not guessed."""
    rows = ["2024-01-01,Heron,no bed", "2024-01-01,Heron,no bed", "2024-01-02,,no bed", "2024-01-03,,no bed"]
    log = read_refusals("\n".join(["date,ward,reason", *rows]).encode())

    assert (log.report.used, log.report.set_aside) == (2, 2)


def test_lines_without_figures_are_not_filled() -> None:
    """A blank line or a footer is no refusal of the ward above it."""
    log = read_refusals(b"date,ward,reason\n2024-01-31,Heron,no bed\n,,\n,,\nEnd of report,,\n")

    assert log.report.used == 1


@pytest.mark.parametrize("months", [("1", "2"), ("January", "February"), ("Jan.", "Feb."), ("2024-01", "2024-02")])
def test_a_return_with_a_column_of_years(months: tuple[str, str]) -> None:
    """Year and month in two columns, years and months merged, are months all the same."""
    rows = [f"2024,{months[0]},Heron,744,190", ",,Teal,300,80", f",{months[1]},Heron,700,180", ",,Teal,310,85"]
    found = read_monthly_return("\n".join(["Year,Month,Ward,Occupied bed days,Discharges", *rows]).encode())

    assert [str(month) for month in found.table["month"]] == ["2024-01", "2024-02"] * 2
    assert found.mean_stay_days("Teal") == pytest.approx(610 / 165)


def test_minutes_of_waiting_are_hours() -> None:
    """A column of minutes is one of waits, too."""
    log = read_bed_requests(b"ward,requested,wait minutes\nHeron,2024-01-31 10:00,390\n")

    assert log.table["wait_hours"].tolist() == [6.5]


def test_a_number_with_the_word_beds() -> None:
    """28 beds are 28; about 28 is no number."""
    beds = read_capacity(b"ward,staffed\nHeron,28 beds\nTeal,20 Betten\nWren,about 28\n")

    assert [beds.beds_today(ward) for ward in beds.wards] == [28, 20]
