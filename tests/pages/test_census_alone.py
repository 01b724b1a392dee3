"""Records: wards that have a census and no ward stays are planned by it and a mean stay that the planner types."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pytest

from tests.pages.test_more_files import give, go, press, text

if TYPE_CHECKING:
    from collections.abc import Callable

    from streamlit.testing.v1 import AppTest

DAYS = [f"2024-{month:02d}-{day:02d}" for month in range(1, 13) for day in range(1, 29)]
ROWS = [
    f"{day},{ward},{beds - 4 + int(day[-2:]) % 5},{beds}"
    for day in DAYS
    for ward, beds in (("Alder", 24), ("Birch", 12))
]
CENSUS = "\n".join(["date,ward,occupied,available", *ROWS]).encode()
QUESTION = "A census can't tell how long patients stay."


def planned(app: AppTest) -> dict[str, float]:
    """Return the beds wanted on average on each ward planned by averages."""
    return {name: ward.demand.offered_load for name, ward in app.session_state["typed"].items()}


def mean_count(beds: int) -> float:
    """Return the mean of the counts that were written."""
    return sum(beds - 4 + int(day[-2:]) % 5 for day in DAYS) / len(DAYS)


def test_a_census_alone_makes_wards(open_app: Callable[..., AppTest]) -> None:
    """Without ward stays, a ward whose mean stay is typed is planned at the load its census shows; the rest are left out."""
    app = give(go(open_app(), "records"), "census_file", "census.csv", CENSUS)
    assert QUESTION in text(app.caption)
    app.number_input(key="census_stay_Alder").set_value(5.0)
    app = press(app, "Plan these wards")

    assert "1 ward is ready on the page One ward" in text(app.caption)
    assert planned(app) == {"Alder": pytest.approx(mean_count(24), rel=0.01)}
    shown = go(app, "one_ward")
    assert not shown.exception
    assert shown.number_input(key="beds").value == 24


def test_wards_with_stays_are_not_asked_about(open_app: Callable[..., AppTest], stays_csv: bytes) -> None:
    """Beside ward stays only wards that have none are asked about."""
    app = give(go(open_app(), "records"), "stays_file", "stays.csv", stays_csv)
    app = give(app, "census_file", "census.csv", CENSUS.replace(b"Birch", b"East"))
    asked = {one.key for one in app.number_input if str(one.key).startswith("census_stay_")}

    assert asked == {"census_stay_Alder"}
    assert "no stays on Alder, so their rows are not used" in text(app.caption)
    app.number_input(key="census_stay_Alder").set_value(5.0)
    assert "not used" not in text(press(app, "Plan these wards").caption)


def test_nothing_is_planned_without_a_stay(open_app: Callable[..., AppTest]) -> None:
    """Where no mean stay is typed no ward is made; where the file leaves its box the question leaves too."""
    app = press(give(go(open_app(), "records"), "census_file", "census.csv", CENSUS), "Plan these wards")
    assert "typed" not in app.session_state or not app.session_state["typed"]
    app.file_uploader(key="census_file").set_value(None).run()
    assert QUESTION not in text(app.caption)
