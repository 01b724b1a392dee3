"""The pictures of the year and week: shares in cells, and names that keep apart."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from bedplan.charts import check_data, week_data, year_data


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


@pytest.mark.parametrize("seen", [28, 29, 20])
def test_names_do_not_touch(seen: int) -> None:
    """The names of the band and of the patients stand a tenth of the picture apart, however near their lines end."""
    days = pd.DataFrame(
        {"day": pd.date_range("2024-01-01", periods=3), "seen": [8, 20, seen], "middle": 22, "low": 18, "high": 28}
    )
    names = check_data(days, None)["check_names"]

    assert abs(names["at"].diff().iloc[1]) >= 0.1 * (max(28, seen) - 8) - 1e-9
    assert names["name"].tolist() == ["in beds", "8 days in 10"]
