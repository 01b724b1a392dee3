"""The justification of a bed count: facts and sentences, no format. Writers turn it into documents."""

from __future__ import annotations

import datetime as dt
import hashlib
from dataclasses import dataclass
from typing import TYPE_CHECKING

from bedplan import wording
from bedplan.errors import ImpossibleFigure

if TYPE_CHECKING:
    from bedplan.data import Check, Records
    from bedplan.export.case import WardCase

SMALLEST_COUNT_SHOWN = 8  # counts of 1 to 7 are withheld: common disclosure practice for health statistics


@dataclass(frozen=True, slots=True)
class Source:
    """Where the figures came from: the file as it was read, in counts only.

    ``reasons`` are (what was done and why, rows, bed-days). ``rows_in`` 0 means that no file of ward stays was read.
    ``others``: other files by name and fingerprint, and how the file was read. ``checks``: (what must agree, figures, verdict).
    """

    name: str
    fingerprint: str = ""
    window: str = ""
    rows_in: int = 0
    used: int = 0
    repaired: int = 0
    set_aside: int = 0
    reasons: tuple[tuple[str, int, float], ...] = ()
    notes: tuple[str, ...] = ()
    others: tuple[tuple[str, str], ...] = ()
    checks: tuple[tuple[str, str, str], ...] = ()

    @classmethod
    def from_records(
        cls, records: Records, others: tuple[tuple[str, str], ...] = (), checks: tuple[Check, ...] = ()
    ) -> Source:
        """Return what a document says about these records; ``others`` = (what, value) of whatever else shaped figures.

        ``checks``: whether the figures agree; those that rest on 1 to 7 rows or patients are withheld.

        Checked by: tests/export/test_justification.py
        """
        start, end = records.window[0], records.window[1] - dt.timedelta(seconds=1)
        report = records.report
        dropped = ", ".join(report.dropped_columns)
        about_dropped = (
            (f"Dropped as the file was read, because they may identify people: {dropped}.",) if dropped else ()
        )
        return cls(
            name=records.name,
            fingerprint=records.fingerprint,
            window=f"{wording.date(start)} to {wording.date(end)}",
            rows_in=report.rows_in,
            used=report.used,
            repaired=report.repaired,
            set_aside=report.set_aside,
            reasons=tuple((finding.sentence, finding.rows, finding.bed_days) for finding in report.findings),
            notes=(*about_dropped, *report.notes),
            others=others,
            checks=tuple((one.what, "*" if one.points_at_few else one.figures, one.verdict) for one in checks),
        )

    @property
    def withholds(self) -> bool:
        """Is any count withheld?"""
        few = (count_or_withheld(count) for count in (self.repaired, self.set_aside, *(row[1] for row in self.reasons)))
        return "*" in few or any(figures == "*" for _, figures, _ in self.checks)

    def sentences(self) -> tuple[str, ...]:
        """Say where the data came from."""
        if not self.rows_in:
            return (f"{self.name}; no file of ward stays was read.",)
        repaired, set_aside = count_or_withheld(self.repaired), count_or_withheld(self.set_aside)
        used = "*" if "*" in (repaired, set_aside) else f"{self.used:,}"
        counts = f"{self.rows_in:,} rows = {used} used + {repaired} repaired + {set_aside} set aside."
        return (f"{self.name}, covering {self.window}. {counts}", *self.notes)


def count_or_withheld(count: int) -> str:
    """Write a count of rows, or * where it is 1 to 7 and could point at a person.

    Checked by: tests/export/test_justification.py
    """
    return "*" if 0 < count < SMALLEST_COUNT_SHOWN else f"{count:,}"


@dataclass(frozen=True, slots=True, eq=False)
class Justification:
    """Everything a bed-count justification says, ready for any format.

    Raises:
        ImpossibleFigure: no ward to justify.
    """

    cases: tuple[WardCase, ...]
    source: Source
    prepared: dt.date

    def __post_init__(self) -> None:
        """A justification needs a ward."""
        if not self.cases:
            raise ImpossibleFigure("There is no ward to justify yet: choose one on the page One ward.")

    @property
    def title(self) -> str:
        """The document's heading."""
        names = ", ".join(case.ward.name for case in self.cases)
        return f"Staffed beds: {names}" if len(self.cases) <= 3 else f"Staffed beds for {len(self.cases)} wards"

    def decisions(self) -> tuple[tuple[str, str], ...]:
        """Return (what is asked for, what came of its check on last year) for each ward."""
        return tuple((self._ask(case), f"{case.ward.name}, check on last year: {case.checked}") for case in self.cases)

    def decision_lines(self) -> tuple[str, ...]:
        """Return the decision box line by line."""
        return tuple(line for decision in self.decisions() for line in decision)

    @staticmethod
    def _ask(case: WardCase) -> str:
        limit = wording.limit_text(case.rule.most, case.words[0], case.within)
        beds, known = case.ward.beds, case.beds_are_known
        today = case.a_year(beds)
        if case.decision is None:
            now = f"today's {beds}" if known else f"an assumed {beds}"
            return (
                f"{case.ward.name}: no bed count looked at keeps {limit}. "
                f"{case.words[2]}: with {now} staffed {'bed' if beds == 1 else 'beds'} {today} a year."
            )
        now = f"today {beds}" if known else f"today not known, {beds} assumed"
        instead = f" instead of {today}" if known else ""
        asked = case.decision.beds
        return (
            f"{case.ward.name}: approve {asked} staffed {'bed' if asked == 1 else 'beds'} ({now}) to keep {limit}. "
            f"{case.words[2]}: {case.a_year(asked)} a year{instead}."
        )

    def reproducibility(self) -> tuple[tuple[str, str], ...]:
        """Return what an auditor needs to get the same figures again, as (what, value)."""
        rows = [
            ("Records", self.source.name),
            ("Data window", self.source.window or "none: no file of ward stays"),
            ("File fingerprint (SHA-256)", self.source.fingerprint or "none: no file of ward stays"),
            *self.source.others,
        ]
        for case in self.cases:
            beds = f"{case.ward.beds}{'' if case.beds_are_known else ', assumed'}"
            stated = (("Staffed beds today", beds), *case.settings)
            settings = "; ".join(f"{name}: {value}" for name, value in stated)
            rows.append((f"Settings, {case.ward.name}", settings))
            rows.append((f"Limit, {case.ward.name}", wording.limit_text(case.rule.most, case.words[0], case.within)))
            rows.append((f"Model, {case.ward.name}", f"{case.model} ({wording.LINES[case.model]})"))
        rows.append(("Random numbers", "none used"))
        rows.append(("Program", f"{wording.PROGRAM} {wording.VERSION}"))
        rows.append(("Date produced", self.prepared.isoformat()))
        rows.append(("Figures' fingerprint", self.fingerprint()))
        return tuple(rows)

    def fingerprint(self) -> str:
        """Return a short fingerprint of every figure in the document, the date left out."""
        digest = hashlib.sha256(self.source.fingerprint.encode())
        for case in self.cases:
            digest.update(f"{case.ward.name}|{case.ward.beds}|{case.rule!r}|{case.settings!r}".encode())
            digest.update(f"{case.assumptions!r}|{case.checked}|{case.ward.average_formula_beds}".encode())
            if case.check is not None:
                bands = [f"{one.held:.9f} {one.low:.9f} {one.high:.9f}" for one in case.check.kept]
                digest.update(repr((case.check.figures, bands)).encode())
            for figures in (
                case.over_year,
                case.by_month,
                *(curve.turn_away_probability for curve in case.curves.values()),
            ):
                digest.update(figures.round(9).tobytes())
        return digest.hexdigest()[:12]
