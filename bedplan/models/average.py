"""The average formula most hospitals use: bed-days ÷ 365 ÷ occupancy. It leaves chance out."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from bedplan.models.rhythm.year import beds_wanted, patients_wanted
from bedplan.models.value_objects.bed_curve import BedCurve, bed_counts
from bedplan.models.value_objects.figures import ABOVE_ZERO, number

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

    from bedplan.models.value_objects.demand import Demand


def average_beds(admissions_per_year: float, mean_stay_days: float, occupancy: float = 0.85) -> float:
    """How many beds does the average formula give, before rounding up?

    Admissions × mean stay ÷ 365 ÷ occupancy, from *recorded* admissions, as hospitals do it: turnaround is left out, which
    errs towards too few beds.

    Raises:
        ImpossibleFigure: negative admissions, a stay not above 0, an occupancy outside 0–1.

    Source: Farmer & Emami 1990, Journal of Epidemiology and Community Health 44; common practice.
    Checked by: tests/models/test_average.py (10,000 × 5 days at 85 % → 161.2)
    """
    admissions = number("{} admissions a year", admissions_per_year, (0.0, math.inf), "give 0 or more")
    days = number("A mean stay of {} days", mean_stay_days, (ABOVE_ZERO, math.inf), "it is more than 0")
    used = number("An occupancy of {}", occupancy, (ABOVE_ZERO, 1.0), "it is above 0 and at most 1")
    return admissions * days / 365.0 / used


def average_occupancy(demand: Demand, beds: ArrayLike) -> BedCurve:
    """For each bed count, which share would be turned away if every day were the average day?

    Nobody while beds ≥ the load, then 1 − beds/load: the no-chance model. Always too low where chance matters. The
    load is that of beds held, turnaround included, as every line has it; occupancy counts patients only.

    Source: Farmer & Emami 1990; common practice.
    Checked by: tests/models/test_every_model.py, tests/models/test_average.py
    """
    counts = bed_counts(beds)
    load = beds_wanted(demand)
    turned_away = np.maximum(0.0, 1.0 - counts / load) if load > 0 else np.zeros(counts.size)
    patient_share = patients_wanted(demand) / load if load > 0 else 0.0
    occupancy = np.minimum(load, counts) / np.maximum(counts, 1) * patient_share
    notes = ["Average formula: leaves chance out, so real wards turn away more than this line says at every bed count."]
    if demand.turnaround_hours > 0:
        notes.append(
            "This line counts beds being made ready for the next patient; the average formula's bed count, worked out "
            "from stays alone, leaves them out and is too low for it."
        )
    months = np.tile(turned_away, (12, 1))
    return BedCurve("average_occupancy", "no chance", demand, counts, turned_away, occupancy, months, tuple(notes))
