"""What is a ward and what is a theatre: by an unmistakable name, or by how patients pass through it."""

from __future__ import annotations

import pandas as pd
import pytest

from bedplan.data import IntakeChoices, Records, read_records
from bedplan.data.cleaning.places import kind_of_place

FIRST = pd.Timestamp("2023-01-01 06:00")


def visits(place: str, hours: float, *, on_the_way: bool, **options: object) -> Records:
    """Read 60 patients who stay so long in a place, straight, or between two days on Heron and three on Teal."""
    lines = ["patient_key,spell_key,ward,start,end"]
    for row in range(60):
        came = FIRST + pd.Timedelta(hours=20 * row)
        here = came + pd.Timedelta(days=2)
        gone = here + pd.Timedelta(hours=hours)
        lines.append(f"p{row},s{row},{place},{here},{gone}")
        if on_the_way:
            lines.append(f"p{row},s{row},Heron,{came},{here}")
            lines.append(f"p{row},s{row},Teal,{gone},{gone + pd.Timedelta(days=3)}")
        else:
            lines.append(f"q{row},t{row},Heron,{came},{here}")
    return read_records("\n".join(lines).encode(), name="stays.csv", choices=IntakeChoices(**options))


@pytest.mark.parametrize(
    ("name", "kind"),
    [
        ("Theatre 3", "procedure place"),
        ("Recovery", "procedure place"),
        ("Theatre Recovery", "procedure place"),
        ("X-ray", "procedure place"),
        ("Discharge lounge", "procedure place"),
        ("Emergency Department", "waiting place"),
        ("A&E", "waiting place"),
        ("Stroke Recovery Unit", "bed ward"),
        ("Acute Recovery Ward", "bed ward"),
        ("Hip recovery", "bed ward"),
        ("Radiology Ward", "bed ward"),
        ("Heron", "bed ward"),
    ],
)
def test_names(name: str, kind: str) -> None:
    """Only a name that no ward could have makes a theatre, a lounge or a waiting place."""
    assert kind_of_place(name) == kind


@pytest.mark.parametrize("name", ["Stroke Recovery Unit", "Acute Recovery Ward", "Recovery", "Imaging"])
@pytest.mark.parametrize("on_the_way", [True, False])
def test_where_patients_stay_for_days_is_a_ward(name: str, on_the_way: bool) -> None:
    """A whole ward is never lost for its name."""
    records = visits(name, 96, on_the_way=on_the_way)

    assert name in records.wards
    assert records.report.set_aside == 0


@pytest.mark.parametrize("name", ["Recovery Unit", "Endoscopy Unit", "Theatre"])
def test_a_doubtful_name_with_short_stays_is_no_ward_and_is_told(name: str) -> None:
    """Three hours in an endoscopy unit: no ward; the report names it with its rows and bed-days."""
    records = visits(name, 3, on_the_way=False)
    (told,) = [note for note in records.report.notes if f"“{name}”" in note]

    assert name not in records.wards
    assert "60 rows with 7.5 bed-days" in told  # 60 × 3 hours
    assert visits(name, 3, on_the_way=False, places={name: "bed ward"}).report.set_aside == 0


def test_short_stays_between_two_wards_are_a_procedure_place() -> None:
    """Whatever it is called: patients come from one ward, stay four hours and go to another."""
    records = visits("Dept 44", 4, on_the_way=True)

    assert records.places["Dept 44"] == "procedure place"
    assert any("“Dept 44”" in note and "60 rows with 10.0 bed-days" in note for note in records.report.notes)


def test_short_stays_of_people_who_come_and_go_home_are_a_ward() -> None:
    """A day unit nobody passes through stays a ward."""
    assert "Dept 44" in visits("Dept 44", 4, on_the_way=False).wards
