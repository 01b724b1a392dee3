"""Days and times of day in columns of their own, under the headings that hospitals give them."""

from __future__ import annotations

import pandas as pd
import pytest

from bedplan.data import preview_columns, read_records

PAIRS = {
    "start_date": "2024-03-{:02d}",
    "start_time": "09:{:02d}",
    "end_date": "2024-04-{:02d}",
    "end_time": "14:{:02d}",
}


def stays(headings: str) -> bytes:
    """Return twenty stays, a column each for the day in, the time in, the day out and the time out."""
    lines = [f"Hosp No,Location,{headings}"]
    lines += [f"p{day},Heron,{','.join(one.format(day) for one in PAIRS.values())}" for day in range(1, 21)]
    return "\n".join(lines).encode()


START = [pd.Timestamp(2024, 3, day, 9, day) for day in range(1, 21)]
END = [pd.Timestamp(2024, 4, day, 14, day) for day in range(1, 21)]


@pytest.mark.parametrize(
    "headings",
    [
        "Date in,Time in,Date out,Time out",
        "In date,In time,Out date,Out time",
        "Start date,Start time,End date,End time",
        "Date from,Time from,Date to,Time to",
        "Date entered,Time entered,Date left,Time left",
        "Date arrived,Time arrived,Date departed,Time departed",
        "Date of arrival,Time of arrival,Date of departure,Time of departure",
        "Ward in date,Ward in time,Ward out date,Ward out time",
        "Ward entry date,Ward entry time,Ward exit date,Ward exit time",
        "Transfer in date,Transfer in time,Transfer out date,Transfer out time",
        "Date admitted,Time admitted,Date discharged,Time discharged",
        "Admit date,Admit time,Disch date,Disch time",
        "Date of admission,Time of admission,Date of discharge,Time of discharge",
        "DATE_IN,TIME_IN,DATE_OUT,TIME_OUT",
        "Datum von,Zeit von,Datum bis,Zeit bis",
    ],
)
def test_usual_pairs_are_read(headings: str) -> None:
    """Each stay starts and ends on its day at its time, without a word from the planner."""
    records = read_records(stays(headings), name="stays.csv")

    assert list(records.stays["start"]) == START
    assert list(records.stays["end"]) == END
    assert records.has_times


@pytest.mark.parametrize("headings", ["Start,End,Update,Uptime", "Start datetime,End datetime,Runtime,Rundate"])
def test_whole_moments_are_left_alone(headings: str) -> None:
    """A start that has no twin stays a start, whatever else the file holds."""
    matched = preview_columns(f"Ward,{headings}\nA,2024-03-01 10:00,2024-03-02 10:00,1,2\n".encode()).matched

    assert [matched["start"], matched["end"]] == headings.split(",")[:2]
    assert "start_time" not in matched


def test_what_a_person_says_of_the_pair_stands() -> None:
    """Where the planner names the column of the start, its twin is not taken."""
    seen = preview_columns(stays("Date in,Time in,Date out,Time out"), columns={"start": "Date in"})

    assert seen.matched["start"] == "Date in"
    assert "start_time" not in seen.matched


def test_unknown_columns_of_clocks_bring_the_question_about_pairs() -> None:
    """Days and times under headings nobody knows can be named as such; a file without clocks isn't asked for them."""
    pairs = ("start_date", "start_time", "end_date", "end_time")
    with_clocks = stays("K1,K2,K3,K4")
    chosen = dict(zip(pairs, ("K1", "K2", "K3", "K4"), strict=True))

    assert set(pairs) < set(preview_columns(with_clocks, name="stays.csv").asked)
    assert not set(pairs) & set(preview_columns(with_clocks.replace(b":", b"x"), name="stays.csv").asked)
    assert list(read_records(with_clocks, name="stays.csv", columns=chosen).stays["end"]) == END
