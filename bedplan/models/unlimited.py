"""Patients who stay anyway: how many want a bed in each hour if nobody is ever turned away."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from scipy import special

from bedplan.models.bed_curve import BedCurve, bed_counts
from bedplan.models.load_grid import load_grid
from bedplan.models.year import HOURS_A_YEAR, arrivals_by_hour, month_of_hour, offered_load_by_hour

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    from bedplan.models.demand import Demand

    Array = NDArray[np.float64]


def _at_least(counts: Array, loads: Array) -> Array:
    """Return the Poisson chance of that many patients or more: ``(n,)`` counts × ``(g,)`` loads -> ``(n, g)``."""
    count = np.maximum(counts, 1)[:, None].astype(float)
    return np.where(counts[:, None] > 0, special.gammainc(count, loads), 1.0)


def unlimited_beds(demand: Demand, beds: ArrayLike) -> BedCurve:
    """For each bed count, which share of patients finds the ward full, if everyone stays anyway?

    Source: Eick, Massey & Whitt 1993, Management Science 39(2).
    Checked by: tests/models/test_unlimited.py
    """
    counts = bed_counts(beds)
    loads, arrivals = offered_load_by_hour(demand), arrivals_by_hour(demand)
    found_full = load_grid(loads, arrivals, month_of_hour, 12)
    hours = load_grid(loads, np.ones(HOURS_A_YEAR), month_of_hour, 12)
    by_month = np.clip(found_full.mean(_at_least(counts, found_full.loads)), 0.0, 1.0)
    overfull = np.clip(hours.mean(_at_least(counts + 1, hours.loads)), 0.0, 1.0)
    patients = found_full.weights.sum(axis=1)
    by_month[:, counts == 0] = float(patients.sum() > 0)
    year = patients @ by_month / max(patients.sum(), 1e-300)
    year[counts == 0] = by_month[0, counts == 0]
    occupancy = np.where(counts > 0, loads.mean() / np.maximum(counts, 1), 0.0)
    return BedCurve(
        "unlimited_beds",
        "stays anyway",
        demand,
        counts,
        year,
        occupancy,
        by_month,
        overfull_share_of_hours=hours.weights.sum(axis=1) @ overfull / HOURS_A_YEAR,
        overfull_by_month=overfull,
    )
