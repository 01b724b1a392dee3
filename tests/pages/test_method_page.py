"""Method and cautions: every line on the picture is explained, and the figures quoted there are right."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

from scipy import optimize

from bedplan.models import MODELS
from bedplan.wording import LINES

if TYPE_CHECKING:
    from collections.abc import Callable

    from streamlit.testing.v1 import AppTest


def loss(load: float, beds: int) -> float:
    """Return Erlang's share turned away by its recursion, 1/B(n) = 1 + n/a ÷ B(n − 1)."""
    inverse = 1.0
    for bed in range(1, beds + 1):
        inverse = 1.0 + bed / load * inverse
    return 1.0 / inverse


def loss_when_running_at(occupancy: float, beds: int) -> float:
    """Return the share turned away where this share of beds is in use."""
    load = optimize.brentq(lambda load: load * (1 - loss(load, beds)) - occupancy * beds, 0.1, 10.0 * beds)
    return loss(load, beds)


def test_every_line_is_explained(open_app: Callable[..., AppTest]) -> None:
    """Each model's line is named and explained with its source."""
    app = open_app().switch_page("bedplan/pages/method.py").run()
    told = [one.value for one in app.markdown]
    for model in MODELS:
        mine = [text for text in told if text.lower().startswith(f"**{LINES[model]}.**")]
        assert len(mine) == 1, model
        assert re.search(r"\b(19|20)\d\d\b|common practice|Cunneen", mine[0]), model


def test_every_step_from_records_to_demand_is_explained(open_app: Callable[..., AppTest]) -> None:
    """The page names how rows, stays, rhythm, hidden demand and forecasts are found."""
    app = open_app().switch_page("bedplan/pages/method.py").run()
    told = " ".join(one.value for one in app.markdown)
    for word in (
        "product limit",
        "residual likelihood",
        "Wolff 1982",
        "singular spectrum",
        "ranked probability",
        "set aside",
    ):
        assert word in told, word


def test_figures_about_85_percent_are_right(open_app: Callable[..., AppTest]) -> None:
    """The shares quoted for wards running at, and sized at, 85 % are those of the loss formula."""
    # Source: method of de Bruin, Bekker, van Zanten & Koole 2010, Annals of Operations Research 178:23-43
    app = open_app().switch_page("bedplan/pages/method.py").run()
    text = next(one.value for one in app.markdown if "85 %" in one.value and "Running" in one.value)
    running, sized = re.search(r"Running.*?85 % of beds(.*?)sized(.*)", text.replace("\n", " ")).groups()
    shares = [float(figure) for figure in re.findall(r"([\d.]+) %", running)]
    for said, beds in zip(shares, (10, 30, 200), strict=True):
        assert abs(100 * loss_when_running_at(0.85, beds) - said) <= (0.005 if said < 1 else 0.5), beds
    shares = [float(figure) for figure in re.findall(r"([\d.]+) %", sized)]
    for said, beds in zip(shares[-3:], (10, 30, 200), strict=True):
        assert abs(100 * loss(0.85 * beds, beds) - said) <= (0.05 if said < 1 else 0.5), beds
