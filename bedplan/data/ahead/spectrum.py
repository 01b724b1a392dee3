"""Singular spectrum analysis: a series as a sum of level, trend and cycles found in the series itself, carried on."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import linalg

from bedplan.errors import ImpossibleFigure

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

MOST_COMPONENTS = 12
MOST_VERTICAL = 0.99  # nearer 1, one value of the recurrence would divide by almost nothing


@dataclass(frozen=True, slots=True)
class Spectrum:
    """A series taken apart: ``shares`` (m,) of its energy by component, largest first, ``vectors`` (window, m)."""

    values: NDArray[np.float64]
    singular_values: NDArray[np.float64]
    vectors: NDArray[np.float64]

    @property
    def shares(self) -> NDArray[np.float64]:
        """Which share of the series' energy does each component hold?"""
        energy = self.singular_values**2
        return energy / max(float(energy.sum()), 1e-300)

    @property
    def components_above_noise(self) -> int:
        """How many components stand out of the noise? At least 1.

        Source: Gavish & Donoho 2014, IEEE Transactions on Information Theory 60(8): threshold for unknown noise.
        """
        window, pieces = self.vectors.shape[0], self.values.size - self.vectors.shape[0] + 1
        ratio = min(window, pieces) / max(window, pieces)
        factor = 0.56 * ratio**3 - 0.95 * ratio**2 + 1.82 * ratio + 1.43
        above = int((self.singular_values > factor * np.median(self.singular_values)).sum())
        return min(max(above, 1), MOST_COMPONENTS, window - 1)

    def rebuilt(self, components: int) -> NDArray[np.float64]:
        """What is the series without its noise? Diagonal averages of the first so many components."""
        window = self.vectors.shape[0]
        pieces = np.lib.stride_tricks.sliding_window_view(self.values, window).T
        kept = self.vectors[:, :components]
        matrix = kept @ (kept.T @ pieces)
        places = np.add.outer(np.arange(window), np.arange(pieces.shape[1])).ravel()
        return np.bincount(places, weights=matrix.ravel()) / np.bincount(places)

    def carried_on(self, components: int, steps: int) -> NDArray[np.float64]:
        """How does the series go on, if each value follows from those before as it did so far? ``(steps,)``."""
        while components > 1 and float((self.vectors[-1, :components] ** 2).sum()) > MOST_VERTICAL:
            components -= 1
        kept, last = self.vectors[:-1, :components], self.vectors[-1, :components]
        recurrence = kept @ last / max(1.0 - float(last @ last), 1.0 - MOST_VERTICAL)
        order = recurrence.size
        series = np.concatenate((self.rebuilt(components)[-order:], np.zeros(steps)))
        lowest, highest = min(0.0, 3.0 * float(self.values.min())), 3.0 * max(0.0, float(self.values.max()))
        for step in range(steps):  # a recurrence that runs away is held within three times what was ever seen
            series[order + step] = min(max(float(recurrence @ series[step : order + step]), lowest), highest)
        return series[order:]


def singular_spectrum(values: ArrayLike, window: int) -> Spectrum:
    """Which level, trend and cycles make up this series? ``window`` is the longest cycle that can be told, in steps.

    Raises:
        ImpossibleFigure: a window below 2 or above half the series.

    Source: Golyandina, Nekrutkin & Zhigljavsky 2001, Analysis of Time Series Structure: SSA and related techniques.
    Checked by: tests/data/ahead/test_spectrum.py
    """
    series = np.asarray(values, dtype=float)
    if not 2 <= window <= series.size // 2:
        raise ImpossibleFigure(
            f"A window of {window} steps does not fit a series of {series.size}: it is 2 to {series.size // 2}."
        )
    pieces = np.lib.stride_tricks.sliding_window_view(series, window)
    # Window × window, however long the series; this driver shares no work between processors, which costs more here.
    energy, vectors = linalg.eigh(pieces.T @ pieces, driver="evr")
    return Spectrum(series, np.sqrt(np.maximum(energy[::-1], 0.0)), vectors[:, ::-1])
