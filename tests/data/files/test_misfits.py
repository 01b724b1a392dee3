"""Stray quotation marks, cells over several lines, and lines that are no rows: every line is accounted for."""

from __future__ import annotations

import pandas as pd
import pytest

from bedplan.data import read_records
from bedplan.data.files.rules import RULES
from bedplan.errors import UnreadableRecords

HEADINGS = "patient_key,ward,destination,start,end"


def lines(rows: int) -> list[str]:
    """Return a clean file, a line a stay, three a day."""
    start = pd.Timestamp("2023-01-01 08:00") + pd.to_timedelta([8 * row for row in range(rows)], unit="h")
    return [
        HEADINGS,
        *(f"p{row},Heron,home,{one},{one + pd.Timedelta(hours=50 + row % 40)}" for row, one in enumerate(start)),
    ]


def written(text: list[str], end: str = "\n") -> bytes:
    """Return the file."""
    return (end.join(text) + end).encode()


@pytest.mark.parametrize("size", [300, 30_000])
@pytest.mark.parametrize("end", ["\n", "\r\n"])
@pytest.mark.parametrize("strays", [(100,), (50, 51), (10, 250), (5, 100, 299)])
def test_a_stray_quotation_mark_swallows_no_row(strays: tuple[int, ...], end: str, size: int) -> None:
    """The mark is taken out, every line is a row as in the clean file, and the lines are named."""
    text = lines(size)
    clean = read_records(written(text, end), name="stays.csv")
    for place in strays:
        text[place] = text[place].replace("home", '"home')
    records = read_records(written(text, end), name="stays.csv")
    told = " ".join(records.report.notes)

    assert records.report.rows_in == size == clean.report.rows_in
    assert records.stays[["ward", "start", "end"]].equals(clean.stays[["ward", "start", "end"]])
    assert "quotation mark" in told
    assert all(f"{place + 1:,}" in told for place in strays)


def test_a_line_nobody_can_mend_is_set_aside_with_its_number() -> None:
    """With a separator too many beside the stray mark, only that line goes, and it stands in the rows set aside."""
    text = lines(300)
    text[120] = text[120].replace("home", '"home, alone')
    records = read_records(written(text), name="stays.csv")

    assert records.report.rows_in == 300
    assert dict(records.report.reasons) == {RULES["misfit"].sentence: 1}
    assert list(records.set_aside["line"]) == [121]
    assert any("line 121" in note.lower() for note in records.report.notes)


@pytest.mark.parametrize("heading", [0, 1, 2, 4])
@pytest.mark.parametrize("separator", [",", "\t"])
def test_a_stray_mark_in_the_headings_loses_nothing(heading: int, separator: str) -> None:
    """Before whichever heading it stands, the file reads as without it, and the report says so."""
    text = lines(300)
    clean = read_records(written(text), name="stays.csv")
    headings = HEADINGS.split(",")
    headings[heading] = f'"{headings[heading]}'
    spoilt = [",".join(headings), *text[1:]]
    records = read_records(written([line.replace(",", separator) for line in spoilt]), name="stays.csv")

    assert records.report.rows_in == 300
    assert records.stays[["ward", "start", "end"]].equals(clean.stays[["ward", "start", "end"]])
    assert any("quotation mark" in note and "headings, line 1" in note for note in records.report.notes)


@pytest.mark.parametrize("rows", ["p0,Hero", 'p0,"Heron', "p0,Heron,home,2024-01-01 10:00,2024-01-02 10:00,x,y"])
def test_a_refusal_always_has_its_reason(rows: str) -> None:
    """A file cut inside its first row, or with cells too many, says what is wrong with its row."""
    with pytest.raises(UnreadableRecords, match=r"can be used: [^;]+ \(1 row\); check") as problem:
        read_records(written([HEADINGS, rows]), name="stays.csv")

    assert "another number of cells" in str(problem.value)


def test_cells_over_several_lines_still_work() -> None:
    """A remark with line ends and commas is one cell of one row, beside a stray mark further on."""
    text = lines(300)
    text[40] = text[40].replace("home", '"home,\nwith help,\n\nfrom family"')
    text[41] = text[41].replace("home", '"care\nhome"')
    clean = read_records(written(lines(300)), name="stays.csv")
    assert read_records(written(text), name="stays.csv").report.rows_in == 300
    text[200] = text[200].replace("home", '"home')
    records = read_records(written(text), name="stays.csv")

    assert records.report.rows_in == 300
    assert dict(records.report.reasons) == {}
    assert records.stays["start"].equals(clean.stays["start"])
    assert any("line 205" in note for note in records.report.notes)  # four more line ends above it


@pytest.mark.parametrize("count", [1, 3, 60])
def test_lines_with_another_number_of_cells_are_listed(count: int) -> None:
    """Each of them stands in the table of rows set aside, with its number in the file and nothing of its text."""
    text = lines(300)
    for place in range(10, 10 + 4 * count, 4):
        text[place] = text[place].replace("home", "home, alone")
    records = read_records(written(["Ward stays", "", *text, "Total,300"]), name="stays.csv")

    assert records.report.set_aside == count + 1 == len(records.set_aside)
    assert list(records.set_aside["line"]) == [*range(13, 13 + 4 * count, 4), 304]
    assert "alone" not in records.set_aside.to_csv()


@pytest.mark.parametrize("where", ["rows", "headings", "both"])
@pytest.mark.parametrize("signs", [";", ";;"])
def test_separators_at_the_end_of_lines_are_no_cells(where: str, signs: str) -> None:
    """Exports that close rows, or headings, with a separator too many are read as they are meant."""
    text = [line.replace(",", ";") for line in lines(60)]
    clean = read_records(written(text), name="stays.csv")
    text = [
        line + (signs if where == "both" or (where == "headings") == (place == 0) else "")
        for place, line in enumerate(text)
    ]
    records = read_records(written(text), name="stays.csv")

    assert records.report.rows_in == records.report.used == 60
    assert records.stays["end"].equals(clean.stays["end"])
