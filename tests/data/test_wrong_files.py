"""Files for the wrong box, and files that hold too little: what is said names the file, the trouble and the way out."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import pytest

from bedplan.data import (
    read_cancellations,
    read_capacity,
    read_census,
    read_monthly_return,
    read_records,
    read_refusals,
)
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from pathlib import Path

READERS = {
    "ward stays": read_records,
    "staffed beds": read_capacity,
    "patients not given a bed": read_refusals,
    "cancelled bookings": read_cancellations,
    "a census": read_census,
    "a monthly return": read_monthly_return,
}
# kind of file -> (its headings, a good row, the same without a ward, the same without a readable date, without a figure)
ROWS = {
    "ward stays": ("ward,start,end", "A,2024-01-01,2024-01-03", ",2024-01-01,2024-01-03", "A,soon,later", "A,,"),
    "staffed beds": ("ward,from,to,staffed_beds", "A,2024-01-01,,20", ",2024-01-01,,20", "A,soon,,20", "A,,,many"),
    "patients not given a bed": ("time,ward,reason", "2024-01-01,A,", "2024-01-01,,", "soon,A,", ",A,"),
    "cancelled bookings": ("planned_date,ward,reason", "2024-01-01,A,", "2024-01-01,,", "soon,A,", ",A,"),
    "a census": ("date,ward,occupied", "2024-01-01,A,18", "2024-01-01,,18", "soon,A,18", "2024-01-01,A,some"),
    "a monthly return": (
        "month,ward,obd,discharges",
        "2024-01,A,500,90",
        "2024-01,,500,90",
        "soon,A,500,90",
        "2024-01,A,,",
    ),
}
# file of the demo -> what it is
DEMO_FILES = {
    "stays.csv": "ward stays",
    "capacity.csv": "staffed beds",
    "refusals.csv": "patients not given a bed",
    "cancellations.csv": "cancelled bookings",
    "census.csv": "a census",
    "monthly_return.csv": "a monthly return",
    "bed_requests.csv": "bed requests",
}
# a daily census says how many beds there were; a refusal without a bed counts as one, whatever the list is called
ALIKE = {("staffed beds", "census.csv"), ("cancelled bookings", "refusals.csv")}


def refusal(kind: str, content: bytes) -> str:
    """Return what is said about a file that can't be used."""
    with pytest.raises(UnreadableRecords) as problem:
        READERS[kind](content, name="march.csv")
    assert all(sentence.count("march.csv") == 1 for sentence in problem.value.problems)
    assert all(sentence.endswith(".") for sentence in problem.value.problems)
    return str(problem.value)


@pytest.mark.parametrize("kind", READERS)
@pytest.mark.parametrize(
    ("content", "told"),
    [(b"", "is empty"), (b" \n\n", "is empty"), (b"%PDF-1.7", "is a PDF document, not a table")],
)
def test_no_reader_speaks_of_other_files(kind: str, content: bytes, told: str) -> None:
    """An empty file or a document is told the same way everywhere, without a word about ward stays."""
    said = refusal(kind, content)

    assert told in said
    assert "ward stays" not in said


@pytest.mark.parametrize("kind", READERS)
def test_headings_alone_are_not_enough(kind: str) -> None:
    """A file with headings and no row says that it has no rows."""
    assert "no rows" in refusal(kind, ROWS[kind][0].encode() + b"\n")


@pytest.mark.parametrize("kind", READERS)
def test_one_row_is_enough(kind: str) -> None:
    """One good row is read."""
    assert READERS[kind]("\n".join(ROWS[kind][:2]).encode(), name="march.csv").wards == ("A",)


@pytest.mark.parametrize("kind", READERS)
@pytest.mark.parametrize("place", [2, 3, 4], ids=["no ward", "no date", "no figure"])
def test_one_bad_row_says_what_is_wrong(kind: str, place: int) -> None:
    """A single row that can't be used is spoken of as one row, with what to write instead."""
    said = refusal(kind, "\n".join((ROWS[kind][0], ROWS[kind][place])).encode())

    assert not re.search(r"\b1 rows|\bthe 1 |Not one", said)
    assert re.search(r"write|check", said)
    assert len(said.split()) <= 45


@pytest.mark.parametrize("kind", READERS)
@pytest.mark.parametrize("file", DEMO_FILES)
def test_a_file_for_another_box_is_refused(kind: str, file: str, demo_data: Path) -> None:
    """The demo's files are read as what they are only; the sentence says what to look for."""
    content = b"\n".join((demo_data / file).read_bytes().split(b"\n")[:60])
    if DEMO_FILES[file] == kind or (kind, file) in ALIKE:
        assert READERS[kind](content, name="march.csv").wards
        return
    said = refusal(kind, content)

    assert "looks like" in said or "lacks" in said or "no column" in said
    if "looks like" in said:
        assert f"looks like {DEMO_FILES[file]}, not like {kind}" in said


@pytest.mark.parametrize("reader", [read_capacity, read_refusals, read_cancellations, read_census])
def test_dates_that_read_two_ways_are_asked_for(reader: object) -> None:
    """Where 03/04 may be April or March no reader guesses, none speaks of stays, and each takes the answer."""
    kind = next(name for name, known in READERS.items() if known is reader)
    content = "\n".join(ROWS[kind][:2]).replace("2024-01-01", "03/04/2024").encode()
    with pytest.raises(UnreadableRecords) as problem:
        reader(content, name="march.csv")
    assert "Say which it is." in str(problem.value)
    assert "stays" not in str(problem.value)
    assert problem.value.question.ends_before_start == {}

    for order, month in (("day first", 4), ("month first", 3)):
        table = reader(content, name="march.csv", date_order=order).table
        assert table["from" if kind == "staffed beds" else "time"].dt.month.tolist() == [month]
