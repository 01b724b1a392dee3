"""Compare wards and Justification: every ward has its row, totals add up, and both follow the inputs of One ward."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Callable

    from streamlit.testing.v1 import AppTest

WARDS = ["Curlew", "Dunlin", "Heron", "Kestrel", "Merlin", "Plover", "Sandpiper", "Teal"]


def go(app: AppTest, page: str) -> AppTest:
    """Turn to a page."""
    return app.switch_page(f"bedplan/pages/{page}.py").run()


def total(app: AppTest) -> str:
    """Return the sentence about all wards together."""
    return next(one.value for one in app.markdown if one.value.startswith("**All"))


def test_every_ward_has_a_row(open_app: Callable[..., AppTest]) -> None:
    """Each ward has one row, the one whose next bed spares most comes first and is named, and the totals add up."""
    app = go(open_app(), "compare")
    table = app.dataframe[0].value
    assert sorted(table["Ward"]) == WARDS
    spared = table["Next bed spares, a year"]
    assert spared.is_monotonic_decreasing
    assert f"most on {table['Ward'].iloc[0]}:" in app.header[0].value
    said = [int(number) for number in re.findall(r"(\d+) (?:staffed|by the)", total(app))]
    assert said == [table[name].sum() for name in ("Staffed beds today", "Average formula", "By the limit")]


def test_rows_follow_the_inputs(open_app: Callable[..., AppTest]) -> None:
    """What was moved on One ward moves that ward's row, and no other ward's; the limit moves them all."""
    app = open_app()
    before = go(app, "compare").dataframe[0].value.set_index("Ward")
    go(app, "one_ward").slider(key="demand").set_value(25).run()
    app.number_input(key="beds").set_value(31).run()
    said = app.header[0].value
    after = go(app, "compare").dataframe[0].value.set_index("Ward")

    assert after.loc["Kestrel", "Staffed beds today"] == 31
    assert f"takes {after.loc['Kestrel', 'By the limit']}." in said
    assert after.loc["Kestrel", "By the limit"] > before.loc["Kestrel", "By the limit"]
    others = ["Staffed beds today", "By the limit", "Share"]
    assert (after.drop("Kestrel")[others].sort_index() == before.drop("Kestrel")[others].sort_index()).all(axis=None)

    go(app, "one_ward").slider(key="limit").set_value(1).run()
    tighter = go(app, "compare").dataframe[0].value.set_index("Ward")
    assert (tighter["By the limit"] > after["By the limit"].reindex(tighter.index)).all()


def test_justification_repeats_the_answer(open_app: Callable[..., AppTest]) -> None:
    """The justification starts with the ward in hand and says the same sentence, and asks for the same beds."""
    app = open_app()
    app.selectbox(key="ward").set_value("Heron").run()
    app.slider(key="demand").set_value(-7).run()
    said = app.header[0].value
    go(app, "justification")
    assert not app.error
    assert app.multiselect(key="justified").value == ["Heron"]
    shown = [one.value for one in (*app.header, *app.markdown)]
    assert said in shown
    needed = re.search(r"takes (\d+)", said).group(1)
    assert f"approve {needed} staffed beds" in " ".join(shown)
    assert any("−7" in str(table.value.to_csv()) for table in app.table)


def test_both_documents_are_offered(open_app: Callable[..., AppTest]) -> None:
    """Both documents can be taken away, for one ward and for all of them."""
    app = go(open_app(), "justification")
    for wards in (["Kestrel"], WARDS):
        app.multiselect(key="justified").set_value(wards).run()
        assert not app.exception
        assert not app.error
        assert [button.key for button in app.download_button] == ["take_html", "take_xlsx"]
        assert [heading.value for heading in app.subheader][: len(wards)] == wards


def test_no_ward_chosen(open_app: Callable[..., AppTest]) -> None:
    """With no ward chosen the page stays calm: it says what to do, or puts a ward back, and offers no empty document."""
    app = go(open_app(), "justification")
    app.multiselect(key="justified").set_value([]).run()
    assert not app.exception
    chosen = app.multiselect(key="justified").value
    assert len(app.error) == (0 if chosen else 1)
    assert bool(app.download_button) == bool(chosen)


def test_chosen_wards_are_kept(open_app: Callable[..., AppTest]) -> None:
    """The wards chosen for a justification are still chosen after a look at another page."""
    app = go(open_app(), "justification")
    app.multiselect(key="justified").set_value(["Merlin", "Teal"]).run()
    go(app, "compare")
    assert go(app, "justification").multiselect(key="justified").value == ["Merlin", "Teal"]


def test_cautions_are_on_paper_and_on_screen(open_app: Callable[..., AppTest]) -> None:
    """The cautions stand on the justification and on the page about methods."""
    app = open_app()
    for page in ("justification", "method"):
        go(app, page)
        assert "Cautions" in [heading.value for heading in app.subheader]
        assert any("true demand is higher" in one.value for one in app.markdown)
