"""Stays inside another stay of the same patient: one bed at a time, and no ward loses its bed-days."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from bedplan.data import IntakeChoices, read_records
from bedplan.data.cleaning.nesting import bed_times
from bedplan.data.files.rules import RULES

if TYPE_CHECKING:
    from bedplan.data import Records

FIRST = pd.Timestamp("2023-01-01 10:00")
PARTED = RULES["parted"].sentence


def intensive_care(rows: int, **options: object) -> Records:
    """Read stays of 10 days on Heron, each with days 3 to 7 in intensive care, and a move to Teal at the end."""
    lines = ["patient_key,spell_key,ward,start,end,specialty"]
    for row in range(rows):
        start = FIRST + pd.Timedelta(days=row)
        times = [start + pd.Timedelta(days=day) for day in (0, 3, 7, 10, 12)]
        for ward, since, until in (("Heron", 0, 3), ("ICU", 1, 2), ("Teal", 3, 4)):
            lines.append(f"p{row},s{row},{ward},{times[since]},{times[until]},med{row % 3}")
    return read_records("\n".join(lines).encode(), name="stays.csv", choices=IntakeChoices(**options))


def bed_days(records: Records) -> dict[str, float]:
    """Return the bed-days of each ward."""
    days = (records.stays["end"] - records.stays["start"]).dt.total_seconds() / 86_400
    return days.groupby(records.stays["ward"].astype(str)).sum().to_dict()


def test_intensive_care_inside_a_ward_stay_keeps_its_bed_days() -> None:
    """The ward stay is parted round intensive care; rows and bed-days balance, and the long ones are told."""
    records = intensive_care(60)
    report = records.report

    assert bed_days(records) == pytest.approx({"Heron": 60 * 6, "ICU": 60 * 4, "Teal": 60 * 2})
    assert dict(report.reasons) == {PARTED: 60}
    assert (report.rows_in, report.used, report.repaired, report.set_aside) == (180, 120, 60, 0)
    assert report.bed_days_in == pytest.approx(60 * 16)
    assert report.bed_days_in + report.bed_days_added == pytest.approx(report.bed_days_used)
    assert report.bed_days_used == pytest.approx(60 * 12)
    assert len(records.stays) == 4 * 60
    assert any(note.startswith("60 overlaps") for note in report.notes)
    assert not any("gaps of more than an hour" in note for note in report.notes)
    back = records.stays[(records.stays["ward"] == "Heron") & (records.stays["start"].dt.day == 8)]
    assert set(back["specialty"]) <= {"med0", "med1", "med2"}


def test_a_bed_that_is_held_counts_whole() -> None:
    """Where beds are held, both the ward's bed and intensive care's are in use."""
    assert bed_days(intensive_care(60, bed_on_leave="held")) == pytest.approx({"Heron": 600, "ICU": 240, "Teal": 120})


def test_theatre_in_the_middle_parts_nothing() -> None:
    """Two hours in theatre are no reason to arrive on the ward twice."""
    lines = ["patient_key,ward,start,end"]
    for row in range(30):
        day = FIRST + pd.Timedelta(days=row)
        lines += [
            f"p{row},Heron,{day},{day + pd.Timedelta(days=5)}",
            f"p{row},Theatre,{day + pd.Timedelta(days=1)},{day + pd.Timedelta(days=1, hours=2)}",
        ]
    records = read_records("\n".join(lines).encode(), name="stays.csv")

    assert len(records.stays) == 30
    assert bed_days(records) == pytest.approx({"Heron": 150})


@given(st.lists(st.tuples(st.integers(0, 30), st.integers(1, 15)), min_size=1, max_size=6))
def test_every_hour_in_hospital_is_spent_in_one_bed(stays: list[tuple[int, int]]) -> None:
    """Hour by hour: in a bed exactly while some stay goes on, never in two, and in that of the stay begun last."""
    start, end = [one for one, _ in stays], [one + length for one, length in stays]
    pieces = bed_times(start, end)
    taken = np.zeros((len(stays), 50), dtype=int)
    for place, mine in enumerate(pieces):
        for since, until in mine:
            taken[place, since:until] += 1

    for hour in range(50):
        going = [place for place in range(len(stays)) if start[place] <= hour < end[place]]
        assert taken[:, hour].sum() == (1 if going else 0)
        if going:
            assert start[int(taken[:, hour].argmax())] == max(start[place] for place in going)
