"""The rows of a stay file while they are being cleaned: plain arrays, and one reason at most for each row."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from bedplan.data.files.blocks import counted, in_blocks, taken
from bedplan.data.files.dates import DAY_SECONDS, MISSING
from bedplan.data.files.report import SET_ASIDE, Finding
from bedplan.data.files.rules import CODES, RULES

if TYPE_CHECKING:
    from numpy.typing import NDArray

OPEN_END = np.int64(2**33)  # the year 2242: stands for "still in" while sorting
SPAN = np.int64(2**34)  # more seconds than any date read here: keeps patients apart in one sorted number


class Way(NamedTuple):
    """Rows fetched in one order, so that each stands beside the next; ``row``: their numbers.

    The columns may be views of the rows' own: they are written by :meth:`renew` only.
    """

    row: NDArray[np.int64]
    patient: NDArray[np.int32]
    spell: NDArray[np.int32]
    ward: NDArray[np.int32]
    start: NDArray[np.int64]
    end: NDArray[np.int64]

    def only(self, which: NDArray[np.bool_]) -> Way:
        """Return some of the rows, in the same order."""
        return self if which.all() else Way(*(every[which] for every in self))

    def renew(self, rows: Rows, which: NDArray[np.int64]) -> None:
        """Take over what was changed since in the rows at these places."""
        for every, now in zip(self[1:], (rows.patient, rows.spell, rows.ward, rows.start, rows.end), strict=True):
            every[which] = now[self.row[which]]


@dataclass(slots=True)
class Rows:
    """One row a line of the file, in file order. ``-1`` = not known; ``MISSING`` end = still in.

    ``start`` and ``end`` are seconds; ``first_start``, ``first_end`` keep them as recorded. ``reason`` holds 0 or a
    code of :data:`CODES`; ``aside`` and ``merged`` rows give no stay of their own. Rows behind ``file_rows`` are second
    parts of stays, of the rows in ``parts``: they are no lines of the file.
    """

    patient: NDArray[np.int32]
    spell: NDArray[np.int32]
    ward: NDArray[np.int32]
    start: NDArray[np.int64]
    end: NDArray[np.int64]
    first_start: NDArray[np.int64] = field(init=False)
    first_end: NDArray[np.int64] = field(init=False)
    reason: NDArray[np.uint8] = field(init=False)
    aside: NDArray[np.bool_] = field(init=False)
    merged: NDArray[np.bool_] = field(init=False)
    parts: NDArray[np.int64] = field(init=False)

    def __post_init__(self) -> None:
        """Start with every row used as it stands."""
        self.first_start, self.first_end = self.start.copy(), self.end.copy()
        self.reason = np.zeros(self.start.size, dtype=np.uint8)
        self.aside = np.zeros(self.start.size, dtype=bool)
        self.merged = np.zeros(self.start.size, dtype=bool)
        self.parts = np.zeros(0, dtype=np.int64)

    @property
    def file_rows(self) -> int:
        """How many rows does the file have?"""
        return self.start.size - self.parts.size

    def go_on(self, row: NDArray[np.int64], start: NDArray[np.int64], end: NDArray[np.int64]) -> None:
        """Let stays go on after another one: a second part each, behind the file's rows."""
        unknown = np.full(row.size, MISSING)
        for name, added in (("start", start), ("end", end), ("first_start", unknown), ("first_end", unknown)):
            setattr(self, name, np.concatenate((getattr(self, name), added)))
        for name in ("patient", "spell", "ward", "reason", "aside", "merged"):
            values = getattr(self, name)
            setattr(self, name, np.concatenate((values, values[row])))
        self.parts = np.concatenate((self.parts, row))

    def along(self, order: NDArray[np.int64]) -> Way:
        """Return some rows in their order."""
        return Way(
            order, *(taken(every, order) for every in (self.patient, self.spell, self.ward, self.start, self.end))
        )

    def as_recorded(self, order: NDArray[np.int64]) -> Way:
        """Return some rows in their order, with the times that stand in the file."""
        return self.along(order)._replace(start=taken(self.first_start, order), end=taken(self.first_end, order))

    @property
    def live(self) -> NDArray[np.bool_]:
        """Rows that still stand for a stay of their own."""
        return ~(self.aside | self.merged)

    @property
    def is_open(self) -> NDArray[np.bool_]:
        """Rows without an end."""
        return self.end == MISSING

    @property
    def changed(self) -> NDArray[np.bool_]:
        """Rows that a rule repaired, or that another row of the patient made longer or shorter."""

        def differ(block: slice) -> NDArray[np.bool_]:
            """Compare one block."""
            moved = (self.start[block] != self.first_start[block]) | (self.end[block] != self.first_end[block])
            return (self.reason[block] > 0) | moved

        return np.concatenate(in_blocks(self.start.size, differ))

    def mark(self, which: NDArray, key: str) -> None:
        """Apply one rule to rows (mask or positions). Setting aside beats a repair; else the first reason stays."""
        rows = np.flatnonzero(which) if which.dtype == bool else which
        rows = rows[~self.aside[rows]]
        if RULES[key].outcome == SET_ASIDE:
            self.aside[rows] = True
            self.reason[rows] = CODES[key]
        else:
            fresh = rows[self.reason[rows] == 0]
            self.reason[fresh] = CODES[key]

    def bed_days_used(self, until: int) -> float:
        """Return the bed-days of the rows that stand for a stay, unfinished ones running to ``until``."""

        def used(block: slice) -> int:
            """Return the seconds of one block."""
            start, end = self.start[block], self.end[block]
            stay = np.where(end == MISSING, np.maximum(until, start), end) - start
            return int(stay[self.live[block]].sum())

        return sum(in_blocks(self.start.size, used)) / DAY_SECONDS

    def recorded_bed_days(self, until: int) -> NDArray[np.float64]:
        """Return the bed-days as recorded of the rows of each reason (0 = none), 0 where the record gives none."""

        def recorded(block: slice) -> NDArray[np.float64]:
            """Return the seconds by reason of one block."""
            start, end = self.first_start[block], self.first_end[block]
            end = np.where(end == MISSING, until, end)
            known = (start > 0) & (end >= start) & (end <= until)
            stay = np.where(known, end - np.where(known, start, 0), 0)
            return np.bincount(self.reason[block], weights=stay, minlength=len(RULES) + 1)

        return np.sum(in_blocks(self.start.size, recorded), axis=0) / DAY_SECONDS

    def counts(self, misfits: int) -> NDArray[np.int64]:
        """Return how many of the file's rows have each reason (0 = none); ``misfits`` were never parsed."""
        counts = counted(self.reason[: self.file_rows], len(RULES) + 1)
        counts[CODES["misfit"]] += misfits
        return counts

    def findings(self, bed_days: NDArray[np.float64], misfits: int = 0) -> tuple[Finding, ...]:
        """Return how many rows met each rule, and their bed-days by reason."""
        counts = self.counts(misfits)
        return tuple(
            Finding(rule.outcome, rule.sentence, int(counts[CODES[key]]), float(bed_days[CODES[key]]))
            for key, rule in RULES.items()
            if counts[CODES[key]]
        )
