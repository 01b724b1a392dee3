"""Records: a file that was put into the box of another kind is told by its headings, and changes nothing."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pytest

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    from streamlit.testing.v1 import AppTest

BOXES = ("stays", "capacity", "refusals", "bed_requests", "cancellations", "census", "monthly_return", "ready")
MAY_BE_BOTH = {  # (file, box): a census names beds, refusals are requests or cancellations, and stays hold ready dates
    ("census", "capacity"),
    ("refusals", "bed_requests"),
    ("refusals", "cancellations"),
    ("stays", "ready"),
}
MISPLACED = [(given, box) for given in BOXES[:-1] for box in BOXES if given != box and (given, box) not in MAY_BE_BOTH]


@pytest.fixture
def app(open_app: Callable[..., AppTest], stays_csv: bytes) -> AppTest:
    """Return the page Records with ward stays loaded."""
    records = open_app().switch_page("bedplan/pages/records.py").run()
    return records.file_uploader(key="stays_file").upload("stays.csv", stays_csv, "text/csv").run()


@pytest.mark.parametrize(("given", "box"), MISPLACED)
def test_a_file_of_another_kind_is_told_in_one_sentence(app: AppTest, demo_data: Path, given: str, box: str) -> None:
    """Which kind it looks like and which it should be, in one sentence; nothing changes and no column is asked for."""
    before = app.session_state["files"]
    content = (demo_data / f"{given}.csv").read_bytes()[:3000].rsplit(b"\n", 1)[0]
    app.file_uploader(key=f"{box}_file").upload(f"{given}.csv", content, "text/csv").run()

    assert not app.exception
    assert len(app.error) == 1
    said = app.error[0].value.replace("\\", "")
    assert said.startswith(f"{given}.csv ")
    assert "looks like" in said
    assert said.count(".") - said.count(".csv") == 1
    assert not any(one.proto.expanded for one in app.expander)
    assert app.session_state["files"] is before
