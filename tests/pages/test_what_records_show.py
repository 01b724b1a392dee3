"""What happened and Hidden demand: the ward in hand, what its records can and can't tell, and planning on it."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import pyarrow as pa
import pytest

from bedplan.data import backtest, read_capacity, read_records, stay_families

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    import pandas as pd
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


def opened(app: AppTest, tab: str, ward: str = "Kestrel") -> AppTest:
    """Turn to a tab of What happened, about a ward."""
    go(app, "what_happened").selectbox(key="ward_looked_at").set_value(ward)
    app.session_state["happened"] = tab
    app.run()
    assert not app.exception
    assert not app.error
    return app


def drawn(app: AppTest, name: str) -> pd.DataFrame:
    """Return the rows of a picture's dataset."""
    found = [one.data.data for chart in app.get("vega_lite_chart") for one in chart.proto.datasets if one.name == name]
    return pa.ipc.open_stream(found[0]).read_pandas()


def test_how_long_patients_stay(open_app: Callable[..., AppTest], demo_data: Path) -> None:
    """The tab says which curve fits best, how far behind the others are, and that the mean is the records' own."""
    app = opened(open_app(), "Length of stay", "Plover")
    found = stay_families(read_records(demo_data / "stays.csv"), "Plover")
    said = " ".join(one.value for one in app.markdown).replace("\\", "")
    families = next(table.value for table in app.table if "Behind the best (AIC)" in table.value)

    assert found.verdict in said
    assert f"the records' own mean, {found.curve.mean_days:.1f} days" in said
    assert families.index.tolist() == [family.capitalize() for family, _, _ in found.rows]
    assert families["Behind the best (AIC)"].tolist() == [f"{behind:.0f}" for _, behind, _ in found.rows]
    lines = drawn(app, "stays")
    assert lines.loc[lines["line"] == "measured", "share"].tolist() == found.shares()["measured"].tolist()
    assert any(found.explained == one.value.replace("\\", "") for one in app.caption)


@pytest.mark.parametrize("ward", ["Kestrel", "Teal"])
def test_last_year_checked(open_app: Callable[..., AppTest], demo_data: Path, ward: str) -> None:
    """The tab shows the verdict, both bands with their ranges, the scores, and how each width of band kept its promise."""
    app = opened(open_app(), "Last year checked", ward)
    found = backtest(read_records(demo_data / "stays.csv"), ward, capacity=read_capacity(demo_data / "capacity.csv"))
    said = " ".join(one.value for one in app.markdown).replace("\\", "")
    figures = next(table.value for table in app.table if "Held against" in table.value)

    assert found.verdict in said
    assert found.promise in said
    assert [(what, *row) for what, row in zip(figures.index, figures.to_numpy(), strict=True)] == list(found.figures)
    kept = drawn(app, "kept")
    assert list(zip(kept["promised"], kept["held"], strict=True)) == list(found.calibration)
    assert list(zip(kept["low"], kept["high"], strict=True)) == list(found.calibration_ranges)


def test_years_ahead(open_app: Callable[..., AppTest]) -> None:
    """The tab draws three recorded years and ten to come, says the method and what it beat, and keeps the table below."""
    app = opened(open_app(), "Years ahead")
    table = app.expander[0].table[0].value

    assert len(drawn(app, "past")) == 3
    assert len(drawn(app, "ahead")) == 11
    assert len(table) == 10
    assert f"{drawn(app, 'ahead')['beds'].iloc[1]:,.1f}" == table["Beds wanted at this growth"].iloc[0]
    assert any("less than the same week last year" in one.value for one in app.markdown)
    assert any("Admissions are foreseen" in one.value for one in app.markdown)


@pytest.mark.parametrize("tab", ["When full", "Length of stay", "Last year checked", "Years ahead"])
def test_every_tab_opens_on_a_small_file(open_app: Callable[..., AppTest], stays_csv: bytes, tab: str) -> None:
    """A file of one year and no beds opens every tab; what it can't tell is said."""
    app = go(open_app(), "records")
    app.file_uploader(key="stays_file").upload("stays.csv", stays_csv, "text/csv").run()
    opened(app, tab, "West")

    assert len(app.get("vega_lite_chart")) == {"When full": 0, "Last year checked": 0}.get(tab, 1)
    if tab == "Last year checked":
        assert any("two years" in one.value for one in app.info)


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
    assert not app.slider  # nothing is asked about a list that nobody brought


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
