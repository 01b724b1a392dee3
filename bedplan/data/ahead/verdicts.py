"""The check on last year in words: each figure, what the bands kept, and a verdict in one sentence."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from bedplan import wording
from bedplan.data.ahead.last_year import BAND, LEAST_A_YEAR_AHEAD, WIDE_BAND, KeptBand, LastYear

if TYPE_CHECKING:
    from collections.abc import Iterator

HARDLY = 0.005  # of a score: nearer or further off by less is neither


@dataclass(frozen=True, slots=True, eq=False)
class Backtest(LastYear):
    """How well a ward's last year was told by what was known before, with what is to be said of it."""

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


def _figures(result: LastYear) -> Iterator[tuple[str, str, str]]:
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
    beside = "; ".join(f"{_nearer(result.score, score)} {name} ({score:.1f})" for name, score, _ in _others(result))
    yield "Beds off on an average day: the whole band (ranked score)", f"{result.score:.1f}", beside
    beside = "; ".join(f"{name.split(', with')[0]} {error:.1f}" for name, _, error in _others(result))
    yield "Beds off on an average day: one number, the middle of the band", f"{result.middle_error:.1f}", beside


def _others(result: LastYear) -> tuple[tuple[str, float, float], ...]:
    """Return (plainer way, its ranked score, how far its one number was off)."""
    return (
        (
            "the same week of the year before, with the band of its past errors",
            result.same_week_score,
            result.same_week_error,
        ),
        ("the average formula, with the band of chance", result.average_formula_score, result.average_formula_error),
    )


def _nearer(score: float, other: float) -> str:
    """Say how much nearer a score is than another's."""
    if other <= 0:
        return "no nearer than"
    if abs(1.0 - score / other) < HARDLY:
        return "as near as"
    return f"{wording.percent(abs(1.0 - score / other))} {'nearer' if score < other else 'further off'} than"


def _found(result: LastYear) -> str:
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
    if result.needs_beds:
        return (
            "more often than it should: a ward that is often full shows that, and so does one that swings less than "
            "assumed; a file of staffed beds is needed to judge"
        )
    if result.is_often_full:
        return "more often than it should: full beds hold the count steady, which says nothing of what is wanted"
    return "more often than it should: this ward swings less than assumed, so its band could be narrower"


def _lean(above: float, inside: float) -> str:
    """Say what to make of the days outside a band: most above it are a warning, most below it are not."""
    if above < 1.0 - inside - above:
        return "most days outside it had fewer patients than told"
    return "plan this ward with more room than its curve shows"


def _headline(result: LastYear) -> str:
    """Say what came of it, and by which share of days: of the band that decided it."""
    low, _ = result.coverage_80_range
    promised, share, days = BAND, result.coverage_80, ""
    if result.outcome == "passed in part":
        promised, share = WIDE_BAND, result.coverage_95
    elif result.outcome == "failed" and low <= BAND <= result.coverage_80_range[1]:
        share, days = result.year_ahead_80, "told a year ahead, "
    outcome = "cannot be judged without its staffed beds" if result.needs_beds else result.outcome
    return (
        f"{result.ward} {outcome}: {days}{wording.percent(share)} of last year's days lay in the band meant to hold "
        f"{wording.percent(promised)}, days on its edge counted in part."
    )


def _verdict(result: LastYear) -> str:
    """Say what came of it, against what, and what it can't tell."""
    full = (
        f" Its beds were full at {wording.percent(result.full_share or 0.0)} of earlier readings, so this checks what "
        "beds allowed, not what was wanted."
        if result.is_often_full
        else ""
    )
    nearer = " and ".join(
        f"{_nearer(result.score, score)} {name.split(', with')[0]}" for name, score, _ in _others(result)
    )
    return (
        f"{result.outcome.capitalize()}: told from earlier records only, the {wording.percent(BAND)} band held "
        f"{wording.percent(result.coverage_80)} of last year's days ({wording.percent(result.drawn_80)} as drawn, in whole "
        f"patients), {_found(result)}{_wide(result)}. Band against band it was {nearer}.{full}"
    )


def _wide(result: LastYear) -> str:
    """Say where the wide band did not hold what it promised; nothing where it did."""
    band = result.wide
    if band.outcome == "kept":
        return ""
    lean = f": {_lean(result.above_95, band.held)}" if band.outcome == "fewer" else ""
    return (
        f"; the {wording.percent(WIDE_BAND)} band held {wording.percent(band.held)}, {band.outcome} than promised even "
        f"allowing for chance{lean}"
    )


def _notes(result: LastYear) -> Iterator[str]:
    """Yield what belongs beside the verdict."""
    yield f"Patients in beds at {result.clock}; each of the 12 months predicted from what was known when it began."
    yield (
        "A day whose count lies on the edge of the band counts in part, because whole patients can't cut it exactly; the "
        f"band in the picture takes all of its edges in, and holds {wording.percent(result.drawn_80)} of the days."
    )
    yield (
        "The ranked score measures whole bands, in beds: the same week of the year before has the band of its past errors "
        "(of chance, while fewer than a quarter of a year is known), the average formula that of chance (Poisson), and "
        "both end at the beds where this one does."
    )
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
