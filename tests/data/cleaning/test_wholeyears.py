"""A year mistyped to another year of the file: told by the ward's own stays, and never hidden."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pytest

from bedplan.data import estimate_demand, read_records, what_repairs_change
from bedplan.data.files.rules import RULES

if TYPE_CHECKING:
    from bedplan.data import Records

WHOLE_YEARS = RULES["whole years"].sentence
DAYS = 3 * 365
FIRST = pd.Timestamp("2021-01-01")


def stays(seed: int, mean_days: float = 4.0, per_day: float = 2.0) -> list[tuple[pd.Timestamp, pd.Timestamp]]:
    """Return stays of a ward over three years, lognormal with an SD of 0.9 means."""
    rng = np.random.default_rng(seed)
    size = int(per_day * DAYS)
    starts = FIRST + pd.to_timedelta(np.sort(rng.uniform(0, DAYS, size)).round(2), unit="D")
    lasts = pd.to_timedelta((rng.lognormal(np.log(mean_days) - 0.3, 0.77, size)).clip(0.1).round(2), unit="D")
    return list(zip(starts, starts + lasts, strict=True))


def read(rows: list[tuple[pd.Timestamp, pd.Timestamp]], ward: str = "Heron") -> Records:
    """Read such stays, a patient each; those that end after the file are still in."""
    last = FIRST + pd.Timedelta(days=DAYS)
    lines = [f"p{n},{ward},{start},{end if end < last else ''}" for n, (start, end) in enumerate(rows) if start < last]
    return read_records("\n".join(["patient_key,ward,start,end", *lines]).encode(), name="stays.csv")


@pytest.mark.parametrize("seed", [1, 2, 3])
@pytest.mark.parametrize("years", [-2, -1, 1])
def test_a_year_mistyped_within_the_file_is_set_aside_and_told(years: int, seed: int) -> None:
    """A start one or two years early, or an end a year late, moves the ward's beds by less than 1 % of the clean file's."""
    rows = stays(seed)
    place = int(0.75 * len(rows)) if years < 0 else int(0.3 * len(rows))
    start, end = rows[place]
    move = pd.DateOffset(years=years)
    rows[place] = (start + move, end) if years < 0 else (start, end + move)
    bed_days = (rows[place][1] - rows[place][0]) / pd.Timedelta(days=1)
    records, clean = read(rows), read([*rows[:place], *rows[place + 1 :]])

    assert dict(records.report.reasons) == {WHOLE_YEARS: 1}
    assert records.report.bed_days[WHOLE_YEARS] == pytest.approx(bed_days, abs=0.01)
    assert records.report.set_aside == len(records.set_aside) == 1
    (note,) = [note for note in records.report.notes if "mistyped year" in note]
    assert f"{rows[place][0].day} {rows[place][0]:%B %Y} to {rows[place][1].day} {rows[place][1]:%B %Y}" in note
    assert f"{bed_days:,.0f} bed-days" in note
    wanted = estimate_demand(records, "Heron")
    assert wanted.beds_wanted == pytest.approx(estimate_demand(clean, "Heron").beds_wanted, rel=0.01)
    (effect,) = what_repairs_change(records)
    assert effect.if_doubted_are_true - effect.beds_wanted == pytest.approx(bed_days / records.days, rel=0.01)
    assert any("if their dates are right" in note for note in wanted.notes)


@pytest.mark.parametrize("long_days", [450.0, 550.0, 640.0])
def test_a_true_long_stay_counts_and_is_named(long_days: float) -> None:
    """A stay that is long by more than whole years counts, and a sentence asks whether its dates are right."""
    rows = stays(4)
    start = rows[100][0]
    rows[100] = (start, start + pd.Timedelta(days=long_days))
    records = read(rows)

    assert records.report.set_aside == 0
    assert records.report.bed_days_used == pytest.approx(records.report.bed_days_in)
    (note,) = [note for note in records.report.notes if "are the dates right?" in note]
    assert f"{long_days:,.0f} days" in note


@pytest.mark.parametrize("seed", range(8))
@pytest.mark.parametrize("mean_days", [60.0, 120.0, 250.0])
def test_wards_of_long_stays_lose_nobody(mean_days: float, seed: int) -> None:
    """Where patients stay for months, a stay of a year is the ward's way."""
    assert WHOLE_YEARS not in read(stays(seed, mean_days, 0.5)).report.reasons


def test_a_small_ward_is_not_judged() -> None:
    """With fewer than 50 stays nobody can say what is usual."""
    rows = [(FIRST + pd.Timedelta(days=20 * n), FIRST + pd.Timedelta(days=20 * n + 3)) for n in range(45)]
    rows[30] = (rows[30][0] - pd.DateOffset(years=1), rows[30][1])

    assert WHOLE_YEARS not in read(rows).report.reasons


def test_many_mistyped_years_of_one_january() -> None:
    """Ten of 2,190 stays with last year's number are all found, though each is as long as the others."""
    rows = stays(5)
    january = [n for n, (start, _) in enumerate(rows) if start.year == 2023 and start.month == 1][:10]
    for n in january:
        rows[n] = (rows[n][0] - pd.DateOffset(years=1), rows[n][1])
    records = read(rows)

    assert records.report.reasons[WHOLE_YEARS] >= 8
    assert records.report.reasons[WHOLE_YEARS] + sum("dates right" in note for note in records.report.notes) >= 9
    assert records.unread["Heron"] == records.report.reasons[WHOLE_YEARS]
