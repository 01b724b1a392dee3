"""What every picture shares: types, greys, fonts, and how a spec and its datasets become a drawing."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import altair as alt
import pandas as pd

if TYPE_CHECKING:
    from collections.abc import Mapping

Spec = dict[str, Any]
Datasets = dict[str, pd.DataFrame]

PERCENT = "format(100 * datum.value, '.3~r') + '\u00a0%'"  # how an axis writes a share: as wording.percent does
APART = {"labelOverlap": "parity", "labelSeparation": 4}  # names on an axis: every other one where they would touch
GREY = "#787878"  # near 4.3:1 on white and on near-black alike
CONFIG: Spec = {
    "view": {"stroke": None},
    "axis": {"labelFontSize": 14, "titleFontSize": 14, "titleFontWeight": "normal", "grid": False, "titlePadding": 8},
    "font": "Liberation Sans, Arial, sans-serif",
}


def scale_of(values: Mapping[str, Any]) -> alt.Scale:
    """Return the scale that gives each name its own value."""
    return alt.Scale(domain=list(values), range=list(values.values()))


def finished(chart: alt.Chart | alt.LayerChart) -> Spec:
    """Return a chart as the spec that never changes again."""
    return chart.to_dict() | {"config": CONFIG}


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
