"""The years ahead: beds in use in the years of the records, then the expected ones in a range that widens."""

from __future__ import annotations

from typing import TYPE_CHECKING

import altair as alt
import pandas as pd

from bedplan.charts.style import Datasets, Spec, finished

if TYPE_CHECKING:
    from collections.abc import Sequence

    from bedplan.data import PastYear
    from bedplan.data.ahead.forecasting import YearAhead

RECORDED, EXPECTED = "#D55E00", "#0072B2"
MIDYEAR = pd.Timedelta(days=182)
YEAR_DAYS = 365


def _fan() -> Spec:
    """Build the records' years as a solid line with dots, the expected ones dashed, and the range about them."""
    year = alt.X("year:T", title=None, axis=alt.Axis(format="%Y", tickCount=8))
    beds = alt.Y(
        "beds:Q",
        title="Beds in use; ahead, wanted at this growth",
        scale=alt.Scale(zero=False),
        axis=alt.Axis(grid=True, gridOpacity=0.3, tickCount=5),
    )
    ahead, past = alt.Chart(alt.NamedData("ahead")), alt.Chart(alt.NamedData("past"))
    band = ahead.mark_area(color=EXPECTED, opacity=0.25).encode(x=year, y=alt.Y("low:Q"), y2="high:Q")
    middle = ahead.mark_line(color=EXPECTED, strokeDash=[6, 4], strokeWidth=2.5).encode(x=year, y=beds)
    seen = past.mark_line(color=RECORDED, strokeWidth=2.5).encode(x=year, y=beds)
    dots = past.mark_point(color=RECORDED, filled=True, size=60, opacity=1).encode(x=year, y=beds)
    names = alt.Chart(alt.NamedData("fan_names")).encode(
        x=year, y=beds, text="name:N", color=alt.Color("colour:N", scale=None)
    )
    beside = names.transform_filter("datum.place == 'beside'").mark_text(align="left", dx=7, fontSize=14)
    after = names.transform_filter("datum.place == 'above'").mark_text(align="left", dx=6, dy=-18, fontSize=14)
    before = names.transform_filter("datum.place == 'before'").mark_text(align="right", dx=-4, dy=-10, fontSize=14)
    return finished(alt.layer(band, middle, seen, dots, beside, after, before).properties(height=260))


FAN: Spec = _fan()


def fan_data(past: Sequence[PastYear], ahead: Sequence[YearAhead]) -> Datasets:
    """Which lines show these years? Each stands at its middle; the range opens from the last year of the records.

    Checked by: tests/charts/test_fan.py
    """
    seen = pd.DataFrame([{"year": one.first_day + MIDYEAR, "beds": one.beds_in_use} for one in past])
    rows = [
        {
            "year": one.first_day + MIDYEAR,
            "beds": one.beds_in_use,
            "low": one.bed_days_80[0] / YEAR_DAYS,
            "high": one.bed_days_80[1] / YEAR_DAYS,
        }
        for one in ahead
    ]
    if past:
        start = seen.iloc[-1]
        rows.insert(0, {"year": start["year"], "beds": start["beds"], "low": start["beds"], "high": start["beds"]})
    last, late = rows[-1], rows[(2 * len(rows)) // 3]
    names = [
        {**last, "name": f"{last['beds']:.0f} expected", "colour": EXPECTED, "place": "beside"},
        {**last, "beds": last["high"], "name": f"{last['high']:.0f}", "colour": EXPECTED, "place": "beside"},
        {**last, "beds": last["low"], "name": f"{last['low']:.0f}", "colour": EXPECTED, "place": "beside"},
        {**late, "beds": late["high"], "name": "8 in 10", "colour": EXPECTED, "place": "before"},
    ]
    if past:
        first = seen.iloc[0]
        named = {"year": first["year"], "beds": first["beds"], "name": "recorded", "colour": RECORDED}
        names.append({**named, "place": "above"})
    return {
        "past": seen if past else pd.DataFrame({"year": [], "beds": []}),
        "ahead": pd.DataFrame(rows),
        "fan_names": pd.DataFrame(names)[["year", "beds", "name", "colour", "place"]],
    }
