"""How long patients waited for a bed, by a list of requests; waits nobody knows are no short waits."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bedplan.errors import UnreadableRecords
from bedplan.wording import MONTHS, percent

if TYPE_CHECKING:
    import pandas as pd

    from bedplan.data.beside.logs import EventLog

FEWEST_A_MONTH = 30  # known waits in a month of the year, below which nothing is said of it; common practice, no source
LONG_SHARE = 0.95
AT_ONCE_HOURS = 0.05  # what would be written as 0.0 hours


@dataclass(frozen=True, slots=True)
class BedWaits:
    """How long the patients asked for on one ward waited for its bed, between two days.

    ``waited``: requests whose wait is known, ``over`` of them longer than ``limit_hours``; ``never_given``: no bed was
    given, or not by the end of the file; ``unknown``: the file doesn't tell. ``median_hours`` and ``hours_of_95``: within
    which half, and 95 in 100, of the known waits lie, None without any. ``by_month``: month 1 to 12 → share over the
    limit, where 30 waits or more are known.
    """

    ward: str
    name: str
    first_day: pd.Timestamp
    last_day: pd.Timestamp
    limit_hours: float
    waited: int
    over: int
    never_given: int
    unknown: int
    median_hours: float | None
    hours_of_95: float | None
    by_month: dict[int, float]

    @property
    def requests(self) -> int:
        """How many requests are there in all?"""
        return self.waited + self.never_given + self.unknown

    @property
    def share_over(self) -> float | None:
        """Which share of the known waits is longer than the limit? None where none is known."""
        return self.over / self.waited if self.waited else None

    @property
    def most_over(self) -> float:
        """Which share would be, if everybody without a bed, and everybody whose wait is not known, waited longer?"""
        return (self.over + self.never_given + self.unknown) / self.requests

    @property
    def sentence(self) -> str:
        """What would I say about it?"""
        return " ".join(part for part in (self._told(), self._months(), self._others()) if part)

    def _told(self) -> str:
        """Say how long those waited whose wait is known."""
        between = f"{self.first_day.day} {self.first_day:%B %Y} to {self.last_day.day} {self.last_day:%B %Y}"
        if self.share_over is None:
            return f"{self.name} asks for a bed on {self.ward} {self.requests:,} times ({between}), and tells no wait."
        half = f"within {self.median_hours:.1f} hours" if self.median_hours >= AT_ONCE_HOURS else "at once"
        return (
            f"{percent(self.share_over)} of {self.waited:,} requests for a bed on {self.ward} waited over "
            f"{self.limit_hours:g} hours ({self.name}, {between}): half had one {half}, 95 in "
            f"100 within {self.hours_of_95:.1f}."
        )

    def _months(self) -> str:
        """Say which month was worst, and which best."""
        if len(self.by_month) < 2:
            return ""
        worst, best = (pick(self.by_month, key=self.by_month.get) for pick in (max, min))
        low, high = percent(self.by_month[best]), percent(self.by_month[worst])
        return f"{MONTHS[worst - 1]} was worst ({high}), {MONTHS[best - 1]} best ({low})."

    def _others(self) -> str:
        """Say for whom no wait is known."""
        parts = []
        if self.never_given:
            parts.append(f"for {self.never_given:,} more no bed is written down as given")
        if self.unknown:
            parts.append(f"of {self.unknown:,} more the wait is not known")
        if not parts:
            return ""
        told = " and ".join(parts)
        return f"{told[0].upper()}{told[1:]}: had they all waited longer, it was {percent(self.most_over)}."


def waits_for_a_bed(log: EventLog, ward: str, limit_hours: float = 4.0) -> BedWaits:
    """How long did patients wait for a bed on this ward, by a list of bed requests? ``limit_hours``: the planner's.

    Requests of which the wait is not known are counted apart, never as short waits. Every request counts, those of one
    patient asked for twice too.

    Raises:
        UnreadableRecords: no request for this ward, or a list without times or hours of a bed given.

    Source: 95 in 100 is the smallest wait at or below which so many lie (the inverse of the empirical distribution).
    Checked by: tests/data/beside/test_waits.py
    """
    rows = log.of_ward(ward)
    if rows.empty or "wait_hours" not in rows:
        lacks = f"no request for a bed on {ward}" if rows.empty else "neither the time a bed was given nor the wait"
        raise UnreadableRecords([f"{log.name} has {lacks}: waits can't be told."])
    known = rows[rows["wait_hours"].notna()]
    hours = np.sort(known["wait_hours"].to_numpy())
    months = (known["wait_hours"] > limit_hours).groupby(known["time"].dt.month).agg(["mean", "size"])
    never = int(rows["never_given"].sum())
    return BedWaits(
        ward=ward,
        name=log.name,
        first_day=rows["time"].min(),
        last_day=rows["time"].max(),
        limit_hours=limit_hours,
        waited=len(known),
        over=int((hours > limit_hours).sum()),
        never_given=never,
        unknown=len(rows) - len(known) - never,
        median_hours=float(np.median(hours)) if hours.size else None,
        hours_of_95=float(hours[int(np.ceil(LONG_SHARE * hours.size)) - 1]) if hours.size else None,
        by_month={int(month): float(row["mean"]) for month, row in months.iterrows() if row["size"] >= FEWEST_A_MONTH},
    )
