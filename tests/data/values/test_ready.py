"""Discharge-ready dates: a column of the stays or a file of its own, each date in the stay it belongs to."""

from __future__ import annotations

import re

import pandas as pd
import pytest

from bedplan.data import IntakeChoices, Records, describe_ward, read_ready_dates, read_records
from bedplan.errors import UnreadableRecords

NOT = pd.NaT
TIMES = "%m/%d/%Y %H:%M"


def american(days: int) -> bytes:
    """Return stays of ten days a day apart, written month first, each patient ready on the sixth day."""
    rows = []
    for day in range(days):
        start = pd.Timestamp("2024-01-01 10:00") + pd.Timedelta(days=day)
        moments = (start, start + pd.Timedelta(days=10), start + pd.Timedelta(days=5))
        rows.append(f"p{day},Teal," + ",".join(moment.strftime(TIMES) for moment in moments))
    return "\n".join(["patient_key,ward,start,end,ready", *rows]).encode()


def test_ready_dates_are_read_in_the_order_of_the_stays() -> None:
    """Month first where starts are: every date lies five days after its start, none after the end."""
    stays = read_records(american(60)).stays

    assert ((stays["ready"] - stays["start"]) == pd.Timedelta(days=5)).all()


def test_ready_dates_find_their_order_where_starts_need_none() -> None:
    """Starts in ISO, ready dates month first without one that shows it: the stays they belong to do."""
    rows = [
        "a,Teal,2024-03-01 10:00,2024-03-12 10:00,03/06/2024",
        "b,Teal,2024-04-01 10:00,2024-04-09 10:00,04/05/2024",
    ]
    stays = read_records("\n".join(["patient_key,ward,start,end,ready", *rows]).encode()).stays

    assert stays["ready"].tolist() == [pd.Timestamp("2024-03-06"), pd.Timestamp("2024-04-05")]


STAYS = b"""patient_key,spell_key,ward,start,end
a,s1,Heron,2024-01-01 10:00,2024-01-05 10:00
a,s1,Teal,2024-01-05 10:00,2024-01-11 10:00
b,s2,Heron,2024-01-01 10:00,2024-01-09 10:00
c,s3,Heron,2024-01-02 10:00,2024-01-20 10:00
a,s4,Heron,2024-03-01 10:00,2024-03-05 10:00
"""


def ready_of(stays: bytes, ready: bytes, **options: object) -> tuple[Records, list]:
    """Return the records read with a file of ready dates, and the dates in the order of starts and wards."""
    records = read_records(
        stays, choices=IntakeChoices(ready_dates=read_ready_dates(ready, name="ready.csv", **options))
    )
    return records, records.stays.sort_values(["start", "ward", "end"])["ready"].tolist()


def test_a_file_of_its_own_is_joined_by_stay() -> None:
    """Ready on Heron and moved while waiting: ready on Teal too. The latest date that fits counts; others don't."""
    rows = b"spell_key,ready\n s1 ,2024-01-04 10:00\ns3,2024-01-10\ns3,2024-01-15\ns2,2024-02-01\ns9,2024-01-03\ns4,\n"
    records, ready = ready_of(STAYS, rows)

    assert ready[0] == pd.Timestamp("2024-01-04 10:00")
    assert ready[1] is NOT  # s2 was ready only after it had ended
    assert ready[2] == pd.Timestamp("2024-01-15")
    assert ready[3] == pd.Timestamp("2024-01-04 10:00")
    assert ready[4] is NOT
    assert any("ready.csv: 3 ward stays have a ready date from it; 2 of its 4 keys" in n for n in records.report.notes)
    # Heron: s1 waits 1 day, s3 5 days and 10 hours there; over its window of 65 days.
    delayed = describe_ward(records, "Heron").delay_beds * records.days
    assert delayed == pytest.approx(1 + 5 + 10 / 24)


def test_joined_by_patient_a_date_stays_within_its_hospital_stay() -> None:
    """Patient a was ready in January: that says nothing about March."""
    _, ready = ready_of(STAYS, b"patient_key,date,time\na,04/01/2024,10:00\nc,15/01/2024,\n")

    assert ready == [
        pd.Timestamp("2024-01-04 10:00"),
        NOT,
        pd.Timestamp("2024-01-15"),
        pd.Timestamp("2024-01-04 10:00"),
        NOT,
    ]


def test_without_hospital_stays_a_date_counts_in_the_ward_stay_it_lies_in() -> None:
    """The ward stay before or after is left alone."""
    stays = re.sub(rb",s(pell_key|\d)", b"", STAYS)
    _, ready = ready_of(stays, b"patient_key,ready\na,2024-01-04 10:00\n")

    assert ready == [pd.Timestamp("2024-01-04 10:00"), NOT, NOT, NOT, NOT]


def test_every_row_of_the_file_is_accounted_for() -> None:
    """Rows without a key, without a date, and with one nobody can read have their reasons."""
    ready = read_ready_dates(b"spell_key,ready\ns1,2024-01-04\n,2024-01-04\ns2,\ns3,soon\ns4\n")

    assert (ready.report.rows_in, ready.report.used, ready.report.set_aside) == (5, 1, 4)
    assert sorted(ready.report.reasons.values()) == [1, 1, 1, 1]
    assert "s1" not in repr(ready)


def test_ready_dates_ask_for_their_order() -> None:
    """03/04 may be two days here as well."""
    with pytest.raises(UnreadableRecords) as problem:
        read_ready_dates(b"spell_key,ready\ns1,03/04/2024\n")
    assert problem.value.question.examples[0][1:] == ("03 April 2024", "04 March 2024")


@pytest.mark.parametrize(
    ("content", "told"),
    [
        (b"spell_key,ward\ns1,Heron\n", "lacks a column of keys or of ready dates"),
        (b"ward,ready\nHeron,2024-01-04\n", "lacks a column of keys or of ready dates"),
        (b"spell_key,ready\ns1,soon\n", "can't be read"),
    ],
)
def test_a_file_of_ready_dates_that_cannot_be_used_says_why(content: bytes, told: str) -> None:
    """One sentence names the file and what it lacks."""
    with pytest.raises(UnreadableRecords, match=r"ready\.csv") as problem:
        read_ready_dates(content, name="ready.csv")
    assert told in str(problem.value)


def test_files_without_a_key_in_common_say_so() -> None:
    """Patient keys on one side and stay keys on the other can't meet."""
    stays = b"patient_key,ward,start,end\na,Heron,2024-01-01 10:00,2024-01-05 10:00\n"

    with pytest.raises(UnreadableRecords, match=r"ready\.csv can't be joined"):
        ready_of(stays, b"spell_key,ready\ns1,2024-01-04\n")
