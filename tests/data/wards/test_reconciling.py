"""The rebuilt census against the official one, comings and goings against patients present, and whether it all adds up."""

from __future__ import annotations

import csv
import datetime as dt
from dataclasses import replace
from typing import TYPE_CHECKING

import pytest

from bedplan.data import adds_up, check_census, flows, read_census, read_monthly_return
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    from bedplan.data import Check, Records


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


def named(checks: tuple[Check, ...], word: str) -> Check:
    """Return the check whose question holds this word."""
    return next(one for one in checks if word in one.what)


def test_bed_days_add_up(larkmere: Records, demo_data: Path) -> None:
    """The bed-days shown are those of the file, summed row by row; a stay that got lost on the way is told."""
    with (demo_data / "stays.csv").open() as file:
        rows = [(row["start"], row["end"]) for row in csv.DictReader(file)]
    at = dt.datetime.fromisoformat
    until = larkmere.seen_until.to_pydatetime()
    whole = sum(((at(end) if end else until) - at(start) for start, end in rows), dt.timedelta()) / dt.timedelta(days=1)

    found = named(adds_up(larkmere), "Bed-days")
    assert found.verdict == "adds up"
    assert found.figures == f"{whole:,.0f} = {whole:,.0f} + 0"
    lost = larkmere.stays.iloc[0]
    days = (lost["end"] - lost["start"]).total_seconds() / 86_400
    fewer = replace(larkmere, stays=larkmere.stays.iloc[1:])
    assert named(adds_up(fewer), "Bed-days").verdict == f"does not add up: {-days:+,.1f} bed-days"


def test_bed_days_set_aside_and_repaired_are_part_of_the_sum(read: Callable[..., Records]) -> None:
    """Ten stays of 2 days; a repeated row is set aside with its 2 days, and what a merged overlap takes away is named."""
    rows = [f"p{n},p{n},Heron,2024-01-{n:02d} 10:00,2024-01-{n + 2:02d} 10:00" for n in range(1, 11)]
    found = named(adds_up(read(*rows, rows[0])), "Bed-days")

    assert found.figures == "22 = 20 + 2"
    assert found.verdict == "adds up"
    assert found.points_at_few
    longer = "p1,p1,Heron,2024-01-02 10:00,2024-01-05 10:00"  # a day of it is in the first row too
    records = read(*rows, longer)
    assert records.report.repaired + records.report.set_aside > 0
    assert named(adds_up(records), "Bed-days").verdict == "adds up"


def test_stays_times_and_moves_are_counted(read: Callable[..., Records]) -> None:
    """Three ward stays in two hospital stays; one of the three starts at midnight sharp."""
    checks = adds_up(
        read(
            "a,a,Heron,2024-01-01 10:00,2024-01-02 11:00",
            "a,a,Teal,2024-01-02 11:00,2024-01-05 10:20",
            "b,b,Heron,2024-01-03 00:00,2024-01-04 11:00",
        )
    )

    assert named(checks, "hospital stay").figures == "3 ÷ 2 = 1.50"
    assert named(checks, "moved in").figures == "2 + 1 − 1 − 2 = 0"
    assert named(checks, "times").figures == "67\u00a0%"
    assert "ask why" in named(checks, "times").verdict


def test_files_without_keys_or_times_say_so(read: Callable[..., Records]) -> None:
    """Without a key moves can't be told; dates alone are 0 % with times."""
    rows = [f"Heron,2024-01-{n:02d},2024-01-{n + 2:02d}" for n in range(1, 25)]
    checks = adds_up(read(*rows, headings="ward,start,end"))

    assert named(checks, "hospital stay").figures == "not known"
    assert named(checks, "times").figures == "0\u00a0%"


@pytest.mark.parametrize(("clock", "there"), [("00:00", 2), ("11:00", 3)])
def test_official_counts_are_compared(read: Callable[..., Records], clock: str, there: int) -> None:
    """At midnight two patients are in, at 11 three; a census that says so agrees, one of twice as many doesn't."""
    records = read(*[f"p{n},p{n},Heron,2024-01-{n:02d} 10:00,2024-01-{n + 2:02d} 12:00" for n in range(1, 29)])

    def against(count: int) -> Check:
        """Return the check against a census of 20 days."""
        days = "\n".join(f"2024-01-{n:02d},{clock},Heron,{count}" for n in range(5, 25))
        return named(adds_up(records, read_census(f"date,time,ward,occupied\n{days}".encode())), clock)

    assert against(there).figures == f"{20 * there} against {20 * there} (+0.0 %)"
    assert against(there).verdict == "agree on every ward (1)"
    assert against(2 * there).verdict == "do not agree: Heron −50.0 %"


def test_nights_are_compared_with_a_monthly_return(larkmere: Records, demo_data: Path) -> None:
    """The return was counted from the same patients, so nights agree; one ward with a tenth more is named."""
    text = (demo_data / "monthly_return.csv").read_text()
    assert named(adds_up(larkmere, returned=read_monthly_return(text.encode())), "Nights").verdict.startswith("agree")
    lines = [line.split(",") for line in text.strip().split("\n")]
    ward, nights = (lines[0].index(name) for name in ("ward", "occupied_bed_days"))
    for line in lines[1:]:
        if line[ward] == "Teal":
            line[nights] = f"{float(line[nights]) / 0.9:.0f}"
    more = read_monthly_return("\n".join(",".join(line) for line in lines).encode())

    assert named(adds_up(larkmere, returned=more), "Nights").verdict == "do not agree: Teal −10.0 %"


def test_nothing_in_common_is_not_agreement(larkmere: Records) -> None:
    """A census of other wards leaves the question open."""
    census = read_census(b"date,ward,occupied\n2023-01-01,Elsewhere,4\n")

    assert named(adds_up(larkmere, census), "Patients").verdict == "no ward and day in both files"
