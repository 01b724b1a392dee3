"""Records: how the file was taken is corrected on the page; the file is read again and whatever else was set stays."""

from __future__ import annotations

import datetime as dt
import json
from typing import TYPE_CHECKING

import pytest

from bedplan.data import IntakeChoices, read_records
from bedplan.plan import Answers, SavedPlan, as_json

if TYPE_CHECKING:
    from collections.abc import Callable

    from streamlit.testing.v1 import AppTest

BEDS = b"ward,from,to,staffed beds\nEast,2024-01-01,,9\nWest,2024-01-01,,8\n"
SEND, FORGET = "Read it again with these corrections", "Forget these corrections"


@pytest.fixture(scope="module")
def places_csv(stays_csv: bytes) -> bytes:
    """Return the stays with a patient a row, three stays in a theatre, and twenty weeks of leave from East, 2 days each."""
    heading, *rows = stays_csv.decode().split("\n")
    kept = [f"p{place},{row}" for place, row in enumerate(rows)]
    for week in range(20):
        left = dt.datetime(2024, 3, 4, 10) + dt.timedelta(weeks=week)  # noqa: DTZ001  records hold local clock times
        came, back = left - dt.timedelta(days=3), left + dt.timedelta(days=2)
        kept.append(f"leaver{week},East,{came:%Y-%m-%d %H:%M},{left:%Y-%m-%d %H:%M}")
        kept.append(f"leaver{week},Home leave,{left:%Y-%m-%d %H:%M},{back:%Y-%m-%d %H:%M}")
    kept += [f"t{day},Main Theatre,2024-02-0{day} 09:00,2024-02-0{day} 15:00" for day in (1, 2, 3)]
    return "\n".join([f"patient,{heading}", *kept]).encode()


@pytest.fixture
def app(open_app: Callable[..., AppTest], places_csv: bytes) -> AppTest:
    """Return the page Records with that file and a file of staffed beds loaded, and a slider of West moved."""
    opened = open_app().switch_page("bedplan/pages/records.py").run()
    opened.file_uploader(key="stays_file").upload("ours.csv", places_csv, "text/csv").run()
    opened.file_uploader(key="capacity_file").upload("beds.csv", BEDS, "text/csv").run()
    go(opened, "one_ward").selectbox(key="ward").set_value("West").run()
    opened.slider(key="demand").set_value(20).run()
    return go(opened, "records")


def go(app: AppTest, page: str) -> AppTest:
    """Turn to a page."""
    return app.switch_page(f"bedplan/pages/{page}.py").run()


def key(app: AppTest, start: str) -> str:
    """Return the present name of an input that starts anew after each reading."""
    return f"{start}_{app.session_state['times_read']}"


def press(app: AppTest, label: str) -> AppTest:
    """Press a button."""
    return next(one for one in app.button if one.label == label).click().run()


def take_as(app: AppTest, place: str, kind: str) -> None:
    """Choose what a place is in the table of places."""
    shown = table(app, "Place in the file")
    row = shown["Place in the file"].tolist().index(place)
    edits = {"edited_rows": {row: {"Taken for": kind}}, "added_rows": [], "deleted_rows": []}
    app.session_state[key(app, "places")] = edits


def table(app: AppTest, heading: str) -> object:
    """Return the table that has this heading."""
    return next(one.value for one in app.dataframe if heading in one.value)


def assert_all_else_stays(app: AppTest) -> None:
    """The capacity file, the ward in hand and its slider are as they were set."""
    assert not app.exception
    assert app.session_state["files"].capacity.name == "beds.csv"
    go(app, "one_ward")
    assert not app.error
    assert app.selectbox(key="ward").value == "West"
    assert (app.slider(key="demand").value, app.number_input(key="beds").value) == (20, 8)
    go(app, "records")


def test_every_place_is_listed(app: AppTest) -> None:
    """The table names every place in the file with what it was taken for, those without ward beds first."""
    shown = table(app, "Place in the file")

    assert shown["Place in the file"].tolist() == ["Home leave", "Main Theatre", "East", "West"]
    assert shown["Taken for"].tolist()[:2] == ["patients on leave", "theatre, X-ray, lounge"]
    assert set(shown["Taken for"].tolist()[2:]) == {"ward with beds"}


def test_a_place_is_corrected_and_forgotten_again(app: AppTest) -> None:
    """A theatre said to be a ward with beds becomes one on every page, until the corrections are forgotten."""
    take_as(app, "Main Theatre", "ward with beds")
    press(app, SEND)
    assert app.session_state["files"].records.wards == ("East", "Main Theatre", "West")
    assert any("Main Theatre” is taken for: ward with beds" in one.value.replace("\\", "") for one in app.markdown)
    assert_all_else_stays(app)
    assert "Main Theatre" in go(app, "one_ward").selectbox(key="ward").options

    press(go(app, "records"), FORGET)
    assert app.session_state["files"].records.wards == ("East", "West")
    assert_all_else_stays(app)


def test_the_ward_on_screen_is_taken_away(app: AppTest) -> None:
    """A ward that is no ward any more leaves the page One ward calmly, on the first that is left."""
    take_as(app, "West", "virtual ward, care at home")
    press(app, SEND)
    assert app.session_state["files"].records.wards == ("East",)
    go(app, "one_ward")
    assert not app.exception
    assert not app.error
    assert app.header[0].value.startswith("East has 9 staffed beds")
    assert app.slider(key="demand").value == 0
    assert any("hold no stays on West" in one.value for one in go(app, "records").caption)


def test_beds_that_nobody_set_follow_the_file(open_app: Callable[..., AppTest], places_csv: bytes) -> None:
    """Without a capacity file beds start at the beds wanted; read another way the start is another, unless it was set."""
    opened = open_app().switch_page("bedplan/pages/records.py").run()
    opened.file_uploader(key="stays_file").upload("ours.csv", places_csv, "text/csv").run()
    start = go(opened, "one_ward").number_input(key="beds").value
    opened.selectbox(key="ward").set_value("West").run()
    opened.number_input(key="beds").set_value(41).run()
    go(opened, "records").date_input(key=key(opened, "first_complete")).set_value(dt.date(2024, 3, 1))
    opened.radio(key=key(opened, "on_leave")).set_value("held")
    press(opened, SEND)

    wanted = opened.session_state["files"].records
    assert wanted.window[0].date() == dt.date(2024, 3, 1)
    assert go(opened, "one_ward").number_input(key="beds").value == 41
    opened.selectbox(key="ward").set_value("East").run()
    now = opened.number_input(key="beds").value
    assert now == opened.session_state["worked_out"]["baseline", "East", "recorded"].beds
    assert now >= start


def test_days_are_chosen(app: AppTest) -> None:
    """First and last complete day are taken, and said on the page."""
    app.date_input(key=key(app, "first_complete")).set_value(dt.date(2024, 2, 1))
    app.date_input(key=key(app, "last_complete")).set_value(dt.date(2024, 11, 30))
    press(app, SEND)

    assert [day.date() for day in app.session_state["files"].records.window] == [
        dt.date(2024, 2, 1),
        dt.date(2024, 12, 1),
    ]
    assert any("1 February 2024 to 30 November 2024" in one.value for one in app.caption)
    assert_all_else_stays(app)


def leave_out(app: AppTest, *periods: tuple[str | None, ...]) -> AppTest:
    """Fill in periods to leave out, with the reason where there is one, and send them."""
    headings = ("First day", "Last day", "Why")
    rows = [{name: cell for name, cell in zip(headings, period, strict=False) if cell} for period in periods]
    app.session_state[key(app, "left_out")] = {"edited_rows": {}, "added_rows": rows, "deleted_rows": []}
    return press(app, SEND)


def test_periods_are_left_out_and_stand_in_the_document(app: AppTest) -> None:
    """Two periods count in no rate, and the justification names both."""
    leave_out(app, ("2024-03-01", "2024-03-31", "pandemic"), ("2024-08-05", "2024-08-06"))
    assert int((~app.session_state["files"].records.counted_days).sum()) == 31 + 2
    assert_all_else_stays(app)
    shown = table(app, "First day")
    assert [day.day for day in shown["First day"]] == [1, 5]

    go(app, "justification")
    said = "2024-03-01 to 2024-03-31 (pandemic); 2024-08-05 to 2024-08-06"
    assert any(said in one.value.to_csv() for one in app.table)


@pytest.mark.parametrize(
    ("periods", "told"),
    [
        ([("2024-03-31", "2024-03-01")], "ends before it starts"),
        ([("2024-03-31", None)], "give both"),
        ([("2023-01-01", "2026-01-01")], "leave no day"),
    ],
)
def test_impossible_periods_change_nothing(app: AppTest, periods: list[tuple[str, str | None]], told: str) -> None:
    """A period that can't be left out gives one sentence; records, beds and sliders are as before."""
    before = app.session_state["files"]
    leave_out(app, *periods)

    assert len(app.error) == 1
    assert told in app.error[0].value.replace("\\", "")
    assert app.session_state["files"] is before
    assert_all_else_stays(app)


def test_other_impossible_answers_change_nothing(app: AppTest) -> None:
    """Days without stays, a clock nobody has and a file without one ward are refused in a sentence each."""
    before = app.session_state["files"]
    app.text_input(key=key(app, "time_zone")).set_value("Larkmere/Town")
    press(app, SEND)
    assert [one.value.replace("\\", "") for one in app.error] == [
        "The time zone 'Larkmere/Town' is not known: write it as in Europe/London."
    ]
    app.text_input(key=key(app, "time_zone")).set_value("")
    for start in ("first", "last"):
        app.date_input(key=key(app, f"{start}_complete")).set_value(dt.date(1999, 1, 1))
    press(app, SEND)
    assert len(app.error) == 1
    assert "choose first and last days within" in app.error[0].value

    assert app.session_state["files"] is before
    assert_all_else_stays(app)


def test_leave_is_asked_about(app: AppTest) -> None:
    """The page asks what becomes of a bed during leave; held beds are occupied 2 days a week for 20 weeks more."""
    before = app.session_state["files"].records.report.bed_days_used
    assert app.radio(key=key(app, "on_leave")).value is None
    assert any("nobody said whether their bed is held" in one.value for one in app.markdown)
    app.radio(key=key(app, "on_leave")).set_value("held")
    press(app, SEND)

    assert app.session_state["files"].records.report.bed_days_used == pytest.approx(before + 20 * 2)
    assert app.radio(key=key(app, "on_leave")).value == "held"
    assert any("bed held" in reason for reason in table(app, "Outcome")["What was done, and why"])
    assert_all_else_stays(app)


def test_a_file_without_leave_is_not_asked(open_app: Callable[..., AppTest], stays_csv: bytes) -> None:
    """Where nobody goes on leave the question is not put, and the demo is not corrected at all."""
    opened = open_app().switch_page("bedplan/pages/records.py").run()
    assert not opened.date_input
    opened.file_uploader(key="stays_file").upload("ours.csv", stays_csv, "text/csv").run()

    assert len(opened.date_input) == 2
    assert not any("on leave" in one.label for one in opened.radio)


def test_times_with_an_offset_come_to_the_hospitals_clock(open_app: Callable[..., AppTest], stays_csv: bytes) -> None:
    """World times in July are an hour later on London's clock."""
    world = stays_csv.replace(b":00,", b":00Z,").replace(b":00\n", b":00Z\n")
    opened = open_app().switch_page("bedplan/pages/records.py").run()
    opened.file_uploader(key="stays_file").upload("ours.csv", world, "text/csv").run()
    before = opened.session_state["files"].records.stays
    opened.text_input(key=key(opened, "time_zone")).set_value("Europe/London")
    press(opened, SEND)

    after = opened.session_state["files"].records.stays
    july = before["start"].dt.month == 7
    assert set((after["start"] - before["start"])[july].dt.total_seconds()) == {3600}


def test_wards_counted_together_keep_everything_else(open_app: Callable[..., AppTest], stays_csv: bytes) -> None:
    """Names that may be one ward are counted together at a press; corrections made before stay."""
    content = stays_csv.replace(b"West", b"Ward 7").replace(b"East,2024-0", b"WARD07,2024-0")
    opened = open_app().switch_page("bedplan/pages/records.py").run()
    opened.file_uploader(key="stays_file").upload("ours.csv", content, "text/csv").run()
    leave_out(opened, ("2024-03-01", "2024-03-31"))
    opened.button(key="link_0").click().run()

    assert not opened.exception
    read = opened.session_state["files"]
    assert len(read.records.wards) == 2
    assert len(read.answers.choices.excluded) == 1
    press(opened, FORGET)
    assert len(opened.session_state["files"].records.wards) == 2


def saved_plan(app: AppTest) -> bytes:
    """Return the plan file that the page offers."""
    return as_json(
        SavedPlan(
            app.session_state["files"].records.fingerprint,
            app.session_state["settings"],
            {},
            app.session_state["files"].answers,
        )
    ).encode()


@pytest.mark.parametrize("plan_first", [True, False])
def test_answers_come_back_with_the_plan_and_the_file(
    app: AppTest, open_app: Callable[..., AppTest], places_csv: bytes, plan_first: bool
) -> None:
    """A plan opened before or after its file reads it as it was read, with the settings of its wards."""
    take_as(app, "Main Theatre", "ward with beds")
    app.radio(key=key(app, "on_leave")).set_value("held")
    leave_out(app, ("2024-03-01", "2024-03-31"))
    plan, wanted = saved_plan(app), app.session_state["files"].records
    assert json.loads(plan)["answers"]["places"] == {"Main Theatre": "bed ward"}

    again = open_app().switch_page("bedplan/pages/records.py").run()
    gives = [("plan_file", "plan.json", plan), ("stays_file", "ours.csv", places_csv)]
    for box, name, content in gives if plan_first else gives[::-1]:
        again.file_uploader(key=box).upload(name, content).run()
        assert not again.exception
        assert not again.error
    found = again.session_state["files"].records
    assert (found.wards, found.excluded, found.report.bed_days_used) == (
        wanted.wards,
        wanted.excluded,
        pytest.approx(wanted.report.bed_days_used),
    )
    go(again, "one_ward").selectbox(key="ward").set_value("West").run()
    assert (again.slider(key="demand").value, again.number_input(key="beds").value) == (20, 8)


def test_a_plan_whose_answers_leave_nothing_is_refused(app: AppTest) -> None:
    """A plan that says of the file in hand what can't be gives a sentence, and nothing changes."""
    before = app.session_state["files"]
    choices = IntakeChoices(window=(dt.date(1999, 1, 1), dt.date(1999, 12, 31)))
    plan = SavedPlan(before.records.fingerprint, {}, {}, Answers(choices=choices))
    app.file_uploader(key="plan_file").upload("plan.json", as_json(plan).encode()).run()

    assert len(app.error) == 1
    assert "within that time" in app.error[0].value
    assert app.session_state["files"] is before
    assert_all_else_stays(app)


def test_corrections_say_what_the_reader_says(app: AppTest, places_csv: bytes) -> None:
    """What the page takes from its inputs is what the reader makes of the same answers."""
    take_as(app, "Main Theatre", "ward with beds")
    app.radio(key=key(app, "on_leave")).set_value("held")
    press(app, SEND)
    choices = IntakeChoices(places={"Main Theatre": "bed ward"}, bed_on_leave="held")

    assert app.session_state["files"].answers.choices == choices
    assert (
        app.session_state["files"].records.report == read_records(places_csv, name="ours.csv", choices=choices).report
    )
