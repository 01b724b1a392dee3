"""Pictures: specs built once at import, and the named datasets that move in them. No page code.

A spec never changes between reruns: everything that moves travels in a dataset, so the browser redraws in place.
"""

from bedplan.charts.curve import CURVE, curve_data
from bedplan.charts.last_year import CHECK, WEEK, check_data, week_data
from bedplan.charts.months import MONTHS, months_data
from bedplan.charts.steps import STEPS, steps_data
from bedplan.charts.style import Datasets, Spec, live, printed

__all__ = [
    "CHECK",
    "CURVE",
    "MONTHS",
    "STEPS",
    "WEEK",
    "Datasets",
    "Spec",
    "check_data",
    "curve_data",
    "live",
    "months_data",
    "printed",
    "steps_data",
    "week_data",
]
