"""When did those come who wanted a bed on a ward, hour by hour, those included who could not be given one?"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.demand.demand_methods import CARRIED, LIST, OPEN_TIME, days_kept, share_of
from bedplan.data.files.dates import DAY_SECONDS
from bedplan.data.wards.occupancy import open_beds, present

if TYPE_CHECKING:
    import pandas as pd
    from numpy.typing import NDArray

    from bedplan.data.beside.logs import EventLog
    from bedplan.data.cleaning.records import Records
    from bedplan.data.demand.evidence import DemandMethod, Evidence, Range

    Array = NDArray[np.float64]

WEEK_HOURS, DAY_HOURS, BLOCK_DAYS = 168, 24, 28
LEAST_OPEN = 0.05  # of an hour of the week, or of four weeks: less tells nothing of who would have come


@dataclass(frozen=True, slots=True, eq=False)
class Asked:
    """Who asked for a bed on a ward, in every hour of the window (hours,), expected values included.

    ``by_chance``: variance ÷ mean that chance alone gives these figures, from day to day and over weeks. Above 1 where
    one who is listed stands for several; where expected values stand in, below 1 from day to day and above it over weeks.
    """

    by_hour: Array
    by_chance: tuple[float, float]


def who_asked(evidence: Evidence, followed: DemandMethod, logs: tuple[EventLog, ...], share: Range) -> Asked:
    """When did those come who wanted a bed on this ward, by the method followed? Adds up to what it found.

    A ward is full in its busy season and lately more often than before where demand grows, so admissions alone hide
    most of those who came then. Those on a list came when it says; by the other methods they are placed where the ward
    was full, at the rate of its open time around it. Days without a list are raised like the mean of the others.

    Checked by: tests/data/demand/test_asked.py
    """
    own = evidence.own
    given = by_hour(own.records, own.here["start"]) + by_hour(own.records, own.brought_home["start"])
    counted = np.repeat(own.records.counted_days, DAY_HOURS)
    wanted = followed.patients_per_day * evidence.days
    more, known, squares = np.zeros(given.size), counted, 0.0
    if followed.name == LIST:
        more, known, squares = _listed(evidence, logs, share)
    elif followed.name in (OPEN_TIME, CARRIED):
        more = _while_full(evidence, given)
    here = float(given[counted].sum())
    missing = max(wanted - here, 0.0) * known.sum() / max(counted.sum(), 1)
    more *= missing / max(float(more[known].sum()), 1e-9)
    asked = np.where(known, given + more, given * wanted / max(here, 1e-9))
    if followed.name == LIST:
        chance = (here + squares) / max(wanted, 1e-9)
        return Asked(asked, (chance, chance))
    return Asked(asked, (min(here / max(wanted, 1e-9), 1.0), max(wanted / max(here, 1e-9), 1.0)))


def by_hour(records: Records, moments: pd.Series) -> Array:
    """How many of these moments fall into each hour of the window? ``(hours,)``."""
    seconds = moments.dropna().to_numpy().astype("datetime64[s]").astype(np.int64)
    place = (seconds - int(records.window[0].timestamp())) // 3_600
    inside = place[(place >= 0) & (place < records.days * DAY_HOURS)]
    return np.bincount(inside, minlength=records.days * DAY_HOURS).astype(float)


def _listed(evidence: Evidence, logs: tuple[EventLog, ...], share: Range) -> tuple[Array, NDArray[np.bool_], float]:
    """Return whom listed cases stand for by hour, the hours in which every list was kept, and the sum of their squares."""
    records = evidence.own.records
    more, known, squares = np.zeros(records.days * DAY_HOURS), records.counted_days.copy(), 0.0
    for log in logs:
        low, high = share_of(log, share)
        stands_for = 2.0 / (low + high)
        listed = by_hour(records, log.for_lack_of_beds(evidence.own.ward, records.window)["time"])
        more += listed * stands_for
        squares += float(listed.sum()) * stands_for**2
        if listed.any():
            known &= days_kept(evidence, log)
    return more, np.repeat(known, DAY_HOURS), squares


def _while_full(evidence: Evidence, given: Array) -> Array:
    """Return how many would have come in each hour while the ward was full, at the rate of open time around it."""
    full, records = _full(evidence), evidence.own.records
    hour = (np.arange(given.size) + DAY_HOURS * records.window[0].weekday()) % WEEK_HOURS
    counted = np.repeat(records.counted_days, DAY_HOURS)
    came, hours, is_open = (
        np.bincount(hour, weights=part * counted, minlength=WEEK_HOURS) for part in (given, 1.0, 1.0 - full)
    )
    usual = (came / np.maximum(is_open, np.maximum(LEAST_OPEN * hours, 1e-9)))[hour]
    window = np.ones(min(BLOCK_DAYS * DAY_HOURS, given.size))
    seen, told, whole = (np.convolve(part * counted, window, "same") for part in (given, usual * (1.0 - full), usual))
    level = seen / np.maximum(told, np.maximum(LEAST_OPEN * whole, 1e-9))
    return level * usual * full * counted


def _full(evidence: Evidence) -> Array:
    """Return for which share of each hour the ward was full; of the four weeks around it where times of day are unknown."""
    if evidence.minutes is not None:
        return evidence.minutes.is_full.reshape(-1, 60).mean(axis=1)
    records = evidence.own.records
    beds = open_beds(records, evidence.own.ward, evidence.capacity, 1)
    full = (present(records, evidence.on_ward, DAY_SECONDS) >= beds).astype(float)
    window = np.ones(min(BLOCK_DAYS, full.size))
    around = np.convolve(full, window, "same") / np.convolve(np.ones(full.size), window, "same")
    return np.repeat(around, DAY_HOURS)
