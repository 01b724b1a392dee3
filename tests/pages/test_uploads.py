"""Records: reading shows how far it is and can be stopped; files for another box, or without stays, are spoken of."""

from __future__ import annotations

import tomllib
from datetime import timedelta
from typing import TYPE_CHECKING

import pytest
import streamlit as st

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    from streamlit.testing.v1 import AppTest

BOXES = {
    "capacity_file": "capacity.csv",
    "refusals_file": "refusals.csv",
    "cancellations_file": "cancellations.csv",
    "census_file": "census.csv",
    "bed_requests_file": "bed_requests.csv",
    "monthly_return_file": "monthly_return.csv",
}


def go(app: AppTest, page: str) -> AppTest:
    """Turn to a page."""
    return app.switch_page(f"bedplan/pages/{page}.py").run()


def give(app: AppTest, box: str, name: str, content: bytes) -> AppTest:
    """Put a file into a box of the page Records."""
    return app.file_uploader(key=box).upload(name, content, "text/csv").run()


@pytest.fixture
def app(open_app: Callable[..., AppTest], stays_csv: bytes) -> AppTest:
    """Return the page Records with ward stays loaded, and a slider of East moved."""
    opened = give(go(open_app(), "records"), "stays_file", "stays.csv", stays_csv)
    go(opened, "one_ward").slider(key="demand").set_value(15).run()
    return go(opened, "records")


def text(elements: object) -> str:
    """Return what elements say, without the marks that keep names from being read as formatting."""
    return "\n".join(one.value for one in elements).replace("\\", "")


def assert_as_before(app: AppTest, before: object) -> None:
    """The files in use and the slider are as they were."""
    assert not app.exception
    assert app.session_state["files"] is before
    go(app, "one_ward")
    assert app.selectbox(key="ward").value == "East"
    assert app.slider(key="demand").value == 15


def test_reading_tells_how_far_it_is(
    open_app: Callable[..., AppTest], stays_csv: bytes, monkeypatch: pytest.MonkeyPatch
) -> None:
    """While a file is read its name, what is done and the share done are shown; afterwards the bar is gone."""
    told = []

    class Bar:
        def progress(self, share: float, words: str) -> None:
            told.append((share, words))

        def empty(self) -> None:
            told.append((None, "gone"))

    monkeypatch.setattr(st, "progress", lambda _share: Bar())
    app = give(go(open_app(), "records"), "stays_file", "ours.csv", stays_csv)

    assert not app.exception
    assert told.pop() == (None, "gone")
    shares = [share for share, _ in told]
    assert shares == sorted(shares)
    assert (shares[0], shares[-1]) == (0.0, 1.0)
    assert len({words for _, words in told}) >= 4
    assert all("ours.csv" in words for _, words in told)


def stop_at(monkeypatch: pytest.MonkeyPatch, share: float) -> None:
    """Let the server stop the run once reading has come so far, as the button Stop does."""

    class Bar:
        def progress(self, done: float, _words: str) -> None:
            if done >= share:
                st.stop()

        def empty(self) -> None:
            pass

    monkeypatch.setattr(st, "progress", lambda _share: Bar())


@pytest.mark.parametrize("share", [0.0, 0.5, 1.0])
def test_a_stopped_reading_changes_nothing(
    app: AppTest, stays_csv: bytes, monkeypatch: pytest.MonkeyPatch, share: float
) -> None:
    """Stopped at any point, what was loaded stays, with its settings; the page says so and reads on at a press only."""
    before = app.session_state["files"]
    with monkeypatch.context() as stopping:
        stop_at(stopping, share)
        give(app, "stays_file", "new.csv", stays_csv + b"\n")
    assert app.session_state["files"] is before

    app.run()
    assert "new.csv was stopped" in text(app.warning)
    assert app.session_state["files"] is before
    next(one for one in app.button if one.label == "Read it now").click().run()
    assert not app.warning
    assert app.session_state["files"].records.name == "new.csv"


def test_a_stopped_reading_is_left_by_turning_the_page(
    app: AppTest, stays_csv: bytes, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Whoever goes to another page instead finds everything as it was."""
    before = app.session_state["files"]
    with monkeypatch.context() as stopping:
        stop_at(stopping, 0.5)
        give(app, "stays_file", "new.csv", stays_csv + b"\n")

    assert_as_before(app, before)


def test_a_removed_file_changes_nothing(app: AppTest) -> None:
    """Taking the file out of its box keeps what was read from it; a refused file goes with its complaint."""
    before = app.session_state["files"]
    give(app, "stays_file", "broken.csv", b"\x89PNG broken")
    assert len(app.error) == 1
    app.file_uploader(key="stays_file").set_value([]).run()

    assert not app.error
    assert_as_before(app, before)


def test_a_refused_file_does_not_take_the_loaded_files_answers(app: AppTest, stays_csv: bytes) -> None:
    """While another file is refused, counting wards together and corrections are about the file that is loaded."""
    give(app, "stays_file", "odd.csv", stays_csv.replace(b"Ward,Start,End", b"Zimmer,Zugang,Abgang"))
    assert len(app.error) == 1
    next(one for one in app.button if one.label.startswith("Read it again with these corr")).click().run()

    assert app.session_state["files"].records.name == "stays.csv"
    assert "odd.csv" in text(app.error)


def test_other_columns_are_not_carried_over(app: AppTest, stays_csv: bytes) -> None:
    """How the columns of a new file were read is shown as it is, not as it was chosen for the file before."""
    rows = stays_csv.split(b"\n", 1)[1].replace(b"\n", b",2024-01-01 00:00\n")
    give(app, "stays_file", "one.csv", b"Ward,Start,End,In\n" + rows)
    app.selectbox(key="stays_column_start").set_value("In")
    next(one for one in app.button if "with these columns" in one.label).click().run()
    assert app.selectbox(key="stays_column_start").value == "In"
    give(app, "stays_file", "two.csv", b"Ward,Start,End,In\n" + rows + b"\n")

    assert app.selectbox(key="stays_column_start").value == "Start"


def test_the_largest_upload_is_the_servers(open_app: Callable[..., AppTest], root: Path) -> None:
    """The page states the limit the server has, and the command that reads a larger file where it lies."""
    limit = tomllib.loads((root / ".streamlit" / "config.toml").read_text())["server"]["maxUploadSize"]
    said = text(go(open_app(), "records").caption)

    assert limit == 300
    assert f"Largest upload {st.get_option('server.maxUploadSize')} MB" in said
    assert "python -m bedplan folder/stays.csv" in said


@pytest.mark.parametrize("box", BOXES)
@pytest.mark.parametrize(
    ("content", "word"),
    [
        (b"", "empty"),
        (b"\x89PNG\r\n", "picture"),
        (b"Ward,Start,End\n", "no rows"),
        (b"Dear all,\nhere.\n", "headings"),
    ],
)
def test_a_bad_file_in_any_box_changes_nothing(app: AppTest, box: str, content: bytes, word: str) -> None:
    """Every box refuses what it can't use in one sentence that names the file and stays while the file is there."""
    before = app.session_state["files"]
    if word == "no rows":  # headings that this box knows
        content = b"month,date,time,ward,beds,occupied,discharges\n"
    give(app, box, "march.csv", content)

    for _ in range(2):
        assert len(app.error) == 1
        assert "march.csv" in text(app.error)
        assert word in text(app.error)
        assert "ward stays" not in text(app.error)
        app.run()
    assert_as_before(app, before)


def test_one_file_counts_once(app: AppTest) -> None:
    """A list given as refusals and again as cancellations would count twice: the second is refused."""
    log = b"time,ward,reason\n2024-02-01 10:00,East,no bed\n"
    give(app, "refusals_file", "log.csv", log)
    assert not app.error
    give(app, "cancellations_file", "log.csv", log)

    assert "in use already, as “Patients not given a bed”" in text(app.error)
    assert app.session_state["files"].cancellations is None


def test_files_still_in_their_boxes_belong_to_the_next_records(app: AppTest, stays_csv: bytes) -> None:
    """A capacity file that lies in its box is taken again with the next file of stays."""
    give(app, "capacity_file", "beds.csv", b"ward,from,to,staffed beds\nEast,2024-01-01,,9\n")
    give(app, "stays_file", "later.csv", stays_csv + b"\n")

    assert not app.error
    assert app.session_state["files"].records.name == "later.csv"
    assert app.session_state["files"].capacity.beds_today("East") == 9


def test_wards_without_stays_are_named(app: AppTest) -> None:
    """Wards that only another file knows are not used, and the page names them, five at most."""
    assert "hold no stays" not in text(app.caption)
    rows = "".join(f"Ward {number},2024-01-01,,10\n" for number in range(1, 8))
    give(app, "capacity_file", "beds.csv", f"ward,from,to,staffed beds\nEast,2024-01-01,,9\n{rows}".encode())
    give(app, "refusals_file", "log.csv", b"time,ward,reason\n2024-02-01 10:00,North,no bed\n")

    said = text(app.caption)
    assert "beds.csv: the records hold no stays on Ward 1, Ward 2, Ward 3, Ward 4 and 3 more" in said
    assert "log.csv: the records hold no stays on North, so" in said


@pytest.fixture
def keyed(open_app: Callable[..., AppTest], stays_csv: bytes) -> AppTest:
    """Return the page Records with the same ward stays loaded, each with a key."""
    heading, *rows = stays_csv.decode().split("\n")
    content = "\n".join([f"spell_key,{heading}", *(f"s{place},{row}" for place, row in enumerate(rows))])
    return give(go(open_app(), "records"), "stays_file", "stays.csv", content.encode())


def test_ready_dates_are_joined(keyed: AppTest) -> None:
    """Dates on which patients were ready to leave are joined by key; the document names their file; corrections keep them."""
    stays = keyed.session_state["files"].records.stays
    ready = "\n".join(
        f"s{place},{moment - timedelta(days=1):%Y-%m-%d %H:%M}" for place, moment in enumerate(stays["end"])
    )
    give(keyed, "ready_file", "ready.csv", f"spell_key,date\n{ready}\n".encode())
    assert not keyed.exception
    assert not keyed.error
    found = keyed.session_state["files"].records.stays
    assert set((found["end"] - found["ready"]).dt.total_seconds()) == {86_400}
    press(keyed, "Read it again with these corrections")
    assert "ready" in keyed.session_state["files"].records.stays

    go(keyed, "justification")
    assert any("ready.csv" in one.value.to_csv().replace("\\", "") for one in keyed.table)


@pytest.mark.parametrize(
    ("content", "told"),
    [
        (b"", "empty"),
        (b"ward,date\nEast,2024-02-01\n", "lacks a column of keys"),
        (b"spell_key,date\ns1,soon\n", "can't be read (1 row)"),
        (b"patient_key,date\np1,2024-02-01\n", "can't be joined"),
    ],
)
def test_ready_dates_that_cannot_be_used_change_nothing(keyed: AppTest, content: bytes, told: str) -> None:
    """A file of ready dates that is none, or has no key in common with the stays, is refused in a sentence."""
    before = keyed.session_state["files"]
    give(keyed, "ready_file", "ready.csv", content)

    assert len(keyed.error) == 1
    assert told in text(keyed.error)
    assert keyed.session_state["files"] is before


def press(app: AppTest, label: str) -> AppTest:
    """Press a button."""
    return next(one for one in app.button if one.label == label).click().run()


def test_reasons_that_are_not_understood_are_asked_about(app: AppTest) -> None:
    """The planner says which reasons mean that no bed was free; those count, and the document says which they are."""
    rows = "2024-02-01 10:00,East,code 7\n2024-02-02 10:00,East,code 9\n2024-02-03 10:00,East,no bed\n"
    give(app, "refusals_file", "log.csv", f"time,ward,reason\n{rows}".encode())
    log = app.session_state["files"].refusals
    assert len(log.for_lack_of_beds("East")) == 1
    app.multiselect(key="refusals_no_bed").set_value(["code 7"])
    press(app, "Count these")

    assert not app.exception
    assert len(app.session_state["files"].refusals.for_lack_of_beds("East")) == 2
    assert not app.multiselect
    go(app, "justification")
    assert any("code 7" in one.value.to_csv() for one in app.table)


def test_names_of_other_files_are_brought_together(app: AppTest) -> None:
    """Other capitals are the same ward at once; another spelling is, once the planner says so."""
    give(app, "capacity_file", "beds.csv", b"ward,from,to,staffed beds\nEAST,2024-01-01,,9\nWard West,2024-01-01,,7\n")
    assert app.session_state["files"].capacity.beds_today("East") == 9
    assert "no stays on Ward West" in text(app.caption)
    press(app, "Count together")

    assert not app.exception
    assert app.session_state["files"].capacity.beds_today("West") == 7
    assert "hold no stays" not in text(app.caption)
    go(app, "one_ward").selectbox(key="ward").set_value("West").run()
    assert app.number_input(key="beds").value == 7


@pytest.mark.parametrize("box", ["capacity_file", "refusals_file", "cancellations_file", "census_file"])
def test_dates_that_read_two_ways_are_asked_for(app: AppTest, box: str) -> None:
    """A list whose dates can be read two ways is taken once the planner says which it is."""
    heading = {"capacity_file": "from,ward,staffed beds", "census_file": "date,ward,occupied"}.get(
        box, "date,ward,reason"
    )
    give(app, box, "march.csv", f"{heading}\n03/04/2024,East,9\n".encode())
    assert "Say which it is" in text(app.error)
    next(one for one in app.radio if one.label.startswith("How are dates")).set_value("month first")
    next(one for one in app.button if one.label == "Read it this way").click().run()

    assert not app.exception
    assert not app.error
    table = getattr(app.session_state["files"], box.removesuffix("_file")).table
    assert table["from" if box == "capacity_file" else "time"].dt.month.tolist() == [3]


def test_a_return_leaves_wards_with_stays_alone(app: AppTest) -> None:
    """A monthly return makes wards of those that have no stays; one it can't make is named, and the others are made."""
    rows = b"2024-01,East,310,300,40\n2024-01,North,310,200,30\n2024-01,Closed,0,0,0\n"
    give(
        app, "monthly_return_file", "return.csv", b"month,ward,available bed days,occupied bed days,discharges\n" + rows
    )

    said = text(app.caption)
    assert "1 ward is ready" in said
    assert "Closed: " in said
    assert "have ward stays" in said
    assert go(app, "one_ward").selectbox(key="ward").options == ["North", "East", "West"]


def test_a_typed_ward_can_be_removed(app: AppTest) -> None:
    """The ward in hand is taken off every page again, with its settings; wards of the records have no such button."""
    assert not [one for one in go(app, "one_ward").button if one.label == "Remove this ward"]
    next(one for one in go(app, "records").button if one.label == "Use these totals").click().run()
    go(app, "one_ward").slider(key="demand").set_value(-20).run()
    assert app.selectbox(key="ward").value == "My ward"
    next(one for one in app.button if one.label == "Remove this ward").click().run()

    assert not app.exception
    assert app.selectbox(key="ward").options == ["East", "West"]
    assert app.header[0].value.startswith("East's staffed beds")
    assert app.slider(key="demand").value == 15
    assert "My ward" not in go(app, "compare").dataframe[0].value["Ward"].tolist()
