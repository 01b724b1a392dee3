"""Rules about one row at a time: dates that mean none, and wards named once for many rows."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pandas as pd
import pytest

from bedplan.data.files.rules import RULES

if TYPE_CHECKING:
    from collections.abc import Callable

    from bedplan.data import Records

    Read = Callable[..., Records]

PLAIN = tuple(f"p{n},s{n},Heron,2024-01-{n + 1:02d} 10:00,2024-01-{n + 4:02d} 16:00" for n in range(1, 20))


def reasons(records: Records) -> dict[str, int]:
    """Return the rules met, by their short names, with their rows."""
    names = {rule.sentence: key for key, rule in RULES.items()}
    return {names[sentence]: rows for sentence, rows in records.report.reasons.items()}


@pytest.mark.parametrize("empty", ["1900-01-01 00:00", "0001-01-01 00:00", "1753-01-01 00:00", "1970-01-01 00:00"])
def test_an_empty_date_is_no_end(read: Read, empty: str) -> None:
    """What a system writes where there is no end is a patient still in, and the report says so; other early dates are not."""
    records = read(*PLAIN, f"a,b,Heron,2024-01-22 09:00,{empty}", "c,d,Heron,2024-01-22 09:00,1900-01-02 00:00")

    assert records.stays.loc[records.stays["end"].isna(), "start"].tolist() == [pd.Timestamp("2024-01-22 09:00")]
    assert reasons(records) == {"empty end": 1, "unlikely date": 1}


NOUGHTS = ("0", "0.0", "00:00:00", "00/00/0000", "0000-00-00 00:00:00", "1900-01-00 00:00", "00/01/1900", "1/0/1900")


@pytest.mark.parametrize("nought", NOUGHTS)
def test_a_nought_is_no_end(read: Read, nought: str) -> None:
    """A nought, or a date of noughts, is a patient still in, counted in the report; as a start it is no date of a patient."""
    records = read(*PLAIN, f"a,b,Heron,2024-01-22 09:00,{nought}", f"c,d,Heron,{nought},2024-01-22 09:00")

    assert records.stays.loc[records.stays["end"].isna(), "start"].tolist() == [pd.Timestamp("2024-01-22 09:00")]
    assert reasons(records) == {"empty end": 1, "unlikely date": 1}


@pytest.mark.parametrize(
    ("end", "known", "rule"),
    [
        ("1980-01-06 00:00", 3, "empty end"),
        ("1901-01-01 12:00", 3, "empty end"),
        ("1980-01-06 00:00", 0, "unlikely date"),
        ("2099-12-31 00:00", 3, "end to come"),
        ("9999-12-31 23:59", 3, "end to come"),
    ],
)
def test_the_same_impossible_end_again_and_again_is_none_yet(read: Read, end: str, known: int, rule: str) -> None:
    """Three ends on one day that can't be are a sign for "still in"; two before 1990 may be slips. Each row is counted."""
    rows = [f"a{n},b{n},Heron,2024-01-22 09:0{n},{end}" for n in range(max(known, 2))]
    records = read(*PLAIN, *rows)

    assert int(records.stays["end"].isna().sum()) == known
    assert reasons(records) == {rule: len(rows)}


def test_the_reason_for_an_early_end_is_true(read: Read) -> None:
    """A row set aside for its end does not say that its start was wrong."""
    records = read(*PLAIN, "c,d,Heron,2024-01-22 09:00,1985-03-07 00:00")

    assert [*records.set_aside["reason"]] == ["The start lies in the future or before 1990, or the end before 1990"]


def test_patients_still_in_do_not_change_how_the_file_was_chosen(read: Read) -> None:
    """Written 1900-01-01 or left blank, the ends of those still in make the same stays and the same period."""
    rows = [
        f"p{n},s{n},Heron,2024-{n % 6 + 1:02d}-{n % 28 + 1:02d} 10:00,2024-{n % 6 + 1:02d}-28 16:00" for n in range(300)
    ]
    still_in = [f"q{n},t{n},Heron,2024-06-{n + 8:02d} 09:00," for n in range(20)]
    blank, early = (read(*rows, *(f"{row}{end}" for row in still_in)) for end in ("", "1900-01-01 00:00"))

    assert (early.window, early.chosen_by) == (blank.window, blank.chosen_by)
    assert early.stays[["start", "end"]].equals(blank.stays[["start", "end"]])


def test_a_ward_named_once_for_many_rows(read: Read) -> None:
    """Merged cells leave the ward's name in the first of its rows: it counts for those below, and the report says so."""
    rows = [row if n in (0, 12) else row.replace("Heron", "") for n, row in enumerate(PLAIN)]
    rows[12] = rows[12].replace("Heron", "Teal")
    records = read(*rows)

    assert records.stays["ward"].tolist() == ["Heron"] * 12 + ["Teal"] * 7
    assert reasons(records) == {"ward above": 17}


def test_wards_missing_here_and_there_are_not_guessed(read: Read) -> None:
    """Where rows next to each other name the same ward, a blank cell is a ward nobody named."""
    records = read(*(row.replace("Heron", "") if n % 3 else row for n, row in enumerate(PLAIN)))

    assert reasons(records) == {"no ward": 12}
