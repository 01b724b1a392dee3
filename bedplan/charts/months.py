"""The months: today's beds against those by the limit."""

from __future__ import annotations

from typing import TYPE_CHECKING

import altair as alt
import pandas as pd

from bedplan import wording
from bedplan.charts.style import APART, GREY, PERCENT, Datasets, Spec, finished, scale_of

if TYPE_CHECKING:
    from collections.abc import Mapping

    import numpy as np
    from numpy.typing import NDArray


MONTH_COLOURS = {"today": "#D55E00", "by the limit": "#0072B2", "limit": GREY}
MONTH_DASHES = {"today": [6, 4], "by the limit": [1, 0], "limit": [1, 0]}
CLOSEST_NAMES = 0.1  # of the picture's height: two names nearer than that would touch


def _months() -> Spec:
    """Build the months: today's beds against the recommended, as two labelled lines of points, and the limit."""
    month = alt.X(
        "month:O",
        scale=alt.Scale(domain=list(wording.MONTHS_SHORT)),
        title=None,
        axis=alt.Axis(labelAngle=0, labelAlign="center", labelBaseline="top", **APART),
    )
    share = alt.Y(
        "share:Q",
        title=None,
        axis=alt.Axis(labelExpr=PERCENT, tickCount=4, grid=True, gridOpacity=0.3, domain=False, ticks=False),
    )
    colour = alt.Color("which:N", scale=scale_of(MONTH_COLOURS), legend=None)
    data = alt.Chart(alt.NamedData("months"))
    line = data.mark_line(strokeWidth=2.5).encode(
        x=month,
        y=share,
        color=colour,
        strokeDash=alt.StrokeDash("which:N", scale=scale_of(MONTH_DASHES), legend=None),
    )
    point = data.mark_point(filled=True, size=50, opacity=1).encode(
        x=month,
        y=share,
        color=colour,
        tooltip=[alt.Tooltip("label:N", title="Beds"), "month:O", alt.Tooltip("share:Q", format=".1%", title="Share")],
    )
    names = (
        alt.Chart(alt.NamedData("month_names"))
        .mark_text(align="left", dx=8, fontSize=14)
        .encode(x=month, y=alt.Y("at:Q", title=None), text="label:N", color=colour)
    )
    limit = alt.Chart(alt.NamedData("limit"))
    rule = limit.mark_rule(strokeWidth=1.5, color=GREY).encode(x=alt.X("from:O", title=None), x2="to:O", y=share)
    return finished(alt.layer(rule, line, point, names).properties(height=200))


MONTHS: Spec = _months()


def months_data(points: Mapping[str, tuple[int, NDArray[np.float64]]], limit: tuple[float, str]) -> Datasets:
    """Which datasets draw the months? ``points``: mark -> (beds, the figure in each month); the formula's is left out.

    ``limit``: its share and its name. Names stand at the end of their lines, moved up where they would touch one another
    or the axis.

    Checked by: tests/charts/test_months.py
    """
    first, last = wording.MONTHS_SHORT[0], wording.MONTHS_SHORT[-1]
    rows: list[dict[str, str | float]] = []
    names: list[dict[str, str | float]] = [{"month": last, "share": limit[0], "which": "limit", "label": limit[1]}]
    for which, (beds, months) in points.items():
        if which not in MONTH_COLOURS:
            continue
        rows += [
            {"month": month, "share": float(share), "which": which, "label": f"{which} {beds}"}
            for month, share in zip(wording.MONTHS_SHORT, months, strict=True)
        ]
        names.append(rows[-1])
    return {
        "months": pd.DataFrame(rows),
        "month_names": _apart(pd.DataFrame(names), max(limit[0], *(row["share"] for row in rows))),
        "limit": pd.DataFrame([{"share": limit[0], "from": first, "to": last}]),
    }


def _apart(names: pd.DataFrame, top: float) -> pd.DataFrame:
    """Return the names with the heights at which they stand, from the lowest up, none touching another."""
    upward = names.sort_values("share", kind="stable")
    at: list[float] = []
    for share in upward["share"]:
        at.append(max(share, at[-1] + CLOSEST_NAMES * top if at else CLOSEST_NAMES / 2.0 * top))
    return upward.assign(at=at)
