"""The rows of a stay file while they are being cleaned: plain arrays, and one reason at most for each row."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.blocks import in_blocks
from bedplan.data.dates import DAY_SECONDS, MISSING
from bedplan.data.report import REPAIRED, SET_ASIDE, Finding, Rule

if TYPE_CHECKING:
    from numpy.typing import NDArray

OPEN_END = np.int64(2**33)  # the year 2242: stands for "still in" while sorting
SPAN = np.int64(2**34)  # more seconds than any date read here: keeps patients apart in one sorted number

# Every rule in one place, in the order in which the report prints them.
RULES: dict[str, Rule] = {
    "misfit": Rule(SET_ASIDE, "Not a ward stay: a title, total, footer or a line with another number of cells"),
    "no ward": Rule(SET_ASIDE, "No ward is named"),
    "no start": Rule(SET_ASIDE, "The start is missing"),
    "start unreadable": Rule(SET_ASIDE, "The start can't be read as a date"),
    "end unreadable": Rule(SET_ASIDE, "The end can't be read as a date"),
    "unlikely date": Rule(SET_ASIDE, "The start lies in the future, or a date before 1990"),
    "mistyped year": Rule(SET_ASIDE, "Dated far from every other stay: a mistyped year"),
    "test patient": Rule(SET_ASIDE, "A test patient, or an age no person reaches"),
    "negative": Rule(SET_ASIDE, "The stay ends before it starts"),
    "duplicate": Rule(SET_ASIDE, "The same stay is in the file twice"),
    "resubmitted": Rule(SET_ASIDE, "An earlier version of a stay that was sent again with another end"),
    "two ends": Rule(
        SET_ASIDE, "In the file twice with another end, and which was sent last can't be told: the longer counts"
    ),
    "zero stay": Rule(SET_ASIDE, "The stay ends in the minute it starts"),
    "forgotten, aside": Rule(
        SET_ASIDE, "No end, and far longer ago than stays on this ward last: a forgotten discharge"
    ),
    "too short": Rule(SET_ASIDE, "Less than 30 minutes on the ward, with no stay before or after to count it in"),
    "nested": Rule(SET_ASIDE, "Inside another stay of the same patient, who can't use two beds"),
    "virtual": Rule(SET_ASIDE, "A virtual ward or care at home: no hospital bed is used"),
    "cot": Rule(SET_ASIDE, "A cot for a well baby: counted apart from beds"),
    "delivery": Rule(SET_ASIDE, "A delivery suite: counted apart from ward beds"),
    "regular": Rule(SET_ASIDE, "A regular day or night attender: counted apart"),
    "procedure place": Rule(SET_ASIDE, "A place without ward beds, such as a theatre, a lounge or X-ray"),
    "waiting place": Rule(SET_ASIDE, "A waiting place, such as an emergency department: not a ward"),
    "leave": Rule(SET_ASIDE, "Home leave: the patient was not in a bed"),
    "leave, ward unknown": Rule(
        SET_ASIDE, "Home leave without a stay just before: which ward held the bed isn't known"
    ),
    "end to come": Rule(REPAIRED, "The end lies in the future: the patient is taken to be still in"),
    "clock change": Rule(REPAIRED, "Ended in the hour that the clock shows twice in autumn: an hour was added"),
    "ward spelling": Rule(REPAIRED, "The ward's name was written with other spaces or capitals"),
    "ward renamed": Rule(REPAIRED, "The ward's name was changed to the one you chose"),
    "serial date": Rule(REPAIRED, "A date stood as a spreadsheet's day number"),
    "swapped": Rule(REPAIRED, "Day and month were the wrong way round"),
    "forgotten, closed": Rule(REPAIRED, "No end, but the patient went on: ended when the next stay starts"),
    "leave, held": Rule(REPAIRED, "Home leave with the bed held: counted on the ward that was left"),
    "joined": Rule(REPAIRED, "Went on in the same ward: joined to one stay"),
    "bridged": Rule(REPAIRED, "Up to an hour before the next stay of the same patient: ended when that one starts"),
    "passed through": Rule(REPAIRED, "Less than 30 minutes on the way: counted in the stay before or after"),
    "parted": Rule(
        REPAIRED, "Another stay of the patient lay inside it: parted round that one, and counted on both sides"
    ),
    "overlap": Rule(REPAIRED, "Overlapped the patient's next stay: ended when that one starts"),
}
CODES = {key: np.uint8(place + 1) for place, key in enumerate(RULES)}


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

    def findings(self, bed_days: NDArray[np.float64], misfits: int = 0) -> tuple[Finding, ...]:
        """Return how many rows met each rule, and their bed-days by reason; ``misfits`` were never parsed."""
        counts = np.bincount(self.reason[: self.file_rows], minlength=len(RULES) + 1)
        counts[CODES["misfit"]] += misfits
        return tuple(
            Finding(rule.outcome, rule.sentence, int(counts[CODES[key]]), float(bed_days[CODES[key]]))
            for key, rule in RULES.items()
            if counts[CODES[key]]
        )
