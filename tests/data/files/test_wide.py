"""A table is taken for one with a column for each ward only where its rows can be that."""

from __future__ import annotations

import pytest

from bedplan.data import read_census
from bedplan.errors import UnreadableRecords

DAYS = [f"2024-03-{day:02d}" for day in range(1, 15)]


def table(headings: str, *rows: str) -> bytes:
    """Return headings and rows as a file."""
    return "\n".join([headings, *rows]).encode()


@pytest.mark.parametrize("headings", ["Date,K17,K9", "Date,K17,occupied", "Date,ward,K9"])
@pytest.mark.parametrize("wards", [("Heron", "Teal"), ("11", "12"), ("Heron", "Teal", "Kestrel")])
def test_a_row_for_each_ward_is_not_a_column_for_each(headings: str, wards: tuple[str, ...]) -> None:
    """Days that stand once for each ward, with wards or patients under a heading nobody knows, are asked about."""
    rows = [f"{day},{ward},{10 + place}" for day in DAYS for place, ward in enumerate(wards)]
    with pytest.raises(UnreadableRecords, match="lacks"):
        read_census(table(headings, *rows))

    _, ward, occupied = headings.split(",")
    census = read_census(table(headings, *rows), columns={"ward": ward, "occupied": occupied})
    assert census.wards == tuple(sorted(wards))
    assert census.occupied(wards[1]).tolist() == [11] * len(DAYS)


def test_a_column_for_each_ward_may_have_rows_twice() -> None:
    """Rows exported twice, and two times a day, leave such a table what it is."""
    twice = [f"{day},00:00,10,5" for day in DAYS] * 2
    hours = [f"{day},{clock},{count},5" for day in DAYS for clock, count in (("00:00", 10), ("12:00", 12))]

    for rows in (twice, hours):
        census = read_census(table("Date,Time,Heron,Teal", *rows))
        assert census.wards == ("Heron", "Teal")
        assert census.occupied("Heron").tolist() == [10] * len(DAYS)
    assert census.occupied("Heron", "12:00").tolist() == [12] * len(DAYS)
