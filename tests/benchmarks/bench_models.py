"""How fast the models answer, as ratios and in milliseconds of processor time; run by hand, nothing is asserted.

python tests/benchmarks/bench_models.py
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

from bedplan.decision import TurnAwayLimit, decide
from bedplan.models import (
    MODELS,
    BookedList,
    Demand,
    LengthOfStay,
    leaving,
    offered_load_by_hour,
    rhythm_correction,
    year,
)
from bedplan.models.erlang import erlang_b_table
from bedplan.models.load_grid import load_grid
from bedplan.models.year import arrivals_by_hour, month_of_hour

if TYPE_CHECKING:
    from collections.abc import Callable

SEASON = (1.3, 1.18, 1.06, 0.97, 0.9, 0.84, 0.8, 0.8, 0.88, 1.0, 1.1, 1.24)
WEEK = (1.10, 1.03, 1.02, 1.01, 1.03, 0.91, 0.90)
DAY = tuple(1.0 - 0.6 * float(np.cos(2 * np.pi * (hour - 3) / 24)) for hour in range(24))
LIST = BookedList((8, 7, 5, 1, 1, 0, 0), LengthOfStay(3.5, 0.5), 13, 0.95)
BEDS = np.arange(201)
WARDS = {
    "load 24, months, weekdays and hours": Demand(6.0, LengthOfStay(4.0, 1.1), SEASON, WEEK, DAY),
    "load 40, exponential stays": Demand(10.0, LengthOfStay(4.0, 1.0, "gamma"), SEASON, WEEK, DAY),
    "load 40, groups and drift": Demand(
        10.0, LengthOfStay(4.0, 1.1), SEASON, WEEK, DAY, clustering=1.3, rate_variation=0.05
    ),
    "load 40 and a booked list": Demand(6.0, LengthOfStay(4.5, 1.1), SEASON, WEEK, DAY, booked=(LIST,)),
    "load 40, discharge hours and slip": Demand(
        10.0,
        LengthOfStay(4.0, 1.1),
        SEASON,
        WEEK,
        DAY,
        discharge_hours=(0,) * 9 + (1,) * 9 + (0,) * 6,
        weekend_slip=(0.35, 0.45),
    ),
    "load 100": Demand(25.0, LengthOfStay(4.0, 1.1), SEASON, WEEK, DAY),
    "load 300": Demand(75.0, LengthOfStay(4.0, 1.1), SEASON, WEEK, DAY),
}


def forget() -> None:
    """Empty every cache the models keep."""
    for module in (leaving, rhythm_correction, year):
        for one in vars(module).values():
            if hasattr(one, "cache_clear"):
                one.cache_clear()


def milliseconds(work: Callable[[], object], times: int = 5) -> float:
    """Return the median processor time of some work, every cache emptied before each time."""
    took = []
    for _ in range(times):
        forget()
        start = time.process_time()
        work()
        took.append(time.process_time() - start)
    return 1000.0 * float(np.median(took))


def first_cut(demand: Demand) -> np.ndarray:
    """Return the modified offered load's share by month, for 0 to 200 beds."""
    grid = load_grid(offered_load_by_hour(demand), arrivals_by_hour(demand), month_of_hour, 12)
    return grid.mean(erlang_b_table(grid.loads, BEDS))


def by_reference_library(demand: Demand) -> np.ndarray:
    """Return the same from scipy.stats: pmf ÷ cdf for each of 8,736 hours × 201 bed counts."""
    loads, arrivals = offered_load_by_hour(demand)[:, None], arrivals_by_hour(demand)
    shares = stats.poisson.pmf(BEDS, loads) / stats.poisson.cdf(BEDS, loads)
    return np.stack([np.bincount(month_of_hour, weights=arrivals * column) for column in shares.T], axis=1)


def main() -> None:
    """Print what each part costs."""
    ward = WARDS["load 40, exponential stays"]
    slow, fast = milliseconds(lambda: by_reference_library(ward), 3), milliseconds(lambda: first_cut(ward))
    print(
        f"52-week year × 0…200 beds by modified offered load: {fast:.1f} ms, scipy.stats {slow:.0f} ms: {slow / fast:.0f} ×"
    )
    others = [model for name, model in MODELS.items() if name != "seasonal_loss"]
    seasonal = MODELS["seasonal_loss"]
    for name, demand in WARDS.items():
        cold = milliseconds(lambda demand=demand: seasonal(demand, BEDS))
        rest = milliseconds(lambda demand=demand: [model(demand, BEDS) for model in others])
        seasonal(demand, BEDS)
        start = time.process_time()
        curve = seasonal(demand, BEDS)
        warm = 1000.0 * (time.process_time() - start)
        counts = np.arange(int(2 * demand.offered_load) + 40)
        wide = seasonal(demand, counts)
        start = time.process_time()
        decide(wide, TurnAwayLimit(0.05))
        choice = 1000.0 * (time.process_time() - start)
        print(
            f"{name:36s} seasonal_loss {cold:4.0f} ms first, {warm:3.0f} ms again; the other {len(others)} models "
            f"{rest:4.0f} ms; decide {choice:.1f} ms; {curve.beds.size} bed counts"
        )


if __name__ == "__main__":
    main()
