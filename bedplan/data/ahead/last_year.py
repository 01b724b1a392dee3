"""What came of checking a ward on its last year: figures, a verdict in one sentence, and what belongs beside it."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import pandas as pd

from bedplan import wording

if TYPE_CHECKING:
    from collections.abc import Iterator

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
class Backtest:
    """How well a ward's last year was told by what was known before.

    ``checked`` False: it could not be; the figures are 0 and the verdict gives ``reason``. ``coverage_80`` and
    ``coverage_95``: share of days inside the band, a day whose count lies on its edge counting in part, with the
    ``…_range`` that chance allows (95 %). ``year_ahead_80``, ``year_ahead_95``: the same, told a whole year ahead.
    ``above_80``: share of days above the 80 % band, where 10 % are promised, ``above_95`` above the 95 % band;
    ``year_ahead_above_80`` the same as the first, a year ahead. ``calibration``: (level, share of days inside), ``calibration_ranges`` what chance allows each (95 %).
    ``score``: ranked probability score of what was told; the ``…_error`` are mean misses of one number; all in beds. ``days``: a row a day: date, present, low, middle, high
    (80 %), low_95, high_95, same_week_last_year, counted. ``months``: (first day, share inside the 80 % band).
    ``left_out_because``: why days are left out, ``silences``: in which nobody came, both in words.
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
    above_80: float = 0.0
    above_95: float = 0.0
    year_ahead_above_80: float = 0.0
    calibration: tuple[Range, ...] = ()
    calibration_ranges: tuple[Range, ...] = ()
    score: float = 0.0
    middle_error: float = 0.0
    same_week_error: float = 0.0
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

    @property
    def figures(self) -> tuple[tuple[str, str, str], ...]:
        """What does the check rest on? (what, last year's figure, what to hold it against); nothing where not checked."""
        return tuple(_figures(self)) if self.checked else ()

    @property
    def promise(self) -> str:
        """Did the bands keep what they promised, at every width? One sentence; empty where not checked."""
        return _promise(self.kept) if self.checked else ""

    @property
    def headline(self) -> str:
        """What came of it, in a line that can be read from afar?"""
        return _headline(self) if self.checked else f"{self.ward} cannot be checked on last year."

    @property
    def verdict(self) -> str:
        """What came of it, in one sentence?"""
        return _verdict(self) if self.checked else f"Cannot be checked on last year: {self.reason}"

    @property
    def notes(self) -> tuple[str, ...]:
        """What belongs beside the verdict?"""
        return tuple(_notes(self)) if self.checked else ()


def _promise(kept: tuple[KeptBand, ...]) -> str:
    """Say how many bands kept what they promised; of those that didn't, the widest."""
    said = []
    for outcome in ("fewer", "more"):
        off = [band for band in kept if band.outcome == outcome]
        if off:
            widest = f"the {wording.percent(off[-1].promised)} band {wording.percent(off[-1].held)}"
            said.append(f"{len(off)} held {outcome} days ({'' if len(off) == 1 else 'among them '}{widest})")
    count = len(kept) - sum(band.outcome != "kept" for band in kept)
    number = f"All {count}" if not said else f"{count or 'None'} of {len(kept)}"
    return "; ".join((f"{number} bands kept what they promised, allowing for chance", *said)) + "."


def _figures(result: Backtest) -> Iterator[tuple[str, str, str]]:
    """Yield a row a figure."""
    for band in (
        KeptBand(BAND, result.coverage_80, *result.coverage_80_range),
        result.wide,
    ):
        promised, held, low, high = map(wording.percent, (band.promised, band.held, band.low, band.high))
        told = {"kept": "keeps", "fewer": "fewer than", "more": "more than"}[band.outcome]
        yield (
            f"Days inside the {promised} band",
            held,
            f"{low} to {high} allowing for chance: {told} the {promised} promised",
        )
    promised = wording.percent((1.0 - BAND) / 2.0)
    yield f"Days above the {wording.percent(BAND)} band", wording.percent(result.above_80), f"{promised} promised"
    yield (
        f"Days inside the {wording.percent(BAND)} band, told a year ahead",
        wording.percent(result.year_ahead_80),
        f"at least {wording.percent(LEAST_A_YEAR_AHEAD)} asked",
    )
    others = (
        ("the same week of the year before", result.same_week_error),
        ("the average formula", result.average_formula_error),
    )
    beside = "; ".join(f"{_nearer(result.score, error)} than {name}" for name, error in others)
    yield "Beds off on an average day: the whole band (ranked score)", f"{result.score:.1f}", beside
    yield "… the middle of the band", f"{result.middle_error:.1f}", ""
    for name, error in others:
        yield f"… {name}", f"{error:.1f}", ""


def _nearer(score: float, other: float) -> str:
    """Say how much nearer a score is than another."""
    if other <= 0:
        return "no nearer"
    return f"{wording.percent(abs(1.0 - score / other))} {'nearer' if score < other else 'further off'}"


def _found(result: Backtest) -> str:
    """Say whether the 80 % band held as often as it should, and to which side the days outside it lie."""
    low, high = result.coverage_80_range
    if result.passed_80:
        return "as often as it should, allowing for chance"
    if high < BAND:
        return f"too seldom: {_lean(result.above_80, result.coverage_80)}"
    if low <= BAND:
        return (
            f"but told a whole year ahead only {wording.percent(result.year_ahead_80)}: the ward changed in a way its past "
            f"did not show; {_lean(result.year_ahead_above_80, result.year_ahead_80)}"
        )
    return "more often than it should: this ward swings less than assumed, so its band could be narrower"


def _lean(above: float, inside: float) -> str:
    """Say what to make of the days outside a band: most above it are a warning, most below it are not."""
    if above < 1.0 - inside - above:
        return "most days outside it had fewer patients than told"
    return "plan this ward with more room than its curve shows"


def _headline(result: Backtest) -> str:
    """Say whether it passed, and by which share of days: told a year ahead where that is why it failed."""
    low, high = result.coverage_80_range
    ahead = not result.passed and low <= BAND <= high
    share = wording.percent(result.year_ahead_80 if ahead else result.coverage_80)
    days = f"told a year ahead, {share}" if ahead else share
    return (
        f"{result.ward} {'passed' if result.passed else 'failed'}: {days} of last year's days lay in the band meant to hold "
        f"{wording.percent(BAND)}."
    )


def _verdict(result: Backtest) -> str:
    """Say what came of it, in one sentence."""
    outcome = "Passed" if result.passed else "Passed in part" if result.passed_80 else "Failed"
    full = (
        f"; its beds were full at {wording.percent(result.full_share or 0.0)} of earlier readings, so this checks what "
        "beds allowed, not what was wanted"
        if result.is_often_full
        else ""
    )
    return (
        f"{outcome}: told from earlier records only, the {wording.percent(BAND)} band held "
        f"{wording.percent(result.coverage_80)} of last year's days, {_found(result)}{_wide(result)}; it was "
        f"{_nearer(result.score, result.same_week_error)} than the same week of the year before and "
        f"{_nearer(result.score, result.average_formula_error)} than the average formula{full}."
    )


def _wide(result: Backtest) -> str:
    """Say where the wide band did not hold what it promised; nothing where it did."""
    band = result.wide
    if band.outcome == "kept":
        return ""
    lean = f": {_lean(result.above_95, band.held)}" if band.outcome == "fewer" else ""
    return (
        f"; the {wording.percent(WIDE_BAND)} band held {wording.percent(band.held)}, {band.outcome} than promised even "
        f"allowing for chance{lean}"
    )


def _notes(result: Backtest) -> Iterator[str]:
    """Yield what belongs beside the verdict."""
    yield f"Patients in beds at {result.clock}; each of the 12 months predicted from what was known when it began."
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
        because = " and ".join(result.left_out_because)
        yield f"{result.days_left_out} days of the year are left out{', ' if because else ''}{because}."
    yield from result.silences
