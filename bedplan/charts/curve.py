"""The bed curve: one line a model, named at the line; marked bed counts; the limit."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import altair as alt
import numpy as np
import pandas as pd

from bedplan import wording
from bedplan.charts.style import GREY, PERCENT, Datasets, Spec, finished, scale_of

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from bedplan.models import BedCurve

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
# how high up the picture each line's name stands, so that names never share a height
NAME_HEIGHTS = {
    "patients wait": 0.91,
    "everyone finds a bed": 0.77,
    "with seasons": 0.62,
    "steady demand": 0.47,
    "average formula": 0.32,
}
ROOM_LEFT_OF_NAMES = 0.7  # the names of the lines stand in the right-hand third, free of marked bed counts
MARKS = {"today": [1, 0], "average formula": [2, 3], "by the limit": [8, 3]}
NEAR_NOTHING = 0.005
_BEDS = alt.X(
    "beds:Q",
    title="Staffed beds",
    axis=alt.Axis(tickMinStep=1, format="d"),
    scale=alt.Scale(zero=False, nice=False, padding=0),
)
_SHARE = alt.Y(
    "share:Q",
    title=None,
    axis=alt.Axis(labelExpr=PERCENT, tickCount=5, grid=True, gridOpacity=0.3, domain=False, ticks=False),
    scale=alt.Scale(zero=True, nice=False),
)
_LINE = alt.Color("line:N", scale=scale_of(COLOURS), legend=None)


def _model_lines() -> alt.Chart:
    return (
        alt.Chart(alt.NamedData("curve"))
        .mark_line(clip=True)
        .encode(
            x=_BEDS,
            y=_SHARE,
            color=_LINE,
            strokeDash=alt.StrokeDash("line:N", scale=scale_of(DASHES), legend=None),
            strokeWidth=alt.StrokeWidth("own:O", scale=scale_of({"other": 1.75, "own": 4}), legend=None),
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
        limit.mark_text(align="right", dy=-8, color=GREY, fontSize=14).encode(
            x=alt.value("width"), y=_SHARE, text="label:N"
        ),
    ]


def _bed_marks() -> list[alt.Chart]:
    """Build the marked bed counts: a post each, its name above the picture in a row of its own."""
    marks = alt.Chart(alt.NamedData("marks"))
    posts = marks.mark_rule(strokeWidth=1.5, color=GREY).encode(
        x=_BEDS, strokeDash=alt.StrokeDash("mark:N", scale=scale_of(MARKS), legend=None)
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
    return finished(chart)


CURVE: Spec = _curve()


def curve_data(
    curves: Mapping[str, BedCurve],
    own: tuple[str, NDArray[np.float64]],
    marked: Mapping[str, int | None],
    limit: tuple[float, str],
) -> Datasets:
    """Which datasets draw these curves? ``own`` = (the ward's model, the figure its limit watches, a bed count each).

    ``marked`` holds a bed count for each mark. The picture is high enough for the figure at every marked count, starts
    where the first line can be named and ends where the own line is near nothing.
    """
    counts = [count for count in marked.values() if count is not None]
    figures = {model: own[1] if model == own[0] else curve.turn_away_probability for model, curve in curves.items()}
    beds = curves[own[0]].beds
    top = min(1.0, max(0.4, 1.15 * float(np.interp(min(counts), beds, own[1]))))
    names = pd.DataFrame([_named(wording.LINES[model], beds, share, top) for model, share in figures.items()])
    last = int(beds[np.argmax(own[1] <= NEAR_NOTHING)] or beds[-1])
    low = max(0, min(int(names["beds"].min()), min(counts) - 1))
    high = max(last, low + 8, low + math.ceil((max(counts) + 1 - low) / ROOM_LEFT_OF_NAMES))
    rows = [
        _shown(beds, share, (low, high), top).assign(
            line=wording.LINES[model], own="own" if model == own[0] else "other"
        )
        for model, share in sorted(figures.items(), key=lambda line: line[0] != own[0])  # the thick line lies lowest
    ]
    marks = [
        {"mark": mark, "beds": count, "label": f"{mark} {count}"} for mark, count in marked.items() if count is not None
    ]
    return {
        "curve": pd.concat(rows, ignore_index=True),
        "names": names.assign(end=float(high)),
        "marks": pd.DataFrame(marks),
        "limit": pd.DataFrame([{"share": min(limit[0], top), "label": limit[1]}]),
    }


def _named(line: str, beds: NDArray[np.int64], share: NDArray[np.float64], top: float) -> dict[str, float | str]:
    """Return where a line carries its name: the point where it passes the height kept for it."""
    height = NAME_HEIGHTS[line] * top
    return {"line": line, "beds": float(np.interp(-height, -share, beds)), "share": height}


def _shown(beds: NDArray[np.int64], share: NDArray[np.float64], window: tuple[int, int], top: float) -> pd.DataFrame:
    """Return one line's points inside the picture, cut exactly at its top edge."""
    edge = float(np.interp(-top, -share, beds))
    inside = beds[(beds >= max(window[0], edge)) & (beds <= window[1])].astype(float)
    if edge > window[0]:
        inside = np.concatenate([[edge], inside])
    return pd.DataFrame({"beds": inside, "share": np.interp(inside, beds, share)})
