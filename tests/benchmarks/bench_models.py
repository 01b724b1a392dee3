"""How fast the models answer, as ratios and in milliseconds of processor time; run by hand, nothing is asserted.

python tests/benchmarks/bench_models.py

Each row is a ward, read at the 40 bed counts around its decision, with nothing remembered from before. The least of
some runs is printed, because others may use the machine; and the middle one.
"""

from __future__ import annotations

import os
import sys
import time
from pathlib import Path
from typing import TYPE_CHECKING

# One thread, so that processor time is what one person's slider costs.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

import numpy as np
from scipy import stats

import bedplan.models
from bedplan.decision import TurnAwayLimit, decide
from bedplan.errors import TargetOutOfReach
from bedplan.models import MODELS, BookedList, Demand, LengthOfStay, offered_load_by_hour
from bedplan.models.formulas.erlang import erlang_b_table
from bedplan.models.rhythm.load_grid import load_grid
from bedplan.models.rhythm.year import arrivals_by_hour, month_of_hour

if TYPE_CHECKING:
    from collections.abc import Callable

SEASON = (1.3, 1.18, 1.06, 0.97, 0.9, 0.84, 0.8, 0.8, 0.88, 1.0, 1.1, 1.24)
WEEK = (1.10, 1.03, 1.02, 1.01, 1.03, 0.91, 0.90)
DAY = tuple(1.0 - 0.6 * float(np.cos(2 * np.pi * (hour - 3) / 24)) for hour in range(24))
LIST = BookedList((8, 7, 5, 1, 1, 0, 0), LengthOfStay(3.5, 0.5), 13, 0.95)
ROUNDS = {"discharge_hours": (0,) * 9 + (1,) * 9 + (0,) * 6, "weekend_slip": (0.35, 0.45)}
MIXED = {"clustering": 1.3, "rate_variation": 0.05}
BEDS = np.arange(201)
AROUND = 20
FIRST = {"average_occupancy", "erlang_loss", "unlimited_beds", "waiting"}


def of_load(load: float, stay: LengthOfStay, **more: object) -> Demand:
    """Return a ward with seasons, weekdays and hours that wants this many beds for its unbooked patients."""
    return Demand(load / stay.mean_days, stay, SEASON, WEEK, DAY, **more)


STAY = LengthOfStay(4.0, 1.1)
WARDS = {
    "24 beds wanted": of_load(24.0, STAY),
    "40": of_load(40.0, STAY),
    "40, exponential stays": of_load(40.0, LengthOfStay(4.0, 1.0, "gamma")),
    "40, every stay four days": of_load(40.0, LengthOfStay(4.0, 0.0)),
    "40, stays of a day": of_load(40.0, LengthOfStay(1.0, 1.0)),
    "40, stays of a month": of_load(40.0, LengthOfStay(30.0, 1.3)),
    "40, groups": of_load(40.0, STAY, clustering=1.3),
    "40, groups and an uncertain rate": of_load(40.0, STAY, **MIXED),
    "40, a booked list": of_load(29.0, STAY, booked=(LIST,)),
    "40, discharge hours and slip": of_load(40.0, STAY, **ROUNDS),
    "40, all of these": of_load(29.0, STAY, booked=(LIST,), turnaround_hours=2.0, **MIXED, **ROUNDS),
    "100": of_load(100.0, STAY),
    "300": of_load(300.0, STAY),
}


def forget() -> None:
    """Empty every cache the models keep."""
    for name, module in list(sys.modules.items()):
        if name.startswith(bedplan.models.__name__):
            for one in vars(module).values():
                if hasattr(one, "cache_clear"):
                    one.cache_clear()


def milliseconds(work: Callable[[], object], times: int = 7) -> tuple[float, float]:
    """Return the least and the median processor time of some work, every cache emptied before each time."""
    took = []
    for _ in range(times):
        forget()
        start = time.process_time()
        work()
        took.append(1000.0 * (time.process_time() - start))
    return min(took), float(np.median(took))


def first_cut(demand: Demand) -> np.ndarray:
    """Return the modified offered load's share by month, for 0 to 200 beds."""
    grid = load_grid(offered_load_by_hour(demand), arrivals_by_hour(demand), month_of_hour, 12)
    return grid.weights @ erlang_b_table(grid.loads, BEDS).T / grid.weights.sum(axis=1)[:, None]


def by_reference_library(demand: Demand) -> np.ndarray:
    """Return the same from scipy.stats: pmf ÷ cdf for each of 8,736 hours × 201 bed counts."""
    loads, arrivals = offered_load_by_hour(demand)[:, None], arrivals_by_hour(demand)
    shares = stats.poisson.pmf(BEDS, loads) / stats.poisson.cdf(BEDS, loads)
    return np.stack([np.bincount(month_of_hour, weights=arrivals * column) for column in shares.T], axis=1)


def around_decision(demand: Demand) -> np.ndarray:
    """Return the 40 bed counts around the one that turns about one in twenty away."""
    middle = int(demand.offered_load + np.sqrt(demand.offered_load))
    return np.arange(max(0, middle - AROUND), middle + AROUND)


def four_and_decide(demand: Demand, beds: np.ndarray) -> None:
    """Run the four other models, and read a limit off each."""
    for name in FIRST:
        curve = MODELS[name](demand, beds)
        try:
            decide(curve, TurnAwayLimit(0.05))
        except TargetOutOfReach:
            continue


def works_on(demand: Demand) -> list[Callable[[], object]]:
    """Return what is timed in one row."""
    beds = around_decision(demand)
    return [
        lambda: MODELS["seasonal_loss"](demand, beds),
        lambda: four_and_decide(demand, beds),
        lambda: MODELS["unlimited_beds"](demand, beds),
        lambda: MODELS["waiting"](demand, beds),
    ]


def main() -> None:
    """Print what each part costs."""
    ward = WARDS["40, exponential stays"]
    slow, fast = milliseconds(lambda: by_reference_library(ward), 3)[0], milliseconds(lambda: first_cut(ward))[0]
    print(
        f"52-week year × 0…200 beds by modified offered load: {fast:.1f} ms, scipy.stats {slow:.0f} ms: {slow / fast:.0f} ×"
    )
    print("least/median ms                    seasonal_loss  other four + decide   unlimited     waiting")
    for name, demand in WARDS.items():
        cells = [milliseconds(work) for work in works_on(demand)]
        print(f"{name:35s}", *(f"{least:7.0f}/{median:<6.0f}" for least, median in cells), flush=True)


if __name__ == "__main__":
    main()
