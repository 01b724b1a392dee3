"""The page's address: a link opens the same plan again, and holds settings and a fingerprint, never a row or a count."""

from __future__ import annotations

import hashlib
from typing import TYPE_CHECKING

import pytest

if TYPE_CHECKING:
    from collections.abc import Callable

    from streamlit.testing.v1 import AppTest

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
