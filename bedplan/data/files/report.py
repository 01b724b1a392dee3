"""What was done to the rows of a file, counted so that nothing can go missing."""

from __future__ import annotations

from dataclasses import dataclass
from types import MappingProxyType
from typing import TYPE_CHECKING, Literal

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

REPAIRED, SET_ASIDE = "repaired", "set aside"


@dataclass(frozen=True, slots=True)
class Rule:
    """One kind of dirt: what happens to a row that has it, and the reason that is printed."""

    outcome: Literal["repaired", "set aside"]
    sentence: str


@dataclass(frozen=True, slots=True)
class Finding:
    """How many rows met one rule, and the bed-days they hold as recorded."""

    outcome: str
    sentence: str
    rows: int
    bed_days: float


def why_none(name: str, findings: Iterable[Finding], advice: str) -> str:
    """Why can no row of this file be used? The commonest three reasons, and what to do."""
    told = "; ".join(
        f"{one.sentence[0].lower()}{one.sentence[1:]} ({'1 row' if one.rows == 1 else f'{one.rows:,} rows'})"
        for one in sorted(findings, key=lambda one: -one.rows)[:3]
    )
    return f"No row of {name} can be used: {told or 'it holds none under its headings'}; {advice}."


@dataclass(frozen=True, slots=True)
class IntakeReport:
    """What became of every row? ``rows_in == used + repaired + set_aside``, always.

    *Used* rows count as they stand, *repaired* rows count after the change named, *set aside* rows do not count.
    Bed-days balance too: ``bed_days_in + bed_days_added == bed_days_used + bed_days_set_aside``, where
    ``bed_days_added`` is what the repairs added (below 0: took away); ``bed_days_repaired`` are those the repaired
    rows held as recorded.

    Checked by: tests/data/cleaning/test_records.py
    """

    rows_in: int
    used: int
    repaired: int
    set_aside: int
    findings: tuple[Finding, ...] = ()
    bed_days_in: float = 0.0
    bed_days_added: float = 0.0
    bed_days_used: float = 0.0
    bed_days_set_aside: float = 0.0
    bed_days_repaired: float = 0.0
    dropped_columns: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()

    @property
    def reasons(self) -> Mapping[str, int]:
        """Why were rows repaired or set aside? Reason → rows."""
        return MappingProxyType({finding.sentence: finding.rows for finding in self.findings})

    @property
    def bed_days(self) -> Mapping[str, float]:
        """How many bed-days do those rows hold, as recorded? Reason → bed-days."""
        return MappingProxyType({finding.sentence: finding.bed_days for finding in self.findings})

    @property
    def summary(self) -> str:
        """What would I say about this file in one sentence?"""
        bed_days = f" ({self.bed_days_set_aside:,.0f} bed-days)" if self.bed_days_in else ""
        return (
            f"Of {self.rows_in:,} rows, {self.used:,} are used as they stand, {self.repaired:,} after a repair and "
            f"{self.set_aside:,}{bed_days} are set aside."
        )

    @property
    def sentences(self) -> tuple[str, ...]:
        """What exactly was done, one sentence a reason?"""
        return tuple(
            f"{finding.rows:,} {'row was' if finding.rows == 1 else 'rows were'} {finding.outcome}"
            + (f" ({finding.bed_days:,.1f} bed-days as recorded)" if self.bed_days_in else "")
            + f": {finding.sentence[0].lower()}{finding.sentence[1:]}."
            for finding in self.findings
        )
