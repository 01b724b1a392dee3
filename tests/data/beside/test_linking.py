"""Ward names of other files: whatever their spelling, a ward's figures come out as under its own name."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pandas as pd
import pytest

from bedplan.data import (
    IntakeChoices,
    check_census,
    describe_ward,
    estimate_demand,
    hidden_demand,
    read_capacity,
    read_census,
    read_records,
    read_refusals,
)
from bedplan.data.beside.linking import is_no_ward, likely_links

if TYPE_CHECKING:
    from bedplan.data import Records

DAYS = pd.date_range("2023-01-01", periods=400)


def stays(ward: str = "W", old: str = "") -> bytes:
    """Return one arrival a day for three days each, under an old name in the first half if there is one."""
    rows = [
        f"p{n},{old if old and n < 200 else ward},{day:%Y-%m-%d} 10:00,{day + pd.Timedelta(days=3):%Y-%m-%d} 09:00"
        for n, day in enumerate(DAYS)
    ]
    return "\n".join(["patient_key,ward,start,end", *rows]).encode()


def refused(ward: str, reason: str = "no bed") -> bytes:
    """Return a list with a refusal every fourth day."""
    rows = [f"{day:%Y-%m-%d} 12:00,{ward},{reason}" for day in DAYS[::4]]
    return "\n".join(["time,ward,reason", *rows]).encode()


@pytest.fixture(scope="module")
def records() -> Records:
    """Return the stays of ward W."""
    return read_records(stays())


@pytest.mark.parametrize("name", ["w", " W", "W "])
def test_refusals_and_beds_count_whatever_the_capitals(records: Records, name: str) -> None:
    """One patient a day came, a quarter of one was refused: 1.25, and the beds are known."""
    found = hidden_demand(records, "W", refusals=read_refusals(refused(name)))
    beds = read_capacity(f"ward,from,staffed_beds\n{name},2023-01-01,5\n".encode())

    assert found.demand_per_day == pytest.approx(1.25, rel=0.01)
    assert estimate_demand(records, "W", capacity=beds).beds_today == 5
    assert describe_ward(records, "W", beds).full is not None
    census = read_census("\n".join(["date,ward,occupied", *(f"{day:%Y-%m-%d},{name},3" for day in DAYS)]).encode())
    assert len(check_census(records, census, "W").days) > 300


def test_a_renamed_ward_keeps_its_refusals() -> None:
    """What is confirmed for the stays holds for the list: half of its entries stand under the old name."""
    both = refused("Ash").decode().splitlines()
    half = len(both) // 2
    listed = "\n".join([*both[:half], *(row.replace("Ash", "W") for row in both[half:])]).encode()
    records = read_records(stays(old="Ash"), choices=IntakeChoices(ward_names={"Ash": "W"}))

    assert hidden_demand(records, "W", refusals=read_refusals(listed)).demand_per_day == pytest.approx(1.25, rel=0.01)


def test_reasons_nobody_understands_are_told_not_counted_as_nobody(records: Records) -> None:
    """The list is not used, and the sentence names the reasons."""
    found = hidden_demand(records, "W", refusals=read_refusals(refused("W", "K7"), name="refusals.csv"))
    (listed,) = [method for method in found.methods if method.name.startswith("the list")]

    assert not listed.used
    assert "“K7” (100)" in listed.reason
    assert "Nobody is listed" not in listed.reason
    assert any("“K7” (100)" in note for note in found.notes)


def test_names_without_stays_are_named_where_nobody_is_listed(records: Records) -> None:
    """The ward may stand there under another name."""
    found = hidden_demand(records, "W", refusals=read_refusals(refused("Heron Ward")))
    (listed,) = [method for method in found.methods if method.name.startswith("the list")]

    assert "“Heron Ward”" in listed.reason


def test_another_way_to_write_a_ward_is_proposed() -> None:
    """Ward 7 and W07 may be one: a person confirms it, as between wards of the stays."""
    records = read_records(stays("Ward 7"))
    log = read_refusals(refused("W07")).linked_to(records)
    (link,) = likely_links(log.unknown_wards, records)

    assert (link.old, link.new) == (("W07",), ("Ward 7",))
    assert "“W07” and “Ward 7” may be one ward" in link.sentence
    assert likely_links(("Owl",), records) == ()


@pytest.mark.parametrize(
    ("cell", "no_ward"),
    [
        ("", True),
        ("Total", True),
        ("Grand Total", True),
        ("sub-total", True),
        ("Totals for March", True),
        ("Sum", True),
        ("Summe", True),
        ("Page 3", True),
        ("Run on 3 March", True),
        ("WARD", True),
        ("Summer", False),
        ("Paget", False),
        ("Totally", False),
        ("7", False),
    ],
)
def test_totals_are_told_from_wards(cell: str, no_ward: bool) -> None:
    """Whole words only: a ward may begin like a total."""
    assert is_no_ward(cell) is no_ward
