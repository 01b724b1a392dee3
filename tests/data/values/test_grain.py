"""Files whose rows are not stays on one ward: accepted where they can be, with what they can't tell."""

from __future__ import annotations

import pandas as pd
import pytest

from bedplan.data import read_records
from bedplan.errors import UnreadableRecords

HOSPITAL_STAYS = b"""SpellNo,First ward,Last ward,Admitted,Discharged
s1,Heron,Heron,2024-01-01 10:00,2024-01-05 10:00
s2,Heron,Teal,2024-01-02 10:00,2024-01-09 10:00
s3,Teal,teal ,2024-01-03 10:00,2024-01-09 10:00
s4,Teal,Heron,2024-01-04 10:00,2024-01-09 10:00
"""


def test_hospital_stays_count_on_their_first_ward_and_say_what_that_hides() -> None:
    """Half of them ended on another ward: totals hold, wards may not."""
    records = read_records(HOSPITAL_STAYS)

    assert records.wards == ("Heron", "Teal")
    assert records.stays["start"].min() == pd.Timestamp("2024-01-01 10:00")
    (note,) = [note for note in records.report.notes if "whole hospital stay" in note]
    assert "counted on its “First ward”" in note
    assert "In 50 % of rows “Last ward” is another ward" in note.replace("50%", "50 %").replace("\u00a0", " ")


@pytest.mark.parametrize("heading", ["Discharge ward", "Ward on admission"])
def test_one_ward_of_a_hospital_stay_is_told_too(heading: str) -> None:
    """With the first or the last ward alone, nobody can tell how many moved."""
    content = f"SpellNo,{heading},Admitted,Discharged\ns1,Heron,2024-01-01 10:00,2024-01-05 10:00\n"
    notes = read_records(content.encode()).report.notes

    assert any(f"whole hospital stay, counted on its “{heading}”" in note for note in notes)


def test_a_ward_beside_first_and_last_is_the_ward() -> None:
    """An extract of ward stays may name those of the hospital stay as well."""
    records = read_records(
        b"spell_key,ward,start,end,first_ward,last_ward\ns1,Heron,2024-01-01 10:00,2024-01-05 10:00,Teal,Swift\n"
    )

    assert records.wards == ("Heron",)
    assert not any("whole hospital stay" in note for note in records.report.notes)


@pytest.mark.parametrize(
    "headings",
    [
        "spell_key,EpiOrder,ward,start,end",
        "spell_key,row,ward,EpiStart,EpiEnd",
        "spell_key,FCE,ward,Episode start,Episode end",
        "episode_id,Consultant,ward,start,end",
    ],
)
def test_episodes_under_a_consultant_are_told_from_ward_stays(headings: str) -> None:
    """The note names the heading that shows it, and asks for ward stays."""
    records = read_records(f"{headings}\ns1,1,Heron,2024-01-01 10:00,2024-01-05 10:00\n".encode())
    (note,) = [note for note in records.report.notes if "episode under one consultant" in note]

    assert "Ask for an extract of ward stays" in note


def test_an_episode_number_alone_may_be_a_hospital_stay() -> None:
    """Some systems call a hospital stay so: nothing is said."""
    records = read_records(b"episode_id,ward,start,end\ns1,Heron,2024-01-01 10:00,2024-01-05 10:00\n")

    assert not any("consultant" in note for note in records.report.notes)


def test_episodes_without_a_ward_are_refused() -> None:
    """No ward, no beds by ward."""
    with pytest.raises(UnreadableRecords, match="no ward column"):
        read_records(b"spell_key,epistart,epiend\ns1,2024-01-01,2024-01-05\n")
