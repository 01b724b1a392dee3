"""Stays nobody could read: they count with their ward's mean stay, and the ward's demand says that they are missing."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from bedplan.data import estimate_demand, read_records
from bedplan.data.files.rules import RULES

HEADINGS = "patient_key,ward,destination,start,end"


def lines(rows: int = 300) -> list[str]:
    """Return stays of 4 days on Heron and of 2 days on Teal by turns, three a day."""
    start = pd.Timestamp("2023-01-01 08:00") + pd.to_timedelta([8 * row for row in range(rows)], unit="h")
    return [
        f"p{row},{'Heron' if row % 2 else 'Teal'},home,{one},{one + pd.Timedelta(days=4 if row % 2 else 2)}"
        for row, one in enumerate(start)
    ]


def read(rows: list[str]) -> object:
    """Read these rows."""
    return read_records("\n".join([HEADINGS, *rows]).encode(), name="stays.csv")


@pytest.mark.parametrize(
    ("kind", "damage"),
    [
        ("end unreadable", lambda row: row[:-19] + "soon"),
        ("start unreadable", lambda row: row.replace(",home,", ",home,x")),
        ("misfit", lambda row: row.replace("home", "home, alone")),
    ],
)
def test_lost_bed_days_are_estimated_and_told(kind: str, damage) -> None:  # noqa: ANN001
    """Thirty of Heron's 150 stays: 30 × 4 bed-days are set aside, and only Heron's demand says "20 %"."""
    rows = lines()
    for place in range(1, 300, 10):
        rows[place] = damage(rows[place])
    records = read(rows)
    report = records.report

    assert report.reasons[RULES[kind].sentence] == 30
    assert report.bed_days[RULES[kind].sentence] == pytest.approx(30 * 4)
    assert report.bed_days_set_aside == pytest.approx(120)
    assert report.bed_days_in + report.bed_days_added == pytest.approx(report.bed_days_used + report.bed_days_set_aside)
    told = {
        ward: [note for note in estimate_demand(records, ward).notes if "not be read" in note] for ward in records.wards
    }
    assert len(told["Heron"]) == 1
    assert "20" in told["Heron"][0]
    assert told["Teal"] == []


def test_totals_and_footers_are_no_lost_stays() -> None:
    """Lines that name no ward, or have few cells, carry no bed-days; one lost stay in 150 is not worth a note."""
    rows = [*lines(), "Total,300", "Heron,150", "Teal,150"]
    rows[1] = rows[1].replace("home", "home, alone")
    records = read(rows)

    assert records.report.bed_days_set_aside == pytest.approx(4)
    assert dict(records.unread) == {"Heron": 1}
    assert not any("not be read" in note for note in estimate_demand(records, "Heron").notes)
    assert np.isclose(records.report.bed_days_in, 300 * 3)
