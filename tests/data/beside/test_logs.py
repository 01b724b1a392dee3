"""Refusals, bed requests and cancellations: read, counted, and honest about what they can't tell."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pandas as pd
import pytest

from bedplan.data import IntakeChoices, read_bed_requests, read_cancellations, read_records, read_refusals
from bedplan.data.values.reasons import means_no_bed
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

    assert timed.table["wait_hours"].tolist() == pytest.approx([6.5, float("nan")], nan_ok=True)
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


@pytest.mark.parametrize(
    ("reason", "no_bed"),
    [
        ("no bed", True),
        ("No staffed bed.", True),
        ("No ICU bed available", True),
        ("full", True),
        ("Ward at capacity", True),
        ("capacity", True),
        ("bed shortage", True),
        ("Insufficient beds", True),
        ("beds not available", True),
        ("unavailability of beds", True),
        ("waiting: no side room", True),
        ("kein Bett", True),
        ("Kein freies Bett verfügbar", True),
        ("Bettenmangel", True),
        ("Station voll", True),
        ("pas de lit", True),
        ("manque de lits", True),
        ("service complet", True),
        ("No hay camas", True),
        ("sin cama", True),
        ("nessun posto letto", True),
        ("geen bed vrij", True),
        ("Ingen säng", True),
        ("ingen ledig seng", True),
        ("sem vaga", True),
        ("patient too well", False),
        ("no bed needed", False),
        ("Patient declined", False),
        ("theatre list full", False),
        ("lacks capacity to consent", False),
        ("surgeon unavailable", False),
        ("no theatre time", False),
        ("Equipment failure", False),
        ("full; consultant informed", True),
        ("ICU full after theatre list", True),
        ("consultant informed", None),
        ("Patient verstorben", False),
        ("embedded device", None),
        ("fulfilled elsewhere", None),
        ("17", None),
        ("needs short stay bed", None),
        ("", None),
    ],
)
def test_what_a_reason_means(reason: str, no_bed: bool | None) -> None:
    """Whole words in a few languages; what is not understood is said to be so."""
    assert means_no_bed(reason) is no_bed


@pytest.mark.parametrize("reason", ["no staffed bed", "ward at capacity", "kein Bett", "bed shortage"])
def test_half_the_reasons_in_other_words_still_count(reason: str) -> None:
    """Twenty-eight entries under two wordings are twenty-eight."""
    rows = [f"2024-01-{n + 1:02d} 10:00,W,{reason if n % 2 else 'no bed'}" for n in range(28)]
    log = read_refusals("\n".join(["time,ward,reason", *rows]).encode())

    assert len(log.for_lack_of_beds("W")) == 28
    assert log.notes == ()


def test_reasons_nobody_understands_are_listed_and_asked_for() -> None:
    """They are not counted as nothing: they are named with their counts, and the planner's word settles them."""
    rows = [f"2024-01-{n + 1:02d} 10:00,W,{reason}" for n, reason in enumerate(["K7", "k7 ", "Z1", "", "no bed"])]
    content = "\n".join(["time,ward,reason", *rows]).encode()
    log = read_refusals(content, name="refusals.csv")

    assert dict(log.unclear_reasons) == {"K7": 1, "k7": 1, "Z1": 1, "": 1}
    assert len(log.for_lack_of_beds("W")) == 1
    assert "“Z1” (1)" in log.notes[0]
    assert "demand may be higher" in log.notes[0]
    settled = read_refusals(content, no_bed_reasons=("K7", ""))
    assert len(settled.for_lack_of_beds("W")) == 4
    assert settled.notes == ()


def test_requests_that_were_granted_are_no_refusals() -> None:
    """Of 28 requests 21 were admitted or accepted: seven were refused."""
    outcomes = ["admitted", "Accepted", "bed given"] * 7 + ["not admitted", "another hospital", "accepted elsewhere"]
    outcomes += ["admitted to Heron", "refused", "", "transferred, then admitted"]
    rows = [f"2024-01-{n + 1:02d} 10:00,W,{outcome}" for n, outcome in enumerate(outcomes[:28])]
    log = read_refusals(
        "\n".join(["date,ward,outcome", *rows, "2023-12-31,Heron,refused"]).replace(", then", "").encode()
    )

    assert len(log.for_lack_of_beds("W")) == 7
    assert log.report.reasons["The outcome says that the bed was given: not a refusal"] == 21
    assert (log.report.rows_in, log.report.used, log.report.set_aside) == (29, 8, 21)


@pytest.mark.parametrize(
    ("yes", "no"),
    [("Y", "N"), ("yes", "no"), ("1", "0"), ("Ja", "Nein"), ("Cancelled", "Completed"), ("2024-01-02", "")],
)
def test_bookings_that_were_kept_are_no_cancellations(yes: str, no: str) -> None:
    """A booking list holds those that took place too: of 28, seven were cancelled."""
    rows = [f"2024-01-{n + 1:02d},W,{yes if n % 4 == 0 else no}" for n in range(28)]
    log = read_cancellations("\n".join(["planned_date,ward,cancelled", *rows]).encode())

    assert len(log.for_lack_of_beds("W")) == 7
    assert log.report.reasons["The booking was not cancelled"] == 21


def test_a_status_can_hold_the_reason() -> None:
    """Where the status says why, only lack of a bed counts."""
    rows = ["cancelled - no bed", "cancelled by patient", "completed"]
    lines = [f"2024-01-0{n + 1},W,{status}" for n, status in enumerate(rows)]
    log = read_cancellations("\n".join(["planned_date,ward,status", *lines]).encode())

    assert len(log.for_lack_of_beds("W")) == 1
    assert log.report.used == 2


STAYS = (
    b"patient_key,ward,start,end\na,W,2024-01-01 10:00,2024-01-04 10:00\nb,Ward 7,2024-01-01 10:00,2024-01-04 10:00\n"
)


def test_wards_are_matched_to_the_stays() -> None:
    """Capitals and blanks don't matter, a renamed ward keeps its refusals, and what matches nothing is named."""
    log = read_refusals(b"date,ward\n2024-01-01,w\n2024-01-02, W \n2024-01-03,Old\n2024-01-04,Owl\n2024-01-05,W07\n")
    linked = log.linked_to(read_records(STAYS, choices=IntakeChoices(ward_names={"old": "W"})))

    assert len(linked.for_lack_of_beds("W")) == 3
    assert linked.unknown_wards == ("Owl", "W07")
    assert linked.linked_to(read_records(STAYS)).wards == linked.wards


@pytest.mark.parametrize(
    ("headings", "row"),
    [
        ("date,time,ward", "2024-03-31,14:05,W"),
        ("date,time,ward", "2024-03-31 00:00:00,14:05:00,W"),
        ("refusal_date,refusal_time,ward", "31/03/2024,1405,W"),
        ("Date;Time;Ward", "31.03.2024;14:05 Uhr;W"),
        ("date,requested_at,ward,outcome", "2024-04-30,2024-03-31 14:05,W,refused"),
        ("time,ward", "2024-03-31 14:05,W"),
        ("date,ward", "2024-03-31 14:05,W"),
    ],
)
def test_date_and_time_may_be_two_columns(headings: str, row: str) -> None:
    """All of these are five past two on the last of March."""
    log = read_refusals(f"{headings}\n{row}\n".encode())

    assert log.table["time"].tolist() == [pd.Timestamp("2024-03-31 14:05")]


def test_a_time_of_day_nobody_can_read_leaves_the_day() -> None:
    """The entry counts on its day, and the report says so."""
    log = read_refusals(b"date,time,ward\n2024-03-31,afternoon,W\n2024-03-31,,W\n")

    assert log.table["time"].tolist() == [pd.Timestamp("2024-03-31")] * 2
    assert (log.report.used, log.report.repaired, log.report.set_aside) == (1, 1, 0)


def test_columns_can_be_named_by_a_person() -> None:
    """Headings nobody knows are no obstacle once a person says what they mean."""
    log = read_refusals(
        b"Zeitpunkt;Fach;Grund\n2024-03-31 14:05;W;kein Bett\n",
        columns={"time": "Zeitpunkt", "ward": "Fach", "reason": "Grund"},
    )

    assert len(log.for_lack_of_beds("W")) == 1


def test_two_times_of_a_request_share_one_order_of_day_and_month() -> None:
    """Where the asking shows that months come first, the giving is read so too."""
    log = read_bed_requests(
        b"ward,requested_at,placed_at\nW,03/30/2024 23:00,04/01/2024 01:00\nW,04/01/2024 01:00,04/02/2024 01:00\n"
    )

    assert log.table["wait_hours"].tolist() == [26.0, 24.0]


def test_a_sorted_list_can_be_read_row_by_row() -> None:
    """Where a spreadsheet swapped some dates, the rows around show which way round each is."""
    days = pd.date_range("2024-01-01", periods=60)
    swapped = [f"{day:%m/%d/%Y}" if n % 3 and day.day <= 12 else f"{day:%d/%m/%Y}" for n, day in enumerate(days)]
    log = read_refusals("\n".join(["date,ward", *(f"{day},W" for day in swapped)]).encode(), date_order="row by row")

    assert log.table["time"].tolist() == days.tolist()
