"""The picture of the months: lines as given, the limit, and names that keep apart."""

from __future__ import annotations

import numpy as np
import pytest

from bedplan.charts import months_data

LIMIT = (0.05, "limit: 1 in 20")


@pytest.mark.parametrize("december", [0.038, 0.05, 0.0])
def test_names_do_not_touch(december: float) -> None:
    """The names at the end of the lines, the limit's too, stand a tenth of the picture apart and clear of the axis, in the lines' order."""
    months = {"today": (28, np.full(12, 0.6)), "by the limit": (39, np.full(12, december))}
    names = months_data(months, LIMIT)["month_names"]

    assert sorted(names["label"]) == ["by the limit 39", "limit: 1 in 20", "today 28"]
    assert names["at"].diff().min() >= 0.1 * 0.6 - 1e-9
    assert names["at"].min() >= 0.05 * 0.6 - 1e-9
    assert names.sort_values("at")["share"].is_monotonic_increasing
    assert (names["at"] >= names["share"]).all()


def test_lines_are_the_months() -> None:
    """Each marked bed count has its twelve months in calendar order; the average formula's line is left out."""
    months = np.linspace(0.01, 0.12, 12)
    shown = months_data({"today": (28, months), "average formula": (31, months)}, LIMIT)["months"]

    assert shown["share"].tolist() == months.tolist()
    assert shown["month"].tolist()[:3] == ["Jan", "Feb", "Mar"]
    assert set(shown["which"]) == {"today"}
