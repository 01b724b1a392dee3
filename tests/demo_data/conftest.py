"""The committed demo files, read once for all tests of the demo."""

from __future__ import annotations

from datetime import date, timedelta
from functools import cache
from pathlib import Path
from typing import TYPE_CHECKING

import pandas as pd
import pytest

from demo_data.flow import Flow, simulate
from demo_data.generate import DEMO_SEED

if TYPE_CHECKING:
    from collections.abc import Callable

DEMO = Path(__file__).parents[2] / "demo_data"
WINDOW_END = pd.Timestamp("2025-04-01")
TIMES = ("start", "end", "ready_date", "wanted_at", "placed_at", "requested_at")


@cache
def read(name: str) -> pd.DataFrame:
    """Return one committed file, its times read."""
    table = pd.read_csv(DEMO / f"{name}.csv", keep_default_na=False, na_values={column: [""] for column in TIMES})
    for column in set(TIMES) & set(table.columns):
        table[column] = pd.to_datetime(table[column], format="%Y-%m-%d %H:%M")
    return table


@pytest.fixture(scope="session")
def read_demo() -> Callable[[str], pd.DataFrame]:
    """How to read a committed file by name; the table is shared and not to be changed."""
    return read


@pytest.fixture(scope="session")
def stays() -> pd.DataFrame:
    """The stays, those still in ended after everything else."""
    table = read("stays")
    return table.assign(left=table["end"].fillna(WINDOW_END + timedelta(days=400)))


@pytest.fixture(scope="session")
def wants() -> pd.DataFrame:
    """Every ward that a patient wanted."""
    return read("truth_patients")


@pytest.fixture(scope="session")
def flow() -> Flow:
    """The run behind the committed files."""
    return simulate(DEMO_SEED)


@pytest.fixture(scope="session")
def open_beds() -> dict[tuple[str, date], int]:
    """The open beds of every ward and day, from the capacity file."""
    return {
        (row["ward"], day.date()): row["staffed_beds"] - row["closed_beds"]
        for row in read("capacity").to_dict("records")
        for day in pd.date_range(row["from"], row["to"])
    }
