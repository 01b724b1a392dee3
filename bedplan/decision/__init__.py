"""Rules, decisions and comparisons over bed curves: from "what happens at each bed count" to "how many, and why"."""

from bedplan.decision.changing_beds import BedChanges, Closure
from bedplan.decision.checking import SimulationCheck, check_by_simulation
from bedplan.decision.comparing import Refused, WardComparison, compare_wards, patients_per_year, spared_by_next_bed
from bedplan.decision.overflowing import (
    BayEffect,
    HoldBackEffect,
    OverflowEffect,
    hold_back_effect,
    overflow_bay_effect,
    overflow_effect,
)
from bedplan.decision.pooling import PoolingEffect, pool_wards, pooling_effect
from bedplan.decision.rules import Decision, OccupancyLimit, OverfullLimit, Rule, TurnAwayLimit, WaitLimit, decide
from bedplan.decision.sharing import SharedBeds, share_beds
from bedplan.decision.ward import Ward

__all__ = [
    "BayEffect",
    "BedChanges",
    "Closure",
    "Decision",
    "HoldBackEffect",
    "OccupancyLimit",
    "OverflowEffect",
    "OverfullLimit",
    "PoolingEffect",
    "Refused",
    "Rule",
    "SharedBeds",
    "SimulationCheck",
    "TurnAwayLimit",
    "WaitLimit",
    "Ward",
    "WardComparison",
    "check_by_simulation",
    "compare_wards",
    "decide",
    "hold_back_effect",
    "overflow_bay_effect",
    "overflow_effect",
    "patients_per_year",
    "pool_wards",
    "pooling_effect",
    "share_beds",
    "spared_by_next_bed",
]
