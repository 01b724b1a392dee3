"""From recorded use to demand: one bar a step, each starting where the last one ended, then the range of all methods."""

from __future__ import annotations

from typing import TYPE_CHECKING

import altair as alt
import pandas as pd

from bedplan.charts.style import GREY, Datasets, Spec, finished, scale_of

if TYPE_CHECKING:
    from collections.abc import Iterable

ROOM_FOR_FIGURES = 1.25  # of the longest bar, so that the figure beside it is whole on a narrow screen
KINDS = {"total": "#0072B2", "adds": "#D55E00", "takes away": "#009E73", "range": GREY}


def _steps() -> Spec:
    """Build the bars, each with its beds written beside it."""
    data = alt.Chart(alt.NamedData("steps"))
    step = alt.Y(
        "label:N", sort=None, title=None, axis=alt.Axis(domain=False, ticks=False, labelLimit=260, labelPadding=8)
    )
    beds = alt.X("start:Q", title="Beds on average", axis=alt.Axis(grid=True, gridOpacity=0.3, tickCount=6))
    colour = alt.Color("kind:N", scale=scale_of(KINDS), legend=None)
    bars = data.mark_bar(height=24).encode(y=step, x=beds, x2="end:Q", color=colour)
    text = data.mark_text(align="left", dx=6, fontSize=14).encode(y=step, x="right:Q", text="said:N", color=colour)
    room = alt.Chart(alt.NamedData("room")).mark_point(opacity=0).encode(x="right:Q")
    return finished(alt.layer(bars, text, room).properties(height=alt.Step(36)))


STEPS: Spec = _steps()


def steps_data(steps: Iterable[tuple[str, float]], between: tuple[float, float]) -> Datasets:
    """Which bars show these steps? ``steps``: (label, beds it adds); the first is a total, and a total closes them.

    ``between``: the lowest and the highest beds that any method says.

    Checked by: tests/charts/test_steps.py
    """
    rows, level = [], 0.0
    for place, (label, beds) in enumerate(steps):
        kind = "total" if place == 0 else "adds" if beds > 0 else "takes away"
        said = f"{beds:.1f}" if place == 0 else f"{beds:+.1f}".replace("-", "−")
        rows.append(_bar(label, level, level + beds, kind, said))
        level += beds
    rows.append(_bar("Beds wanted on average", 0.0, level, "total", f"{level:.1f}"))
    low, high = between
    rows.append(_bar(f"By all methods {low:.1f} to {high:.1f}", low, high, "range", ""))
    room = ROOM_FOR_FIGURES * max(row["right"] for row in rows)
    return {"steps": pd.DataFrame(rows), "room": pd.DataFrame({"right": [room]})}


def _bar(label: str, start: float, end: float, kind: str, said: str) -> dict[str, str | float]:
    return {"label": label, "start": start, "end": end, "right": max(start, end), "kind": kind, "said": said}
