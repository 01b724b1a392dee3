"""Accounting for every row of the files beside the ward stays: used, repaired or set aside, and why."""

from __future__ import annotations

from typing import TYPE_CHECKING

from bedplan.data.files.report import REPAIRED, SET_ASIDE, Finding, IntakeReport, why_none
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    import pandas as pd

    from bedplan.data.files.texttable import TextTable

MISFITS = "A title, total or footer, or a line with another number of cells"


def account(
    text: TextTable, reason: pd.Series, file: str, advice: str, repairs: tuple[str, int] = ("", 0)
) -> IntakeReport:
    """What became of every row of a file that holds no stays? ``reason`` (n,) is empty where a row is used.

    ``repairs``: a sentence and how many of the used rows it is true of; ``advice``: what to do where no row is left.

    Raises:
        UnreadableRecords: every row is set aside.

    Checked by: tests/data/test_damaged_other_files.py
    """
    aside = reason[reason != ""].value_counts()
    findings = [Finding(SET_ASIDE, sentence, int(rows), 0.0) for sentence, rows in aside.items()]
    if text.misfits:
        findings.append(Finding(SET_ASIDE, MISFITS, text.misfits, 0.0))
    used = int((reason == "").sum())
    if not used:
        raise UnreadableRecords([why_none(file, findings, advice)])
    sentence, repaired = repairs
    if repaired:
        findings.append(Finding(REPAIRED, sentence, repaired, 0.0))
    return IntakeReport(
        rows_in=reason.size + text.misfits,
        used=used - repaired,
        repaired=repaired,
        set_aside=int(aside.sum()) + text.misfits,
        findings=tuple(findings),
        dropped_columns=text.dropped,
        notes=text.notes,
    )
