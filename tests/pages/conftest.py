"""What tests of the pages share: the program opened without a browser, and a small file made by a stated rule."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import pytest
from streamlit.testing.v1 import AppTest

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

SECONDS_TO_OPEN = 60


@pytest.fixture(autouse=True)
def no_search_for_components(monkeypatch: pytest.MonkeyPatch) -> None:
    """Spare each run a search through every installed package for page components, of which this project has none."""
    place = "streamlit.components.v2.component_manager.BidiComponentManager.discover_and_register_components"
    monkeypatch.setattr(place, lambda *_, **__: None, raising=False)


@pytest.fixture
def open_app(root: Path) -> Callable[..., AppTest]:
    """Return a function that opens the program at its front page, with these values in the page's address."""

    def opened(**address: str) -> AppTest:
        app = AppTest.from_file(root / "app.py", default_timeout=SECONDS_TO_OPEN)
        app.query_params.update(address)
        return app.run()

    return opened


@pytest.fixture(scope="session")
def every_page(root: Path) -> list[str]:
    """Return the name of every page that the front door leads to."""
    return re.findall(r"bedplan/pages/(\w+)\.py", (root / "app.py").read_text())
