"""What came of checking a ward on its last year: figures, a verdict in one sentence, and what belongs beside it."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import pandas as pd

from bedplan import wording

if TYPE_CHECKING:
    from collections.abc import Iterator

    from bedplan.data.chances import WhenFull

    Range = tuple[float, float]

BAND, WIDE_BAND = 0.80, 0.95
LEAST_A_YEAR_AHEAD = 0.60  # of days, for an 80 % band; common practice, no source
OFTEN_FULL = 0.10  # of readings: from there on beds shape the census at least as much as demand


@dataclass(frozen=True, slots=True, eq=False)
class Backtest:
    """How well a ward's last year was told by what was known before.

    ``checked`` False: it could not be; the figures are 0 and the verdict gives ``reason``. ``coverage_80`` and
    ``coverage_95``: share of days inside the band, a day whose count lies on its edge counting in part, with the
    ``…_range`` that chance allows (95 %). ``year_ahead_80``, ``year_ahead_95``: the same, told a whole year ahead.
    ``calibration``: (level, share of days inside). ``score``: ranked probability score of what was told; the
    ``…_error`` are mean misses of one number; all in beds. ``days``: a row a day: date, present, low, middle, high
    (80 %), low_95, high_95, same_week_last_year, counted. ``months``: (first day, share inside the 80 % band).
    ``full_share``: readings before the year at which no open bed was free; None without capacity.
    """

    ward: str
    checked: bool
    reason: str = ""
    reading_hour: int = 0
    coverage_80: float = 0.0
    coverage_95: float = 0.0
    coverage_80_range: Range = (0.0, 0.0)
    coverage_95_range: Range = (0.0, 0.0)
    year_ahead_80: float = 0.0
    year_ahead_95: float = 0.0
    calibration: tuple[Range, ...] = ()
    score: float = 0.0
    middle_error: float = 0.0
    same_week_error: float = 0.0
    average_formula_error: float = 0.0
    average_formula_beds: int = 0
    days_above_average_formula: int = 0
    days_left_out: int = 0
    full_share: float | None = None
    when_full: WhenFull = "stays anyway"
    methods: tuple[str, ...] = ()
    months: tuple[tuple[pd.Timestamp, float], ...] = ()
    days: pd.DataFrame = field(default_factory=pd.DataFrame)

    @property
    def passed(self) -> bool:
        """Did the 80 % band hold as many days as chance allows, and told a year ahead still most of them?"""
        low, high = self.coverage_80_range
        return self.checked and low <= BAND <= high and self.year_ahead_80 >= LEAST_A_YEAR_AHEAD

    @property
    def is_often_full(self) -> bool:
        """Was the ward full so often that its beds, not its demand, shape the census?"""
        return self.full_share is not None and self.full_share > OFTEN_FULL

    @property
    def clock(self) -> str:
        """At which time of day are patients counted?"""
        return f"{self.reading_hour:02d}:00" if self.reading_hour else "midnight"

    @property
    def verdict(self) -> str:
        """What came of it, in one sentence?"""
        return _verdict(self) if self.checked else f"Cannot be checked on last year: {self.reason}"

    @property
    def notes(self) -> tuple[str, ...]:
        """What belongs beside the verdict?"""
        return tuple(_notes(self)) if self.checked else ()


def _found(result: Backtest) -> str:
    """Say whether the 80 % band held as often as it should."""
    low, high = result.coverage_80_range
    if result.passed:
        return "as often as it should, allowing for chance"
    if high < BAND:
        return "too seldom: plan this ward with more room than its curve shows"
    if low <= BAND:
        return (
            f"but told a whole year ahead only {wording.percent(result.year_ahead_80)}: the ward changed in a way its past "
            "did not show, so plan it with more room than its curve shows"
        )
    return "more often than it should: this ward swings less than assumed, so its band could be narrower"


def _verdict(result: Backtest) -> str:
    """Say what came of it, in one sentence."""
    full = (
        f"; its beds were full at {wording.percent(result.full_share or 0.0)} of earlier readings, so this checks what "
        "beds allowed, not what was wanted"
        if result.is_often_full
        else ""
    )
    return (
        f"{'Passed' if result.passed else 'Failed'}: trained only on earlier records, the {wording.percent(BAND)} band held "
        f"{wording.percent(result.coverage_80)} of last year's days, {_found(result)}; its middle was "
        f"{result.middle_error:.1f} beds off on an average day, the same week of the year before "
        f"{result.same_week_error:.1f}, the average formula {result.average_formula_error:.1f}{full}."
    )


def _notes(result: Backtest) -> Iterator[str]:
    """Yield what belongs beside the verdict."""
    low, high = (wording.percent(share) for share in result.coverage_80_range)
    yield (
        f"Patients in beds at {result.clock}; each of the 12 months predicted from what was known when it began. Chance allows "
        f"{low} to {high}. A whole year ahead, the {wording.percent(BAND)} band held "
        f"{wording.percent(result.year_ahead_80)} of days and the {wording.percent(WIDE_BAND)} band "
        f"{wording.percent(result.year_ahead_95)}."
    )
    yield "A day whose count lies on the edge of the band counts in part, because whole patients can't cut it exactly."
    yield (
        f"The average formula's {wording.beds_text(result.average_formula_beds)} were passed on "
        f"{result.days_above_average_formula} days."
    )
    yield f"Arrivals were predicted by {' or '.join(result.methods)}."
    if result.full_share is None:
        yield "No beds by date were given, so the band does not end at them: where the ward is often full, it is too wide."
    else:
        yield "The band ends at the staffed beds of each day; closures of the year were not known to it."
    if result.is_often_full:
        yield (
            "Patients who went elsewhere because the ward was full are not in this check: it says nothing against a "
            "higher demand."
        )
    if result.middle_error >= min(result.same_week_error, result.average_formula_error):
        yield "One number, told by a plainer way, was as near on an average day as the middle of the band."
    if result.days_left_out:
        yield f"{result.days_left_out} days of the year are left out, as chosen for this file."
