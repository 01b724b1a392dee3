"""A plan: what the records say about each ward, what the planner changed, and both as a file. No patient rows."""

from bedplan.plan.answers import NO_COLUMN, Answers, FileAnswers
from bedplan.plan.baseline import (
    Baseline,
    Changes,
    changed_demand,
    changed_stay,
    from_census,
    from_estimate,
    from_return,
    from_totals,
    peaked,
    planned_ward,
)
from bedplan.plan.saving import SavedPlan, as_json, as_totals, from_json, from_saved_totals

__all__ = [
    "NO_COLUMN",
    "Answers",
    "Baseline",
    "Changes",
    "FileAnswers",
    "SavedPlan",
    "as_json",
    "as_totals",
    "changed_demand",
    "changed_stay",
    "from_census",
    "from_estimate",
    "from_json",
    "from_return",
    "from_saved_totals",
    "from_totals",
    "peaked",
    "planned_ward",
]
