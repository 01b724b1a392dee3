"""The planner sees which heading was taken for what, with three rows, and never an identity."""

from __future__ import annotations

import pytest

from bedplan.data import preview_columns, read_records
from bedplan.errors import ImpossibleFigure

ROWS = b"Location,In,Out,Surname,Note\nA,2024-01-01 10:00,2024-01-02 10:00,Smith,x\nB,2024-01-03 10:00,2024-01-04 10:00,Jones,y\n"


def test_usual_headings_are_matched_with_their_rows() -> None:
    """Each column that will be used shows its heading and the values under it."""
    seen = preview_columns(ROWS, name="stays.csv")

    assert dict(seen.matched) == {"ward": "Location", "start": "In", "end": "Out"}
    assert seen.samples["ward"] == ("A", "B")
    assert "Note" in seen.headings


def test_identities_are_never_shown() -> None:
    """A column of names is neither offered nor sampled."""
    seen = preview_columns(ROWS, name="stays.csv")

    assert "Surname" not in seen.headings
    assert "Smith" not in str(seen)


def test_unknown_headings_can_be_chosen() -> None:
    """A file whose headings nobody knows lists them, and reads once they are chosen."""
    rows = ROWS.replace(b"Location,In,Out", b"Alpha,Beta,Gamma")
    chosen = {"ward": "Alpha", "start": "Beta", "end": "Gamma"}

    assert set(preview_columns(rows, name="stays.csv").headings) == {"Alpha", "Beta", "Gamma", "Note"}
    assert read_records(rows, name="stays.csv", columns=chosen).wards == ("A", "B")
    assert preview_columns(rows, name="stays.csv", columns=chosen).samples["start"][0] == "2024-01-01 10:00"


def test_only_the_top_of_a_long_file_is_looked_at() -> None:
    """Ten thousand more rows change nothing in the preview."""
    row = b"C,2024-01-05 10:00,2024-01-06 10:00,Gray,z\n"

    assert (
        preview_columns(ROWS + row * 10_000, name="s.csv").samples == preview_columns(ROWS + row, name="s.csv").samples
    )


def test_keys_are_not_shown() -> None:
    """A patient's key may be a real number, so its column is named but its values stay hidden."""
    rows = b"MRN,Ward,Start,End\n9434765919,A,2024-01-01 10:00,2024-01-02 10:00\n"
    seen = preview_columns(rows, name="stays.csv")

    assert seen.matched["patient_key"] == "MRN"
    assert "9434765919" not in str(seen)


@pytest.mark.parametrize(
    ("kind", "content", "matched"),
    [
        ("staffed beds", b"ward,from,staffed_beds\nTeal,2024-01-01,12\n", ("ward", "from", "staffed")),
        ("refusals", b"Date,Time,Ward,Reason\n2024-01-01,10:00,Teal,no bed\n", ("ward", "time", "date", "reason")),
        ("bed requests", b"ward,requested_at,placed_at\nTeal,2024-01-01,2024-01-02\n", ("ward", "time", "placed")),
        ("cancellations", b"planned_date,ward,cancelled\n2024-01-01,Teal,Y\n", ("ward", "date", "outcome")),
        ("census", b"date,ward,occupied\n2024-01-01,Teal,5\n", ("date", "ward", "occupied")),
        ("monthly return", b"month,ward,discharges\n2024-01,Teal,5\n", ("month", "ward", "discharges")),
        ("ready dates", b"spell_key,ready\ns1,2024-01-01\n", ("spell_key", "date")),
    ],
)
def test_other_files_show_their_columns_too(kind: str, content: bytes, matched: tuple[str, ...]) -> None:
    """Each kind of file has its own names, and keys are not shown."""
    seen = preview_columns(content, kind=kind)

    assert tuple(seen.matched) == matched
    assert set(matched) <= set(seen.asked)
    assert not any("s1" in cells for cells in seen.samples.values())


def test_a_kind_of_file_nobody_knows_is_refused() -> None:
    """A wrong name is a mistake of the caller."""
    with pytest.raises(ImpossibleFigure, match="staffed beds"):
        preview_columns(b"ward,from\nTeal,2024-01-01\n", kind="beds")
