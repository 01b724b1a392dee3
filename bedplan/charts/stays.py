"""How long patients stay: the share still in after so many days, as recorded and as the plan draws it."""

from __future__ import annotations

import altair as alt
import numpy as np
import pandas as pd

from bedplan.charts.style import PERCENT, Datasets, Spec, finished, scale_of

MEASURED = "in the records"
COLOURS = {"measured": "#D55E00", "planned": "#0072B2"}
DASHES = {"measured": [1, 0], "planned": [6, 4]}
NAME_HEIGHTS = {"measured": 0.62, "planned": 0.4}  # shares at which each line carries its name, free of the other's


def _stays() -> Spec:
    """Build two falling lines, each named beside itself."""
    data = alt.Chart(alt.NamedData("stays"))
    day = alt.X("day:Q", title="Days since the patient came", axis=alt.Axis(tickMinStep=1), scale=alt.Scale(nice=False))
    share = alt.Y(
        "share:Q",
        title="Patients still in",
        scale=alt.Scale(domain=[0, 1]),
        axis=alt.Axis(labelExpr=PERCENT, tickCount=5, grid=True, gridOpacity=0.3),
    )
    colour = alt.Color("line:N", scale=scale_of(COLOURS), legend=None)
    lines = data.mark_line(strokeWidth=2.5).encode(
        x=day, y=share, color=colour, strokeDash=alt.StrokeDash("line:N", scale=scale_of(DASHES), legend=None)
    )
    names = alt.Chart(alt.NamedData("stay_names"))
    dots = names.mark_point(filled=True, size=60, opacity=1).encode(x=day, y=share, color=colour)
    words = names.mark_text(align="left", dx=9, dy=-6, fontSize=14).encode(x=day, y=share, text="name:N", color=colour)
    return finished(alt.layer(lines, dots, words).properties(height=240))


STAYS: Spec = _stays()


def stays_data(shares: pd.DataFrame, planned: str) -> Datasets:
    """Which lines show these shares? ``shares``: columns day, measured, planned; ``planned``: the plan's family.

    Checked by: tests/charts/test_stays.py
    """
    names = {"measured": MEASURED, "planned": f"in the plan: {planned}"}
    spots = [
        {
            "line": line,
            "day": float(np.interp(-height, -shares[line].to_numpy(), shares["day"].to_numpy())),
            "share": height,
            "name": names[line],
        }
        for line, height in NAME_HEIGHTS.items()
    ]
    rows = shares.melt("day", ["measured", "planned"], "line", "share")
    return {"stays": rows, "stay_names": pd.DataFrame(spots)}
