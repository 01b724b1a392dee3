"""Answers a planner gives about a file are checked before they are used."""

from __future__ import annotations

import datetime as dt
from typing import TYPE_CHECKING

import pandas as pd
import pytest

from bedplan.data import IntakeChoices, read_records
from bedplan.data.cleaning.places import BED_WARD, PLACE_NAMES
from bedplan.data.values.choices import PLACE_KINDS
from bedplan.errors import ImpossibleFigure, UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Callable

    from bedplan.data import Records

CONTENT = b"patient_key,ward,start,end\na,Heron,2024-01-01 10:00,2024-01-04 10:00\n"


@pytest.mark.parametrize(
    ("answers", "told"),
    [
        ({"places": {"Heron": "a nice place"}}, "Heron can't be"),
        ({"time_zone": "Larkmere/Town"}, "Larkmere/Town"),
        ({"time_zone": "../etc"}, "time zone"),
        ({"excluded": ((dt.date(2024, 2, 1), dt.date(2024, 1, 1)),)}, "ends before it starts"),
        ({"window": (dt.date(2024, 2, 1), dt.date(2024, 1, 1))}, "ends before it starts"),
        ({"bed_on_leave": "perhaps"}, "held or given away"),
    ],
)
def test_answers_that_make_no_sense_are_refused(answers: dict, told: str) -> None:
    """A kind of place, a time zone or a period that can't be is told at once, in a sentence."""
    with pytest.raises(ImpossibleFigure, match=told):
        IntakeChoices(**answers)


def test_an_unknown_date_order_is_refused() -> None:
    """A misspelt answer is not taken for day first."""
    with pytest.raises(ImpossibleFigure, match="day first"):
        read_records(CONTENT, date_order="dayfirst")


def test_every_kind_of_place_can_be_chosen() -> None:
    """The kinds a person can choose are those the program knows by name, and a ward with beds."""
    assert set(PLACE_KINDS) == {BED_WARD, *PLACE_NAMES}


@pytest.mark.parametrize("key", ["aBcTeStXy9", "x9zzzQ", "protest1"])
def test_random_keys_are_not_taken_for_test_patients(key: str) -> None:
    """Letters that stand in a pseudonym by chance make nobody a test patient."""
    assert len(read_records(CONTENT + f"{key},Heron,2024-01-02 10:00,2024-01-04 10:00\n".encode()).stays) == 2


# A patient on Heron from the 1st to the 5th, on leave until the 8th, back until the 10th; and one who stays on Heron.
LEAVE = (
    "a,a,Heron,2024-01-01 10:00,2024-01-05 10:00",
    "a,a,Home leave,2024-01-05 10:00,2024-01-08 10:00",
    "a,a,Heron,2024-01-08 10:00,2024-01-10 10:00",
    "b,b,Heron,2024-01-02 10:00,2024-01-03 10:00",
)


def bed_days(records: Records) -> float:
    """Return the days spent in beds by everybody."""
    return float((records.stays["end"] - records.stays["start"]).sum() / pd.Timedelta(days=1))


@pytest.mark.parametrize("given", [None, "given away"])
def test_a_bed_given_away_is_free_during_leave(read: Callable[..., Records], given: str | None) -> None:
    """The three days of leave count nowhere: 4 + 2 + 1 bed-days; where nobody said so, a note asks."""
    records = read(*LEAVE, choices=IntakeChoices(bed_on_leave=given))

    assert bed_days(records) == 7
    assert (records.report.repaired, records.report.set_aside) == (0, 1)
    assert any("nobody said whether their bed is held" in note for note in records.report.notes) is (given is None)


def test_a_held_bed_is_occupied_during_leave(read: Callable[..., Records]) -> None:
    """The ward that was left keeps the bed: one stay of nine days, one arrival, and the finding says so."""
    records = read(*LEAVE, choices=IntakeChoices(bed_on_leave="held"))

    assert bed_days(records) == 9 + 1
    assert len(records.of_ward("Heron")) == 2
    assert any("bed held" in reason for reason in records.report.reasons)
    assert records.report.set_aside == 0
    assert records.report.rows_in == 4 == records.report.used + records.report.repaired
    assert any("held, as the planner said" in note for note in records.report.notes)


@pytest.mark.parametrize(
    ("rows", "days"),
    [
        # leave written over the end of the stay, and leave after leave: both stay with Heron, 1st to 9th
        (("a,a,Heron,2024-01-01 10:00,2024-01-05 10:00", "a,a,On leave,2024-01-04 10:00,2024-01-09 10:00"), 8),
        (
            (
                "a,a,Heron,2024-01-01 10:00,2024-01-05 10:00",
                "a,a,Home leave,2024-01-05 10:30,2024-01-07 10:00",
                "a,a,Weekend leave,2024-01-07 10:00,2024-01-09 10:00",
            ),
            8,
        ),
        # back on another ward: Heron until the 8th, Teal from then on
        (
            (
                "a,a,Heron,2024-01-01 10:00,2024-01-05 10:00",
                "a,a,Home leave,2024-01-05 10:00,2024-01-08 10:00",
                "a,a,Teal,2024-01-08 10:00,2024-01-09 10:00",
            ),
            8,
        ),
        # leave two hours after the stay, of another patient, or before any stay: nobody knows which ward held the bed
        (("a,a,Heron,2024-01-01 10:00,2024-01-05 10:00", "a,a,Home leave,2024-01-05 12:00,2024-01-09 10:00"), 4),
        (("a,a,Heron,2024-01-01 10:00,2024-01-05 10:00", "z,z,Home leave,2024-01-05 10:00,2024-01-09 10:00"), 4),
        (("a,a,Home leave,2024-01-01 10:00,2024-01-05 10:00", "a,a,Heron,2024-01-05 10:00,2024-01-09 10:00"), 4),
    ],
)
def test_leave_stays_with_the_ward_that_was_left(
    read: Callable[..., Records], rows: tuple[str, ...], days: int
) -> None:
    """Held leave follows the stay just before it; where there is none it is set aside, with that reason."""
    records = read(*rows, choices=IntakeChoices(bed_on_leave="held"))

    assert bed_days(records) == days
    told = any("which ward held the bed isn't known" in reason for reason in records.report.reasons)
    assert told is (records.report.set_aside > 0) is (days == 4)
    assert "leave" not in {kind for place, kind in records.places.items() if place in records.wards}


def test_every_place_in_the_file_is_told(read: Callable[..., Records]) -> None:
    """The records say what each place was taken for, those set aside included, and follow what a person said."""
    rows = (*LEAVE, "c,c,Main Theatre,2024-01-05 10:00,2024-01-05 15:00")

    assert read(*rows).places == {"Heron": "bed ward", "Home leave": "leave", "Main Theatre": "procedure place"}
    said = read(*rows, choices=IntakeChoices(places={"Main Theatre": "bed ward"}))
    assert said.places["Main Theatre"] == "bed ward"
    assert said.wards == ("Heron", "Main Theatre")
    assert any("“Main Theatre” is taken for: ward with beds" in note for note in said.report.notes)


def test_chosen_days_are_named(read: Callable[..., Records]) -> None:
    """First and last complete day and a period left out count, and both stand in the report that documents print."""
    first, last = dt.date(2024, 1, 2), dt.date(2024, 1, 9)
    left_out = (dt.date(2024, 1, 4), dt.date(2024, 1, 6))
    choices = IntakeChoices(window=(first, last), excluded=(left_out,), excluded_because=("pandemic",))
    records = read(*LEAVE, choices=choices)

    assert records.window == (pd.Timestamp("2024-01-02"), pd.Timestamp("2024-01-10"))
    assert int((~records.counted_days).sum()) == 3
    assert any("02 January 2024 to 09 January 2024" in note for note in records.report.notes)
    assert "04 January 2024 to 06 January 2024 is left out of rates and rhythms: pandemic." in records.report.notes


@pytest.mark.parametrize(
    ("answers", "told"),
    [
        ({"window": (dt.date(1999, 1, 1), dt.date(1999, 2, 1))}, "01 January 2024 to 10 January 2024"),
        ({"excluded": ((dt.date(2023, 1, 1), dt.date(2025, 1, 1)),)}, "no day"),
        (
            {
                "excluded": (
                    (dt.date(2023, 1, 1), dt.date(2024, 1, 5)),
                    (dt.date(2024, 1, 6), dt.date(2025, 1, 1)),
                )
            },
            "no day",
        ),
        ({"places": {"Heron": "virtual"}}, "No row of stays.csv can be used"),
    ],
)
def test_answers_that_leave_nothing_are_refused(read: Callable[..., Records], answers: dict, told: str) -> None:
    """Days without a stay, periods that leave no day and places that leave no ward are told in a sentence."""
    with pytest.raises(UnreadableRecords, match=told):
        read(*LEAVE, choices=IntakeChoices(**answers))
