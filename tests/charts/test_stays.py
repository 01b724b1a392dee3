"""The picture of stays: two lines as given, each named on itself."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from bedplan.charts import stays_data

DAYS = np.linspace(0.0, 10.0, 101)
SHARES = pd.DataFrame({"day": DAYS, "measured": 1.0 - DAYS / 10.0, "planned": np.exp(-DAYS / 4.0)})


def test_lines_are_the_shares() -> None:
    """Each line's points are the shares that were given."""
    rows = stays_data(SHARES, "gamma")["stays"]

    for line in ("measured", "planned"):
        one = rows[rows["line"] == line]
        assert one["share"].tolist() == SHARES[line].tolist()
        assert one["day"].tolist() == DAYS.tolist()


def test_each_name_lies_on_its_line() -> None:
    """A line falling evenly to 0 in 10 days has 62 % left on day 3.8; the other has 40 % left on day 4 ln 2.5."""
    names = stays_data(SHARES, "gamma")["stay_names"].set_index("line")

    assert names.loc["measured", "day"] == pytest.approx(3.8)
    assert names.loc["planned", "day"] == pytest.approx(4.0 * np.log(2.5), abs=0.01)
    assert names["name"].tolist() == ["in the records", "in the plan: gamma"]
