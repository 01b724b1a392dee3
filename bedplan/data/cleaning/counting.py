"""Counting what became of every row and every bed-day, those nobody could read included."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.files.blocks import in_blocks
from bedplan.data.files.dates import DAY_SECONDS, MISSING, UNREADABLE
from bedplan.data.files.report import SET_ASIDE, IntakeReport, why_none
from bedplan.data.files.rules import CODES, RULES

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from bedplan.data.files.texttable import TextTable
    from bedplan.data.values.rows import Rows
    from bedplan.data.values.table import StayTable

ANY_SEPARATOR = r"[,;\t|]"
# Reasons for which a stay that took place gives no bed-days: nobody can tell how long it lasted.
UNREAD = ("no start", "start unreadable", "end unreadable", "unlikely date", "mistyped year", "negative")

# Stays that took place and give no bed-days either, though their rows hold some: these are told as recorded.
DOUBTED = ("forgotten, aside", "whole years")


def count_rows(
    table: StayTable, text: TextTable, until: int, notes: list[str]
) -> tuple[IntakeReport, Mapping[str, int]]:
    """What became of every row? The report, and ward → its stays that could not be read, or whose dates are doubted.

    Lines with another number of cells are rows too. Stays that could not be read count with their ward's mean stay.

    Checked by: tests/data/cleaning/test_records.py, tests/data/cleaning/test_counting.py
    """
    rows, counts = table.rows, table.rows.counts(text.misfits)
    lost = _lost(table, text)
    recorded = rows.recorded_bed_days(until)
    if lost.any():
        recorded[[CODES[key] for key in UNREAD]] = 0.0
        recorded += lost @ _mean_days(rows, len(table.wards))
    kept, total = rows.bed_days_used(until), float(recorded.sum())
    is_aside = np.array([False, *(rule.outcome == SET_ASIDE for rule in RULES.values())])
    aside = float(recorded[is_aside].sum())
    report = IntakeReport(
        rows_in=int(counts.sum()),
        used=int(counts[0]),
        repaired=int(counts[1:][~is_aside[1:]].sum()),
        set_aside=int(counts[is_aside].sum()),
        findings=rows.findings(recorded, misfits=text.misfits),
        bed_days_in=total,
        bed_days_added=kept + aside - total,
        bed_days_used=kept,
        bed_days_set_aside=aside,
        bed_days_repaired=float(recorded[1:][~is_aside[1:]].sum()),
        dropped_columns=table.dropped,
        notes=tuple(notes),
    )
    missing = lost.sum(axis=0) + sum(_by_ward(table, key) for key in DOUBTED)
    return report, {ward: int(count) for ward, count in zip(table.wards, missing, strict=True) if count}


def _by_ward(table: StayTable, key: str) -> NDArray[np.int64]:
    """Return how many rows of each ward have this reason."""
    ward = table.rows.ward[table.rows.reason == CODES[key]]
    return np.bincount(ward[ward >= 0], minlength=len(table.wards))


def _lost(table: StayTable, text: TextTable) -> NDArray[np.float64]:
    """Return how many stays of each ward could not be read, for each reason (reasons, wards)."""
    wards = len(table.wards)
    counts = np.zeros((len(RULES) + 1, wards))
    for key in UNREAD:
        counts[CODES[key]] += _by_ward(table, key)
    if text.lines and wards:
        for ward, count in _named_in_lines(table.wards, text).items():
            counts[CODES["misfit"], ward] += count * text.misfits / len(text.lines)
    return counts


def _named_in_lines(wards: tuple[str, ...], text: TextTable) -> dict[int, int]:
    """Return ward → lines with another number of cells that are stays there: nearly whole, and one cell names the ward."""
    codes = {ward.casefold(): code for code, ward in enumerate(wards)}
    found: dict[int, int] = {}
    fewest = len({*text.headings.values(), *text.unused, *text.dropped}) - 1
    for line in text.lines:
        if line.cells >= fewest:
            cells = [cell.strip().strip('"').casefold() for cell in re.split(ANY_SEPARATOR, line.text)]
            code = next((codes[cell] for cell in cells if cell in codes), None)
            if code is not None:
                found[code] = found.get(code, 0) + 1
    return found


def _mean_days(rows: Rows, wards: int) -> NDArray[np.float64]:
    """Return the mean of each ward's finished stays in days; that of all where a ward has none."""

    def add(block: slice) -> NDArray[np.float64]:
        """Count the stays of one block, and their seconds."""
        ward, start, end = rows.ward[block], rows.start[block], rows.end[block]
        known = (end != MISSING) & ~(rows.aside[block] | rows.merged[block])
        weights = (None, (end - start)[known])
        return np.array([np.bincount(ward[known], weights=one, minlength=wards) for one in weights])

    count, total = np.sum([np.zeros((2, wards)), *in_blocks(rows.start.size, add)], axis=0)
    overall = total.sum() / max(count.sum(), 1)
    return np.where(count > 0, total / np.maximum(count, 1), overall) / DAY_SECONDS


def why_no_row(rows: Rows, misfits: int, name: str) -> list[str]:
    """Why could no row of the file be used?"""
    unreadable = (rows.start == UNREADABLE).sum() > rows.start.size // 2
    advice = "write dates as 2024-03-31 14:05" if unreadable else "check the export and try again"
    return [why_none(name, rows.findings(np.zeros(len(RULES) + 1), misfits), advice)]
