"""What happened: the share of hours full through week and year, and last year's days inside the predicted band."""

from __future__ import annotations

from typing import TYPE_CHECKING

import altair as alt
import numpy as np
import pandas as pd

from bedplan import wording
from bedplan.charts.style import APART, Datasets, Spec, finished

if TYPE_CHECKING:
    from numpy.typing import NDArray


LIGHTEST, DARKEST = "#FFFFFF", "#08306B"  # of a cell: never full, always full
INK = (("#000000", 0.655), ("#FFFFFF", 1.0))  # of the digits in it, up to which share: 4.5:1 on every colour between
ROOM_FOR_DAYS = 82  # pixels left of the cells, alike in both pictures, so that they line up
CLOSEST_NAMES = 0.1  # of the picture's height: two names nearer than that would touch
# two digits in a cell of so many pixels; where they would touch, the colour is read alone
DIGITS = "width / {cells} < 13 ? 0 : width / {cells} < 22 ? 10 : 13"


def _cells(name: str, cells: int, x: alt.X, y: alt.Y, height: alt.Step) -> Spec:
    """Build shares as so many cells a row, each with its share written in it, darker where the ward is full more often."""
    data = alt.Chart(alt.NamedData(name))
    scale = alt.Scale(domain=[0, 1], range=[LIGHTEST, DARKEST], interpolate="rgb")
    colour = alt.Color("share:Q", scale=scale, legend=None)
    tips = [y.shorthand, x.shorthand, alt.Tooltip("share:Q", format=".0%", title="Share of hours full")]
    colours = data.mark_rect(stroke="#B8BEC4", strokeWidth=0.5).encode(x=x, y=y, color=colour, tooltip=tips)
    (dark, most), (light, _) = INK
    ink = alt.condition(f"datum.share > {most}", alt.value(light), alt.value(dark))
    size = alt.ExprRef(expr=DIGITS.format(cells=cells))
    text = data.mark_text(fontSize=size).encode(x=x, y=y, text="said:N", color=ink)
    return finished(alt.layer(colours, text).properties(height=height))


def _week() -> Spec:
    """Build the week: a cell an hour."""
    hour = alt.X("hour:O", title="Hour of the day", axis=alt.Axis(labelAngle=0, **APART))
    day = alt.Y("day:O", sort=list(wording.WEEKDAYS), title=None, axis=_names_of_rows())
    return _cells("week", 24, hour, day, alt.Step(30))


def _year() -> Spec:
    """Build the year: a cell a month, in a row."""
    month = alt.X(
        "month:O", sort=list(wording.MONTHS_SHORT), title=None, axis=alt.Axis(labelAngle=0, orient="top", **APART)
    )
    return _cells("year", 12, month, alt.Y("row:O", title=None, axis=_names_of_rows()), alt.Step(34))


def _names_of_rows() -> alt.Axis:
    return alt.Axis(minExtent=ROOM_FOR_DAYS, maxExtent=ROOM_FOR_DAYS, ticks=False, domain=False, labelPadding=8)


def _check() -> Spec:
    """Build last year: the band that was predicted, the middle of it, and the patients who were there."""
    data = alt.Chart(alt.NamedData("check"))
    day = alt.X("day:T", title=None, axis=alt.Axis(format="%b %Y", tickCount=8, **APART))
    patients = alt.Y("low:Q", title="Patients", scale=alt.Scale(zero=False), axis=alt.Axis(grid=True, gridOpacity=0.3))
    band = data.mark_area(color="#0072B2", opacity=0.25).encode(x=day, y=patients, y2="high:Q")
    middle = data.mark_line(color="#0072B2", strokeDash=[6, 4], strokeWidth=1.5).encode(x=day, y="middle:Q")
    seen = data.mark_line(color="#D55E00", strokeWidth=1.5).encode(x=day, y="seen:Q")
    names = alt.Chart(alt.NamedData("check_names")).mark_text(align="left", dx=6, fontSize=14)
    words = names.encode(x="day:T", y="at:Q", text="name:N", color=alt.Color("colour:N", scale=None))
    return finished(alt.layer(band, middle, seen, words).properties(height=280))


WEEK: Spec = _week()
YEAR: Spec = _year()
CHECK: Spec = _check()


def week_data(shares: NDArray[np.float64]) -> Datasets:
    """Which cells show these shares of hours full, ``(7, 24)``, Monday first?"""
    rows = [
        {"day": day, "hour": hour, **_cell(share)}
        for day, row in zip(wording.WEEKDAYS, shares, strict=True)
        for hour, share in enumerate(row)
    ]
    return {"week": pd.DataFrame(rows)}


def year_data(shares: NDArray[np.float64]) -> Datasets:
    """Which cells show these shares of hours full, ``(12,)``, January first?

    Checked by: tests/charts/test_last_year.py
    """
    rows = [
        {"month": month, "row": "All hours", **_cell(share)}
        for month, share in zip(wording.MONTHS_SHORT, shares, strict=True)
    ]
    return {"year": pd.DataFrame(rows)}


def _cell(share: float) -> dict[str, float | str]:
    """Return a share and how it is written: whole per cent, nothing where nothing was recorded."""
    return {"share": float(share), "said": "" if np.isnan(share) else f"{100 * share:.0f}"}


def check_data(days: pd.DataFrame) -> Datasets:
    """Which lines show last year? ``days``: columns day, seen, low, middle, high.

    Checked by: tests/charts/test_last_year.py
    """
    last = days.iloc[-1]
    names = [
        {"day": last["day"], "at": float(last["seen"]), "name": "in beds", "colour": "#D55E00"},
        {"day": last["day"], "at": float(last["high"]), "name": "8 days in 10", "colour": "#0072B2"},
    ]
    apart = CLOSEST_NAMES * float(np.ptp(days[["low", "high", "seen"]].to_numpy()))
    if abs(names[0]["at"] - names[1]["at"]) < apart:
        names[1]["at"] = names[0]["at"] + apart
    return {"check": days, "check_names": pd.DataFrame(names)}
