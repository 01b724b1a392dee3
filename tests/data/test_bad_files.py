"""Files that can't be used: each gives one clear sentence on what is wrong, where, and what to do."""

from __future__ import annotations

import io
import zipfile

import openpyxl
import pytest

from bedplan.data import estimate_demand, read_capacity, read_records
from bedplan.errors import UnreadableRecords

GOOD = b"patient_key,ward,start,end\na,Heron,2024-01-01 10:00,2024-01-04 10:00\n"


def zip_of(name: str, content: bytes) -> bytes:
    """Return a zip file holding one file."""
    packed = io.BytesIO()
    with zipfile.ZipFile(packed, "w", zipfile.ZIP_DEFLATED) as archive:
        archive.writestr(name, content)
    return packed.getvalue()


def empty_book() -> bytes:
    """Return a workbook with an empty sheet."""
    packed = io.BytesIO()
    openpyxl.Workbook().save(packed)
    return packed.getvalue()


BAD_FILES = {
    "nothing": (b"", "empty"),
    "blank lines": (b"\n\n  \n", "empty"),
    "a picture": (b"\x89PNG\r\n\x1a\n" + bytes(200), "picture"),
    "a photograph": (b"\xff\xd8\xff\xe0" + bytes(200), "picture"),
    "a PDF": (b"%PDF-1.7\n" + bytes(200), "PDF"),
    "an old workbook": (b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1" + bytes(512), "old Excel workbook"),
    "a zip of a table": (zip_of("stays.csv", GOOD), "unpack it"),
    "a swelling zip": (zip_of("xl/worksheets/sheet1.xml", bytes(300 * 2**20)), "unpack to"),
    "half a workbook": (empty_book()[:900], "damaged Excel workbook"),
    "an empty workbook": (empty_book(), "no line of headings"),
    "half a Parquet file": (b"PAR1" + bytes(100), "damaged Parquet"),
    "random bytes": (bytes(range(256)) * 20, "not a text table"),
    "half a UTF-16 file": (b"\xff\xfe" + "ward,start,end\n".encode("utf-16-le") + b"\x00\xd8\x00", "UTF-16"),
    "prose": (b"Dear colleague,\nplease find the figures attached.\n", "no line of headings"),
    "headings alone": (b"patient_key,ward,start,end\n", "no rows"),
    "no ward": (b"patient_key,start,end\na,2024-01-01,2024-01-04\n", "no ward column"),
    "no dates": (b"patient_key,ward,age\na,Heron,40\n", "no column for the arrival"),
    "no end": (b"patient_key,ward,start\na,Heron,2024-01-01\n", "no column for the departure"),
    "no readable date": (b"ward,start,end\nHeron,yesterday,today\nHeron,once,twice\n", "2024-03-31 14:05"),
    "only negative stays": (b"ward,start,end\nHeron,2024-01-04 10:00,2024-01-01 10:00\n", "ends before it starts"),
}


@pytest.mark.parametrize("kind", BAD_FILES)
def test_a_file_that_cannot_be_used_says_why(kind: str) -> None:
    """One sentence names the file, the trouble and the way out."""
    content, told = BAD_FILES[kind]

    with pytest.raises(UnreadableRecords) as problem:
        read_records(content, name="march.csv")

    assert told in str(problem.value)
    assert all("march.csv" in sentence and sentence.endswith(".") for sentence in problem.value.problems)


def test_every_problem_of_the_headings_is_told_at_once() -> None:
    """A file without ward, start and end names all three, in that order."""
    with pytest.raises(UnreadableRecords) as problem:
        read_records(b"patient_key,age_band\na,40-49\n", name="march.csv")

    assert len(problem.value.problems) == 3


def test_a_path_that_is_not_there_says_so() -> None:
    """A wrong path is told, not raised as an operating-system error."""
    with pytest.raises(UnreadableRecords, match=r"nowhere\.csv can't be opened"):
        read_records("/nowhere/nowhere.csv")


def test_a_ward_without_stays_lists_the_wards_there_are() -> None:
    """Asking for a ward the file doesn't have names those it has."""
    with pytest.raises(UnreadableRecords, match=r"no stay on ward “Teal”.*Heron"):
        estimate_demand(read_records(GOOD), "Teal")


def test_a_ward_nobody_left_gives_no_length_of_stay() -> None:
    """Without one finished stay the length of stay can't be told."""
    records = read_records(GOOD + b"b,Teal,2024-01-02 10:00,\n")

    with pytest.raises(UnreadableRecords, match="No stay on ward “Teal” has ended"):
        estimate_demand(records, "Teal")


@pytest.mark.parametrize(
    ("content", "told"),
    [
        (b"", "empty"),
        (b"ward,from,to\nHeron,2024-01-01,2024-12-31\n", "staffed or funded beds"),
        (b"ward,from,staffed_beds\nHeron,2024-01-01,many\n", "“many” in row 1"),
        (b"ward,from,staffed_beds\nHeron,soon,20\n", "“soon” in row 1"),
        (b"ward,from,staffed_beds\nHeron,2024-01-01,\n", "name a ward and a number of beds in each"),
    ],
)
def test_a_capacity_file_that_cannot_be_used_says_why(content: bytes, told: str) -> None:
    """The same holds for bed counts."""
    with pytest.raises(UnreadableRecords) as problem:
        read_capacity(content, name="beds.csv")

    assert told in str(problem.value)


@pytest.mark.parametrize("rows", [1, 3])
def test_a_handful_of_rows_works(rows: int) -> None:
    """One ward and very few stays give an answer, with notes that say how little it rests on."""
    lines = [f"p{n},Heron,2024-01-0{n + 1} 10:00,2024-01-0{n + 3} 12:00" for n in range(rows)]
    records = read_records("\n".join(["patient_key,ward,start,end", *lines]).encode())
    estimate = estimate_demand(records, "Heron")

    assert estimate.stays == rows
    assert any("Admissions are not arrivals" in note for note in estimate.notes)
    assert any("too few" in note for note in estimate.notes)
    assert estimate.month_factors == (1.0,) * 12
