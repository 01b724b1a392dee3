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
