"""A plan as a file: settings, typed totals and answers about the records; never a row or a count of rows."""

from __future__ import annotations

import json
import math
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any

from bedplan import wording
from bedplan.errors import ImpossibleFigure, UnreadableRecords
from bedplan.models import LengthOfStay
from bedplan.plan.answers import Answers, FileAnswers, saved_answers, saved_file_answers
from bedplan.plan.baseline import Baseline, from_totals

if TYPE_CHECKING:
    from collections.abc import Mapping

PLAN_FORMAT = 1
TOTALS = ("admissions_per_year", "arrivals_per_day", "mean_days", "variation", "beds", "rate_variation")


@dataclass(frozen=True, slots=True)
class SavedPlan:
    """What a plan file holds: settings, typed totals and answers about the records; never a row or a count of rows.

    ``settings``: ward → its inputs; ``typed``: ward → typed totals; ``answers``: how the ward stays were to be read;
    ``limit``: its size, what it watches and when it holds; ``records``: the fingerprint of the stays it was made with;
    ``files``: the fingerprint of a file beside them → what was said of it.
    """

    records: str
    settings: Mapping[str, Mapping[str, str | float]]
    typed: Mapping[str, Mapping[str, Any]]
    answers: Answers = field(default_factory=Answers)
    limit: Mapping[str, str | float] = field(default_factory=dict)
    files: Mapping[str, FileAnswers] = field(default_factory=dict)


def as_json(plan: SavedPlan) -> str:
    """How is a plan kept in a file? JSON with every setting, changed or not.

    Checked by: tests/test_plan.py
    """
    held = {
        "plan": PLAN_FORMAT,
        "records": plan.records,
        "settings": plan.settings,
        "typed": plan.typed,
        "answers": plan.answers.as_saved(),
        "limit": plan.limit,
        "files": {mark: said.as_saved() for mark, said in plan.files.items()},
    }
    return json.dumps(held, indent=1, ensure_ascii=False, default=dict)


def from_json(text: str | bytes) -> SavedPlan:
    """What does a plan file say?

    Raises:
        UnreadableRecords: it is not a plan file, or one of a later version.
        ImpossibleFigure: an answer about the file that nobody knows, such as a kind of place.

    Checked by: tests/test_plan.py
    """
    try:
        held = json.loads(text)
        version = held.pop("plan")
        reasons = dict(held.pop("reasons", {}))  # an earlier plan kept nothing else of these files
        plan = SavedPlan(**held)
        settings = {str(name): dict(values) for name, values in plan.settings.items()}
        typed = {str(name): _typed(row) for name, row in plan.typed.items()}
        answers = saved_answers(plan.answers)
        limit = dict(plan.limit)
        said = {mark: {"no_bed_reasons": one} for mark, one in reasons.items()} | dict(plan.files)
        files = {str(mark): saved_file_answers(one) for mark, one in said.items()}
    except ImpossibleFigure:
        raise
    except (ValueError, TypeError, AttributeError, KeyError) as problem:
        raise UnreadableRecords(
            ["This is not a plan saved by bedplan: choose a file that “Save this plan” wrote."]
        ) from problem
    if version != PLAN_FORMAT:
        raise UnreadableRecords([f"This plan has format {version}; this program reads format {PLAN_FORMAT}."])
    return SavedPlan(str(plan.records), settings, typed, answers, limit, files)


def _typed(row: Mapping[str, Any]) -> dict[str, Any]:
    """Return one ward's totals: finite figures, its month factors and where they came from."""
    held = {"arrivals_per_day": row["admissions_per_year"] / 365.0, "rate_variation": 0.0} | dict(row)
    figures = {key: float(held[key]) for key in TOTALS}
    months = [float(factor) for factor in row.get("month_factors", ())]
    if not all(math.isfinite(figure) for figure in (*figures.values(), *months)):
        raise ValueError("a figure without end")
    known = row.get("beds_known", True) is not False
    return {**figures, "month_factors": months, "origin": str(row.get("origin", "")), "beds_known": known}


def as_totals(ward: Baseline) -> dict[str, Any]:
    """Return a typed ward as the row of a plan file."""
    demand, stay = ward.demand, ward.demand.length_of_stay
    figures = (
        ward.admissions_per_year,
        demand.arrivals_per_day,
        stay.mean_days,
        stay.variation,
        ward.beds,
        demand.rate_variation,
    )
    others = {
        "month_factors": list(demand.month_factors),
        "origin": ward.origin,
        "beds_known": wording.BEDS_UNKNOWN not in ward.notes,
    }
    return dict(zip(TOTALS, figures, strict=True)) | others


def from_saved_totals(name: str, row: Mapping[str, Any]) -> Baseline:
    """Return the typed ward that such a row holds.

    Raises:
        ImpossibleFigure: figures outside their meaning.
    """
    stay = LengthOfStay(row["mean_days"], row["variation"])
    ward = from_totals(name, row["admissions_per_year"], stay, round(row["beds"]))
    months = tuple(row["month_factors"]) or ward.demand.month_factors
    demand = ward.demand.with_changes(
        arrivals_per_day=row["arrivals_per_day"], month_factors=months, rate_variation=row["rate_variation"]
    )
    unknown = () if row["beds_known"] else (wording.BEDS_UNKNOWN,)
    return replace(ward, demand=demand, origin=row["origin"] or ward.origin, notes=(*ward.notes, *unknown))
