"""Pictures: specs built once at import, and the named datasets that move in them. No page code.

A spec never changes between reruns: everything that moves travels in a dataset, so the browser redraws in place.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import altair as alt
import numpy as np
import pandas as pd

from bedplan import wording

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from bedplan.models import BedCurve, BedPoint

Spec = dict[str, Any]
Datasets = dict[str, pd.DataFrame]

# Hues of the Okabe-Ito set that keep 3:1 contrast on white and on near-black; dashes say the same again.
COLOURS = {
    "average formula": "#D55E00",
    "steady demand": "#009E73",
    "with seasons": "#0072B2",
    "everyone finds a bed": "#CC79A7",
    "patients wait": "#CC79A7",
}
DASHES = {
    "average formula": [2, 3],
    "steady demand": [7, 4],
    "with seasons": [1, 0],
    "everyone finds a bed": [10, 3, 2, 3],
    "patients wait": [10, 3],
}
# the share at which each line's name stands, so that names never share a height
LABEL_SHARES = {
    "patients wait": 0.36,
    "everyone finds a bed": 0.30,
    "with seasons": 0.235,
    "steady demand": 0.17,
    "average formula": 0.105,
}
HIGHEST_SHARE = 0.4
MARKS = {"today": [1, 0], "average formula": [2, 3], "by the limit": [8, 3]}
GREY = "#767676"
CONFIG: Spec = {
    "view": {"stroke": None},
    "axis": {"labelFontSize": 14, "titleFontSize": 14, "titleFontWeight": "normal", "grid": False, "titlePadding": 8},
    "font": "Liberation Sans, Arial, sans-serif",
}


def _scale(values: Mapping[str, Any]) -> alt.Scale:
    return alt.Scale(domain=list(values), range=list(values.values()))


_BEDS = alt.X(
    "beds:Q",
    title="Staffed beds",
    axis=alt.Axis(tickMinStep=1, format="d"),
    scale=alt.Scale(zero=False, nice=False, padding=0),
)
_SHARE = alt.Y(
    "share:Q",
    title=None,
    axis=alt.Axis(format=".0%", tickCount=5, grid=True, gridOpacity=0.3, domain=False, ticks=False),
    scale=alt.Scale(domain=[0, HIGHEST_SHARE]),
)
_LINE = alt.Color("line:N", scale=_scale(COLOURS), legend=None)


def _model_lines() -> alt.Chart:
    return (
        alt.Chart(alt.NamedData("curve"))
        .mark_line(clip=True)
        .encode(
            x=_BEDS,
            y=_SHARE,
            color=_LINE,
            strokeDash=alt.StrokeDash("line:N", scale=_scale(DASHES), legend=None),
            strokeWidth=alt.StrokeWidth("own:N", scale=_scale({"other": 1.75, "own": 4}), legend=None),
            tooltip=[
                alt.Tooltip("line:N", title="Line"),
                alt.Tooltip("beds:Q", title="Staffed beds", format="d"),
                alt.Tooltip("share:Q", title="Share", format=".1%"),
            ],
        )
    )


def _line_names() -> list[alt.Chart]:
    """Build each line's name, at the end of a thin leader from the line to the right-hand edge."""
    names = alt.Chart(alt.NamedData("names"))
    return [
        names.mark_rule(strokeWidth=1, opacity=0.5).encode(x=_BEDS, x2="end:Q", y=_SHARE, color=_LINE),
        names.mark_point(filled=True, size=60, opacity=1).encode(x=_BEDS, y=_SHARE, color=_LINE),
        names.mark_text(align="right", dy=-9, fontSize=15).encode(x="end:Q", y=_SHARE, text="line:N", color=_LINE),
    ]


def _limit() -> list[alt.Chart]:
    limit = alt.Chart(alt.NamedData("limit"))
    return [
        limit.mark_rule(strokeWidth=1.5, color=GREY).encode(y=_SHARE),
        limit.mark_text(align="left", dy=-8, color=GREY, fontSize=14).encode(x=alt.value(4), y=_SHARE, text="label:N"),
    ]


def _bed_marks() -> list[alt.Chart]:
    """Build the marked bed counts: a post each, its name above the picture in a row of its own."""
    marks = alt.Chart(alt.NamedData("marks"))
    posts = marks.mark_rule(strokeWidth=1.5, color=GREY).encode(
        x=_BEDS, strokeDash=alt.StrokeDash("mark:N", scale=_scale(MARKS), legend=None)
    )
    rows = [
        marks.transform_filter(alt.datum.mark == mark)
        .mark_text(fontSize=15, fontWeight="bold", color=GREY, align="center")
        .encode(x=_BEDS, y=alt.value(-10 - 20 * row), text="label:N")
        for row, mark in enumerate(reversed(MARKS))
    ]
    return [posts, *rows]


def _curve() -> Spec:
    layers = [*_limit(), *_bed_marks(), _model_lines(), *_line_names()]
    chart = alt.layer(*layers).resolve_scale(strokeDash="independent").properties(height=380)
    return chart.to_dict() | {"config": CONFIG}


def _months() -> Spec:
    """Build the months: today's beds against the recommended, as two labelled lines of points, and the limit."""
    month = alt.X("month:O", sort=list(wording.MONTHS_SHORT), title=None, axis=alt.Axis(labelAngle=0))
    share = alt.Y(
        "share:Q",
        title=None,
        axis=alt.Axis(format=".0%", tickCount=4, grid=True, gridOpacity=0.3, domain=False, ticks=False),
    )
    colour = alt.Color("which:N", scale=_scale({"today": "#D55E00", "by the limit": "#0072B2"}), legend=None)
    data = alt.Chart(alt.NamedData("months"))
    line = data.mark_line(strokeWidth=2.5).encode(
        x=month,
        y=share,
        color=colour,
        strokeDash=alt.StrokeDash("which:N", scale=_scale({"today": [6, 4], "by the limit": [1, 0]}), legend=None),
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
        .encode(x=month, y=share, text="label:N", color=colour)
    )
    rule = alt.Chart(alt.NamedData("limit")).mark_rule(strokeWidth=1.5, color=GREY).encode(y=share)
    return alt.layer(rule, line, point, names).properties(height=200).to_dict() | {"config": CONFIG}


CURVE: Spec = _curve()
MONTHS: Spec = _months()


def curve_data(
    curves: Sequence[BedCurve], own: str, marked: Mapping[str, int | None], limit: tuple[float, str]
) -> Datasets:
    """Which datasets draw these curves? ``own`` names the ward's own model; ``marked`` a bed count for each mark.

    The window runs from where even the own line is past the top of the picture to where it is near nothing, and
    always holds the marked counts.
    """
    low, high = _window(
        next(curve for curve in curves if curve.model == own), [count for count in marked.values() if count is not None]
    )
    rows, names = [], []
    for curve in curves:
        line = wording.LINES[curve.model]
        shown = (curve.beds >= low) & (curve.beds <= high)
        beds, share = curve.beds[shown], curve.turn_away_probability[shown]
        rows.append(
            pd.DataFrame({"beds": beds, "share": share, "line": line, "own": "own" if curve.model == own else "other"})
        )
        at = float(np.interp(-LABEL_SHARES[line], -share, beds))
        names.append({"line": line, "beds": at, "share": LABEL_SHARES[line], "end": float(high)})
    marks = [
        {"mark": mark, "beds": count, "label": f"{mark} {count}"} for mark, count in marked.items() if count is not None
    ]
    return {
        "curve": pd.concat(rows, ignore_index=True),
        "names": pd.DataFrame(names),
        "marks": pd.DataFrame(marks, columns=["mark", "beds", "label"]),
        "limit": pd.DataFrame([{"share": min(limit[0], HIGHEST_SHARE), "label": limit[1]}]),
    }


def _window(curve: BedCurve, marked: Sequence[int]) -> tuple[int, int]:
    """Return the first and last bed count worth drawing."""
    share = curve.turn_away_probability
    first = int(curve.beds[np.argmax(share <= HIGHEST_SHARE)]) - 1
    last = int(curve.beds[np.argmax(share <= 0.002)]) if (share <= 0.002).any() else int(curve.beds[-1])
    low = max(0, min([first, *(count - 2 for count in marked)]))
    high = min(int(curve.beds[-1]), max([last, low + 8, *(count + 3 for count in marked)]))
    return low, high


def months_data(today: BedPoint, needed: BedPoint | None, limit: float) -> Datasets:
    """Which datasets draw the months for today's beds and, where there is one, the recommended count?"""
    rows, names = [], []
    for which, point in (("today", today), ("by the limit", needed)):
        if point is None:
            continue
        label = f"{which}, {wording.beds_text(point.beds)}"
        rows += [
            {"month": month, "share": float(share), "which": which, "label": label}
            for month, share in zip(wording.MONTHS_SHORT, point.by_month, strict=True)
        ]
        names.append(rows[-1])
    return {
        "months": pd.DataFrame(rows),
        "month_names": pd.DataFrame(names),
        "limit": pd.DataFrame([{"share": limit}]),
    }


def live(spec: Spec, data: Datasets) -> Spec:
    """Return what a page draws: the unchanged spec with its datasets beside it (frames travel as they are)."""
    return spec | {"datasets": data}


def printed(spec: Spec, data: Datasets, *, width: int = 640) -> Spec:
    """Return what a document draws: the same spec on white, with its rows inside."""
    return spec | {
        "width": width,
        "background": "white",
        "datasets": {name: frame.to_dict("records") for name, frame in data.items()},
    }
