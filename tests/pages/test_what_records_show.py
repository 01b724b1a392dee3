"""What happened and Hidden demand: the ward in hand, what its records can and can't tell, and planning on it."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import pytest

if TYPE_CHECKING:
    from collections.abc import Callable

    from streamlit.testing.v1 import AppTest

BOTH = ("what_happened", "hidden")


def go(app: AppTest, page: str) -> AppTest:
    """Turn to a page."""
    return app.switch_page(f"bedplan/pages/{page}.py").run()


def patients_wanting(app: AppTest) -> float:
    """Return the patients a day who, as the page Hidden demand says, wanted the ward."""
    said = next(one.value for one in app.markdown if "wanted this ward" in one.value)
    return float(re.search(r"([\d.]+) patients a day", said).group(1))


@pytest.mark.parametrize("page", BOTH)
def test_the_ward_in_hand(open_app: Callable[..., AppTest], page: str) -> None:
    """The page is about the ward chosen on One ward, and a ward chosen here is the one in hand there."""
    app = go(open_app(), page)
    assert "Kestrel" in app.header[0].value
    app.selectbox(key="ward_looked_at").set_value("Teal").run()
    assert not app.exception
    assert not app.error
    assert "Teal" in app.header[0].value
    assert go(app, "one_ward").header[0].value.startswith("Teal ")


def test_planning_on_hidden_demand(open_app: Callable[..., AppTest]) -> None:
    """The switch on Hidden demand is the switch on One ward: with it a ward that is always full takes more beds."""
    app = open_app()
    app.selectbox(key="ward").set_value("Teal").run()
    recorded = app.header[0].value
    go(app, "hidden").toggle(key="plan_hidden_Teal").set_value(True).run()
    go(app, "one_ward")
    assert app.toggle(key="hidden").value is True
    added = app.header[0].value
    takes = [int(re.search(r"takes (\d+)", said).group(1)) for said in (recorded, added)]
    assert takes[1] > takes[0]
    go(app, "justification")
    assert any("hidden demand included" in table.value.to_csv().replace("\\", "") for table in app.table)

    go(app, "one_ward").toggle(key="hidden").set_value(False).run()
    assert app.header[0].value == recorded
    assert go(app, "hidden").toggle(key="plan_hidden_Teal").value is False


def test_a_refusals_list_kept_in_part(open_app: Callable[..., AppTest]) -> None:
    """The smaller the part of refusals that is written down, the more patients wanted the ward."""
    app = open_app()
    app.selectbox(key="ward").set_value("Merlin").run()
    go(app, "hidden")
    wanted = []
    for percent in (100, 70, 40):
        app.slider(key="recorded_Merlin").set_value(percent).run()
        assert not app.exception
        wanted.append(patients_wanting(app))
    assert wanted == sorted(wanted)
    assert wanted[-1] > wanted[0]


def test_records_alone_tell_little(open_app: Callable[..., AppTest], stays_csv: bytes) -> None:
    """Without a file of staffed beds or of refusals the pages say what is missing instead of guessing."""
    app = go(open_app(), "records")
    app.file_uploader(key="stays_file").upload("stays.csv", stays_csv, "text/csv").run()
    go(app, "what_happened")
    assert not app.exception
    assert any("staffed beds" in one.value for one in app.info)
    go(app, "hidden")
    assert not app.exception
    assert "can't tell" in app.table[0].value.to_csv()


def test_last_year_is_checked_on_paper(open_app: Callable[..., AppTest], stays_csv: bytes) -> None:
    """A justification says how last year's check came out where records reach back, and that none was made where not."""
    app = go(open_app(), "justification")
    assert not any("Not yet checked" in one.value for one in app.markdown)
    assert any("check on last year" in one.value and "Passed" in one.value for one in app.markdown)
    go(app, "records").file_uploader(key="stays_file").upload("stays.csv", stays_csv, "text/csv").run()
    go(app, "justification")
    assert not app.exception
    assert not app.error
    assert not any("check on last year" in one.value and "Passed" in one.value for one in app.markdown)
