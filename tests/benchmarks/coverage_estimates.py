"""How often do estimates hold the truth? Made-up wards of every kind, read from their own files; prints bias and coverage.

    python tests/benchmarks/coverage_estimates.py [--seeds 30] [--only steps]

Each ward is an hour-by-hour simulation of its own that uses nothing of the program. "arrivals", "stay" and "beds": share
of wards whose 95 % interval holds the long-run truth, and whose interval lies wholly below it; "drift": what is found on
average; "next year": share of years inside the 80 and 95 % ranges; "demand": share of wards whose 90 % interval holds
who really wanted the ward. 95 of 100 is right for 95 %; below 85 with 30 seeds is a finding.
"""

from __future__ import annotations

import argparse
import heapq
import math
import sys
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd
from scipy import signal

ROOT = Path(__file__).resolve().parents[2]
if str(ROOT) not in sys.path:
    sys.path.insert(0, str(ROOT))  # so that the file also runs as a script

from bedplan.data import (  # noqa: E402 - the path comes first
    Records,
    estimate_demand,
    forecast_arrivals,
    hidden_demand,
    read_capacity,
    read_records,
    read_refusals,
)

FIRST, DAYS, AHEAD = pd.Timestamp("2021-01-04"), 1_096, 365
HOURS = np.array([22, 18, 15, 13, 12, 13, 16, 22, 32, 43, 52, 58, 60, 60, 59, 58, 58, 58, 57, 54, 50, 44, 36, 29])
WEEK = np.array([1.10, 1.03, 1.02, 1.01, 1.03, 0.91, 0.90])


@dataclass(frozen=True)
class Kind:
    """One kind of ward: beds wanted on average, lognormal stays, rhythm, drift, families, a step some days ago, and beds.

    ``beds`` 0: there is always one. Those who find it full leave, and ``recorded`` of them are written down.
    """

    load: float
    stay: float
    spread: float = 1.0
    season: float = 0.1
    growth: float = 0.0
    drift: float = 0.0
    lasts: float = 120.0
    family: int = 1
    step: float = 1.0
    step_days: int = 56
    beds: int = 0
    recorded: float = 1.0

    @property
    def before(self) -> int:
        """How many days before the file does the simulation begin?"""
        return int(60 + 6 * self.stay * (1 + self.spread))


KINDS = {
    "tiny, 2-day stays": Kind(1.2, 2.0, 1.2),
    "small": Kind(4.0, 4.0),
    "middle, growing": Kind(12.0, 6.0, season=0.2, growth=0.02),
    "40-day stays": Kind(25.0, 40.0),
    "half-day stays": Kind(10.0, 0.5),
    "heavy tail": Kind(12.0, 6.0, 4.0),
    "twos": Kind(15.0, 5.0, family=2),
    "drift 3 %": Kind(40.0, 4.0, drift=0.03),
    "drift 5 %": Kind(25.0, 5.0, drift=0.05),
    "drift 10 %": Kind(25.0, 5.0, drift=0.10),
    "drift 10 %, a year": Kind(25.0, 5.0, drift=0.10, lasts=365.0),
    "steps: a fifth more": Kind(15.0, 5.0, step=1.2),
    "steps: a third more": Kind(40.0, 5.0, step=1.33, step_days=42),
    "steps: a third fewer": Kind(40.0, 5.0, step=0.67),
    "full: 6 in 100 leave": Kind(10.0, 4.0, beds=14),
    "full: 12 in 100, 60 % listed": Kind(12.0, 4.0, beds=14, recorded=0.6),
    "full: 25 in 100, 30 % listed": Kind(14.0, 4.0, beds=13, recorded=0.3),
    "full: 2 beds": Kind(1.0, 2.0, beds=2),
    "full: 60 beds": Kind(58.0, 5.0, beds=60),
    "full: half-day stays": Kind(8.0, 0.5, beds=10),
    "full: winter": Kind(14.0, 5.0, season=0.3, beds=16),
    "full: growing": Kind(14.0, 5.0, growth=0.08, beds=15),
    "full: drift 8 %": Kind(20.0, 4.0, drift=0.08, beds=22),
    "full: twos": Kind(10.0, 4.0, family=2, beds=13),
}


def rates(kind: Kind, rng: np.random.Generator) -> tuple[np.ndarray, np.ndarray]:
    """Return arrivals a day from the run-in to the year ahead: in the long run, and as they drift."""
    day = np.arange(-kind.before, DAYS + AHEAD)
    calendar = FIRST + pd.to_timedelta(day, unit="D")
    season = 1.0 + kind.season * np.cos(2.0 * np.pi * (calendar.day_of_year.to_numpy() - 15) / 365.25)
    level = (1.0 + kind.growth) ** ((day - DAYS + 182) / 365.25) * np.where(
        day >= DAYS - kind.step_days, kind.step, 1.0
    )
    steady = kind.load / kind.stay * season * WEEK[calendar.day_of_week] * level
    keeps = math.exp(-1.0 / kind.lasts)
    shocks = rng.normal(size=day.size) * math.sqrt(1.0 - keeps**2)
    shocks[0] = rng.normal()
    return steady, steady * np.exp(kind.drift * signal.lfilter([1.0], [1.0, -keeps], shocks) - kind.drift**2 / 2.0)


def patients(kind: Kind, rate: np.ndarray, rng: np.random.Generator) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return starts and ends of stays, and moments at which somebody found no bed, in days of the file."""
    families = rng.poisson(np.outer(rate / kind.family, HOURS / HOURS.sum()).ravel())
    moments = np.repeat(np.arange(families.size) / 24.0 - kind.before, families) + rng.random(families.sum()) / 24.0
    came = np.repeat(np.sort(moments), kind.family)
    sigma = math.sqrt(math.log1p(kind.spread**2))
    ends = came + rng.lognormal(math.log(kind.stay) - sigma**2 / 2.0, sigma, came.size)
    if not kind.beds:
        return came, ends, np.zeros(0)
    has_bed, busy = np.zeros(came.size, dtype=bool), []
    for place, moment in enumerate(came):
        while busy and busy[0] <= moment:
            heapq.heappop(busy)
        if len(busy) < kind.beds:
            has_bed[place] = True
            heapq.heappush(busy, ends[place])
    return came[has_bed], ends[has_bed], came[~has_bed]


def stamps(days: np.ndarray) -> list[str]:
    """Write days of the file as dates with times."""
    return list((FIRST + pd.to_timedelta(np.floor(days * 1_440), unit="min")).strftime("%Y-%m-%d %H:%M"))


def as_records(start: np.ndarray, end: np.ndarray) -> Records:
    """Write the ward's stays to a file and read them."""
    seen = (end >= 0) & (start < DAYS)
    ends = np.where(end[seen] < DAYS, stamps(end[seen]), "")
    table = pd.DataFrame(
        {"patient_key": np.arange(seen.sum()), "ward": "Heron", "start": stamps(start[seen]), "end": ends}
    )
    return read_records(table.to_csv(index=False).encode(), name="stays.csv")


def one_ward(kind: Kind, seed: int) -> dict[str, float]:
    """Simulate one ward and hold what its files say against the truth."""
    rng = np.random.default_rng(seed)
    steady, rate = rates(kind, rng)
    start, end, lost = patients(kind, rate, rng)
    records = as_records(start, end)
    latest = slice(kind.before + DAYS - 365, kind.before + DAYS)
    row, found = {}, None
    if kind.beds:
        found, row = hidden(kind, records, (start, lost), rng)
    estimate = estimate_demand(records, "Heron", hidden=found)
    true = {"arrivals": steady[latest].mean(), "stay": kind.stay, "beds": steady[latest].mean() * kind.stay}
    told = {
        "arrivals": estimate.arrivals_interval,
        "stay": estimate.mean_stay_interval,
        "beds": estimate.uncertainty.beds_wanted,
    }
    for name, (low, high) in told.items():
        row |= {f"{name} held": low <= true[name] <= high, f"{name} below": high < true[name]}
    row |= {"bias": estimate.arrivals_per_day / true["arrivals"] - 1.0, "drift": estimate.demand.rate_variation}
    row |= {"twos": estimate.demand.clustering, "stay bias": estimate.mean_stay_days / kind.stay - 1.0}
    year = forecast_arrivals(records, "Heron").years[0]
    came = ((start >= DAYS) & (start < DAYS + AHEAD)).sum()
    row["next 80"] = year.admissions_80[0] <= came <= year.admissions_80[1]
    row["next 95"] = year.admissions_95[0] <= came <= year.admissions_95[1]
    return row


def hidden(kind: Kind, records: Records, who: tuple[np.ndarray, np.ndarray], rng: np.random.Generator) -> tuple:
    """Return the ward's hidden demand, and how every method used did."""
    start, lost = who
    lost = lost[(lost >= 0) & (lost < DAYS)]
    true = (((start >= 0) & (start < DAYS)).sum() + lost.size) / DAYS
    beds = read_capacity(
        f"ward,from,to,staffed_beds\nHeron,2020-01-01,2030-01-01,{kind.beds}\n".encode(), name="beds.csv"
    )
    rows = "".join(
        f"{one},Heron,no bed,another hospital\n" for one in stamps(lost[rng.random(lost.size) < kind.recorded])
    )
    listed = read_refusals(f"time,ward,reason,outcome\n{rows}".encode(), name="refusals.csv")
    found = hidden_demand(records, "Heron", capacity=beds, refusals=listed, share_recorded=kind.recorded)
    row = {}
    for name, method in zip(("list", "specialty", "open time", "formula"), found.methods, strict=True):
        if method.used:
            row[f"{name} off"] = method.patients_per_day / true - 1.0
            row[f"{name} held"] = method.interval[0] <= true <= method.interval[1]
    return found, row


def main() -> None:
    """Run the kinds of ward and print a line for each."""
    parser = argparse.ArgumentParser(description="How often do estimates hold the truth?")
    parser.add_argument("--seeds", type=int, default=30)
    parser.add_argument("--only", default="", help="kinds whose names begin so")
    asked = parser.parse_args()
    for name, kind in KINDS.items():
        if name.startswith(asked.only):
            table = pd.DataFrame([one_ward(kind, 5_000 + seed) for seed in range(asked.seeds)])
            means = table.astype(float).mean()
            print(f"{name:30} " + "  ".join(f"{what} {value:+.3f}" for what, value in means.items()), flush=True)


if __name__ == "__main__":
    main()
