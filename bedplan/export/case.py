"""One ward's case: its curves, the figure its limit watches, and the decision."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from bedplan import wording
from bedplan.decision import OverfullLimit, WaitLimit, decide
from bedplan.errors import BedplanError, TargetOutOfReach
from bedplan.models import MODELS

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from numpy.typing import NDArray

    from bedplan.data import Backtest
    from bedplan.decision import Decision, Rule, Ward
    from bedplan.models import BedCurve

DAYS_PER_YEAR = 365.0
# the models that say nothing about such a ward, or would slow a slider for a line that nobody asked for
LEFT_OUT = {"leaves": {"waiting"}, "waits": {"seasonal_loss", "waiting"}}
ALIKE = 0.02  # months this near each other have no worst one worth naming


@dataclass(frozen=True, slots=True, eq=False)
class WardCase:
    """One ward's case: the ward, its models' curves, the limit, the decision (None where out of reach), what it rests on.

    ``assumptions`` are (what, value, where from); ``settings`` (slider, value). ``checked`` says what
    came of the check on last year; ``check`` holds it, where one could be made. The figure that the limit watches, for
    each bed count of the ward's own curve, is ``over_year`` ``(n,)`` and ``by_month`` ``(12, n)``.
    """

    ward: Ward
    curves: Mapping[str, BedCurve]
    rule: Rule
    decision: Decision | None
    assumptions: tuple[tuple[str, str, str], ...] = ()
    settings: tuple[tuple[str, str], ...] = ()
    checked: str = wording.NOT_YET_CHECKED
    check: Backtest | None = None

    @property
    def model(self) -> str:
        """The name of the model the answer is read on: the ward's own, or the one that knows waits."""
        return "waiting" if isinstance(self.rule, WaitLimit) else self.ward.model

    @property
    def curve(self) -> BedCurve:
        """The curve of that model."""
        return self.curves[self.model]

    @property
    def over_year(self) -> NDArray[np.float64]:
        """The watched figure over the year, for each bed count."""
        return self.rule.over_year(self.curve)

    @property
    def by_month(self) -> NDArray[np.float64]:
        """The watched figure in each month, January first, for each bed count."""
        return self.rule.by_month(self.curve)

    @property
    def compared(self) -> tuple[str, ...]:
        """The models whose share without a free bed is shown beside the watched figure: all that say something else."""
        same = np.array_equal(self.over_year, self.curve.turn_away_probability)
        return tuple(name for name in self.curves if name != self.model or not same)

    @property
    def within(self) -> str:
        """Whether the limit holds for the year or for every month."""
        return getattr(self.rule, "within", "year")

    @property
    def words(self) -> tuple[str, str, str]:
        """How the figure is said: after "1 in 20", in the short sentence, and as a heading."""
        if isinstance(self.rule, OverfullLimit):
            return wording.OVER_FULL
        if isinstance(self.rule, WaitLimit):
            return wording.waits_over(self.rule.hours)
        return wording.WHEN_FULL[self.curve.when_full]

    def months_at(self, beds: int) -> NDArray[np.float64]:
        """Return the watched figure in each month at one bed count, ``(12,)``."""
        return self.by_month[:, int(np.searchsorted(self.curve.beds, beds))]

    def share_at(self, beds: int) -> float:
        """Return the watched figure over the year at one bed count."""
        return float(self.over_year[int(np.searchsorted(self.curve.beds, beds))])

    def count_a_year(self, beds: int) -> float:
        """Return the watched figure as patients a year, or as days' worth of over-full hours a year."""
        each_day = 1.0 if isinstance(self.rule, OverfullLimit) else self.ward.demand.total_arrivals_per_day
        return self.share_at(beds) * DAYS_PER_YEAR * each_day

    def a_year(self, beds: int) -> str:
        """Say that count."""
        said = wording.patients_per_year(self.count_a_year(beds))
        return f"{said} days" if isinstance(self.rule, OverfullLimit) else said

    @property
    def beds_are_known(self) -> bool:
        """Did the records, a file of beds or the planner say how many beds are staffed today?"""
        return wording.BEDS_UNKNOWN not in self.ward.notes

    def sentence(self) -> str:
        """Say the answer in at most 30 words."""
        months = self.months_at(self.ward.beds)
        worst = int(np.argmax(months))
        needed = None if self.decision is None else self.decision.beds
        return wording.answer_sentence(
            self.ward.name,
            (self.ward.beds if self.beds_are_known else None, self.ward.average_formula_beds, needed),
            (self.rule.most, self.words[1], self.within),
            (None if _are_alike(months) else worst, float(months[worst])),
        )

    def marked(self) -> dict[str, int | None]:
        """Return the bed counts to mark on a chart."""
        return {
            "today": self.ward.beds,
            "average formula": self.ward.average_formula_beds,
            "by the limit": None if self.decision is None else self.decision.beds,
        }

    def months(self) -> dict[str, tuple[int, NDArray[np.float64]]]:
        """Return (beds, the watched figure in each month) for each marked bed count."""
        return {mark: (beds, self.months_at(beds)) for mark, beds in self.marked().items() if beds is not None}

    def limit(self) -> tuple[float, str]:
        """Return the limit as drawn: its share and its label."""
        return self.rule.most, f"limit: {wording.one_in(self.rule.most)}"

    def table(self) -> list[dict[str, str]]:
        """Return today's, the formula's and the limit's bed counts side by side, in words."""
        return [self._row(mark, beds) for mark, beds in self.marked().items() if beds is not None]

    def _row(self, mark: str, beds: int) -> dict[str, str]:
        months, share = self.months_at(beds), self.share_at(beds)
        worst, best = (
            wording.percent(float(months[at])) if _are_alike(months) else wording.in_month(at, float(months[at]))
            for at in (int(np.argmax(months)), int(np.argmin(months)))
        )
        return {
            "": mark.capitalize() if mark != "today" or self.beds_are_known else "Today, assumed",
            "Staffed beds": str(beds),
            "A year": self.a_year(beds),
            "As a share": wording.percent(share),
            "In words": wording.one_in(share),
            "Highest month": worst,
            "Lowest month": best,
            "Occupancy that results": wording.percent(self.curve.at(beds).occupancy, 0),
        }

    def notes(self) -> tuple[str, ...]:
        """Return the notes of the ward and of its curve, each once."""
        found = [*self.ward.notes, *self.curve.notes]
        if self.model == "unlimited_beds":
            found.append(
                "Patients who find the ward full are taken to be placed elsewhere at once. If they wait in line instead, more "
                "find it full than this says: set the limit on waits to plan for that."
            )
        return tuple(dict.fromkeys(found))


def _are_alike(months: NDArray[np.float64]) -> bool:
    """Are the figures of these months so near one another that none is worth naming?"""
    return float(np.ptp(months)) <= ALIKE * float(months.max())


def with_check(case: WardCase, check: Callable[[], Backtest]) -> WardCase:
    """What came of checking this ward on its last year? The case with the verdict, or with the reason why there is none.

    Checked by: tests/export/test_check_on_paper.py
    """
    try:
        found = check()
    except BedplanError as error:
        return replace(case, checked=f"{wording.NOT_YET_CHECKED} {error}", check=None)
    return replace(case, checked=found.verdict, check=found if found.checked else None)


def case_for(
    ward: Ward,
    rule: Rule,
    assumptions: tuple[tuple[str, str, str], ...] = (),
    settings: tuple[tuple[str, str], ...] = (),
) -> WardCase:
    """What is the case for this ward under this limit? The curves that say something about it, and the decision on its own.

    Raises:
        ImpossibleFigure: the limit watches a figure that the ward's model does not know.

    Checked by: tests/export/test_justification.py
    """
    left_out = LEFT_OUT[ward.when_full] - ({"waiting"} if isinstance(rule, WaitLimit) else set())
    curves = {model: ward.curve(model) for model in MODELS if model not in left_out}
    case = WardCase(ward, curves, rule, None, assumptions, settings)
    try:
        decision = decide(case.curve, rule)
    except TargetOutOfReach:
        decision = None
    return WardCase(ward, curves, rule, decision, assumptions, settings)
