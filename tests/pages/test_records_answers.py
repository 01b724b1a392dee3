"""Records: the page asks what a file can't tell by itself, and opens saved plans."""

from __future__ import annotations

import hashlib
from typing import TYPE_CHECKING

import pytest

from bedplan.pages import saved
from bedplan.plan import SavedPlan, as_json
from tests.data.values.test_exchanged import spoilt_workbook

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    from streamlit.testing.v1 import AppTest

HEADINGS = b"Ward,Start,End\n"


def go(app: AppTest, page: str) -> AppTest:
    """Turn to a page."""
    return app.switch_page(f"bedplan/pages/{page}.py").run()


def give_stays(app: AppTest, name: str, content: bytes) -> AppTest:
    """Upload a file of ward stays."""
    return go(app, "records").file_uploader(key="stays_file").upload(name, content, "text/csv").run()


def answer(app: AppTest) -> str:
    """Return what the page One ward says."""
    return go(app, "one_ward").header[0].value


def test_dates_that_read_two_ways(open_app: Callable[..., AppTest]) -> None:
    """Where 03/04 may be April or March the page asks, with both readings, and takes the file after the answer."""
    rows = [f"East,{1 + day % 9:02d}/0{1 + day % 7}/2024,{3 + day % 9:02d}/0{1 + day % 7}/2024" for day in range(40)]
    app = give_stays(open_app(), "either.csv", HEADINGS + "\n".join(rows).encode())
    assert not app.exception
    assert len(app.error) == 1
    question = next(one for one in app.radio if "dates" in one.label)
    assert question.value is None
    assert [one.value.index.name for one in app.table].count("As written") == 1

    question.set_value(question.options[0])
    next(one for one in app.button if one.label == "Read it this way").click().run()
    assert not app.exception
    assert not app.error
    assert any("either.csv" in heading.value for heading in app.subheader)
    assert answer(app).startswith("East")


def test_columns_can_be_named(open_app: Callable[..., AppTest], stays_csv: bytes) -> None:
    """A file with headings that nobody could guess is read once the planner says which is which."""
    plain = answer(give_stays(open_app(), "stays.csv", stays_csv))
    app = give_stays(open_app(), "stays.csv", stays_csv.replace(b"Ward,Start,End", b"Zimmer,Zugang,Abgang"))
    assert len(app.error) == 1
    for key, heading in (("ward", "Zimmer"), ("start", "Zugang"), ("end", "Abgang")):
        app.selectbox(key=f"stays_column_{key}").set_value(heading)
    next(one for one in app.button if "with these columns" in one.label).click().run()
    assert not app.exception
    assert not app.error
    assert answer(app) == plain


def test_days_and_times_of_day_can_be_named(open_app: Callable[..., AppTest], stays_csv: bytes) -> None:
    """Where days and times stand in columns of their own, under any headings, the question offers a box for each."""
    plain = answer(give_stays(open_app(), "stays.csv", stays_csv))
    lines = stays_csv.decode().splitlines()
    apart = "\n".join([lines[0].replace("Start,End", "K1,K2,K3,K4"), *(row.replace(" ", ",") for row in lines[1:])])
    app = give_stays(open_app(), "stays.csv", apart.encode())
    assert len(app.error) == 1
    for key, heading in (("start_date", "K1"), ("start_time", "K2"), ("end_date", "K3"), ("end_time", "K4")):
        app.selectbox(key=f"stays_column_{key}").set_value(heading)
    next(one for one in app.button if "with these columns" in one.label).click().run()
    assert not app.exception
    assert not app.error
    assert answer(app) == plain


def test_exchanged_days_and_months_are_asked_about(open_app: Callable[..., AppTest]) -> None:
    """A workbook whose date cells a spreadsheet exchanged shows both readings, and is read as the planner says."""
    app = give_stays(open_app(), "spoilt.xlsx", spoilt_workbook())
    assert list(app.table[0].value.columns) == ["Read as it stands", "Read with day and month exchanged"]
    (asked,) = (one for one in app.radio if "How are dates written" in one.label)
    asked.set_value("day and month exchanged up to day 12")
    next(one for one in app.button if one.label == "Read it this way").click().run()
    assert not app.exception
    assert not app.error
    assert any("spoilt.xlsx" in heading.value for heading in app.subheader)


def test_a_saved_plan_is_opened(open_app: Callable[..., AppTest], demo_data: Path) -> None:
    """A saved plan brings back a ward's inputs, and those of a ward typed as totals."""
    app = open_app()
    plan = SavedPlan(
        hashlib.sha256((demo_data / "stays.csv").read_bytes()).hexdigest(),
        {"Heron": {"beds": 33, "full": "waits", "demand": 7, "stay": 0, "spread": 0, "peak": 100, "growth": 0}},
        {"Annex": {"admissions_per_year": 1000.0, "mean_days": 3.0, "variation": 1.0, "beds": 11}},
    )
    go(app, "records").file_uploader(key="plan_file").upload("plan.json", as_json(plan).encode(), "application/json")
    app.run()
    assert not app.exception
    assert not app.error
    go(app, "one_ward").selectbox(key="ward").set_value("Heron").run()
    assert (app.slider(key="demand").value, app.number_input(key="beds").value) == (7, 33)
    app.selectbox(key="ward").set_value("Annex").run()
    assert "Annex has 11 staffed beds" in app.header[0].value


def test_the_share_written_down_is_saved(open_app: Callable[..., AppTest], monkeypatch: pytest.MonkeyPatch) -> None:
    """The plan keeps the share of refusals that is written down, and nothing of a ward that was only looked at."""
    plans: list[SavedPlan] = []
    monkeypatch.setattr(saved, "as_json", lambda plan: plans.append(plan) or as_json(plan))
    app = go(open_app(), "hidden")
    app.selectbox(key="ward_looked_at").set_value("Merlin").run()
    app.slider(key="recorded_Merlin").set_value(45).run()
    app.selectbox(key="ward_looked_at").set_value("Dunlin").run()
    go(app, "records")
    plan = plans[-1]
    assert plan.settings["Merlin"]["written"] == 0.45
    assert "written" not in plan.settings.get("Dunlin", {})

    again = go(open_app(), "records")
    again.file_uploader(key="plan_file").upload("plan.json", as_json(plan).encode()).run()
    assert not again.error
    go(again, "hidden").selectbox(key="ward_looked_at").set_value("Merlin").run()
    assert again.slider(key="recorded_Merlin").value == 45
    go(again, "one_ward")
    assert again.radio(key="full").value == "leaves"
    assert not again.exception


@pytest.mark.parametrize(
    "content",
    [
        b"",
        b"not a plan",
        b"[1, 2]",
        b'{"plan": 99, "records": "", "settings": {}, "typed": {}, "answers": {}}',
        b'{"plan": 1, "records": "", "settings": {"Heron": {"beds": "many"}}, "typed": {}, "answers": {}}',
        b'{"plan": 1, "records": "", "settings": {}, "typed": {"A": {"beds": 3}}, "answers": {}}',
        b'{"plan": 1, "records": "", "settings": {}, "typed": {}, "answers": {"columns": 4}}',
    ],
)
def test_a_file_that_is_no_plan(open_app: Callable[..., AppTest], stays_csv: bytes, content: bytes) -> None:
    """A file that is no plan, or a damaged one, is refused in a sentence, and records can be loaded after it."""
    app = open_app()
    before = answer(app)
    go(app, "records").file_uploader(key="plan_file").upload("plan.json", content, "application/json").run()
    assert not app.exception
    assert len(app.error) == 1
    assert answer(app) == before
    give_stays(app, "stays.csv", stays_csv)
    assert not app.exception
    assert not app.error
