"""Wards made up for the tests of looking ahead: their truth is known because they are drawn from it."""

from __future__ import annotations

import heapq
import math
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd

from bedplan.data import IntakeReport, Records
from bedplan.data.beside.capacity import Capacity

MONTHS = np.array([1.24, 1.15, 1.02, 0.95, 0.92, 0.88, 0.86, 0.84, 0.92, 1.00, 1.06, 1.16])
WEEKDAYS = np.array([1.10, 1.04, 1.02, 1.01, 1.03, 0.91, 0.89])
FIRST_DAY = pd.Timestamp("2022-04-01")
RUN_IN_DAYS = 300
MINUTES_A_DAY = 1_440


@dataclass(frozen=True)
class MadeWard:
    """Poisson arrivals with season, weekday and growth; lognormal stays. ``jump`` multiplies arrivals of the last year.

    ``beds``: patients who find that many taken leave, or wait in turn outside (``waits``: a share of them);
    ``handover_days`` pass before a freed bed is theirs. ``stays_grow``: a share by which stays lengthen each year.
    """

    per_day: float
    mean_days: float
    variation: float
    days: int = 1_096
    growth: float = 0.02
    jump: float = 1.0
    stays_grow: float = 0.0
    beds: int | None = None
    waits: float = 0.0
    handover_days: float = 0.0

    def rates(self) -> np.ndarray:
        """Return the true arrivals a day, from the start of the run-in."""
        whole = pd.date_range(FIRST_DAY - pd.Timedelta(days=RUN_IN_DAYS), periods=RUN_IN_DAYS + self.days)
        years = (np.arange(whole.size) - RUN_IN_DAYS) / 365.25
        rate = self.per_day * MONTHS[whole.month - 1] / MONTHS.mean() * WEEKDAYS[whole.day_of_week]
        return rate * (1 + self.growth) ** years * np.where(np.arange(whole.size) >= whole.size - 365, self.jump, 1.0)


def made_records(ward: MadeWard, seed: int, *, dates_only: bool = False) -> Records:
    """Return the records of such a ward, named Heron: all stays that touch its window."""
    rng = np.random.default_rng(seed)
    counts = rng.poisson(ward.rates())
    came = np.sort(np.repeat(np.arange(counts.size) - RUN_IN_DAYS, counts) + rng.beta(2.2, 1.8, counts.sum()))
    sigma = math.sqrt(math.log1p(ward.variation**2))
    stay = rng.lognormal(math.log(ward.mean_days) - sigma**2 / 2, sigma, came.size)
    stay = stay * (1 + ward.stays_grow) ** (came / 365.25)
    begin, end = came, came + stay
    if ward.beds is not None:
        waits = rng.random(came.size) < ward.waits
        begin, end = _in_beds(came, stay, waits, ward.beds, ward.handover_days)
    touching = (end >= 0) & (begin < ward.days)
    return as_records(begin[touching], end[touching], ward.days, dates_only=dates_only)


def as_records(begin: np.ndarray, end: np.ndarray, days: int, *, dates_only: bool = False) -> Records:
    """Return records of stays given in days after the window's first midnight; ends after the window are not known."""
    round_to = 1.0 if dates_only else 1.0 / MINUTES_A_DAY
    start, stop = (
        FIRST_DAY + pd.to_timedelta(np.floor(x / round_to) * round_to, unit="D").round("min") for x in (begin, end)
    )
    last = FIRST_DAY + pd.Timedelta(days=days)
    stays = pd.DataFrame(
        {
            "patient_key": np.arange(begin.size),
            "ward": pd.Categorical(["Heron"] * begin.size),
            "start": start,
            "end": pd.Series(stop).where(stop < last),
        }
    )
    report = IntakeReport(rows_in=begin.size, used=begin.size, repaired=0, set_aside=0)
    return Records(
        name="made up",
        stays=stays,
        set_aside=stays.iloc[:0],
        wards=("Heron",),
        report=report,
        window=(FIRST_DAY, last),
        seen_until=last,
        fingerprint="",
        has_times=not dates_only,
    )


def with_beds(beds: int, days: int = 1_096) -> Capacity:
    """Return a capacity file that gives Heron so many beds throughout."""
    row = {"ward": "Heron", "from": FIRST_DAY, "to": FIRST_DAY + pd.Timedelta(days=days)}
    table = pd.DataFrame([{**row, "funded": beds, "staffed": beds, "closed": 0, "reason": ""}])
    return Capacity("capacity.csv", table, ("Heron",))


def _in_beds(
    came: np.ndarray, stay: np.ndarray, waits: np.ndarray, beds: int, handover_days: float
) -> tuple[np.ndarray, np.ndarray]:
    """Return begins and ends of those who get a bed: at once, or, where they wait, when it is their turn."""
    leaving: list[float] = []
    kept = []
    for moment, days, stands_by in zip(came.tolist(), stay.tolist(), waits.tolist(), strict=True):
        while leaving and leaving[0] <= moment:
            heapq.heappop(leaving)
        if len(leaving) < beds:
            begin = moment
        elif stands_by:
            begin = heapq.heappop(leaving) + handover_days
        else:
            continue
        heapq.heappush(leaving, begin + days)
        kept.append((begin, begin + days))
    begins, ends = np.array(kept).T
    return begins, ends


def without_arrivals(records: Records, first: int, last: int) -> Records:
    """Return the records without those who came from day ``first`` up to ``last``, not among them."""
    day = (records.stays["start"] - records.window[0]).dt.days
    return replace(records, stays=records.stays[~day.between(first, last - 1)].reset_index(drop=True))
