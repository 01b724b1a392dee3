"""What came of checking a ward on its last year: every figure of it, and whether it passed."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import pandas as pd

if TYPE_CHECKING:
    from bedplan.data.ahead.chances import WhenFull

    Range = tuple[float, float]

BAND, WIDE_BAND = 0.80, 0.95
LEAST_A_YEAR_AHEAD = 0.60  # of days, for an 80 % band; common practice, no source
OFTEN_FULL = 0.10  # of readings: from there on beds shape the census at least as much as demand


@dataclass(frozen=True, slots=True)
class KeptBand:
    """One width of band: the share of days it promised, the share it held, and between which shares chance allows."""

    promised: float
    held: float
    low: float
    high: float

    @property
    def outcome(self) -> str:
        """Did it hold ``"fewer"`` or ``"more"`` days than promised, or was it ``"kept"``, allowing for chance?"""
        return "fewer" if self.high < self.promised else "more" if self.low > self.promised else "kept"


@dataclass(frozen=True, slots=True, eq=False)
class LastYear:
    """How well a ward's last year was told by what was known before.

    ``checked`` False: it could not be; the figures are 0 and the verdict gives ``reason``. ``coverage_80`` and
    ``coverage_95``: share of days inside the band, a day whose count lies on its edge counting in part, with the
    ``…_range`` that chance allows (95 %); ``drawn_80``: share of days inside the 80 % band as it is drawn, in whole
    patients. ``year_ahead_80``, ``year_ahead_95``: told a whole year ahead. ``above_80``: share of days above the 80 %
    band, where 10 % are promised, ``above_95`` above the 95 % band; ``year_ahead_above_80`` the same as the first, a
    year ahead. ``calibration``: (level, share of days inside), ``calibration_ranges`` what chance allows each (95 %).
    ``score``: ranked probability score of what was told, ``same_week_score`` and ``average_formula_score`` of plainer
    ways with bands of their own; the ``…_error`` are mean misses of one number; all in beds, on the same days, without
    those whose same week of the year before is left out (where that leaves any). ``days``: a row a day: date, present,
    low, middle, high (80 %), low_95, high_95, same_week_last_year, counted. ``months``: (first day, share inside the
    80 % band).
    ``left_out_because``: why days are left out, ``silences``: in which nobody came, both in words.
    ``full_share``: readings before the year at which no open bed was free; None without capacity.
    """

    ward: str
    checked: bool
    reason: str = ""
    reading_hour: int = 0
    coverage_80: float = 0.0
    coverage_95: float = 0.0
    drawn_80: float = 0.0
    coverage_80_range: Range = (0.0, 0.0)
    coverage_95_range: Range = (0.0, 0.0)
    year_ahead_80: float = 0.0
    year_ahead_95: float = 0.0
    above_80: float = 0.0
    above_95: float = 0.0
    year_ahead_above_80: float = 0.0
    calibration: tuple[Range, ...] = ()
    calibration_ranges: tuple[Range, ...] = ()
    score: float = 0.0
    middle_error: float = 0.0
    same_week_score: float = 0.0
    same_week_error: float = 0.0
    average_formula_score: float = 0.0
    average_formula_error: float = 0.0
    average_formula_beds: int = 0
    days_above_average_formula: int = 0
    days_left_out: int = 0
    left_out_because: tuple[str, ...] = ()
    silences: tuple[str, ...] = ()
    full_share: float | None = None
    when_full: WhenFull = "stays anyway"
    methods: tuple[str, ...] = ()
    months: tuple[tuple[pd.Timestamp, float], ...] = ()
    days: pd.DataFrame = field(default_factory=pd.DataFrame)

    @property
    def passed(self) -> bool:
        """Did both bands hold what they promised, and the 80 % band, told a year ahead, still most days?"""
        return self.passed_80 and self.wide.outcome != "fewer"

    @property
    def passed_80(self) -> bool:
        """Did the 80 % band hold as many days as chance allows, and told a year ahead still most of them?"""
        low, high = self.coverage_80_range
        return self.checked and low <= BAND <= high and self.year_ahead_80 >= LEAST_A_YEAR_AHEAD

    @property
    def needs_beds(self) -> bool:
        """Did the 80 % band hold more days than chance allows, as it does on full wards, and no beds tell whether this is one?"""
        return self.full_share is None and self.coverage_80_range[0] > BAND

    @property
    def outcome(self) -> str:
        """How did it end, in a word or two?"""
        if self.needs_beds:
            return "not judged"
        return "passed" if self.passed else "passed in part" if self.passed_80 else "failed"

    @property
    def wide(self) -> KeptBand:
        """How did the 95 % band keep its promise?"""
        return KeptBand(WIDE_BAND, self.coverage_95, *self.coverage_95_range)

    @property
    def is_often_full(self) -> bool:
        """Was the ward full so often that its beds, not its demand, shape the census?"""
        return self.full_share is not None and self.full_share > OFTEN_FULL

    @property
    def clock(self) -> str:
        """At which time of day are patients counted?"""
        return f"{self.reading_hour:02d}:00" if self.reading_hour else "midnight"

    @property
    def kept(self) -> tuple[KeptBand, ...]:
        """How did each band keep its promise?"""
        return tuple(
            KeptBand(*pair, *between) for pair, between in zip(self.calibration, self.calibration_ranges, strict=True)
        )
