"""Refusals, bed requests and cancellations: read, counted, and honest about what they can't tell."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pandas as pd
import pytest

from bedplan.data import read_bed_requests, read_cancellations, read_refusals
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from pathlib import Path

REFUSALS = b"""time,ward,reason,outcome
2024-01-01 10:00,Merlin,no bed,another hospital
2024-01-02 10:00,Merlin,patient too well,ward
2024-01-03 10:00,=Teal,Ward full,another hospital
soon,Merlin,no bed,
2024-01-05 10:00,,no bed,
Total
"""


def test_refusals_are_counted_row_by_row() -> None:
    """Rows without a ward or a time are set aside, footers too; the rest is used."""
    log = read_refusals(REFUSALS)

    assert (log.report.rows_in, log.report.used, log.report.set_aside) == (6, 3, 3)
    assert sum(log.report.reasons.values()) == 3
    assert log.wards == ("'=Teal", "Merlin")
    assert any("rarely complete" in sentence for sentence in log.cannot)


def test_only_lack_of_beds_counts_as_unmet_demand() -> None:
    """A patient refused because another place fits better did not want this bed."""
    log = read_refusals(REFUSALS)

    assert len(log.of_ward("Merlin")) == 2
    assert len(log.for_lack_of_beds("Merlin")) == 1
    assert len(log.for_lack_of_beds("'=Teal")) == 1
    window = (pd.Timestamp("2024-01-02"), pd.Timestamp("2024-02-01"))
    assert log.for_lack_of_beds("Merlin", window).empty


def test_without_reasons_every_refusal_counts() -> None:
    """Where no reason is written down, all are taken for lack of beds."""
    log = read_refusals(b"Date,Ward\n2024-01-01,Merlin\n2024-01-02,Merlin\n")

    assert len(log.for_lack_of_beds("Merlin")) == 2


def test_waits_come_from_two_times_or_from_hours() -> None:
    """Asked at 10:00 and placed at 16:30 is six and a half hours."""
    timed = read_bed_requests(
        b"ward,requested_at,placed_at\nHeron,2024-01-01 10:00,2024-01-01 16:30\nHeron,2024-01-01 11:00,\n"
    )
    hours = read_bed_requests(b"ward;requested;wait_hours\nHeron;2024-01-01 10:00;6,5\n")

    assert timed.table["wait_hours"].tolist() == [6.5, 0.0]
    assert hours.table["wait_hours"].tolist() == [6.5]


def test_a_request_placed_before_it_was_asked_is_set_aside() -> None:
    """No bed is given before it is wanted; the row is counted, not lost."""
    log = read_bed_requests(
        b"ward,requested_at,placed_at\nHeron,2024-01-01 10:00,2024-01-01 09:00\nHeron,2024-01-01 11:00,2024-01-01 12:00\n"
    )

    assert (log.report.rows_in, log.report.used, log.report.set_aside) == (2, 1, 1)


def test_the_demos_logs(demo_data: Path) -> None:
    """Every row of the demo's logs is read; every cancellation is for lack of a bed."""
    for reader, name in (
        (read_refusals, "refusals"),
        (read_bed_requests, "bed_requests"),
        (read_cancellations, "cancellations"),
    ):
        path = demo_data / f"{name}.csv"
        log = reader(path)
        assert log.report.used == log.report.rows_in == len(pd.read_csv(path))

    cancelled = read_cancellations(demo_data / "cancellations.csv")
    assert len(cancelled.for_lack_of_beds("Sandpiper")) == len(cancelled.table)


@pytest.mark.parametrize("content", [b"ward,reason\nHeron,no bed\n", b"time,ward\nsoon,Heron\n", b""])
def test_a_log_that_cannot_be_used_says_why(content: bytes) -> None:
    """One sentence names the file and what it lacks."""
    with pytest.raises(UnreadableRecords, match=r"refusals\.csv"):
        read_refusals(content, name="refusals.csv")


def test_ambiguous_dates_of_a_log_ask_too() -> None:
    """03/04 may be two days in a log as well."""
    with pytest.raises(UnreadableRecords, match="day first or month first"):
        read_refusals(b"date,ward\n03/04/2024,Merlin\n")
    log = read_refusals(b"date,ward\n03/04/2024,Merlin\n", date_order="day first")
    assert log.table["time"].tolist() == [pd.Timestamp("2024-04-03")]
