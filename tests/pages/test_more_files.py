"""Records: whether the figures add up, bed requests, returns whose rows hold several months, and what a plan keeps of files."""

from __future__ import annotations

import csv
import hashlib
import json
from datetime import timedelta
from typing import TYPE_CHECKING

import pytest

from bedplan.pages import saved
from bedplan.plan import FileAnswers, SavedPlan, as_json, from_json

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    from streamlit.testing.v1 import AppTest

MONTHS = "A row of this return holds"
RETURN = b"month,ward,available bed days,occupied bed days,discharges\n"


def go(app: AppTest, page: str) -> AppTest:
    """Turn to a page."""
    return app.switch_page(f"bedplan/pages/{page}.py").run()


def give(app: AppTest, box: str, name: str, content: bytes) -> AppTest:
    """Put a file into a box of the page Records."""
    return app.file_uploader(key=box).upload(name, content, "text/csv").run()


def text(elements: object) -> str:
    """Return what elements say, without the marks that keep names from being read as formatting."""
    return "\n".join(one.value for one in elements).replace("\\", "")


def press(app: AppTest, label: str) -> AppTest:
    """Press a button."""
    return next(one for one in app.button if one.label == label).click().run()


def checks(app: AppTest) -> dict[str, tuple[str, str]]:
    """Return what the page says of whether the figures add up: question → figures and verdict."""
    table = next(one.value for one in app.table if "Verdict" in one.value)
    return {
        str(what).replace("\\", ""): tuple(str(cell).replace("\\", "") for cell in row)
        for what, row in zip(table.index, table.to_numpy(), strict=True)
    }


@pytest.fixture
def app(open_app: Callable[..., AppTest], stays_csv: bytes) -> AppTest:
    """Return the page Records with ward stays loaded."""
    return give(go(open_app(), "records"), "stays_file", "stays.csv", stays_csv)


def test_the_demo_adds_up(open_app: Callable[..., AppTest], demo_data: Path) -> None:
    """The census at midnight, summed from its file, is met to the patient; every other row has a verdict."""
    with (demo_data / "census.csv").open() as file:
        official = sum(int(row["beds_occupied"]) for row in csv.DictReader(file) if row["time"] == "00:00")
    shown = checks(go(open_app(), "records"))

    assert shown["Patients at 00:00, all days: from stays, against census.csv"] == (
        f"{official:,} against {official:,} (+0.0 %)",
        "Agree on every ward (8)",
    )
    assert all(figures and verdict for figures, verdict in shown.values())
    assert len(shown) == 5


def test_a_census_that_differs_is_named(app: AppTest) -> None:
    """A census of nine times as many patients as the stays hold does not agree, on the page at once."""
    assert not [what for what in checks(app) if "against" in what]
    days = "\n".join(f"2024-03-{day:02d},00:00,East,99" for day in range(1, 29))
    give(app, "census_file", "census.csv", f"date,time,ward,occupied\n{days}".encode())

    figures, verdict = checks(app)["Patients at 00:00, all days: from stays, against census.csv"]
    assert f"against {28 * 99:,}" in figures
    assert verdict.startswith("Do not agree: East −9")


def load_of_north(app: AppTest) -> float:
    """Return the beds that North's patients use on average."""
    return app.session_state["typed"]["North"].demand.offered_load


def test_months_in_a_row_are_asked_for(app: AppTest) -> None:
    """Two rows half a year apart are read as months, 30 beds; told that each holds three, as the quarters they are, 10."""
    assert not [one for one in app.selectbox if one.label == MONTHS]
    # 10 beds used each day of January to March (91 days) and of July to September (92 days)
    give(app, "monthly_return_file", "return.csv", RETURN + b"2024-03,North,1000,910,91\n2024-09,North,1000,920,92\n")
    assert "say how many months a row holds" in text(app.caption)
    assert load_of_north(app) == pytest.approx(1830 / 61)
    next(one for one in app.selectbox if one.label == MONTHS).set_value(3).run()

    assert not app.exception
    assert load_of_north(app) == pytest.approx(10.0)
    assert "say how many months" not in text(app.caption)


def test_the_order_of_dates_outlives_the_months(app: AppTest) -> None:
    """Dates once said to be month first stay so when the months of a row are said."""
    give(app, "monthly_return_file", "return.csv", RETURN + b"03/04/2024,North,400,310,40\n")
    next(one for one in app.radio if one.label.startswith("How are dates")).set_value("month first")
    press(app, "Read it this way")
    months = app.session_state["files"].monthly_return.table["month"]
    assert months.astype(str).tolist() == ["2024-03"]
    next(one for one in app.selectbox if one.label == MONTHS).set_value(2).run()

    assert not app.error
    months = app.session_state["files"].monthly_return.table["month"]
    assert months.astype(str).tolist() == ["2024-02", "2024-03"]


def test_a_return_of_known_wards_is_compared(app: AppTest) -> None:
    """Nights of a ward with stays are held against its return; wards without stays are not said to be unused."""
    give(app, "monthly_return_file", "return.csv", RETURN + b"2024-03,East,31000,29000,40\n2024-03,North,400,310,40\n")

    assert "against 29,000" in checks(app)["Nights: from stays, against return.csv"][0]
    assert "hold no stays" not in text(app.caption)


def test_wards_of_a_return_can_be_counted_together(app: AppTest) -> None:
    """A ward of the return under another spelling is one of the records' wards once the planner says so, and no other."""
    give(
        app,
        "monthly_return_file",
        "return.csv",
        RETURN + b"2024-03,Ward East,31000,29000,40\n2024-03,North,400,310,40\n",
    )
    assert set(app.session_state["typed"]) == {"Ward East", "North"}
    press(app, "Count together")

    assert not app.exception
    assert set(app.session_state["typed"]) == {"North"}
    assert "against 29,000" in checks(app)["Nights: from stays, against return.csv"][0]


def test_a_return_in_its_box_keeps_what_was_set(app: AppTest, stays_csv: bytes) -> None:
    """The next file of stays is compared with the return that is still in its box; the slider of its ward stays."""
    give(app, "monthly_return_file", "return.csv", RETURN + b"2024-03,East,31000,29000,40\n2024-03,North,400,310,40\n")
    go(app, "one_ward").slider(key="demand").set_value(-20).run()
    assert app.selectbox(key="ward").value == "North"
    give(
        go(app, "records"),
        "monthly_return_file",
        "return.csv",
        RETURN + b"2024-03,East,31000,29000,40\n2024-03,North,400,310,40\n",
    )
    give(app, "stays_file", "later.csv", stays_csv + b"\n")
    assert "against 29,000" in checks(app)["Nights: from stays, against return.csv"][0]

    go(app, "one_ward").selectbox(key="ward").set_value("North").run()
    assert app.slider(key="demand").value == -20


def why_no_list(app: AppTest) -> str:
    """Return what the page Hidden demand says of the method by lists."""
    table = next(one.value for one in go(app, "hidden").table if "Why" in one.value)
    return str(table["Why"].iloc[0]).replace("\\", "")


def test_bed_requests_are_told_what_they_cannot_say(app: AppTest) -> None:
    """Alone they are refused as a list of those without a bed; a list of refusals beside them is used all the same."""
    requests = b"ward,requested at,placed at\nEast,2024-02-01 10:00,2024-02-01 15:00\n"
    give(app, "bed_requests_file", "requests.csv", requests)
    assert "nobody in it counts as not given a bed" in text(app.caption)
    assert "requests.csv holds all who asked for a bed" in why_no_list(app)
    give(go(app, "records"), "refusals_file", "log.csv", b"time,ward,reason\n2024-02-02 10:00,East,no bed\n")

    assert "listed as those who could not be given one" in why_no_list(app)
    go(app, "justification")
    assert any("requests.csv" in one.value.to_csv().replace("\\", "") for one in app.table)


def test_waits_in_a_list_of_requests_are_shown(app: AppTest) -> None:
    """Three of four waited over four hours: What happened says so, and One ward sets it against the model's waits."""
    assert "requests for a bed" not in text(go(app, "what_happened").markdown)
    given = ("15:00", "16:00", "17:00", "10:30")
    rows = [f"East,2024-02-0{day} 10:00,2024-02-0{day} {clock}" for day, clock in enumerate(given, 1)]
    requests = "\n".join(["ward,requested at,placed at", *rows, "East,2024-02-09 10:00,"])
    give(go(app, "records"), "bed_requests_file", "requests.csv", requests.encode())
    said = text(go(app, "what_happened").markdown)

    assert "75 % of 4 requests for a bed on East waited over 4 hours".replace("75 ", "75\u00a0") in said
    assert "For 1 more no bed is written down as given" in said
    go(app, "one_ward").radio(key="full").set_value("waits").run()
    assert "requests waited" not in text(app.caption)
    app.selectbox(key="measure").set_value("wait4").run()
    assert "75\u00a0% of requests waited over 4 hours; the model has" in text(app.caption)
    assert not app.exception


def test_a_reason_is_said_once(open_app: Callable[..., AppTest]) -> None:
    """Where two methods fail for one reason, the second says that it is the one above."""
    table = next(one.value for one in go(open_app(), "hidden").table if "Why" in one.value)

    assert table["Why"].iloc[2].startswith("Patients queue for Kestrel")
    assert table["Why"].iloc[3] == "As above."


REFUSALS = b"time,ward,reason\n2024-02-01 10:00,East,code 7\n2024-02-02 10:00,East,code 9\n"


def plan_of(app: AppTest, monkeypatch: pytest.MonkeyPatch) -> SavedPlan:
    """Return the plan that the page Records offers."""
    plans: list[SavedPlan] = []
    with monkeypatch.context() as here:
        here.setattr(saved, "as_json", lambda plan: plans.append(plan) or as_json(plan))
        go(app, "records")
    return from_json(as_json(plans[-1]))


@pytest.mark.parametrize("plan_first", [True, False])
def test_answers_about_reasons_come_back(
    app: AppTest, open_app: Callable[..., AppTest], monkeypatch: pytest.MonkeyPatch, plan_first: bool
) -> None:
    """Which reasons mean no bed is kept in the plan and counts again for exactly that list, whichever comes first."""
    give(app, "refusals_file", "log.csv", REFUSALS)
    app.multiselect(key="refusals_no_bed").set_value(["code 7"])
    press(app, "Count these")
    plan = plan_of(app, monkeypatch)
    assert dict(plan.files) == {hashlib.sha256(REFUSALS).hexdigest(): FileAnswers(no_bed_reasons=("code 7",))}

    again = go(open_app(), "records")
    given = app.session_state["files"].content
    steps = [
        ("plan_file", "plan.json", as_json(plan).encode()),
        ("stays_file", "stays.csv", given),
        ("refusals_file", "log.csv", REFUSALS),
    ]
    for step in steps if plan_first else [*steps[1:], steps[0]]:
        give(again, *step)
    assert not again.exception
    assert again.session_state["files"].refusals.no_bed_reasons == ("code 7",)
    assert len(again.session_state["files"].refusals.for_lack_of_beds("East")) == 1
    again.run()
    assert not again.multiselect
    give(again, "refusals_file", "other.csv", REFUSALS + b"2024-02-03 10:00,East,code 7\n")
    assert again.session_state["files"].refusals.no_bed_reasons is None


@pytest.fixture
def with_ready(open_app: Callable[..., AppTest], stays_csv: bytes) -> AppTest:
    """Return the page Records with keyed ward stays, and a file of ready dates, a day before each end."""
    heading, *rows = stays_csv.decode().split("\n")
    content = "\n".join([f"spell_key,{heading}", *(f"s{place},{row}" for place, row in enumerate(rows))])
    app = give(go(open_app(), "records"), "stays_file", "stays.csv", content.encode())
    ends = app.session_state["files"].records.stays["end"]
    ready = "\n".join(f"s{place},{end - timedelta(days=1):%Y-%m-%d %H:%M}" for place, end in enumerate(ends))
    return give(app, "ready_file", "ready.csv", f"spell_key,date\n{ready}\n".encode())


def test_ready_dates_outlive_another_plan(
    with_ready: AppTest, open_app: Callable[..., AppTest], monkeypatch: pytest.MonkeyPatch
) -> None:
    """A plan with other answers leaves the ready dates in use; it names their file, and asks for it where it is not here."""
    plan = plan_of(with_ready, monkeypatch)
    held = json.loads(as_json(plan))
    held["answers"] |= {"places": {"West": "virtual"}, "ready_file": "ready.csv"}
    assert plan.answers.ready_file == "ready.csv"
    content = with_ready.session_state["files"].content
    give(with_ready, "plan_file", "plan.json", json.dumps(held).encode())
    assert not with_ready.error
    assert with_ready.session_state["files"].records.wards == ("East",)
    assert "ready" in with_ready.session_state["files"].records.stays
    assert "was made with ready dates" not in text(with_ready.caption)

    again = give(go(open_app(), "records"), "plan_file", "plan.json", json.dumps(held).encode())
    assert "was made with ready dates from ready.csv" in text(again.caption)
    give(again, "stays_file", "stays.csv", content)
    assert again.session_state["files"].records.wards == ("East",)
    assert "ready" not in again.session_state["files"].records.stays
