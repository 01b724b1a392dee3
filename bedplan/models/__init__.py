"""Every model, once, in order: its name -> the function ``(demand, beds) -> BedCurve``."""

from __future__ import annotations

from types import MappingProxyType
from typing import TYPE_CHECKING

from bedplan.models.average import average_beds, average_occupancy
from bedplan.models.formulas.erlang import erlang_b, erlang_b_log, erlang_c
from bedplan.models.formulas.patience import Patience, erlang_a
from bedplan.models.rhythm.year import offered_load_by_hour
from bedplan.models.seasonal import seasonal_loss
from bedplan.models.simulation.run import Closure, WardRun
from bedplan.models.simulation.ward import SimulatedWard, simulate_ward
from bedplan.models.steady import erlang_loss
from bedplan.models.unlimited import unlimited_beds
from bedplan.models.value_objects.bed_curve import BedCurve, BedPoint, Waits, bed_counts
from bedplan.models.value_objects.demand import BookedList, Demand
from bedplan.models.value_objects.stay import LengthOfStay
from bedplan.models.value_objects.stay_fit import SeenStays, StayFit, fit_stay
from bedplan.models.waiting import waiting

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from numpy.typing import ArrayLike

MODELS: Mapping[str, Callable[[Demand, ArrayLike], BedCurve]] = MappingProxyType(
    {model.__name__: model for model in (average_occupancy, erlang_loss, unlimited_beds, seasonal_loss, waiting)}
)

__all__ = [
    "MODELS",
    "BedCurve",
    "BedPoint",
    "BookedList",
    "Closure",
    "Demand",
    "LengthOfStay",
    "Patience",
    "SeenStays",
    "SimulatedWard",
    "StayFit",
    "Waits",
    "WardRun",
    "average_beds",
    "average_occupancy",
    "bed_counts",
    "erlang_a",
    "erlang_b",
    "erlang_b_log",
    "erlang_c",
    "erlang_loss",
    "fit_stay",
    "offered_load_by_hour",
    "seasonal_loss",
    "simulate_ward",
    "unlimited_beds",
    "waiting",
]
