"""Hidden demand on ten other three-year spells of the invented hospital, each from its own files alone."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pytest

from bedplan.data import hidden_demand, read_capacity, read_records, read_refusals
from demo_data.files import (
    CAPACITY_COLUMNS,
    DAYS,
    REFUSAL_COLUMNS,
    STAY_COLUMNS,
    WINDOW_END,
    WINDOW_START,
    capacity_rows,
    in_window,
    refusal_rows,
    stay_rows,
    write_table,
)
from demo_data.flow import Flow, booked_start, simulate
from demo_data.generate import DEMO_SEED
from demo_data.patients import stay_end

if TYPE_CHECKING:
    from pathlib import Path

# How much of those sent away the wards write down (the generator says so); Teal sends nobody away.
SHARE_RECORDED = {"Teal": 1.0, "Merlin": 1.0, "Curlew": 0.6, "Dunlin": 0.6}


def truth(flow: Flow, ward: str) -> tuple[float, float]:
    """Return who wanted the ward first, a day, and the beds they wanted on average: each from the wish to a stay's end."""
    first = [want for want in flow.wants if want.ward == ward and not want.after_refusal]
    minutes = 0
    for want in first:
        start = booked_start(want) if want.came_from == "booked" else want.wanted_at
        end = stay_end(flow.hospital.by_name[ward], want.chances, start)
        minutes += max(min(end, WINDOW_END) - max(start, WINDOW_START), 0)
    return sum(in_window(want) for want in first) / len(DAYS), minutes / (WINDOW_END - WINDOW_START)


def held(flow: Flow, folder: Path) -> dict[tuple[str, str], bool]:
    """Return, for patients and beds of each ward, whether the 90 % interval from the files holds the truth."""
    write_table(folder / "stays.csv", STAY_COLUMNS, stay_rows(flow))
    write_table(folder / "capacity.csv", CAPACITY_COLUMNS, capacity_rows(flow.hospital))
    write_table(folder / "refusals.csv", REFUSAL_COLUMNS, refusal_rows(flow))
    records, beds = read_records(folder / "stays.csv"), read_capacity(folder / "capacity.csv")
    listed, result = read_refusals(folder / "refusals.csv"), {}
    for ward, share in SHARE_RECORDED.items():
        found = hidden_demand(records, ward, capacity=beds, refusals=listed, share_recorded=share)
        patients, wanted = truth(flow, ward)
        result[ward, "patients"] = found.interval[0] < patients < found.interval[1]
        result[ward, "beds"] = found.beds_interval[0] < wanted < found.beds_interval[1]
    return result


@pytest.mark.parametrize("first", [1, 6])
def test_intervals_hold_the_truth_on_at_least_eight_of_ten_other_years(tmp_path: Path, first: int) -> None:
    """For each of four wards with hidden demand, patients a day and beds wanted; ten seeds in a row, four of every five."""
    every = [held(simulate(DEMO_SEED + step), tmp_path) for step in range(first, first + 5)]
    counts = {figure: sum(one[figure] for one in every) for figure in every[0]}

    assert len(every) == 5
    assert all(count >= 4 for count in counts.values()), counts
