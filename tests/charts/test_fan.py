"""The picture of the years ahead: years at their middles, a range that opens from the last recorded one."""

from __future__ import annotations

import pandas as pd
import pytest

from bedplan.charts import fan_data
from bedplan.data import PastYear
from bedplan.data.ahead.forecasting import YearAhead

PAST = tuple(PastYear(pd.Timestamp(f"{year}-01-01"), 1_000.0, beds) for year, beds in ((2022, 20.0), (2023, 21.0)))
AHEAD = tuple(
    YearAhead(
        pd.Timestamp(f"{2024 + number}-01-01"),
        1_000.0,
        (900.0, 1_100.0),
        (800.0, 1_200.0),
        365.0 * (22.0 + number),
        (365.0 * (20.0 - number), 365.0 * (24.0 + 2 * number)),
    )
    for number in range(4)
)


def test_the_fan_opens_from_the_last_recorded_year() -> None:
    """The range starts at nothing where the records end, then holds each year's own bounds, in beds."""
    data = fan_data(PAST, AHEAD)
    ahead = data["ahead"]

    assert data["past"]["beds"].tolist() == [20.0, 21.0]
    assert ahead["beds"].tolist() == pytest.approx([21.0, 22.0, 23.0, 24.0, 25.0])
    assert ahead["low"].tolist() == pytest.approx([21.0, 20.0, 19.0, 18.0, 17.0])
    assert ahead["high"].tolist() == pytest.approx([21.0, 24.0, 26.0, 28.0, 30.0])
    assert ahead["year"].iloc[1] == pd.Timestamp("2024-07-01")
    assert ahead["year"].is_monotonic_increasing


def test_the_last_year_is_named_with_its_figures() -> None:
    """At the end stand the expected beds and both ends of the range; the records are named where they begin."""
    names = fan_data(PAST, AHEAD)["fan_names"].set_index("name")

    assert names.loc["25 expected", "beds"] == pytest.approx(25.0)
    assert names.loc["30", "beds"] == pytest.approx(30.0)
    assert names.loc["17", "beds"] == pytest.approx(17.0)
    assert names.loc["recorded", "year"] == pd.Timestamp("2022-07-02")
    assert "8 in 10" in names.index


def test_without_a_whole_recorded_year() -> None:
    """A file of less than a year shows the years ahead alone, and no name of what isn't there."""
    data = fan_data((), AHEAD)

    assert data["past"].empty
    assert len(data["ahead"]) == 4
    assert "recorded" not in data["fan_names"]["name"].tolist()
