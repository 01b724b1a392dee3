"""One ward: every input moves the answer, the right way; answers are short, and kept a ward at a time."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING, Any

import pytest

if TYPE_CHECKING:
    from collections.abc import Callable

    from streamlit.testing.v1 import AppTest

GOES_ELSEWHERE = ("Curlew", "Dunlin", "Merlin", "Sandpiper")  # wards of the invented hospital that turn patients away


def go(app: AppTest, page: str) -> AppTest:
    """Turn to a page."""
    return app.switch_page(f"bedplan/pages/{page}.py").run()


def sentence(app: AppTest) -> str:
    """Return the answer as it is read."""
    return app.header[0].value.replace("\\", "")


def beds_by_the_limit(app: AppTest) -> int:
    """Return the bed count that the sentence says the limit takes."""
    return int(re.search(r"takes (\d+)", sentence(app)).group(1))


def inputs(app: AppTest) -> dict[str, Any]:
    """Return every keyed input on the page and what it shows."""
    kinds = (app.slider, app.radio, app.number_input, app.segmented_control, app.selectbox)
    return {one.key: one.value for kind in kinds for one in kind if one.key}


def everything(app: AppTest) -> tuple[object, ...]:
    """Return what the page answers: sentence, table, and the figures in its pictures."""
    drawn = [data.data.data for chart in app.get("vega_lite_chart") for data in chart.proto.datasets]
    return sentence(app), app.table[0].value.to_csv(), drawn


def assert_calm(app: AppTest) -> None:
    """Nothing went wrong on the page."""
    assert not app.exception
    assert not app.error


@pytest.mark.parametrize("ward", ["Kestrel", "Merlin"])
def test_every_slider_moves_the_answer(open_app: Callable[..., AppTest], ward: str) -> None:
    """Moving any slider changes the answer, whether the ward's patients wait or go elsewhere."""
    app = open_app(ward=ward)
    for key, value in inputs(app).items():
        if key in {slider.key for slider in app.slider}:
            slider = app.slider(key=key)
            before = everything(app)
            slider.set_value(slider.min + slider.step if value != slider.min + slider.step else slider.max).run()
            assert_calm(app)
            assert everything(app) != before, key
            assert app.slider(key=key).label


@pytest.mark.parametrize(
    ("ward", "key", "values"),
    [
        ("Kestrel", "demand", [-50, -20, 0, 15, 40, 100]),
        ("Curlew", "demand", [-50, -20, 0, 15, 40, 100]),
        ("Kestrel", "stay", [-50, -20, 0, 15, 40, 100]),
        ("Curlew", "stay", [-50, -20, 0, 15, 40, 100]),
        ("Heron", "growth", [-10, 0, 5, 20]),
        ("Kestrel", "peak", [0, 100, 180, 250]),
    ],
)
def test_more_is_asked_for_more_beds(open_app: Callable[..., AppTest], ward: str, key: str, values: list[int]) -> None:
    """More demand, longer stays, growth or a higher winter peak never take fewer beds, and in the end take more."""
    app = open_app(ward=ward)
    beds, said = [], set()
    for value in values:
        app.slider(key=key).set_value(value).run()
        assert_calm(app)
        beds.append(beds_by_the_limit(app))
        said.add(sentence(app))

    assert beds == sorted(beds)
    assert beds[-1] > beds[0]
    assert len(said) > 2


def test_looser_limit_takes_fewer_beds(open_app: Callable[..., AppTest]) -> None:
    """A looser limit never takes more beds, a limit over the year never more than one in every month."""
    app = open_app()
    beds = []
    for percent in (1, 2, 5, 10, 20):
        app.slider(key="limit").set_value(percent).run()
        beds.append(beds_by_the_limit(app))
    assert beds == sorted(beds, reverse=True)
    assert beds[0] > beds[-1]

    app.slider(key="limit").set_value(5).run()
    in_every_month = beds_by_the_limit(app)
    assert "every month" in sentence(app)
    app.segmented_control(key="within").set_value("year").run()
    assert "the year" in sentence(app)
    assert beds_by_the_limit(app) < in_every_month


def test_staffed_beds_are_said_and_compared(open_app: Callable[..., AppTest]) -> None:
    """Today's beds stand in the sentence; they don't move what the limit takes, and none at all turns everyone away."""
    app = open_app()
    needed = beds_by_the_limit(app)
    for beds in (27, 1, 0, 2000):
        app.number_input(key="beds").set_value(beds).run()
        assert_calm(app)
        assert f" has {beds} staffed bed" in sentence(app)
        assert beds_by_the_limit(app) == needed
    app.number_input(key="beds").set_value(0).run()
    assert sentence(app).endswith("everyone today.")


def test_every_ward_says_what_its_patients_do(open_app: Callable[..., AppTest]) -> None:
    """Only a ward whose patients go elsewhere is said to turn them away; a ward whose patients wait never is."""
    app = open_app()
    for ward in app.selectbox(key="ward").options:
        app.selectbox(key="ward").set_value(ward).run()
        assert_calm(app)
        told = [sentence(app), *(one.value for one in app.markdown if one.value.startswith("**"))]
        leaves = ward in GOES_ELSEWHERE
        assert app.radio(key="full").value == ("leaves" if leaves else "waits")
        assert any("turned away" in text for text in told) == leaves
        assert any("find" in text for text in told) != leaves


def test_what_patients_do_can_be_changed(open_app: Callable[..., AppTest]) -> None:
    """The words follow the planner's own answer to what patients do when the ward is full, on paper too."""
    app = open_app(ward="Curlew")
    app.radio(key="full").set_value("waits").run()
    assert "turned away" not in sentence(app)
    go(app, "justification")
    assert_calm(app)
    decision = next(one.value for one in app.header if "approve" in one.value)
    assert "turned away" not in decision

    go(app, "one_ward").radio(key="full").set_value("leaves").run()
    assert "turned away" in sentence(app)


def test_every_measure_of_waiting_answers(open_app: Callable[..., AppTest]) -> None:
    """Whatever a limit watches on a ward whose patients wait, the answer is calm, short and in its own words."""
    app = open_app()
    said = set()
    for measure in app.selectbox(key="measure").options:
        app.selectbox(key="measure").select(measure).run()
        assert_calm(app)
        assert len(sentence(app).split()) <= 30
        assert "turned away" not in sentence(app)
        said.add(sentence(app))
    assert len(said) == len(app.selectbox(key="measure").options)


def test_answers_are_short_at_every_end(open_app: Callable[..., AppTest]) -> None:
    """With every slider at either end the page answers calmly in at most 30 words, for large and small wards."""
    app = open_app()
    for ward in ("Heron", "Teal", "Curlew", "Merlin"):
        app.selectbox(key="ward").set_value(ward).run()
        for end in ("min", "max"):
            for slider in app.slider:
                slider.set_value(getattr(slider, end))
            app.number_input(key="beds").set_value(0 if end == "max" else 2000)
            app.run()
            assert_calm(app)
            assert len(sentence(app).split()) <= 30


def test_back_to_the_records(open_app: Callable[..., AppTest]) -> None:
    """One button brings back what the records say: the same answer as before anything was moved."""
    app = open_app()
    started, answered = inputs(app), everything(app)
    for key in ("demand", "stay", "spread", "peak", "growth"):
        app.slider(key=key).set_value(app.slider(key=key).max).run()
    app.number_input(key="beds").set_value(3).run()
    app.radio(key="full").set_value("leaves").run()
    assert everything(app) != answered

    next(button for button in app.button if "records say" in button.label).click().run()
    assert inputs(app) == started
    assert everything(app) == answered


def test_inputs_survive_the_other_pages(open_app: Callable[..., AppTest], every_page: list[str]) -> None:
    """Inputs and answer are the same after a walk through every other page."""
    app = open_app()
    app.selectbox(key="ward").set_value("Heron").run()
    app.slider(key="demand").set_value(12).run()
    app.slider(key="limit").set_value(3).run()
    app.segmented_control(key="within").set_value("year").run()
    app.number_input(key="beds").set_value(33).run()
    left, answered = inputs(app), everything(app)
    for page in every_page:
        assert_calm(go(app, page))
    go(app, "one_ward")

    assert inputs(app) == left
    assert everything(app) == answered


def test_each_ward_keeps_its_own_inputs(open_app: Callable[..., AppTest]) -> None:
    """Another ward starts from its own records, and the first ward's inputs wait for the planner's return."""
    app = open_app()
    app.slider(key="demand").set_value(30).run()
    app.number_input(key="beds").set_value(35).run()
    kestrel = sentence(app)
    app.selectbox(key="ward").set_value("Merlin").run()
    assert app.slider(key="demand").value == 0
    assert app.number_input(key="beds").value != 35
    app.slider(key="stay").set_value(-20).run()
    merlin = sentence(app)

    app.selectbox(key="ward").set_value("Kestrel").run()
    assert (app.slider(key="demand").value, app.slider(key="stay").value) == (30, 0)
    assert sentence(app) == kestrel
    app.selectbox(key="ward").set_value("Merlin").run()
    assert (app.slider(key="demand").value, app.slider(key="stay").value) == (0, -20)
    assert sentence(app) == merlin


def test_spread_of_stay_is_explained(open_app: Callable[..., AppTest]) -> None:
    """Whoever moves the spread of stay on a ward that turns patients away reads why so little happens."""
    app = open_app(ward="Merlin")
    assert not app.info
    app.slider(key="spread").set_value(50).run()
    assert len(app.info) == 1
    assert "only the mean counts" in app.info[0].value


def test_beds_that_nobody_stated_are_asked_for(open_app: Callable[..., AppTest], stays_csv: bytes) -> None:
    """Records without a file of beds: every page that speaks of today's beds says they are not known, until typed."""
    app = go(open_app(), "records")
    app.file_uploader(key="stays_file").upload("stays.csv", stays_csv, "text/csv").run()
    go(app, "one_ward")
    ward, start = app.selectbox(key="ward").value, app.number_input(key="beds").value
    assert sentence(app).startswith(f"{ward}'s staffed beds today are not known; ")
    assert any("Type them on the left" in one.value for one in app.info)
    for page in ("compare", "justification"):
        assert any(ward in one.value and "are not in the records" in one.value for one in go(app, page).warning)

    go(app, "one_ward").toggle(key="hidden").set_value(True).run()
    assert "not known" in sentence(app)
    app.number_input(key="beds").set_value(start + 3).run()
    assert sentence(app).startswith(f"{ward} has {start + 3} staffed beds;")
    assert not any("are not in the records" in one.value for one in go(app, "justification").warning)
    assert not any(ward in one.value for one in go(app, "compare").warning)
