"""The page's address: a link opens the same plan again, and holds settings and a fingerprint, never a row or a count."""

from __future__ import annotations

import hashlib
from typing import TYPE_CHECKING

import pytest
from streamlit.testing.v1 import AppTest

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping
    from pathlib import Path

MOST_VALUES, LONGEST_VALUE = 12, 40
LINK = {
    "ward": "Merlin",
    "beds": "9",
    "limit": "3",
    "within": "over the year",
    "demand": "12",
    "stay": "-4",
    "spread": "20",
    "peak": "150",
    "growth": "2",
}


def go(app: AppTest, page: str) -> AppTest:
    """Turn to a page."""
    return app.switch_page(f"bedplan/pages/{page}.py").run()


def load(app: AppTest, content: bytes) -> AppTest:
    """Upload a file of ward stays and come back to the page One ward."""
    go(app, "records").file_uploader(key="stays_file").upload("stays.csv", content, "text/csv").run()
    return go(app, "one_ward")


def test_a_link_opens_the_plan(open_app: Callable[..., AppTest]) -> None:
    """A link sets every input, and what is said is the same as after moving them by hand."""
    app = open_app(**LINK)
    assert app.selectbox(key="ward").value == "Merlin"
    assert app.number_input(key="beds").value == 9
    assert app.segmented_control(key="within").value == "year"
    for key in ("limit", "demand", "stay", "spread", "peak", "growth"):
        assert app.slider(key=key).value == int(LINK[key])

    by_hand = open_app()
    by_hand.selectbox(key="ward").set_value("Merlin").run()
    by_hand.segmented_control(key="within").set_value("year")
    by_hand.number_input(key="beds").set_value(9)
    for key in ("limit", "demand", "stay", "spread", "peak", "growth"):
        by_hand.slider(key=key).set_value(int(LINK[key]))
    by_hand.run()
    assert by_hand.header[0].value == app.header[0].value
    assert [slider.label for slider in by_hand.slider] == [slider.label for slider in app.slider]


@pytest.mark.parametrize(
    "address",
    [
        {"demand": "9999"},
        {"demand": "a lot"},
        {"beds": "-3"},
        {"beds": "9" * 30},
        {"ward": "No such ward"},
        {"within": "ever"},
        {"full": "vanish"},
        {"limit": "0"},
        {"measure": "luck"},
        {"records": "<script>"},
        {"nonsense": "1"},
    ],
)
def test_a_bad_link_opens_calmly(open_app: Callable[..., AppTest], address: dict[str, str]) -> None:
    """A value in the address that can't be is left aside: the page opens on what the records say."""
    plain = open_app().header[0].value
    app = open_app(**address)
    assert not app.exception
    assert not app.error
    assert app.header[0].value == plain


def test_the_address_is_short_and_holds_no_counts(open_app: Callable[..., AppTest], stays_csv: bytes) -> None:
    """With every input moved the address holds at most 12 short values, the file's fingerprint among them, no counts."""
    app = load(open_app(), stays_csv)
    app.selectbox(key="ward").set_value("West").run()
    for slider in app.slider:
        slider.set_value(slider.max)
    app.number_input(key="beds").set_value(9)
    app.segmented_control(key="within").set_value("year").run()
    for key in [slider.key for slider in app.slider]:
        app.session_state[key] = app.slider(key=key).value
    app.run()

    rows = go(app, "records").metric[0].value
    go(app, "one_ward")
    address = app.query_params
    assert address["records"] == hashlib.sha256(stays_csv).hexdigest()[:12]
    assert len(address.keys() - {"records"}) <= MOST_VALUES
    assert all(len(str(value)) <= LONGEST_VALUE for value in address.values())
    assert not any(rows in str(value) for key, value in address.items() if key != "records")


def test_other_records_are_asked_for(open_app: Callable[..., AppTest], stays_csv: bytes) -> None:
    """A link made with other records says which it was made with and which are shown, until those records are loaded."""
    asked = hashlib.sha256(stays_csv).hexdigest()[:12]
    app = open_app(records=asked)
    here = app.query_params["records"]
    assert here != asked
    for page in ("one_ward", "compare", "justification"):
        go(app, page)
        assert len(app.warning) == 1
        assert asked in app.warning[0].value
        assert here in app.warning[0].value

    load(app, stays_csv)
    assert not app.warning
    assert app.query_params["records"] == asked


def test_the_same_records_open_quietly(open_app: Callable[..., AppTest]) -> None:
    """A link made with the records that are shown brings no warning."""
    here = open_app().query_params["records"]
    assert not open_app(records=here).warning


def test_no_input_makes_the_address_long(open_app: Callable[..., AppTest]) -> None:
    """However many inputs are moved at once, they are no more than 12 values beside the fingerprint."""
    app = open_app()
    side = app.sidebar
    kinds = (side.slider, side.radio, side.number_input, side.segmented_control, side.selectbox, side.toggle)
    kept = [one.key for kind in kinds for one in kind if one.key]
    assert len(kept) >= 9
    assert len(kept) <= MOST_VALUES


# pages that can be opened first here: their address is their file's name
DIRECT = ("records", "compare", "justification", "method")


@pytest.fixture
def open_at(root: Path) -> Callable[..., AppTest]:
    """Return a function that opens the program at one of these pages, as a reload of that page does."""

    def opened(page: str, address: Mapping[str, list[str]]) -> AppTest:
        app = AppTest.from_file(root / "app.py", default_timeout=60)
        for key, values in address.items():
            app.query_params[key] = values
        return app.switch_page(f"bedplan/pages/{page}.py").run()

    return opened


def set_everything(app: AppTest) -> AppTest:
    """Choose another ward than the first, and move every input away from its start."""
    app.selectbox(key="ward").set_value("Curlew").run()
    app.radio(key="full").set_value("waits").run()
    app.selectbox(key="measure").set_value("wait12")
    app.segmented_control(key="within").set_value("year")
    app.number_input(key="beds").set_value(31)
    for slider in app.slider:
        slider.set_value(slider.max - slider.step)
    app.toggle(key="hidden").set_value(True)
    app.run()
    go(app, "hidden").slider(key="recorded_Curlew").set_value(45).run()
    return go(app, "one_ward")


def inputs(app: AppTest) -> dict[str, object]:
    """Return every input of the page One ward."""
    side = app.sidebar
    kinds = (side.slider, side.radio, side.number_input, side.segmented_control, side.selectbox, side.toggle)
    return {one.key: one.value for kind in kinds for one in kind}


@pytest.mark.parametrize("page", DIRECT)
def test_a_reload_on_any_page_changes_nothing(
    open_app: Callable[..., AppTest], open_at: Callable[..., AppTest], page: str
) -> None:
    """The address of each page holds all that was set; opened anew there, every input is as it was left."""
    app = set_everything(open_app())
    wanted, said = inputs(app), app.header[0].value
    assert wanted["limit"] == 19
    go(app, page).run()
    again = open_at(page, app.query_params)
    assert not again.exception
    assert again.query_params == app.query_params

    go(again, "one_ward")
    assert inputs(again) == wanted
    assert again.header[0].value == said
    assert go(again, "hidden").slider(key="recorded_Curlew").value == 45


def test_settings_count_at_once_after_a_reload(
    open_app: Callable[..., AppTest], open_at: Callable[..., AppTest]
) -> None:
    """Compare wards and Justification show the address's settings without a way round by One ward."""
    app = set_everything(open_app())
    shown = {}
    for page in ("compare", "justification"):
        go(app, page).run()
        shown[page] = text(app)
        assert text(open_at(page, app.query_params)) == shown[page]
        assert text(open_at(page, {})) != shown[page]


def text(app: AppTest) -> list[str]:
    """Return what a page says of its wards."""
    tables = [frame.value.to_csv() for frame in (*app.dataframe, *app.table)]
    return [*(one.value for one in (*app.header, *app.markdown)), *tables]


def test_wards_in_the_justification_survive(open_app: Callable[..., AppTest], open_at: Callable[..., AppTest]) -> None:
    """Two wards chosen for the document are chosen still after a reload."""
    app = go(open_app(), "justification")
    app.multiselect(key="justified").set_value(["Kestrel", "Teal"]).run()
    app.run()

    assert open_at("justification", app.query_params).multiselect(key="justified").value == ["Kestrel", "Teal"]


@pytest.mark.parametrize(
    ("key", "code", "label"),
    [
        ("full", "leaves", "go elsewhere"),
        ("within", "year", "over the year"),
        ("measure", "wait4", "patients who wait over 4 hours"),
    ],
)
def test_answers_travel_as_short_codes(open_app: Callable[..., AppTest], key: str, code: str, label: str) -> None:
    """The address holds a short code; the label that earlier addresses held means the same."""
    opened = [open_app(**{key: asked}) for asked in (code, label)]

    assert inputs(opened[0])[key] == code
    assert inputs(opened[0]) == inputs(opened[1])
    assert opened[0].header[0].value == opened[1].header[0].value
    for app in opened:
        assert not app.exception
        assert app.query_params[key] == code


def test_what_stands_as_it_starts_is_left_out(open_app: Callable[..., AppTest]) -> None:
    """Untouched, the address holds the fingerprint alone, on every page; put back, a setting leaves it again."""
    app = open_app()
    for page in ("compare", "records", "method", "one_ward"):
        go(app, page).run()
        assert set(app.query_params) == {"records"}
    app.segmented_control(key="within").set_value("year").run()
    assert app.query_params["within"] == "year"
    app.segmented_control(key="within").set_value("every_month").run()
    assert "within" not in app.query_params


def test_a_typed_ward_is_missed(open_app: Callable[..., AppTest], open_at: Callable[..., AppTest]) -> None:
    """An address made for a typed ward says that it isn't here, instead of showing another ward under its settings."""
    for app in (open_app(ward="Annex", demand="20"), open_at("compare", {"ward": ["Annex"], "demand": ["20"]})):
        assert not app.exception
        assert len(app.warning) == 1
        assert "Annex" in app.warning[0].value


@pytest.mark.parametrize(
    "address",
    [
        {"demand": ["9999"]},
        {"beds": ["many"]},
        {"limit": ["0"]},
        {"within": ["ever"]},
        {"full": ["vanish"]},
        {"written": ["5"]},
        {"justified": ["No such ward"]},
        {"hidden": ["perhaps"]},
        {"nonsense": ["1", "2"]},
    ],
)
def test_a_bad_address_of_another_page_opens_calmly(
    open_at: Callable[..., AppTest], address: dict[str, list[str]]
) -> None:
    """What can't be is left aside on other pages as well."""
    app = open_at("compare", address)

    assert not app.exception
    assert not app.error
    assert text(app) == text(open_at("compare", {}))
