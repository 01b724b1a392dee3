"""The picture of kept promises: a dot a band, its mark and the words beside it from how the band did."""

from __future__ import annotations

import pytest

from bedplan.charts import CALIBRATION, calibration_data
from bedplan.data.ahead.last_year import KeptBand

KEPT, FEWER, MORE = KeptBand(0.8, 0.78, 0.7, 0.85), KeptBand(0.95, 0.8, 0.7, 0.9), KeptBand(0.1, 0.2, 0.15, 0.25)


def test_a_dot_a_band() -> None:
    """Every band stands at its promise, at the share it held, with its bar; the line runs from none to all."""
    data = calibration_data([KEPT, FEWER])

    assert data["kept"].to_dict("records") == [
        {"promised": 0.8, "held": 0.78, "low": 0.7, "high": 0.85, "outcome": "kept"},
        {"promised": 0.95, "held": 0.8, "low": 0.7, "high": 0.9, "outcome": "fewer"},
    ]
    assert data["kept_line"].to_numpy().tolist() == [[0.0, 0.0], [1.0, 1.0]]


@pytest.mark.parametrize(
    ("bands", "said"),
    [([KEPT], []), ([KEPT, FEWER], ["fewer"]), ([MORE, KEPT, FEWER], ["fewer", "more"])],
)
def test_what_missed_is_said_in_words(bands: list[KeptBand], said: list[str]) -> None:
    """The words for bands that held fewer or more stand in the picture only where there are such bands."""
    names = calibration_data(bands)["kept_names"]["name"].tolist()

    assert [word for word in ("fewer", "more") if any(f"{word} than promised" in name for name in names)] == said
    assert "as promised" in names


def test_words_do_not_touch() -> None:
    """Words in the corner stand at least 15 pixels apart, so that none covers another."""
    corner = calibration_data([MORE, KEPT, FEWER])["kept_names"].query("promised < 0.1")["held"].sort_values()

    assert (corner.diff().dropna() * CALIBRATION["height"] >= 15).all()
    assert CALIBRATION["width"] == CALIBRATION["height"]
