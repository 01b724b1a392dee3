"""Seasons, weekdays and hours, and patients who find the ward full go elsewhere."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bedplan.models.bed_curve import BedCurve, bed_counts
from bedplan.models.erlang import erlang_b_table
from bedplan.models.load_grid import load_grid
from bedplan.models.year import arrivals_by_hour, month_of_hour, offered_load_by_hour

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from bedplan.models.demand import Demand


def seasonal_loss(demand: Demand, beds: ArrayLike) -> BedCurve:
    """For each bed count, which share is turned away, in each month and over the year?

    Modified offered load: the Erlang loss formula at each hour's own load, averaged over patients.

    Source: Massey & Whitt 1994, Annals of Applied Probability 4(4).
    Checked by: tests/models/test_seasonal.py
    """
    counts = bed_counts(beds)
    grid = load_grid(offered_load_by_hour(demand), arrivals_by_hour(demand), month_of_hour, 12)
    by_month = np.clip(grid.mean(erlang_b_table(grid.loads, counts)), 0.0, 1.0)
    patients = grid.weights.sum(axis=1)
    by_month[:, counts == 0] = float(patients.sum() > 0)
    year = patients @ by_month / max(patients.sum(), 1e-300)
    year[counts == 0] = by_month[0, counts == 0]
    occupancy = demand.offered_load * (1.0 - year) / np.maximum(counts, 1)
    note = (
        "With seasons: right for the seasons alone. A weekly rhythm of usual size turns away up to a sixth more "
        "than this line says."
    )
    return BedCurve("seasonal_loss", "leaves", demand, counts, year, occupancy, by_month, (note,))
