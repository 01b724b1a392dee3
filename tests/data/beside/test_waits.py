"""Waits for a bed: unknown ones are never short ones, and who never had a bed is counted apart."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import pandas as pd
import pytest

from bedplan.data import read_bed_requests
from bedplan.data.beside.waits import waits_for_a_bed
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from pathlib import Path


@pytest.mark.parametrize(
    "content",
    [
        "ward,requested_at,wait_hours\nW,2024-01-01 10:00,\nW,2024-01-01 11:00,soon\nW,2024-01-01 12:00,9\n",
        "ward,requested_at,placed_at\nW,2024-01-01 10:00,later\nW,2024-01-01 11:00,x\nW,2024-01-01 12:00,2024-01-01 21:00\n",
    ],
)
def test_an_unknown_wait_is_no_short_wait(content: str) -> None:
    """Of three requests one waited nine hours and two are not known: all of those known waited over four hours."""
    log = read_bed_requests(content.encode(), name="asked.csv")
    found = waits_for_a_bed(log, "W")

    assert (found.requests, found.waited, found.unknown, found.never_given) == (3, 1, 2, 0)
    assert (found.share_over, found.most_over) == (1.0, 1.0)
    assert "Of 2 more the wait is not known" in found.sentence
    assert any("Of 2 requests the wait is not known" in note for note in log.report.notes)


def test_who_never_had_a_bed_is_counted_apart() -> None:
    """A blank time, or an outcome that says so, is no bed; an outcome that says a bed was given is an unknown wait."""
    rows = [
        "W,2024-01-01 10:00,2024-01-01 11:00,admitted",
        "W,2024-01-01 10:00,,admitted",
        "W,2024-01-01 10:00,,went to another hospital",
        "W,2024-01-01 10:00,,",
    ]
    found = waits_for_a_bed(
        read_bed_requests("\n".join(["ward,requested_at,placed_at,outcome", *rows]).encode()), "W", 1.0
    )

    assert (found.waited, found.over, found.never_given, found.unknown) == (1, 0, 2, 1)
    assert (found.share_over, found.most_over) == (0.0, 0.75)


def test_hours_stand_in_where_a_time_is_blank() -> None:
    """Where a row has no time but hours, the hours count; where it has both, the times do."""
    log = read_bed_requests(
        b"ward,requested_at,placed_at,wait_hours\nW,2024-01-01 10:00,,7\nW,2024-01-01 10:00,2024-01-01 12:00,2.00\n"
    )

    assert log.table["wait_hours"].tolist() == [7.0, 2.0]


@pytest.mark.parametrize(
    "rows",
    [
        "W,2024-01-01 10:00,2024-01-01\nW,2024-01-02 22:00,2024-01-03\nW,2024-01-03 22:00,2024-01-01\n",
        "W,2024-01-01,2024-01-01\nW,2024-01-02,2024-01-03\nW,2024-01-03,2024-01-01\n",
    ],
)
def test_days_alone_tell_no_hours(rows: str) -> None:
    """A bed given on the day it was asked for is neither at once nor before it was asked for; a day earlier is."""
    log = read_bed_requests(("ward,requested_at,placed_at\n" + rows).encode())

    assert log.table["wait_hours"].isna().tolist() == [True, True]
    assert log.report.reasons["The bed is given before it is asked for"] == 1
    assert "tells no wait" in waits_for_a_bed(log, "W").sentence


def test_a_wait_below_zero_is_set_aside() -> None:
    """Hours below 0 are a fault of the list, not a bed at once."""
    log = read_bed_requests(b"ward,requested_at,wait_hours\nW,2024-01-01 10:00,-3\nW,2024-01-01 11:00,5\n")

    assert log.table["wait_hours"].tolist() == [5.0]
    assert log.report.reasons["The bed is given before it is asked for"] == 1


def test_waits_by_hand() -> None:
    """Forty waits of 1 to 40 hours: half within 20.5, 95 in 100 within the 38th, 36 over four; one month has enough."""
    rows = [f"W,2024-01-{n % 28 + 1:02d} 10:00,{n}" for n in range(1, 41)] + ["W,2024-02-01 10:00,1"] * 2
    found = waits_for_a_bed(read_bed_requests("\n".join(["ward,requested,wait", *rows[:40]]).encode()), "W")
    more = waits_for_a_bed(read_bed_requests("\n".join(["ward,requested,wait", *rows]).encode()), "W", 12.0)

    assert (found.median_hours, found.hours_of_95, found.over) == (20.5, 38.0, 36)
    assert found.share_over == 0.9
    assert more.by_month == {1: 28 / 40}
    assert more.waited == 42


def test_the_demos_waits(demo_data: Path) -> None:
    """Counted row by row from the file's own column of hours, month by month."""
    rows = pd.read_csv(demo_data / "bed_requests.csv")
    found = waits_for_a_bed(read_bed_requests(demo_data / "bed_requests.csv"), "Heron")
    hours = [hour for hour in rows["wait_hours"] if not math.isnan(hour)]
    january = rows[rows["requested_at"].str[5:7] == "01"]["wait_hours"].dropna()

    assert found.requests == len(rows)
    assert found.waited == len(hours)
    assert found.share_over == pytest.approx(sum(hour > 4 for hour in hours) / len(hours), abs=0.002)
    assert found.median_hours == pytest.approx(sorted(hours)[len(hours) // 2], abs=0.02)
    assert found.by_month[1] == pytest.approx((january > 4).mean(), abs=0.005)
    assert found.sentence.count("was worst") == 1


def test_without_waits_it_says_so() -> None:
    """A list that tells neither time nor wait, or of another ward, is refused in a sentence."""
    log = read_bed_requests(b"ward,requested_at\nW,2024-01-01 10:00\n", name="asked.csv")

    with pytest.raises(UnreadableRecords, match=r"asked\.csv has neither"):
        waits_for_a_bed(log, "W")
    with pytest.raises(UnreadableRecords, match="no request for a bed on V"):
        waits_for_a_bed(log, "V")
