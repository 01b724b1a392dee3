"""Records: a file is taken in and accounted for, and a bad one is refused in plain words and changes nothing."""

from __future__ import annotations

import hashlib
import re
from pathlib import Path
from typing import TYPE_CHECKING

import pytest

if TYPE_CHECKING:
    from collections.abc import Callable

    from streamlit.testing.v1 import AppTest

EVERY_PAGE = re.findall(r"bedplan/pages/(\w+)\.py", (Path(__file__).resolve().parents[2] / "app.py").read_text())
PICTURE = b"\x89PNG\r\n\x1a\n\x00\x00\x00\rIHDR" + bytes(range(256)) * 4
HEADINGS = b"Ward,Start,End\n"
ONE_STAY = b"East,2024-01-01 10:00,2024-01-03 10:00\n"
BEDS_HEADINGS = b"ward,from,to,funded beds,staffed beds,closed beds\n"
# file name -> (what is in it, a word that the refusal must hold)
BAD_STAYS = {
    "nothing.csv": (b"", "empty"),
    "blank lines.csv": (b"\n\n \n", "empty"),
    "picture.csv": (PICTURE, "picture"),
    "letter.csv": (b"Dear planner,\nplease find the stays attached.\n", "heading"),
    "no ward.csv": (b"Start,End\n2024-01-01 10:00,2024-01-03 10:00\n", "ward"),
    "no dates.csv": (b"Ward,Colour\nEast,red\n", "start"),
    "no end.csv": (b"Ward,Start\nEast,2024-01-01 10:00\n", "end"),
    "headings only.csv": (HEADINGS, "no rows"),
    "spoken dates.csv": (HEADINGS + b"East,next Monday,some day\n" * 3, "date"),
    "backwards.csv": (HEADINGS + b"East,2024-03-05 10:00,2024-03-01 10:00\n" * 3, "ends before it starts"),
    "far future.csv": (HEADINGS + b"East,2124-01-01 10:00,2124-01-03 10:00\n" * 3, "future"),
}
BAD_BEDS = {
    "nothing.csv": b"",
    "picture.csv": PICTURE,
    "no ward.csv": b"from,to,staffed beds\n2024-01-01,,20\n",
    "words for beds.csv": BEDS_HEADINGS + b"East,2024-01-01,,many,lots,0\n",
    "fewer than none.csv": BEDS_HEADINGS + b"East,2024-01-01,,-4,-4,0\n",
}


def go(app: AppTest, page: str) -> AppTest:
    """Turn to a page."""
    return app.switch_page(f"bedplan/pages/{page}.py").run()


def give_stays(app: AppTest, name: str, content: bytes) -> AppTest:
    """Upload a file of ward stays."""
    return go(app, "records").file_uploader(key="stays_file").upload(name, content, "text/csv").run()


def give_beds(app: AppTest, content: bytes, name: str = "beds.csv") -> AppTest:
    """Upload a capacity file."""
    return go(app, "records").file_uploader(key="capacity_file").upload(name, content, "text/csv").run()


def counts(app: AppTest) -> dict[str, int]:
    """Return what the page says became of the rows."""
    return {metric.label: int(metric.value.replace(",", "")) for metric in app.metric}


def answer(app: AppTest) -> str:
    """Return what the page One ward says."""
    return go(app, "one_ward").header[0].value


def assert_every_page_is_calm(app: AppTest) -> None:
    """No page fails or complains."""
    for page in EVERY_PAGE:
        go(app, page)
        assert not app.exception, page
        assert not app.error, page


def test_three_columns_are_enough(open_app: Callable[..., AppTest], stays_csv: bytes) -> None:
    """Ward, start and end are taken in: every row accounted for, the file named and fingerprinted, its wards planned."""
    app = give_stays(open_app(), "our stays.csv", stays_csv)
    assert not app.error
    rows = counts(app)
    assert rows["Rows in"] == stays_csv.count(b"\n")
    assert rows["Rows in"] == sum(rows.values()) - rows["Rows in"]
    assert rows["Used as they stand"] > 0.9 * rows["Rows in"]
    assert any("our stays.csv" in heading.value for heading in app.subheader)
    assert any(hashlib.sha256(stays_csv).hexdigest()[:12] in caption.value for caption in app.caption)

    go(app, "one_ward")
    assert app.selectbox(key="ward").options == ["East", "West"]
    assert_every_page_is_calm(app)


@pytest.mark.parametrize(
    "headings", [b"Location,In,Out", b"Ward name;Ward start;Ward end", b"WARD\tADMDTTM\tDISCHDTTM"]
)
def test_other_headings_are_known(open_app: Callable[..., AppTest], stays_csv: bytes, headings: bytes) -> None:
    """The same stays under other headings, with other separators, give the same answer."""
    separator = next(sign for sign in (b";", b"\t", b",") if sign in headings)
    rows = stays_csv.replace(b",", separator).split(b"\n", 1)[1]
    plain = answer(give_stays(open_app(), "stays.csv", stays_csv))
    assert answer(give_stays(open_app(), "stays.csv", headings + b"\n" + rows)) == plain


def test_staffed_beds_come_from_the_capacity_file(open_app: Callable[..., AppTest], stays_csv: bytes) -> None:
    """A capacity file gives each ward its staffed beds; a ward it leaves out is asked for, one without stays is no harm."""
    app = give_stays(open_app(), "stays.csv", stays_csv)
    give_beds(app, BEDS_HEADINGS + b"East,2024-01-01,,9,8,0\nNorth,2024-01-01,,30,30,0\n")
    assert not app.error

    assert answer(app).startswith("East has 8 staffed beds")
    assert app.selectbox(key="ward").options == ["East", "West"]
    assert_every_page_is_calm(app)


def test_a_ward_without_beds(open_app: Callable[..., AppTest], stays_csv: bytes) -> None:
    """A ward with no staffed bed is no error: everyone finds it full."""
    app = give_stays(open_app(), "stays.csv", stays_csv)
    give_beds(app, BEDS_HEADINGS + b"East,2024-01-01,,0,0,0\nWest,2024-01-01,,9,9,0\n")

    assert answer(app).startswith("East has 0 staffed beds")
    assert answer(app).endswith("everyone today.")
    assert_every_page_is_calm(app)


@pytest.mark.parametrize("name", BAD_STAYS)
@pytest.mark.parametrize("own", [False, True], ids=["demo", "own records"])
def test_a_bad_file_changes_nothing(
    open_app: Callable[..., AppTest],
    stays_csv: bytes,
    name: str,
    own: bool,
) -> None:
    """A file that can't be used is refused in plain words that name it, and what was loaded before is still here."""
    content, word = BAD_STAYS[name]
    app = give_stays(open_app(), "stays.csv", stays_csv) if own else open_app()
    before = answer(app)
    give_stays(app, name, content)

    assert not app.exception
    assert len(app.error) == 1
    said = app.error[0].value.replace("\\", "")
    assert name in said
    assert word in said
    assert len(said.split()) <= 50
    assert any("loaded before" in caption.value for caption in app.caption)
    assert answer(app) == before
    assert not app.error


@pytest.mark.parametrize("name", BAD_BEDS)
def test_a_bad_capacity_file_changes_nothing(open_app: Callable[..., AppTest], stays_csv: bytes, name: str) -> None:
    """A capacity file that can't be used is refused in plain words, and the beds known before stay."""
    app = give_stays(open_app(), "stays.csv", stays_csv)
    give_beds(app, BEDS_HEADINGS + b"East,2024-01-01,,8,8,0\n")
    before = answer(app)
    give_beds(app, BAD_BEDS[name], name)

    assert not app.exception
    assert len(app.error) == 1
    assert name in app.error[0].value.replace("\\", "")
    assert answer(app) == before
    assert not app.error


@pytest.mark.parametrize("rows", [1, 3])
def test_a_handful_of_rows_is_taken_with_a_caution(open_app: Callable[..., AppTest], rows: int) -> None:
    """Even one or three stays give an answer, with a caution that they are too few."""
    app = give_stays(open_app(), "few.csv", HEADINGS + ONE_STAY * rows)
    assert not app.error
    assert_every_page_is_calm(app)
    go(app, "one_ward")
    assert any("too few" in one.value for one in app.markdown)


def test_one_ward_alone(open_app: Callable[..., AppTest], stays_csv: bytes) -> None:
    """A file of one ward works on every page."""
    app = give_stays(open_app(), "east.csv", b"\n".join([HEADINGS.strip(), *stays_csv.split(b"\n")[2::2]]))
    go(app, "one_ward")
    assert app.selectbox(key="ward").options == ["East"]
    assert_every_page_is_calm(app)


def test_a_ward_where_nobody_left(open_app: Callable[..., AppTest], stays_csv: bytes) -> None:
    """A ward whose stays all lack an end can't be planned, and the page says so in a sentence; the others can."""
    app = give_stays(open_app(), "stays.csv", stays_csv + b"\nAnnex,2024-12-30 10:00,\nAnnex,2024-12-31 10:00,")
    assert not app.error
    go(app, "one_ward").selectbox(key="ward").set_value("Annex").run()
    assert not app.exception
    assert len(app.error) == 1
    assert "Annex" in app.error[0].value
    go(app, "compare")
    assert not app.exception
    assert len(app.dataframe[0].value) == 2


def test_more_beds_than_a_ward_can_have(open_app: Callable[..., AppTest], stays_csv: bytes) -> None:
    """A capacity file with an absurd bed count leads to a sentence, not to a broken page."""
    app = give_stays(open_app(), "stays.csv", stays_csv)
    give_beds(app, BEDS_HEADINGS + b"East,2024-01-01,,9000,9000,0\n")
    told = [one.value for one in app.error]
    for page in ("one_ward", "compare", "justification"):
        go(app, page)
        assert not app.exception, page
        told += [one.value for one in (*app.error, *app.warning)]
    assert any("beds" in text for text in told)


def test_new_records_forget_old_inputs(open_app: Callable[..., AppTest], stays_csv: bytes) -> None:
    """What was moved for one file is not carried over to a ward of the same name in the next."""
    app = give_stays(open_app(), "stays.csv", stays_csv)
    fresh = answer(app)
    app.slider(key="demand").set_value(50).run()
    app.number_input(key="beds").set_value(77).run()
    give_stays(app, "again.csv", stays_csv + b"\n")

    assert answer(app) == fresh
    assert app.slider(key="demand").value == 0


def test_back_to_the_demo(open_app: Callable[..., AppTest], stays_csv: bytes) -> None:
    """The planner's records can be forgotten, and the demo is shown as at first."""
    app = open_app()
    demo = answer(app)
    give_stays(app, "stays.csv", stays_csv)
    assert answer(app) != demo
    next(button for button in go(app, "records").button if "Forget" in button.label).click().run()
    assert answer(app) == demo


def test_identities_are_dropped_and_never_shown(open_app: Callable[..., AppTest], stays_csv: bytes) -> None:
    """Names and numbers of people are dropped as the file is read: the page says which columns, no page shows a value."""
    heading, *rows = stays_csv.split(b"\n")
    rows = [b"Zebedee Quagmire,9434765919," + row for row in rows]
    app = give_stays(open_app(), "named.csv", b"\n".join([b"Patient name,NHS number," + heading, *rows]))
    assert not app.error
    assert any("Patient name" in one.value and "NHS number" in one.value for one in app.markdown)
    for page in ("records", "one_ward", "compare", "justification"):
        go(app, page)
        shown = str(app.main) + str(app.sidebar) + "".join(frame.value.to_csv() for frame in app.dataframe)
        assert len(shown) > 200
        assert "Quagmire" not in shown
        assert "9434765919" not in shown
    assert not any("Quagmire" in value or "9434765919" in value for value in app.query_params.values())


def test_the_largest_line_counts_the_rows(open_app: Callable[..., AppTest], stays_csv: bytes) -> None:
    """The first heading says how many rows are used, repaired and set aside: the same figures as below it."""
    app = go(open_app(), "records")
    assert app.header[0].value == f"The Larkmere demo: all {counts(app)['Rows in']:,} rows are used."
    backwards = b"\nEast,2024-03-25 10:00,2024-03-21 10:00\nWest,2024-05-25 10:00,2024-05-21 10:00"
    give_stays(app, "ours.csv", stays_csv + backwards)
    rows = counts(app)
    used = rows["Used as they stand"] + rows["Used after a repair"]

    assert rows["Set aside"] == 2
    assert app.header[0].value == (
        f"ours.csv: {used:,} of {rows['Rows in']:,} rows used ({rows['Used after a repair']:,} repaired), 2 set aside."
    )
