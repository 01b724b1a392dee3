"""Steady demand, and patients who find the ward full go elsewhere: the average year by Erlang's loss formula."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bedplan.models.formulas.erlang import erlang_b
from bedplan.models.rhythm.year import beds_wanted, leaving_of, patients_wanted
from bedplan.models.value_objects.bed_curve import BedCurve, bed_counts

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from bedplan.models.value_objects.demand import Demand


def erlang_loss(demand: Demand, beds: ArrayLike) -> BedCurve:
    """For each bed count, which share is turned away if demand were the same all year?

    Uses the year's mean load only: seasons, weekdays, hours of discharge, clusters and drift are left out, so with any
    of them the figure is too low; the notes say so. The load is that of beds held: turnaround counts, and what hours
    of discharge and weekends add to a stay. Occupancy counts patients only.

    Source: Erlang 1917; de Bruin et al. 2010, Annals of Operations Research 178.
    Checked by: tests/models/test_every_model.py, tests/models/test_erlang.py
    """
    counts = bed_counts(beds)
    load = beds_wanted(demand)
    turned_away = erlang_b(load, counts) if load > 0 else np.zeros(counts.size)
    occupancy = patients_wanted(demand) * (1.0 - turned_away) / np.maximum(counts, 1)
    notes = []
    if not demand.is_steady:
        notes.append(
            "Steady demand: the year's mean only. With seasons or weekdays more are turned away than this line says."
        )
    elif leaving_of(demand).has_rhythm:
        notes.append(
            "Steady demand: beds come free evenly. With hours of discharge more are turned away than this line says."
        )
    if demand.clustering > 1 or demand.rate_variation > 0:
        notes.append(
            "Patients who come together, and demand that drifts, are left out of this line: both turn more away."
        )
    return BedCurve(
        "erlang_loss", "leaves", demand, counts, turned_away, occupancy, np.tile(turned_away, (12, 1)), tuple(notes)
    )
