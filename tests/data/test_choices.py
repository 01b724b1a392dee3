"""Answers a planner gives about a file are checked before they are used."""

from __future__ import annotations

import datetime as dt

import pytest

from bedplan.data import IntakeChoices, read_records
from bedplan.data.choices import PLACE_KINDS
from bedplan.data.places import BED_WARD, PLACE_NAMES
from bedplan.errors import ImpossibleFigure

CONTENT = b"patient_key,ward,start,end\na,Heron,2024-01-01 10:00,2024-01-04 10:00\n"


@pytest.mark.parametrize(
    ("answers", "told"),
    [
        ({"places": {"Heron": "a nice place"}}, "Heron can't be"),
        ({"time_zone": "Larkmere/Town"}, "Larkmere/Town"),
        ({"time_zone": "../etc"}, "time zone"),
        ({"excluded": ((dt.date(2024, 2, 1), dt.date(2024, 1, 1)),)}, "ends before it starts"),
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
