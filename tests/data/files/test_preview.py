"""The planner sees which heading was taken for what, with three rows, and never an identity."""

from __future__ import annotations

import io

import pandas as pd
import pytest

from bedplan.data import preview_columns, read_capacity, read_records
from bedplan.errors import ImpossibleFigure, UnreadableRecords

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


STRANGE = "K1,K2,K3,K19,K20\n" + "".join(
    f"{ward},2024-0{month}-01,{9 + month},{name},{90_000 + 7 * month}\n"
    for month, ward, name in [(1, "East", "Ida"), (2, "West", "Ella"), (3, "East", "Emma"), (4, "West", "Ada")]
)


def as_file(ending: str) -> bytes:
    """Return the strange table as a file of this kind; the workbook has an empty sheet before it."""
    if ending == "csv":
        return STRANGE.encode()
    table, written = pd.read_csv(io.StringIO(STRANGE)), io.BytesIO()
    if ending == "parquet":
        table.to_parquet(written, index=False)
    else:
        with pd.ExcelWriter(written) as book:
            pd.DataFrame().to_excel(book, sheet_name="Cover", index=False)
            table.to_excel(book, sheet_name="Beds", index=False)
    return written.getvalue()


@pytest.mark.parametrize("ending", ["csv", "xlsx", "parquet"])
def test_what_unknown_columns_hold_is_shown(ending: str) -> None:
    """Headings nobody knows are listed, whatever the file, with their first rows, but not with what may name a person."""
    seen = preview_columns(as_file(ending), name=f"beds.{ending}", kind="staffed beds")

    assert seen.headings == ("K1", "K2", "K3", "K19", "K20")
    assert dict(seen.matched) == {}
    assert seen.lacking == (("ward",), ("staffed", "funded"))
    assert seen.others == {
        "K1": ("East", "West", "East"),
        "K2": ("2024-01-01", "2024-02-01", "2024-03-01"),
        "K3": ("10", "11", "12"),
        "K19": ("not shown",),
        "K20": ("not shown",),
    }


@pytest.mark.parametrize("content", [b"Dear all,\nthe beds are attached.\n", b"K1,K2,K3\n"])
def test_prose_and_headings_alone_have_no_columns(content: bytes) -> None:
    """Where there are no rows under headings there is nothing to choose."""
    assert preview_columns(content, kind="staffed beds").headings == ()


def test_what_cannot_be_chosen_is_shown_without_it() -> None:
    """One heading for two names is refused as the file is read; the preview shows what it would be without that."""
    rows = b"ward,from,beds\nTeal,2024-01-01,12\n"
    chosen = {"staffed": "beds", "ward": "beds"}
    with pytest.raises(UnreadableRecords, match="“beds” was chosen for staffed and for ward"):
        read_capacity(rows, columns=chosen)

    assert dict(preview_columns(rows, kind="staffed beds", columns=chosen).matched)["ward"] == "ward"


def test_a_column_can_be_said_to_be_none() -> None:
    """A name for which no column is chosen takes none, though a heading would fit, and the heading is free again."""
    rows = b"ward,from,staffed,closed\nTeal,2024-01-01,12,2\n"

    assert read_capacity(rows).table["closed"].tolist() == [2]
    assert read_capacity(rows, columns={"closed": ""}).table["closed"].tolist() == [0]
    assert "closed" in preview_columns(rows, kind="staffed beds", columns={"closed": ""}).others


@pytest.mark.parametrize(
    ("headings", "kind", "told"),
    [
        ("time,ward,reason", "census", "a list of patients not given a bed, not like a census"),
        ("ward,start,end", "refusals", "a file of ward stays, not like a list of patients not given a bed"),
        ("date,ward,occupied", "ward stays", "a census, not like a file of ward stays"),
        ("ward,from,staffed beds", "ready dates", "a file of staffed beds, not like a file of ready dates"),
        ("ward,requested at,placed at", "monthly return", "a list of bed requests, not like a monthly return"),
        ("month,ward,obd,discharges", "census", "a monthly return, not like a census"),
        ("spell key,ready date", "staffed beds", "a file of ready dates, not like a file of staffed beds"),
    ],
)
def test_headings_of_another_kind_are_named(headings: str, kind: str, told: str) -> None:
    """Headings that make another kind of file complete, and not this one, are said to be that; not once a person chose."""
    content = f"{headings}\n{','.join('2' for _ in headings.split(','))}\n".encode()

    assert (
        preview_columns(content, name="x.csv", kind=kind).mistaken
        == f"x.csv looks like {told}: choose another file here."
    )
    assert not preview_columns(content, kind=kind, columns={"ward": headings.split(",", maxsplit=1)[0]}).mistaken


@pytest.mark.parametrize("headings", ["Date,K17,K9", "date,time,ward,reason_for_it", "Datum,K1,Zahl"])
def test_nothing_is_claimed_of_headings_that_fit_no_kind(headings: str) -> None:
    """Where no kind is complete the columns that lack are named, and no other kind."""
    content = f"{headings}\n{','.join('x' for _ in headings.split(','))}\n".encode() * 2
    seen = preview_columns(content, kind="monthly return")

    assert seen.mistaken == ""
    assert seen.lacking


def test_a_wide_census_is_asked_for_its_dates() -> None:
    """Wards with counts under them are no columns to choose from our names; two rows of headings are no other case."""
    one = b"Date,Heron,Teal\n2024-01-01,20,5\n2024-01-02,21,6\n"
    two = b",Heron,,Teal,\nDate,occupied,beds,occupied,beds\n2024-01-01,20,24,5,8\n2024-01-02,21,24,6,8\n"

    for content in (one, two):
        seen = preview_columns(content, name="wide.csv", kind="census")
        assert seen.asked == ("date", "time")
        assert dict(seen.matched) == {"date": "Date"}
        assert seen.samples["date"] == ("2024-01-01", "2024-01-02")
        assert seen.hint == "Read as a table with a column for each ward: Heron, Teal."


def test_a_wide_census_in_doubt_is_asked_for_everything() -> None:
    """Where one of the columns taken for wards holds no count, wards and patients may stand in columns of their own."""
    seen = preview_columns(b"Date,K17,K9\n2024-01-01,Heron,20\n2024-01-02,Heron,21\n", kind="census")

    assert "ward" in seen.asked
    assert "If it has a row for each ward" in seen.hint
