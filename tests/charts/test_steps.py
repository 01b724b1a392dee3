"""The picture from recorded to demand: bars that follow on one another, their total, and the range of all methods."""

from __future__ import annotations

import pytest

from bedplan.charts import steps_data


def test_bars_lead_from_recorded_to_wanted() -> None:
    """Each bar starts where the last one ended, one that takes away runs back, and the total reaches where they end."""
    rows = steps_data([("Recorded", 24.9), ("Taken out", -1.7), ("Brought home", 1.5)], (24.1, 25.4))["steps"]

    assert rows["start"].tolist() == pytest.approx([0.0, 24.9, 23.2, 0.0, 24.1])
    assert rows["end"].tolist() == pytest.approx([24.9, 23.2, 24.7, 24.7, 25.4])
    assert rows["said"].tolist() == ["24.9", "−1.7", "+1.5", "24.7", ""]
    assert rows["label"].iloc[-1] == "By all methods 24.1 to 25.4"
    assert rows["kind"].tolist() == ["total", "takes away", "adds", "total", "range"]


def test_figures_have_room() -> None:
    """Past the longest bar, be it the range, there is room for the figure beside it."""
    data = steps_data([("Recorded", 10.0)], (9.0, 16.0))

    assert data["room"]["right"].iloc[0] >= 1.25 * data["steps"]["right"].max()
    assert data["steps"]["right"].max() == pytest.approx(16.0)
