"""Print how many patients a second are simulated, beside the same ward in SimPy: python tests/benchmarks/bench_simulation.py."""

from __future__ import annotations

import random
import sys
import time
from pathlib import Path
from typing import TYPE_CHECKING

import simpy

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from bedplan.models import BookedList, Demand, LengthOfStay, simulate_ward

if TYPE_CHECKING:
    from collections.abc import Iterator

EXPONENTIAL = LengthOfStay(4.0, 1.0, "gamma")
WINTER = (1.3, 1.2, 1.1, 1.0, 0.9, 0.9, 0.8, 0.8, 0.9, 1.0, 1.0, 1.1)
WEEK = (1.1, 1.1, 1.1, 1.0, 1.0, 0.8, 0.9)


def simpy_rate(beds: int, arrivals: int, *, waits: bool) -> float:
    """Play a ward of 6 arrivals a day and 4-day stays in SimPy, as its handbook would; return patients a second."""
    chance, env = random.Random(1), simpy.Environment()  # noqa: S311  chance, not secrets
    ward = simpy.Resource(env, beds)

    def patient() -> Iterator[simpy.Event]:
        with ward.request() as bed:
            yield bed
            yield env.timeout(chance.expovariate(0.25))

    def door() -> Iterator[simpy.Event]:
        for _ in range(arrivals):
            yield env.timeout(chance.expovariate(6.0))
            if waits or ward.count < beds:
                env.process(patient())

    env.process(door())
    start = time.perf_counter()
    env.run()
    return arrivals / (time.perf_counter() - start)


def our_rate(demand: Demand, beds: int, when_full: str) -> float:
    """Simulate a ward with everything left at its default; return patients counted a second, best of three."""
    rates = []
    for seed in range(3):
        start = time.perf_counter()
        ward = simulate_ward(demand, beds, seed=seed, when_full=when_full)
        rates.append(ward.arrivals / (time.perf_counter() - start))
    return max(rates)


def main() -> None:
    """Print the table."""
    steady = Demand(6.0, EXPONENTIAL)
    rhythm = Demand(6.0, LengthOfStay(4.0), month_factors=WINTER, weekday_factors=WEEK)
    booked = BookedList((2, 2, 2, 2, 2, 0, 0), LengthOfStay(2.0))
    for when_full in ("leaves", "waits"):
        theirs = max(simpy_rate(31, 100_000, waits=when_full == "waits") for _ in range(3))
        print(f"{when_full}: SimPy {theirs:,.0f} patients a second")
        for name, demand, beds in (
            ("steady", steady, 31),
            ("seasons and weekdays, lognormal stays", rhythm, 36),
            ("the same, with a booked list", rhythm.with_changes(booked=(booked,)), 42),
            ("300 beds", steady.with_changes(arrivals_per_day=66.0), 300),
        ):
            ours = our_rate(demand, beds, when_full)
            print(f"  {name}: {ours:,.0f} patients a second, {ours / theirs:.0f} times SimPy")


if __name__ == "__main__":
    main()
