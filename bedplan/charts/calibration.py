"""Did the bands keep what they promised? A dot a band: the share of days it held against the share it promised."""

from __future__ import annotations

from typing import TYPE_CHECKING

import altair as alt
import pandas as pd

from bedplan.charts.style import GREY, PERCENT, Datasets, Spec, finished, scale_of

if TYPE_CHECKING:
    from collections.abc import Iterable

    from bedplan.data.ahead.last_year import KeptBand

SIDE = 320  # square, so that the line of kept promises stands at 45 degrees
COLOURS = {"kept": "#0072B2", "fewer": "#D55E00", "more": "#D55E00"}
SHAPES = {"kept": "circle", "fewer": "triangle-down", "more": "triangle-up"}
LINE = (0.14, 0.055, "as promised")  # where the line's name stands: beside its foot, below the bars
EXPLAINED = ("dot: days inside", "bar: allowing for chance")
MISSED = {"fewer": "▼ fewer than promised", "more": "▲ more than promised"}
TOP, STEP = 0.965, 0.065  # the words stand in the upper left corner, free of bars unless far too many days were held


def _axis(title: str) -> dict[str, object]:
    return {
        "title": title,
        "scale": alt.Scale(domain=[0, 1], nice=False),
        "axis": alt.Axis(
            labelExpr=PERCENT, values=[0, 0.2, 0.4, 0.6, 0.8, 1], labelFlush=False, grid=True, gridOpacity=0.3
        ),
    }


def _calibration() -> Spec:
    """Build the square: the line of kept promises, a bar and a dot a band, another mark where a band missed."""
    data = alt.Chart(alt.NamedData("kept"))
    promised = alt.X("promised:Q", **_axis("Days the band promised to hold"))
    held = alt.Y("held:Q", **_axis("Days it held"))
    colour = alt.Color("outcome:N", scale=scale_of(COLOURS), legend=None)
    line = alt.Chart(alt.NamedData("kept_line")).mark_line(color=GREY, strokeDash=[6, 4], strokeWidth=1.5)
    bars = data.mark_rule(strokeWidth=2, opacity=0.6).encode(x=promised, y=alt.Y("low:Q"), y2="high:Q", color=colour)
    tips = [
        alt.Tooltip("promised:Q", format=".0%", title="Promised"),
        alt.Tooltip("held:Q", format=".1%", title="Held"),
        alt.Tooltip("low:Q", format=".1%", title="Allowing for chance, from"),
        alt.Tooltip("high:Q", format=".1%", title="to"),
    ]
    dots = data.mark_point(filled=True, size=70, opacity=1).encode(
        x=promised,
        y=held,
        color=colour,
        shape=alt.Shape("outcome:N", scale=scale_of(SHAPES), legend=None),
        tooltip=tips,
    )
    names = alt.Chart(alt.NamedData("kept_names")).mark_text(align="left", fontSize=13)
    said = names.encode(x=promised, y=held, text="name:N", color=alt.Color("colour:N", scale=None))
    chart = alt.layer(line.encode(x=promised, y=held), bars, dots, said)
    return finished(chart.properties(width=SIDE, height=SIDE))


CALIBRATION: Spec = _calibration()


def calibration_data(kept: Iterable[KeptBand]) -> Datasets:
    """Which dots show how these bands kept their promise?

    Checked by: tests/charts/test_calibration.py
    """
    bands = pd.DataFrame(
        [
            {"promised": one.promised, "held": one.held, "low": one.low, "high": one.high, "outcome": one.outcome}
            for one in kept
        ]
    )
    words = [(name, GREY) for name in EXPLAINED]
    words += [(name, COLOURS[outcome]) for outcome, name in MISSED.items() if (bands["outcome"] == outcome).any()]
    names = [
        {"promised": 0.03, "held": TOP - STEP * place, "name": name, "colour": colour}
        for place, (name, colour) in enumerate(words)
    ]
    names.append(dict(zip(("promised", "held", "name", "colour"), (*LINE, GREY), strict=True)))
    return {
        "kept": bands,
        "kept_line": pd.DataFrame({"promised": [0.0, 1.0], "held": [0.0, 1.0]}),
        "kept_names": pd.DataFrame(names),
    }
