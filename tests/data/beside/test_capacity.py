"""Bed counts by date, as capacity files write them."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pandas as pd
import pytest

from bedplan.data import IntakeChoices, read_capacity, read_records
from bedplan.data.beside.capacity import beds_in_text
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from pathlib import Path

BEDS = b"""ward,from,to,funded_beds,staffed_beds,closed_beds,reason
Kestrel,2024-01-01,2024-01-10,28,28,0,
Kestrel,2024-01-11,2024-01-20,28,32,6,=outbreak
Kestrel,2024-01-21,,28,30,0,
Teal,2024-01-01,,12,12,0,
"""


def test_open_beds_are_staffed_and_not_closed() -> None:
    """Each day has the beds of its own period."""
    capacity = read_capacity(BEDS)
    days = pd.DatetimeIndex(["2024-01-10", "2024-01-11", "2024-01-20", "2024-01-21", "2026-01-01", "2023-01-01"])

    assert capacity.open_beds_by_day("Kestrel", days).tolist() == [28, 26, 26, 30, 30, 28]
    assert capacity.wards == ("Kestrel", "Teal")


def test_todays_beds_are_the_latest() -> None:
    """The last row says how many beds there are now."""
    capacity = read_capacity(BEDS)

    assert capacity.beds_today("Kestrel") == 30
    assert capacity.funded_today("Kestrel") == 28


def test_closures_are_listed_with_their_reason() -> None:
    """When, how many, why; and a reason is never a formula."""
    closures = read_capacity(BEDS).closures("Kestrel")

    assert closures["closed"].tolist() == [6]
    assert closures["reason"].tolist() == ["'=outbreak"]


@pytest.mark.parametrize(
    ("text", "beds"),
    [
        ("24", (24, 0)),
        ("24 (+2)", (24, 2)),
        ("24/2", (24, 2)),
        ("24+2", (24, 2)),
        ("20 (+12)", (20, 12)),
        ("20/24", None),
        ("20 (24)", None),
        ("24/20", None),
        ("²", None),
        ("24.0", (24, 0)),
        ("closed", (0, 0)),
        ("Closed", (0, 0)),
        ("n/a", None),
        ("", None),
        (None, None),
        ("many", None),
        ("-3", None),
    ],
)
def test_what_a_cell_can_say(text: str | None, beds: tuple[int, int] | None) -> None:
    """Core and extra beds in one cell are told apart; closed is none."""
    assert beds_in_text(text) == beds


def test_extra_beds_in_a_cell_are_staffed() -> None:
    """24 (+2) is 24 funded and 26 staffed beds."""
    capacity = read_capacity(b"ward,from,beds\nTeal,2024-01-01,24 (+2)\n")

    assert (capacity.funded_today("Teal"), capacity.beds_today("Teal")) == (24, 26)
    assert any("funded beds only" in note for note in capacity.notes)


def test_the_demo_hospitals_beds(demo_data: Path) -> None:
    """The winter bay and the four closures of the demo come out on the days they were written for."""
    capacity = read_capacity(demo_data / "capacity.csv")
    kestrel = capacity.open_beds_by_day("Kestrel")

    assert kestrel[pd.Timestamp("2024-01-25")] == 28 + 4 - 6
    assert kestrel[pd.Timestamp("2023-12-15")] == 28
    assert kestrel[pd.Timestamp("2023-12-16")] == 32
    assert capacity.open_beds_by_day("Plover")[pd.Timestamp("2024-02-13")] == 30 - 12


def day(text: str) -> pd.DatetimeIndex:
    """Return one day as an index."""
    return pd.DatetimeIndex([text])


def test_american_dates_are_read_as_such_or_asked_for() -> None:
    """12/16 shows that months come first; where nothing shows it, the file asks, with both readings."""
    american = b"ward,from,staffed_beds\nTeal,03/04/2023,12\nTeal,12/16/2023,14\n"
    capacity = read_capacity(american)
    assert capacity.open_beds_by_day("Teal", pd.date_range("2023-03-04", "2023-04-03")).tolist() == [12] * 31
    assert capacity.table["from"].tolist() == [pd.Timestamp("2023-03-04"), pd.Timestamp("2023-12-16")]

    open_order = b"ward,from,staffed_beds\nTeal,03/04/2023,12\n"
    with pytest.raises(UnreadableRecords) as problem:
        read_capacity(open_order)
    assert problem.value.question.examples == (("03/04/2023", "03 April 2023", "04 March 2023"),)
    for order, first in (("day first", "2023-04-03"), ("month first", "2023-03-04")):
        assert read_capacity(open_order, date_order=order).table["from"].tolist() == [pd.Timestamp(first)]


@pytest.mark.parametrize("cell", ["20/24", "20 (24)"])
def test_a_cell_that_can_be_read_two_ways_is_asked_for(cell: str) -> None:
    """20/24 may be 20 of 24 beds or 44: nobody guesses."""
    with pytest.raises(UnreadableRecords, match=r"row 1 of beds\.csv is no number of staffed beds: write one number"):
        read_capacity(f"ward,from,staffed_beds\nTeal,2024-01-01,{cell}\n".encode(), name="beds.csv")


def test_every_row_is_accounted_for() -> None:
    """Totals, blank counts, repeated rows, periods that end before they start: counted, each with its reason."""
    rows = (
        "Teal,2024-01-01,2024-06-30,12",
        "Teal,2024-01-01,2024-06-30,12",
        "Heron,2024-01-01,2024-06-30,n/a",
        "Merlin,2024-06-30,2024-01-01,8",
        ",2024-01-01,2024-06-30,8",
        "Total,2024-01-01,2024-06-30,20",
        "Teal,2024-07-01",
    )
    capacity = read_capacity("\n".join(["ward,from,to,staffed_beds", *rows]).encode())

    assert capacity.wards == ("Teal",)
    assert (capacity.report.rows_in, capacity.report.used, capacity.report.set_aside) == (7, 1, 6)
    assert dict(capacity.report.reasons) == {
        "No ward is named, or the row is a total": 2,
        "The same row twice": 1,
        "No number of beds is named": 1,
        "The period ends before it starts": 1,
        "A title, total or footer, or a line with another number of cells": 1,
    }


def test_a_ward_whose_name_begins_like_a_total_is_a_ward() -> None:
    """Summerfield and Paget are wards, not sums and pages."""
    assert read_capacity(b"ward,beds\nSummerfield,12\nPaget,8\nSum,20\nPage 1,20\n").wards == ("Paget", "Summerfield")


@pytest.mark.parametrize("cell", ["n/a", "", "-"])
def test_funded_beds_may_be_unknown(cell: str) -> None:
    """Where only the staffed beds of a row are known they stand for the funded ones, and a note says so."""
    capacity = read_capacity(f"ward,from,funded_beds,staffed_beds\nTeal,2024-01-01,{cell},20\n".encode())

    assert (capacity.funded_today("Teal"), capacity.beds_today("Teal")) == (20, 20)
    assert any("1 row names no funded beds" in note for note in capacity.notes)


def test_a_closure_within_a_longer_period_ends() -> None:
    """Of periods that overlap the later one counts, on its own days only; the note names the ward."""
    capacity = read_capacity(
        b"ward,from,to,staffed,closed\nTeal,2024-01-01,,28,0\nTeal,2024-02-01,2024-02-10,28,6\nHeron,2024-01-01,,9,0\n"
    )

    assert capacity.open_beds_by_day("Teal", pd.date_range("2024-01-31", periods=12)).tolist() == [28, *[22] * 10, 28]
    assert any("Periods overlap on Teal:" in note for note in capacity.notes)


def test_more_closed_than_staffed_is_no_bed_and_told() -> None:
    """Beds in use can't be fewer than none."""
    capacity = read_capacity(b"ward,from,staffed,closed\nTeal,2024-01-01,4,6\n")

    assert capacity.open_beds_by_day("Teal", day("2024-01-01")).tolist() == [0]
    assert any("more closed beds than staffed ones" in note for note in capacity.notes)


STAYS = b"patient_key,ward,start,end\na,W,2024-01-01 10:00,2024-01-04 10:00\nb,Teal,2024-01-01 10:00,2024-01-04 10:00\n"


def test_wards_are_matched_to_the_stays_whatever_the_capitals() -> None:
    """A lower-case name with a blank after it is the same ward; what matches nothing is named."""
    capacity = read_capacity(b"ward,from,beds\nw ,2024-01-01,20\nOwl,2024-01-01,7\n").linked_to(read_records(STAYS))

    assert capacity.beds_today("W") == 20
    assert capacity.unknown_wards == ("Owl",)


def test_a_renamed_ward_keeps_the_beds_of_its_old_name() -> None:
    """What the planner said of the stays' names holds for the beds too, one period after the other."""
    records = read_records(STAYS, choices=IntakeChoices(ward_names={"Ward 7": "W"}))
    capacity = read_capacity(
        b"ward,from,to,beds\nWard 7,2024-01-01,2024-01-31,20\nW,2024-02-01,2024-02-28,24\n"
    ).linked_to(records)

    assert capacity.open_beds_by_day("W", pd.date_range("2024-01-31", periods=2)).tolist() == [20, 24]
    assert capacity.wards == ("W",)


def test_merged_wards_have_the_beds_of_both() -> None:
    """Two wards side by side became one: before, it had 10 and 12 beds, after the first closed 12, then 22."""
    records = read_records(STAYS, choices=IntakeChoices(ward_names={"Ash": "W", "Oak": "W"}))
    rows = "Ash,2024-01-01,2024-01-31,10\nOak,2024-01-01,2024-02-10,12\nW,2024-02-11,2024-03-31,22\n"
    capacity = read_capacity(f"ward,from,to,beds\n{rows}".encode()).linked_to(records)
    days = pd.DatetimeIndex(["2024-01-01", "2024-01-31", "2024-02-01", "2024-02-10", "2024-02-11", "2025-01-01"])

    assert capacity.open_beds_by_day("W", days).tolist() == [22, 22, 12, 12, 22, 22]
    assert capacity.beds_today("W") == 22


def test_one_ward_written_two_ways_is_not_counted_twice() -> None:
    """Ward 7 and W07 are one ward: its beds are not added."""
    records = read_records(STAYS, choices=IntakeChoices(ward_names={"Ward 7": "W", "W07": "W"}))
    capacity = read_capacity(b"ward,from,beds\nWard 7,2024-01-01,20\nW07,2024-01-01,20\n").linked_to(records)

    assert capacity.beds_today("W") == 20


def test_a_cell_nobody_can_read_costs_its_row_and_is_named() -> None:
    """The other rows are used; the note quotes the cell, its row, and says what stands for those days."""
    rows = [
        "Teal,2024-01-01,12",
        "Teal,2024-02-01,many",
        "Teal,soon,14",
        "Total,2024-02-01,lots",
        "Teal,2024-03-01,20/24",
    ]
    capacity = read_capacity("\n".join(["ward,from,staffed_beds", *rows]).encode(), name="beds.csv")

    assert capacity.beds_today("Teal") == 12
    assert (capacity.report.rows_in, capacity.report.used, capacity.report.set_aside) == (5, 1, 4)
    assert capacity.report.reasons["A date or a number of beds can't be read"] == 3
    for told in ("“many” in row 2", "“soon” in row 3", "“20/24” in row 5", "the period before it stands"):
        assert any(told in note for note in capacity.notes)
    assert not any("lots" in note for note in capacity.notes)


@pytest.mark.parametrize("end", ["9999-12-31", "31/12/9999", "31.12.9999", "", "current"])
def test_an_end_far_away_is_open(end: str) -> None:
    """The year 9999 stands for no end."""
    capacity = read_capacity(f"ward,from,to,staffed_beds\nTeal,2024-01-01,{end},12\n".encode())

    assert capacity.table["to"].tolist() == [pd.Timestamp("2100-12-31")]


@pytest.mark.parametrize(
    ("rows", "overlap"),
    [
        (["Alder,2022-01-01,,24", "Alder,2023-07-01,,26"], False),  # a list of changes
        (["Alder,2022-01-01,2023-07-01,24", "Alder,2023-07-01,,26"], True),  # both name 1 July
        (["Alder,2022-01-01,,24", "Alder,2023-07-01,2023-07-31,20"], True),  # a month's change within the usual
        (["Alder,2022-01-01,,24", "Alder,2022-01-01,,26"], True),  # which?
        (["Alder,2022-01-01,2022-12-31,24", "Birch,2022-06-01,,26"], False),
    ],
)
def test_only_periods_that_overlap_are_said_to(rows: list[str], overlap: bool) -> None:
    """A row without a last day runs to the next row's first day, unless that one ends and gives the beds back."""
    beds = read_capacity("\n".join(["ward,from,to,staffed", *rows]).encode())

    assert any("overlap" in note for note in beds.notes) == overlap


def test_a_gap_between_periods_is_said() -> None:
    """June is in no row: the beds of May are taken, and the note names ward and days; no gap, no note."""
    rows = (
        b"ward,from,to,staffed\nAlder,2022-01-01,2023-05-31,24\nAlder,2023-07-01,2024-12-31,20\nBirch,2022-01-01,,9\n"
    )
    beds = read_capacity(rows)

    assert beds.open_beds_by_day("Alder", pd.DatetimeIndex(["2023-06-15"])).tolist() == [24]
    assert [note for note in beds.notes if "No row names" in note] == [
        (
            "No row names the beds of Alder from 2023-06-01 to 2023-06-30: those of the row before are taken. "
            "If a ward was closed then, add a row with 0 beds."
        )
    ]
    assert not any("No row" in note for note in read_capacity(rows.replace(b"2023-05-31", b"2023-06-30")).notes)
