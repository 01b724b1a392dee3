"""Records: what was said of files comes back with the plan; a census with a column for each ward is asked for its dates only."""

from __future__ import annotations

import hashlib
from typing import TYPE_CHECKING

import pytest

from bedplan.pages import saved
from bedplan.plan import FileAnswers, SavedPlan, as_json, from_json
from tests.pages.giving_files import are_open, give, go, name, press, text

if TYPE_CHECKING:
    from collections.abc import Callable

    from streamlit.testing.v1 import AppTest

MONTHS = "A row of this return holds"
BEDS = b"K1,K2,K3\nEast,01/02/2024,9\nEast,01/03/2024,11\n"
BEDS_SAID = FileAnswers({"ward": "K1", "from": "K2", "staffed": "K3"}, "day first")
RETURN = b"K10,K1,K9,K12\n2024-03,North,910,91\n2024-09,North,920,92\n"
RETURN_SAID = FileAnswers({"month": "K10", "ward": "K1", "occupied": "K9", "discharges": "K12"}, months_a_row=3)
REFUSALS = b"K5,K1,K6\n2024-02-01 10:00,East,code 7\n2024-02-02 10:00,East,code 9\n"
REFUSALS_SAID = FileAnswers({"time": "K5", "ward": "K1", "reason": "K6"}, no_bed_reasons=("code 7",))
SAID = {hashlib.sha256(BEDS).hexdigest(): BEDS_SAID, hashlib.sha256(RETURN).hexdigest(): RETURN_SAID}
SAID |= {hashlib.sha256(REFUSALS).hexdigest(): REFUSALS_SAID}
WIDE = "Date,Heron occupied,Heron beds,Teal occupied,Teal beds\n" + "".join(
    f"2024-03-{day:02d},{20 + day % 3},24,{5 + day % 2},8\n" for day in range(1, 29)
)


def months(app: AppTest) -> object:
    """Return the question how many months a row of the return holds."""
    return next(one for one in app.selectbox if one.label == MONTHS)


def plan_of(app: AppTest, monkeypatch: pytest.MonkeyPatch) -> SavedPlan:
    """Return the plan that the page Records offers."""
    plans: list[SavedPlan] = []
    with monkeypatch.context() as here:
        here.setattr(saved, "as_json", lambda plan: plans.append(plan) or as_json(plan))
        go(app, "records")
    return from_json(as_json(plans[-1]))


@pytest.fixture
def app(open_app: Callable[..., AppTest], stays_csv: bytes) -> AppTest:
    """Return the page Records with ward stays loaded."""
    return give(go(open_app(), "records"), "stays", "stays.csv", stays_csv)


def answer_all(app: AppTest) -> AppTest:
    """Bring a file of beds, a return and a list of refusals, and say how each is to be read."""
    name(give(app, "capacity", "beds.csv", BEDS), "capacity", dict(BEDS_SAID.columns))
    app.radio[0].set_value("day first")
    press(app, "Read it this way", "capacity_date_order")
    name(give(app, "monthly_return", "return.csv", RETURN), "monthly_return", dict(RETURN_SAID.columns))
    months(app).set_value(3).run()
    name(give(app, "refusals", "log.csv", REFUSALS), "refusals", dict(REFUSALS_SAID.columns))
    app.multiselect(key="refusals_no_bed").set_value(["code 7"])
    return press(app, "Count these", "refusals_reasons")


def assert_as_said(app: AppTest) -> None:
    """Every file is read as it was said, and nothing is asked."""
    assert not app.exception
    assert not app.error
    assert not any(are_open(app))
    assert not app.multiselect
    files = app.session_state["files"]
    assert files.capacity.table["from"].dt.month.tolist() == [2, 3]
    assert files.capacity.beds_today("East") == 11
    # 10 beds used each day of January to March (91 days) and of July to September (92 days)
    assert app.session_state["typed"]["North"].demand.offered_load == pytest.approx(10.0)
    assert months(app).value == 3
    assert len(files.refusals.for_lack_of_beds("East")) == 1


def test_a_plan_keeps_what_was_said_of_each_file(app: AppTest, monkeypatch: pytest.MonkeyPatch) -> None:
    """Columns, dates, months a row and reasons stand in the plan by the file's fingerprint, and in the document."""
    answer_all(app)
    assert_as_said(app)
    plan = plan_of(app, monkeypatch)

    assert dict(plan.files) == SAID
    go(app, "one_ward").selectbox(key="ward").set_value("East").run()
    tables = "\n".join(one.value.to_csv().replace("\\", "") for one in go(app, "justification").table)
    assert "Staffed beds: columns,ward = K1; from = K2; staffed = K3" in tables
    assert "Staffed beds: dates,day first" in tables
    assert "Patients not given a bed: reasons taken for lack of a bed,code 7" in tables
    assert ("Monthly return: months a row", "3", "return.csv") in app.session_state["typed"]["North"].facts


@pytest.mark.parametrize("first", ["plan", "files"])
def test_the_same_files_are_read_the_same_way(app: AppTest, first: str) -> None:
    """A plan opened before or after its files are brought: they are read as it says, without a question."""
    plan = as_json(SavedPlan("", {}, {}, files=SAID)).encode()
    given = [
        ("capacity", "beds.csv", BEDS),
        ("monthly_return", "return.csv", RETURN),
        ("refusals", "log.csv", REFUSALS),
    ]
    for step in [("plan", "plan.json", plan), *given] if first == "plan" else [*given, ("plan", "plan.json", plan)]:
        give(app, *step)

    assert_as_said(app)
    app.run()
    assert_as_said(app)


def test_a_return_brought_again_keeps_its_wards_settings(
    app: AppTest, open_app: Callable[..., AppTest], monkeypatch: pytest.MonkeyPatch
) -> None:
    """A slider of a ward known by its return comes back with the plan, and stays when the return itself is brought."""
    answer_all(app)
    go(app, "one_ward").selectbox(key="ward").set_value("North").run().slider(key="demand").set_value(12).run()
    again = give(go(open_app(), "records"), "plan", "plan.json", as_json(plan_of(app, monkeypatch)).encode())
    give(again, "stays", "stays.csv", app.session_state["files"].content)
    give(again, "monthly_return", "return.csv", RETURN)

    assert not again.error
    assert go(again, "one_ward").selectbox(key="ward").set_value("North").run().slider(key="demand").value == 12


def test_a_file_no_longer_in_its_box_is_asked_for(app: AppTest) -> None:
    """Where a plan reads a file another way than it was read, and the file is gone from its box, the page says so."""
    beds = b"ward,from,beds,K3\nEast,2024-02-01,9,11\n"
    said = {hashlib.sha256(beds).hexdigest(): FileAnswers({"staffed": "K3"})}
    give(app, "capacity", "beds.csv", beds)
    go(go(app, "one_ward"), "records")
    give(app, "plan", "plan.json", as_json(SavedPlan("", {}, {}, files=said)).encode())
    assert "beds.csv was read another way than this plan says: give it again." in text(app.caption)
    give(app, "capacity", "beds.csv", beds)

    assert app.session_state["files"].capacity.beds_today("East") == 11


def test_other_columns_ask_for_reasons_again(app: AppTest) -> None:
    """Reasons were said of one column: where another holds them they are asked about again, not taken for something else."""
    log = b"time,ward,reason,K6\n2024-02-01 10:00,East,code 7,B3\n2024-02-02 10:00,East,code 9,B4\n"
    give(app, "refusals", "log.csv", log)
    app.multiselect(key="refusals_no_bed").set_value(["code 7"])
    press(app, "Count these", "refusals_reasons")
    name(app, "refusals", {"reason": "K6"})

    assert app.multiselect(key="refusals_no_bed").options == ["B3 (1)", "B4 (1)"]


def test_a_column_for_each_ward_is_asked_for_its_dates_only(app: AppTest) -> None:
    """Wards are named and not asked for as columns; confirmed as it stands, the table is read the same."""
    give(app, "census", "wide.csv", WIDE.encode())
    before = app.session_state["files"].census.table
    keys = [one.key for one in app.selectbox if one.key.startswith("census_column_")]
    assert keys == ["census_column_date", "census_column_time"]
    assert "a column for each ward: Heron, Teal." in text(app.caption)
    assert are_open(app)[0] is False
    press(app, "Read it again with these columns", "census_columns")

    assert not app.error
    assert app.session_state["files"].census.table.equals(before)
    assert set(before["occupied"]) == {20, 21, 22, 5, 6}


def test_a_column_for_each_ward_needs_its_date(app: AppTest) -> None:
    """Such a table whose column of dates nobody knows says that its date is enough, and is read once that is named."""
    give(app, "census", "wide.csv", WIDE.replace("Date,", "K18,").encode())
    assert len(app.error) == 1
    assert "needs its date only" in text(app.caption)
    name(app, "census", {"date": "K18"})

    assert not app.error
    assert app.session_state["files"].census.wards == ("Heron", "Teal")


def test_a_row_for_each_ward_is_not_taken_for_a_column_for_each(app: AppTest) -> None:
    """A census whose wards stand under a heading nobody knows is not read as if its headings were wards."""
    rows = [f"2024-03-{day:02d},{ward},{count}" for day in range(1, 29) for ward, count in (("East", 8), ("West", 5))]
    give(app, "census", "long.csv", "\n".join(["Date,K17,K9", *rows]).encode())
    assert "long.csv lacks ward, occupied" in text(app.error)
    assert app.session_state["files"].census is None
    name(app, "census", {"ward": "K17", "occupied": "K9"})

    assert not app.error
    assert app.session_state["files"].census.occupied("West").tolist() == [5] * 28


def test_a_return_without_beds_waits_for_them_to_be_typed(app: AppTest) -> None:
    """Beds that the return doesn't name are not known; typed on the page One ward, they are."""
    give(app, "monthly_return", "return.csv", b"month,ward,obd,discharges\n2024-01,North,325,50\n")
    go(app, "one_ward").selectbox(key="ward").set_value("North").run()
    assert app.header[0].value.startswith("North's staffed beds today are not known")
    app.number_input(key="beds").set_value(14).run()

    assert not app.exception
    assert app.header[0].value.startswith("North has 14 staffed beds")
