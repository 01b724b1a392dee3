"""The rebuilt census against the official one, and comings and goings against patients present."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pytest

from bedplan.data import check_census, flows, read_census
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    from bedplan.data import Records


@pytest.mark.parametrize("clock", ["00:00", "11:00"])
def test_the_demos_census_is_rebuilt_from_its_stays(larkmere: Records, demo_data: Path, clock: str) -> None:
    """Stays and census come from the same patients, so they agree to the patient, day and night."""
    census = read_census(demo_data / "census.csv", zeros_are_real=True)
    for ward in larkmere.wards:
        check = check_census(larkmere, census, ward, clock)

        assert check.days_alike == 1.0
        assert check.difference == 0.0
        assert " agree" in check.sentence


def test_a_census_of_other_patients_does_not_agree(read: Callable[..., Records]) -> None:
    """Twice as many patients in the official count are told as half of them missing."""
    rows = [f"p{n},p{n},Heron,2024-01-{n:02d} 10:00,2024-01-{n + 2:02d} 12:00" for n in range(1, 29)]
    official = "\n".join(["date,ward,occupied", *(f"2024-01-{n:02d},Heron,4" for n in range(5, 25))]).encode()
    check = check_census(read(*rows), read_census(official), "Heron")

    # Each midnight has the patients of the two days before.
    assert check.days["rebuilt"].tolist() == [2] * 20
    assert check.difference == pytest.approx(-0.5)
    assert "do not agree" in check.sentence


def test_a_ward_the_census_does_not_have_is_told(larkmere: Records) -> None:
    """The wards and times there are stand in the message."""
    census = read_census(b"date,ward,occupied\n2024-01-01,Heron,4\n")

    with pytest.raises(UnreadableRecords, match="Teal"):
        check_census(larkmere, census, "Teal")


def test_comings_and_goings_explain_the_patients_present(larkmere: Records) -> None:
    """For every ward: in at first + came + moved in − moved out − left = in at last."""
    balance = flows(larkmere).balance
    change = balance["external_in"] + balance["transfers_in"] - balance["transfers_out"] - balance["external_out"]

    assert (balance["present_first"] + change == balance["present_last"]).all()
    assert (balance > 0).any(axis=None)


def test_transfers_are_counted_by_pair(read: Callable[..., Records]) -> None:
    """Two patients go from Heron to Teal, one goes home from Heron, one comes to Teal from outside."""
    records = read(
        "a,a,Heron,2024-01-01 10:00,2024-01-02 10:00",
        "a,a,Teal,2024-01-02 10:00,2024-01-05 10:00",
        "b,b,Heron,2024-01-01 11:00,2024-01-02 11:00",
        "b,b,Teal,2024-01-02 11:00,2024-01-05 11:00",
        "c,c,Heron,2024-01-01 12:00,2024-01-02 12:00",
        "d,d,Teal,2024-01-01 13:00,2024-01-02 13:00",
    )
    table = flows(records).table.set_index(["from", "to"])["patients"].to_dict()

    assert table == {
        ("outside", "Heron"): 3,
        ("Heron", "Teal"): 2,
        ("Heron", "outside"): 1,
        ("outside", "Teal"): 1,
        ("Teal", "outside"): 3,
    }
