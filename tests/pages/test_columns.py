"""Records: which column is which can be said of every kind of file, outlives other answers, and is kept in the plan."""

from __future__ import annotations

import io
from datetime import timedelta
from typing import TYPE_CHECKING

import pandas as pd
import pytest

from tests.pages.giving_files import are_open, give, go, name, press, text

if TYPE_CHECKING:
    from collections.abc import Callable

    from streamlit.testing.v1 import AppTest

BEDS = b"K1,K2,K3,K4\nEast,2024-01-01,9,\nWest,2024-01-01,7,refit\n"
BEDS_COLUMNS = {"ward": "K1", "from": "K2", "staffed": "K3"}


def beds_of_file(app: AppTest) -> int:
    """Return East's beds today by the file in use."""
    return app.session_state["files"].capacity.beds_today("East")


def beds_of(app: AppTest, ward: str = "East") -> int:
    """Return today's staffed beds of a ward as the page One ward starts with them."""
    beds = go(app, "one_ward").selectbox(key="ward").set_value(ward).run().number_input(key="beds").value
    go(app, "records")
    return beds


@pytest.fixture
def app(open_app: Callable[..., AppTest], stays_csv: bytes) -> AppTest:
    """Return the page Records with ward stays loaded, each with a key."""
    heading, *rows = stays_csv.decode().split("\n")
    content = "\n".join([f"spell_key,{heading}", *(f"s{place},{row}" for place, row in enumerate(rows))])
    return give(go(open_app(), "records"), "stays", "stays.csv", content.encode())


def load_of_north(app: AppTest) -> float:
    """Return the beds that North's patients use on average, by the return."""
    return app.session_state["typed"]["North"].demand.offered_load


def days_ready(app: AppTest) -> set[float]:
    """Return for how many days patients were ready to leave."""
    stays = app.session_state["files"].records.stays
    return set((stays["end"] - stays["ready"]).dropna().dt.total_seconds() / 86_400)


# kind -> rows under headings nobody knows, which is which, the figure that follows, and what it is by the rows
STRANGE = {
    "capacity": (
        BEDS,
        BEDS_COLUMNS,
        lambda app: app.session_state["files"].capacity.beds_today("West"),
        7,
    ),
    "refusals": (
        b"K5,K1,K6\n2024-02-01 10:00,East,no bed\n2024-02-02 10:00,East,patient declined\n",
        {"time": "K5", "ward": "K1", "reason": "K6"},
        lambda app: len(app.session_state["files"].refusals.for_lack_of_beds("East")),
        1,
    ),
    "bed_requests": (
        b"K1,K13,K14\nEast,2024-02-01 10:00,2024-02-01 16:00\n",
        {"ward": "K1", "time": "K13", "placed": "K14"},
        lambda app: app.session_state["files"].bed_requests.table["wait_hours"].tolist(),
        [6.0],
    ),
    "cancellations": (
        b"K7,K1,K6\n2024-02-01,West,no bed\n2024-02-02,West,no bed\n2024-02-05,West,patient declined\n",
        {"date": "K7", "ward": "K1", "reason": "K6"},
        lambda app: len(app.session_state["files"].cancellations.for_lack_of_beds("West")),
        2,
    ),
    "census": (
        b"K7,K8,K1,K9\n2024-03-01,00:00,East,8\n2024-03-02,00:00,East,10\n2024-03-02,00:00,West,1\n",
        {"date": "K7", "time": "K8", "ward": "K1", "occupied": "K9"},
        lambda app: app.session_state["files"].census.occupied("East").mean(),
        9.0,
    ),
    "monthly_return": (
        b"K10,K1,K11,K9,K12\n2024-01,North,400,310,62\n2024-02,North,400,290,58\n",
        {"month": "K10", "ward": "K1", "available": "K11", "occupied": "K9", "discharges": "K12"},
        load_of_north,
        pytest.approx(600 / 60),
    ),
    "ready": (
        "\n".join(["K15,K16", *(f"s{place},{{{place}}}" for place in range(4))]).encode(),
        {"spell_key": "K15", "date": "K16"},
        days_ready,
        {1.0},
    ),
}


def rows_of(app: AppTest, kind: str) -> bytes:
    """Return the rows of a kind; patients are ready a day before they leave."""
    if kind != "ready":
        return STRANGE[kind][0]
    ends = app.session_state["files"].records.stays["end"]
    return STRANGE[kind][0].decode().format(*(f"{end - timedelta(days=1):%Y-%m-%d %H:%M}" for end in ends[:4])).encode()


@pytest.mark.parametrize("kind", STRANGE)
def test_columns_of_every_kind_can_be_named(app: AppTest, kind: str) -> None:
    """Headings nobody knows: the question is open, what the columns hold is shown, and once answered the figure follows."""
    _, columns, figure, expected = STRANGE[kind]
    give(app, kind, "odd.csv", rows_of(app, kind))
    assert len(app.error) == 1
    assert "odd.csv" in text(app.error)
    assert are_open(app).count(True) == 1
    assert all(f"- {heading}: " in text(app.caption) for heading in columns.values())
    name(app, kind, columns)

    assert not app.exception
    assert not app.error
    assert not any(are_open(app))
    assert figure(app) == expected
    assert all(app.selectbox(key=f"{kind}_column_{key}").value == heading for key, heading in columns.items())


def test_the_page_follows_what_was_named(app: AppTest) -> None:
    """Beds from a column that only the planner could name are today's beds on the page One ward."""
    name(give(app, "capacity", "odd.csv", BEDS), "capacity", BEDS_COLUMNS)

    assert (beds_of(app, "East"), beds_of(app, "West")) == (9, 7)


@pytest.mark.parametrize("ending", ["xlsx", "parquet"])
def test_columns_of_a_workbook_can_be_named(app: AppTest, ending: str) -> None:
    """A workbook or a Parquet file whose headings nobody knows is asked about like a text."""
    table, written = pd.read_csv(io.BytesIO(BEDS)), io.BytesIO()
    getattr(table, "to_excel" if ending == "xlsx" else "to_parquet")(written, index=False)
    give(app, "capacity", f"odd.{ending}", written.getvalue())
    assert are_open(app)[0]
    name(app, "capacity", BEDS_COLUMNS)

    assert not app.error
    assert app.session_state["files"].capacity.beds_today("West") == 7


def test_a_file_read_well_shows_how(app: AppTest) -> None:
    """Where headings are known the question is closed, and holds each heading with its first rows."""
    give(app, "census", "census.csv", b"date,ward,occupied\n2024-03-01,East,8\n2024-03-02,East,10\n2024-03-03,East,9\n")

    assert not any(are_open(app))
    assert app.selectbox(key="census_column_occupied").value == "occupied"
    assert "8 · 10 · 9" in text(app.caption)


def test_a_column_can_be_left_out(app: AppTest) -> None:
    """A column that was taken for closed beds stands for nothing once the planner says so, and stays so."""
    beds = b"ward,from,staffed_beds,closed\nEast,2024-01-01,9,2\n"
    give(app, "capacity", "beds.csv", beds)
    assert app.session_state["files"].capacity.table["closed"].tolist() == [2]
    name(app, "capacity", {"closed": ""})

    assert app.session_state["files"].capacity.table["closed"].tolist() == [0]
    assert app.selectbox(key="capacity_column_closed").value == ""
    go(app, "justification")
    assert any("closed = no column" in one.value.to_csv() for one in app.table)


WRONG = {
    "beds in words": ({"staffed": "K4"}, "“refit” in row 1 of odd.csv is no number of staffed beds"),
    "one column for two": ({"from": "K4", "to": "K4"}, "“K4” was chosen for from and for to"),
    "no ward": ({"ward": ""}, "odd.csv lacks a column of ward"),
}


@pytest.mark.parametrize("case", WRONG)
def test_a_wrong_correction_loses_nothing(app: AppTest, case: str) -> None:
    """One sentence, the question open, what was read before still in use and still in the plan; then it can be mended."""
    wrong, told = WRONG[case]
    name(
        give(app, "capacity", "odd.csv", BEDS[: BEDS.index(b"West")].replace(b"9,", b"9,refit")),
        "capacity",
        BEDS_COLUMNS,
    )
    before, kept = app.session_state["files"], dict(app.session_state["said_of_files"])
    name(app, "capacity", wrong)

    assert not app.exception
    assert len(app.error) == 1
    assert told in text(app.error)
    assert "still in use, unchanged" in text(app.caption)
    assert app.session_state["files"] is before
    assert app.session_state["said_of_files"] == kept
    assert are_open(app)[0]
    name(app, "capacity", BEDS_COLUMNS)
    assert not app.error
    assert beds_of(app) == 9


DATES = "East,01/02/2024,9,5\nEast,01/03/2024,11,6\n"  # of February and March, or of two days in January


@pytest.mark.parametrize("headings", ["K1,K2,K3,K21", "ward,from,K3,beds"])
def test_columns_and_dates_outlive_each_other(app: AppTest, headings: str) -> None:
    """A file that needs both answers, columns first or dates first, is read with both."""
    give(app, "capacity", "both.csv", f"{headings}\n{DATES}".encode())
    place, since = headings.split(",")[:2]
    columns = {"ward": place, "from": since, "staffed": "K3"}
    dates_first = not are_open(app)[0]
    if not dates_first:
        name(app, "capacity", columns)
    app.radio[0].set_value("day first")
    press(app, "Read it this way", "capacity_date_order")
    if dates_first:
        assert beds_of_file(app) == 6
        name(app, "capacity", columns)

    assert dates_first == headings.startswith("ward")
    assert not app.error
    assert app.session_state["files"].capacity.table["from"].dt.month.tolist() == [2, 3]
    assert beds_of_file(app) == beds_of(app) == 11


def test_a_heading_named_for_something_else_leaves_its_place(app: AppTest) -> None:
    """Whether figures are bed-days or beds: the question opens by itself, and one answer is enough."""
    rows = b"month,ward,occupied beds,discharges\n2024-01,North,10,1\n2024-02,North,10,1\n"
    give(app, "monthly_return", "return.csv", rows)
    assert "may be beds occupied on average or bed-days" in text(app.error)
    assert are_open(app).count(True) == 1
    name(app, "monthly_return", {"occupied": "occupied beds"})

    assert not app.error
    assert app.selectbox(key="monthly_return_column_occupied_beds").value == ""
    assert load_of_north(app) == pytest.approx(20 / 60)


def test_another_file_is_asked_about_anew(app: AppTest) -> None:
    """What was said of a file holds for exactly that file: a changed one asks again, the same one doesn't."""
    name(give(app, "capacity", "odd.csv", BEDS), "capacity", BEDS_COLUMNS)
    give(app, "capacity", "odd.csv", BEDS.replace(b",9,", b",12,"))
    assert len(app.error) == 1
    assert app.selectbox(key="capacity_column_ward").value == ""
    give(app, "capacity", "odd.csv", BEDS)

    assert not app.error
    assert beds_of(app) == 9


def test_forgotten_records_take_their_answers_along(app: AppTest) -> None:
    """Once the records are forgotten, so is what was said of the files beside them."""
    name(give(app, "capacity", "odd.csv", BEDS), "capacity", BEDS_COLUMNS)
    next(one for one in app.button if one.label.startswith("Forget these records")).click().run()

    assert not app.exception
    assert "said_of_files" not in app.session_state


def test_wards_of_a_wrong_reading_are_taken_off(app: AppTest) -> None:
    """A return whose site stood for its ward makes the right wards once that is said, and no longer the wrong one."""
    rows = (
        b"month,site,K1,available,occupied,discharges\n2024-01,Main,North,400,310,62\n2024-01,Main,South,400,155,62\n"
    )
    give(app, "monthly_return", "return.csv", rows)
    assert set(app.session_state["typed"]) == {"Main"}
    name(app, "monthly_return", {"ward": "K1"})

    assert not app.exception
    assert set(app.session_state["typed"]) == {"North", "South"}
