"""Beds overstated in a part of the file only: found, dated and said, and beds stated right are left alone."""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
import pytest

from bedplan.data import hidden_demand
from bedplan.data.beside.capacity import Capacity
from bedplan.data.demand.walls import BedUse
from tests.data.made_wards import FIRST_DAY, MadeWard, as_records, made_records

HALF, DAYS = 548, 1_096
REAL = 20


def stated(*periods: tuple[int, int, int]) -> Capacity:
    """Return a capacity file of Heron with (first day, last day, beds) of the window."""
    rows = [
        {
            "ward": "Heron",
            "from": FIRST_DAY + pd.Timedelta(days=first),
            "to": FIRST_DAY + pd.Timedelta(days=last),
            "funded": beds,
            "staffed": beds,
            "closed": 0,
            "reason": "",
        }
        for first, last, beds in periods
    ]
    return Capacity("capacity.csv", pd.DataFrame(rows), ("Heron",))


def walls_told(notes: tuple[str, ...]) -> list[str]:
    """Return the sentences about beds that were hardly ever used."""
    return [note for note in notes if note.startswith("Hardly ever")]


@pytest.mark.parametrize("dates_only", [False, True])
@pytest.mark.parametrize("seed", [1, 2, 3])
def test_beds_overstated_until_a_day(seed: int, *, dates_only: bool) -> None:
    """Twenty-three are stated until the middle and 20 after it, 20 were open all along: the first half is named."""
    records = made_records(MadeWard(5.0, 4.0, 1.0, growth=0.0, beds=REAL), seed, dates_only=dates_only)
    capacity = stated((0, HALF - 1, REAL + 3), (HALF, DAYS, REAL))
    found = hidden_demand(records, "Heron", capacity=capacity)
    (told,) = walls_told(found.notes)
    last = FIRST_DAY + pd.Timedelta(days=HALF - 1)

    assert f"more than {REAL} patients on Heron from 1 April 2022 to {last.day} {last:%B %Y}, though 23 beds" in told
    assert "3 of them seem not to be there" in told
    assert found.spread[0] < MadeWard(5.0, 4.0, 1.0, growth=0.0).rates()[-DAYS:].mean() < found.spread[1]


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_beds_not_open_for_a_while(seed: int) -> None:
    """Twenty-three are stated throughout, of which three were not open in the first year and a half: about that is named."""
    parts = []
    for first, beds in ((0, REAL), (HALF, REAL + 3)):
        half = made_records(MadeWard(6.0, 4.0, 1.0, growth=0.0, beds=beds, days=HALF), seed).stays
        begin, end = ((half[key] - FIRST_DAY) / pd.Timedelta(days=1) for key in ("start", "end"))
        parts.append((begin.clip(lower=0.0) + first, end.fillna(HALF) + first))
    records = as_records(*(np.concatenate(one) for one in zip(*parts, strict=True)), DAYS)
    (told,) = walls_told(hidden_demand(records, "Heron", capacity=stated((0, DAYS, REAL + 3))).notes)
    until = pd.Timestamp(told.split(" to ")[1].split(",")[0])

    assert f"more than {REAL} patients on Heron from 1 April 2022" in told
    assert abs((until - FIRST_DAY).days - HALF) <= 45


def test_beds_stated_right_through_changes_are_left_alone() -> None:
    """Twenty-four wards that lose patients or are queued for, over three years: hardly any part is called unused."""
    rng = np.random.default_rng(11)
    doubted = 0
    for seed in range(24):
        mean_days, per_day = float(rng.choice([1.5, 4.0, 8.0])), float(rng.uniform(1.0, 5.0))
        beds = round(mean_days * per_day + rng.uniform(-0.5, 2.0) * math.sqrt(mean_days * per_day)) + 1
        ward = MadeWard(per_day, mean_days, 1.0, beds=beds, waits=seed % 3 / 2, handover_days=0.05)
        doubted += len(
            walls_told(hidden_demand(made_records(ward, seed), "Heron", capacity=stated((0, DAYS, beds))).notes)
        )

    assert doubted <= 1


def test_too_short_a_part_tells_nothing() -> None:
    """Two months of a ward whose patients stay eight days hold too few stays to miss a bed in."""
    free = np.repeat(np.tile([1, 2, 3, 4], 15), 24).reshape(60, 24)
    use = BedUse(free, np.full(60, 20), np.ones(60, dtype=bool), np.arange(60) // 30, 8.0)

    assert use.walls() == ()
