"""Pictures: specs built once at import, and the named datasets that move in them. No page code.

A spec never changes between reruns: everything that moves travels in a dataset, so the browser redraws in place.
"""

from bedplan.charts.calibration import CALIBRATION, calibration_data
from bedplan.charts.curve import CURVE, curve_data
from bedplan.charts.fan import FAN, fan_data
from bedplan.charts.last_year import CHECK, WEEK, YEAR, check_data, week_data, year_data
from bedplan.charts.months import MONTHS, months_data
from bedplan.charts.stays import STAYS, stays_data
from bedplan.charts.steps import STEPS, steps_data
from bedplan.charts.style import Datasets, Spec, live, printed

__all__ = [
    "CALIBRATION",
    "CHECK",
    "CURVE",
    "FAN",
    "MONTHS",
    "STAYS",
    "STEPS",
    "WEEK",
    "YEAR",
    "Datasets",
    "Spec",
    "calibration_data",
    "check_data",
    "curve_data",
    "fan_data",
    "live",
    "months_data",
    "printed",
    "stays_data",
    "steps_data",
    "week_data",
    "year_data",
]
