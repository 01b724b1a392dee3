"""Every page: it opens, says something, shows no error, and draws the same pictures again without flicker."""

from __future__ import annotations

import re
from pathlib import Path
from typing import TYPE_CHECKING

import pytest

if TYPE_CHECKING:
    from collections.abc import Callable

    from streamlit.testing.v1 import AppTest

# every page that the front door leads to
FRONT_DOOR = Path(__file__).resolve().parents[2] / "app.py"
PAGES = re.findall(r"bedplan/pages/(\w+)\.py", FRONT_DOOR.read_text())
LABELLED = ("slider", "radio", "number_input", "selectbox", "multiselect", "button", "text_input", "file_uploader")


def go(app: AppTest, page: str) -> AppTest:
    """Turn to a page."""
    return app.switch_page(f"bedplan/pages/{page}.py").run()


def specs(app: AppTest) -> list[str]:
    """Return what the page's pictures are drawn by, apart from their figures."""
    return [chart.proto.spec for chart in app.get("vega_lite_chart")]


def figures(app: AppTest) -> list[bytes]:
    """Return the figures in the page's pictures."""
    return [data.data.data for chart in app.get("vega_lite_chart") for data in chart.proto.datasets]


@pytest.mark.parametrize("page", PAGES)
def test_page_opens(open_app: Callable[..., AppTest], page: str) -> None:
    """The page opens on the demo with a heading, without an error, and opens again."""
    app = go(open_app(), page)
    for _ in range(2):
        assert not app.exception
        assert not app.error
        assert [*app.header, *app.subheader]
        app.run()
    assert len(PAGES) >= 5


@pytest.mark.parametrize("page", PAGES)
def test_page_opens_on_loaded_records(open_app: Callable[..., AppTest], stays_csv: bytes, page: str) -> None:
    """The page opens on a planner's own file as well, and no longer speaks of the demo hospital."""
    app = go(open_app(), "records")
    app.file_uploader(key="stays_file").upload("our stays.csv", stays_csv, "text/csv").run()
    go(app, page)

    assert not app.exception
    assert not app.error
    shown = [element.value for element in (*app.header, *app.subheader, *app.caption)]
    assert not any("Larkmere" in text for text in shown)


@pytest.mark.parametrize("page", PAGES)
def test_every_input_is_named(open_app: Callable[..., AppTest], page: str) -> None:
    """Every input has a label that a screen reader can say."""
    app = go(open_app(), page)
    labels = [element.label for kind in LABELLED for element in getattr(app, kind)]

    assert all(label.strip() for label in labels)
    assert len(labels) > 9 or page != "one_ward"


def test_pictures_keep_their_spec(open_app: Callable[..., AppTest]) -> None:
    """Whatever is moved, a picture's spec stays the same to the byte while its figures change: it never flickers."""
    app = open_app()
    before, drawn = specs(app), figures(app)
    assert len(before) >= 2

    app.slider(key="demand").set_value(25).run()
    assert specs(app) == before
    assert figures(app) != drawn

    app.slider(key="limit").set_value(2).run()
    app.radio(key="full").set_value("leaves").run()
    app.segmented_control(key="within").set_value("year").run()
    app.number_input(key="beds").set_value(0).run()
    app.selectbox(key="ward").set_value("Merlin").run()
    assert specs(app) == before


def test_pictures_are_put_in_words(open_app: Callable[..., AppTest]) -> None:
    """Each picture carries words for those who can't see it, and the main one says the page's own sentence."""
    app = open_app()
    for change in (0, 40):
        app.slider(key="demand").set_value(change).run()
        words = [chart.proto.alt for chart in app.get("vega_lite_chart")]
        assert all(len(text) > 10 for text in words)
        assert app.header[0].value.replace("\\", "") in words
