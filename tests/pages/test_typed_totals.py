"""Typed totals: a planner without a file gets a ward to plan, or a sentence about what can't be."""

from __future__ import annotations

import math
import re
from typing import TYPE_CHECKING

import pytest
from scipy import stats

if TYPE_CHECKING:
    from collections.abc import Callable

    from streamlit.testing.v1 import AppTest

BY_QUANTILES = "how early and how late patients leave"


def go(app: AppTest, page: str) -> AppTest:
    """Turn to a page."""
    return app.switch_page(f"bedplan/pages/{page}.py").run()


def type_totals(app: AppTest, figures: dict[str, float], *, name: str = "Annex", known: str | None = None) -> AppTest:
    """Fill in the form on the page Records and send it; ``figures`` are found by the beginnings of their labels."""
    go(app, "records")
    app.text_input[0].set_value(name)
    if known:
        app.radio[0].set_value(known)
    for label, value in figures.items():
        next(one for one in app.number_input if one.label.startswith(label)).set_value(value)
    return next(one for one in app.button if one.label == "Use these totals").click().run()


def plan(app: AppTest, ward: str) -> str:
    """Choose the ward on the page One ward and return the sentence."""
    go(app, "one_ward").selectbox(key="ward").set_value(ward).run()
    assert not app.exception
    assert not app.error
    return app.header[0].value.replace("\\", "")


def test_ten_thousand_admissions(open_app: Callable[..., AppTest]) -> None:
    """10,000 admissions of 5 days at 85 % are 162 beds by the average formula, as hospitals do it."""
    # common practice, no source; 10,000 × 5 ÷ 365 ÷ 0.85 = 161.16
    app = type_totals(open_app(), {"Admissions": 10_000.0, "Mean stay": 5.0, "Staffed": 150})
    assert len(app.success) == 1
    sentence = plan(app, "Annex")
    assert sentence.startswith("Annex has 150 staffed beds; the average formula says 162.")
    go(app, "justification").multiselect(key="justified").set_value(["Annex"]).run()
    assert not app.exception
    assert not app.error
    assert any("otals typed by the planner" in str(table.value) for table in app.table)
    assert any("Cannot be checked on last year" in one.value for one in app.markdown)


def test_two_points_of_the_stay(open_app: Callable[..., AppTest]) -> None:
    """From how early and how late 1 in 20 leave comes the mean of the lognormal stay through both points."""
    # Source: quantiles of the lognormal, ln x = μ ± 1.645 σ; its mean is exp(μ + σ² ÷ 2)
    early, late = 1.0, 18.0
    sigma = math.log(late / early) / (2 * stats.norm.ppf(0.95))
    mean = math.exp(math.log(early * late) / 2 + sigma**2 / 2)
    figures = {"Admissions": 1460.0, "1 in 20 leave": early, "1 in 20 stay": late}
    app = type_totals(open_app(), figures, known=BY_QUANTILES)
    assert len(app.success) == 1
    assert f"{1460 / 365 * mean:.1f} beds on average" in app.success[0].value
    assert f"average formula says {math.ceil(1460 / 365 * mean / 0.85)}" in plan(app, "Annex")


@pytest.mark.parametrize(
    ("figures", "known", "words"),
    [
        ({"1 in 20 leave": 18.0, "1 in 20 stay": 1.0}, BY_QUANTILES, "18 and 1 days"),
        ({"1 in 20 leave": 5.0, "1 in 20 stay": 5.0}, BY_QUANTILES, "5 and 5 days"),
        ({"1 in 20 leave": 0.01, "1 in 20 stay": 3000.0}, BY_QUANTILES, "too far apart"),
        ({"Admissions": 500_000.0, "Mean stay": 1000.0}, None, "beds wanted"),
    ],
)
def test_impossible_totals(
    open_app: Callable[..., AppTest], figures: dict[str, float], known: str | None, words: str
) -> None:
    """Totals that can't be are refused in one sentence that quotes them, and no ward is made of them."""
    app = type_totals(open_app(), figures, known=known)
    assert not app.exception
    assert not app.success
    assert len(app.error) == 1
    assert words in app.error[0].value
    assert "Annex" not in go(app, "one_ward").selectbox(key="ward").options


def test_nobody_comes(open_app: Callable[..., AppTest]) -> None:
    """A ward without admissions needs no bed, on every page."""
    app = type_totals(open_app(), {"Admissions": 0.0, "Staffed": 5})
    assert "takes 0." in plan(app, "Annex")
    for page in ("compare", "justification"):
        go(app, page)
        assert not app.exception
        assert not app.error


def test_a_name_is_only_a_name(open_app: Callable[..., AppTest]) -> None:
    """A ward name with marks of formatting is shown as typed, never read as formatting or as a link."""
    name = "*Bold* [x](http://y) $z$"
    app = type_totals(open_app(), {}, name=name)
    assert name not in app.success[0].value
    assert app.success[0].value.replace("\\", "").startswith(name)
    go(app, "one_ward").selectbox(key="ward").set_value(name).run()
    go(app, "justification")
    assert not app.exception
    for heading in (*app.header, *app.subheader):
        assert not re.search(r"(?<!\\)[*\[$]", heading.value)


def test_totals_say_what_they_leave_out(open_app: Callable[..., AppTest]) -> None:
    """A ward planned from totals carries the note that totals know no season."""
    app = type_totals(open_app(), {})
    plan(app, "Annex")
    assert any("no season" in one.value for one in app.markdown)


def test_totals_typed_again(open_app: Callable[..., AppTest]) -> None:
    """Totals typed again for the same ward replace the first ones, beds included."""
    app = type_totals(open_app(), {"Staffed": 28})
    assert plan(app, "Annex").startswith("Annex has 28 staffed beds")
    type_totals(app, {"Staffed": 15})
    assert plan(app, "Annex").startswith("Annex has 15 staffed beds")


@pytest.mark.parametrize(("admissions", "key", "value"), [(7300.0, "demand", -50), (100_000.0, "demand", 0)])
def test_the_formula_may_lie_far_above_the_need(
    open_app: Callable[..., AppTest], admissions: float, key: str, value: int
) -> None:
    """The picture and the table reach the average formula's bed count, also where far fewer beds are needed."""
    app = type_totals(open_app(), {"Admissions": admissions, "Mean stay": 5.0, "Staffed": 80})
    go(app, "one_ward").selectbox(key="ward").set_value("Annex").run()
    app.slider(key=key).set_value(value).run()
    assert not app.exception
    assert not app.error
    formula = str(math.ceil(admissions * (1 + value / 100) * 5.0 / 365 / 0.85))
    assert app.table[0].value.loc["Staffed beds", "Average formula"] == formula


def test_the_ward_just_typed_is_shown(open_app: Callable[..., AppTest]) -> None:
    """After typing totals the page One ward shows that ward."""
    app = type_totals(open_app(), {"Staffed": 21})
    go(app, "one_ward")
    assert app.selectbox(key="ward").value == "Annex"
    assert "Annex has 21 staffed beds" in app.header[0].value


@pytest.mark.parametrize("page", ["what_happened", "hidden"])
def test_a_look_at_the_records_keeps_the_typed_ward_in_hand(open_app: Callable[..., AppTest], page: str) -> None:
    """Pages about records say that a ward known by totals has none, show another, and leave it in hand until one is chosen."""
    app = type_totals(open_app(), {"Admissions": 1200.0})
    go(app, page)
    assert len([one for one in app.info if "Annex is known by totals only" in one.value]) == 1
    assert go(app, "justification").multiselect(key="justified").value == ["Annex"]

    go(app, page).selectbox(key="ward_looked_at").set_value("Teal").run()
    assert not [one for one in app.info if "Annex" in one.value]
    assert go(app, "justification").multiselect(key="justified").value == ["Teal"]


def test_months_that_are_alike_are_not_named(open_app: Callable[..., AppTest]) -> None:
    """Totals know no season, so no month is called the highest or lowest, and no busiest one stands at its slider."""
    app = type_totals(open_app(), {"Admissions": 1200.0})
    plan(app, "Annex")
    assert not re.search(r"\b(?:Jan|Feb|Mar|Apr|May|Jun|Jul|Aug|Sep|Oct|Nov|Dec)\b", app.table[0].value.to_csv())
    assert app.slider(key="peak").label == "Season: none known"
