"""The pictures of the year and week: shares in cells, and names that keep apart."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from bedplan.charts import check_data, week_data, year_data
from bedplan.charts.last_year import DARKEST, INK, LIGHTEST


def test_a_cell_a_month() -> None:
    """Twelve shares stand in calendar order, written as whole per cent; a month without records is left empty."""
    shares = np.linspace(0.0, 1.0, 12)
    shares[4] = np.nan
    cells = year_data(shares)["year"]

    assert cells["month"].tolist()[:2] == ["Jan", "Feb"]
    assert cells["said"].tolist()[:6] == ["0", "9", "18", "27", "", "45"]


def test_a_cell_an_hour() -> None:
    """A share of Tuesday's third hour stands there and nowhere else."""
    shares = np.zeros((7, 24))
    shares[1, 2] = 0.256
    cells = week_data(shares)["week"]

    assert len(cells) == 168
    assert cells[cells["said"] != "0"][["day", "hour", "said"]].to_numpy().tolist() == [["Tuesday", 2, "26"]]


def luminance(colour: str, towards: str = "#000000", share: float = 0.0) -> float:
    """Return the relative luminance of a mixture of two colours (Web Content Accessibility Guidelines 2.2, W3C 2023)."""
    ends = [[int(one[place : place + 2], 16) / 255 for place in (1, 3, 5)] for one in (colour, towards)]
    mixed = [start + share * (end - start) for start, end in zip(*ends, strict=True)]
    linear = [part / 12.92 if part <= 0.04045 else ((part + 0.055) / 1.055) ** 2.4 for part in mixed]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def test_digits_stand_out_in_every_cell() -> None:
    """Whatever share a cell shows, its digits have the contrast of 4.5 to 1 that the guidelines ask of small text."""
    for percent in range(101):
        ink = luminance(next(colour for colour, most in INK if percent / 100 <= most))
        cell = luminance(LIGHTEST, DARKEST, percent / 100)
        assert (max(ink, cell) + 0.05) / (min(ink, cell) + 0.05) >= 4.5


@pytest.mark.parametrize("seen", [28, 29, 20])
def test_names_do_not_touch(seen: int) -> None:
    """The names of the band and of the patients stand a tenth of the picture apart, however near their lines end."""
    days = pd.DataFrame(
        {"day": pd.date_range("2024-01-01", periods=3), "seen": [8, 20, seen], "middle": 22, "low": 18, "high": 28}
    )
    names = check_data(days)["check_names"]

    assert abs(names["at"].diff().iloc[1]) >= 0.1 * (max(28, seen) - 8) - 1e-9
    assert names["name"].tolist() == ["in beds", "8 days in 10"]
