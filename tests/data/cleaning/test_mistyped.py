"""One mistyped year: it is set aside with its dates, and every ward wants the beds it wants without it."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pytest

from bedplan.data import estimate_demand, read_records
from bedplan.data.files.rules import RULES

if TYPE_CHECKING:
    from bedplan.data import Records

FIRST = np.datetime64("2021-01-01T00:00", "m")
DAY_MINUTES = 1_440


def stays(seed: int, wards: dict[str, tuple[float, float]], days: int) -> list[list[str]]:
    """Return all stays that touch so many days, of wards with (arrivals a day, mean stay); those still in have no end."""
    rng = np.random.default_rng(seed)
    rows = []
    for ward, (per_day, mean_days) in wards.items():
        size = rng.poisson(per_day * (days + 60))
        start = FIRST + (rng.uniform(-60, days, size) * DAY_MINUTES).astype("timedelta64[m]")
        end = start + np.maximum(rng.lognormal(np.log(mean_days) - 0.3, 0.77, size) * DAY_MINUTES, 60).astype(
            "timedelta64[m]"
        )
        last = FIRST + np.timedelta64(days * DAY_MINUTES)
        rows += [
            [ward, str(one), "" if other > last else str(other)]
            for one, other in zip(start, end, strict=True)
            if other > FIRST
        ]
    return sorted(rows, key=lambda row: row[1])


def read(rows: list[list[str]]) -> Records:
    """Read such rows, one patient each."""
    lines = [f"p{place},{','.join(row)}" for place, row in enumerate(rows)]
    return read_records("\n".join(["patient_key,ward,start,end", *lines]).encode(), name="stays.csv")


def beds(records: Records) -> dict[str, float]:
    """Return the beds that each ward wants."""
    return {ward: estimate_demand(records, ward).beds_wanted for ward in records.wards}


def later(row: list[str], years: int, *, start: bool = True, end: bool = True) -> None:
    """Move the year of one row's dates."""
    for place, wanted in ((1, start), (2, end)):
        if wanted and row[place]:
            row[place] = f"{int(row[place][:4]) + years}{row[place][4:]}".replace("-02-29", "-02-28")


LARGE = ({"Heron": (3.0, 4.5), "Teal": (4.0, 3.0), "Wren": (4.0, 3.5)}, 1_095)
SMALL = ({"Heron": (1.6, 3.0)}, 365)
CASES = {
    "a stay a year late": (LARGE, 0.8, {"years": 1}),
    "a stay a year late, with no end": (LARGE, "open", {"years": 1}),
    "a small file, no end, a year late": (SMALL, "open", {"years": 1}),
    "a start ten years early": (SMALL, 0.5, {"years": -10, "end": False}),
    "a stay ten years early": (SMALL, 0.5, {"years": -10}),
    "a stay a year early": (SMALL, 0.3, {"years": -1}),
    "an end two years late": (SMALL, 0.5, {"years": 2, "start": False}),
    "an end a year late": (SMALL, 0.5, {"years": 1, "start": False}),
}


@pytest.mark.parametrize("seed", [1, 2, 3])
@pytest.mark.parametrize("case", CASES)
def test_one_mistyped_year_changes_no_ward(case: str, seed: int) -> None:
    """The row is set aside alone, with a sentence that quotes its dates, and beds stay within 1 % of the clean file's."""
    (wards, days), where, how = CASES[case]
    rows = stays(seed, wards, days)
    finished = [row for row in rows if row[2]]
    row = next(row for row in rows if not row[2]) if where == "open" else finished[int(where * len(finished))]
    place = rows.index(row)
    without = read(rows[:place] + rows[place + 1 :])
    later(row, **how)
    records = read(rows)

    assert dict(records.report.reasons) == {RULES["mistyped year"].sentence: 1}
    (told,) = [note for note in records.report.notes if "mistyped year" in note]
    moved = next(text for text, wanted in ((row[1], how.get("start", True)), (row[2], True)) if wanted)
    assert str(int(moved[8:10])) in told
    assert moved[:4] in told
    assert records.window == without.window
    assert records.stays["end"].isna().sum() == without.stays["end"].isna().sum()
    assert beds(records) == pytest.approx(beds(without), rel=0.01)


@pytest.mark.parametrize("seed", [1, 2, 3, 4, 5, 6])
@pytest.mark.parametrize("mean_days", [2.0, 20.0, 120.0])
@pytest.mark.parametrize("per_day", [0.1, 1.0])
def test_real_quiet_wards_and_long_stays_are_left(per_day: float, mean_days: float, seed: int) -> None:
    """Wards with ten patients a quarter, and those whose patients were in for months before the file begins, lose nobody."""
    rng = np.random.default_rng(seed)
    rows = stays(seed, {"Heron": (per_day, mean_days)}, 1_095)
    for days in rng.integers(100, 900, 3):  # in for long already when the file begins
        rows.insert(0, ["Heron", str(FIRST - np.timedelta64(days * DAY_MINUTES)), "2021-03-10T11:00"])
    records = read(rows)

    assert RULES["mistyped year"].sentence not in records.report.reasons
