"""The census rebuilt from stays against the official one: how far apart, and whether it was counted at another time."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.wards.occupancy import present
from bedplan.data.wards.stays import stays_in_window
from bedplan.wording import percent

if TYPE_CHECKING:
    from bedplan.data.beside.census import Census
    from bedplan.data.cleaning.records import Records

AGREES = 0.02  # of patients on average; common practice, no source
SHIFTS = sorted(range(-24, 25), key=abs)  # hours by which a count may have been taken at another time than it says
FEWEST_DAYS, CLEARLY = 28, 0.2  # of days more alike at another time, below which it may be chance; no source
DAY_MINUTES = 1_440


@dataclass(frozen=True)
class CensusCheck:
    """The count rebuilt from stays against a census file. ``days``: date, rebuilt, official, one row a day both have.

    ``clock``: the time of day the census says. ``shift_hours``: at how many hours from there the stays agree with it on
    most days, and on which share (``alike_there``); 0 where no time is clearly better than the one it says.
    """

    ward: str
    days: pd.DataFrame
    clock: str = "00:00"
    shift_hours: int = 0
    alike_there: float = 0.0

    @property
    def difference(self) -> float:
        """By which share does the rebuilt count differ on average? Above 0: the stays show more patients."""
        official = float(self.days["official"].sum())
        return float(self.days["rebuilt"].sum() - official) / official if official > 0 else 0.0

    @property
    def days_alike(self) -> float:
        """On which share of days do the two agree to the patient?"""
        return float((self.days["rebuilt"] == self.days["official"]).mean())

    @property
    def apart(self) -> str:
        """Was it counted at another time than it says? A sentence without its full stop; nothing where it was not."""
        if not self.shift_hours:
            return ""
        hour, minute = (int(part) for part in self.clock.split(":"))
        days, there = divmod(hour + self.shift_hours, 24)
        when = {-1: "on the day before", 0: "on the same day", 1: "on the day after"}[days]
        a_day = ", a day apart" if abs(self.shift_hours) == 24 else ""
        return (
            f"counted at {there:02d}:{minute:02d} {when}{a_day}, it would be the same on {percent(self.alike_there)}; ask "
            "when patients were counted"
        )

    @property
    def sentence(self) -> str:
        """Do the two agree?"""
        word = "agree" if abs(self.difference) <= AGREES else "do not agree"
        only = " in total only" if self.apart and word == "agree" else ""
        return (
            f"{self.ward}: stays and census {word}{only}: patients differ by {percent(abs(self.difference))} over "
            f"{len(self.days):,} days, and the count is the same on {percent(self.days_alike)} of them"
            f"{f'; {self.apart}' if self.apart else ''}."
        )


def check_census(records: Records, census: Census, ward: str, clock: str = "00:00") -> CensusCheck:
    """Does the count rebuilt from stays agree with the official one at this time of day, or at another?

    Raises:
        UnreadableRecords: the ward is not in both files.

    Checked by: tests/data/wards/test_census_check.py, tests/data/wards/test_reconciling.py
    """
    official, records = census.linked_to(records).occupied(ward, clock), records.settled
    hour, minute = (int(part) for part in clock.split(":"))
    steps = present(records, stays_in_window(records, ward), 60)
    places = np.arange(records.days) * DAY_MINUTES + hour * 60 + minute
    both = pd.DataFrame({"rebuilt": pd.Series(steps[places], index=records.calendar), "official": official}).dropna()
    both = both.astype({"rebuilt": int, "official": int})
    found = CensusCheck(ward, both.rename_axis("date").reset_index(), clock)
    days = ((both.index - records.calendar[0]) // pd.Timedelta(days=1)).to_numpy()
    shift, alike = _best_shift(steps, places[days], both["official"].to_numpy())
    if len(both) < FEWEST_DAYS or alike < found.days_alike + CLEARLY:
        return found
    return CensusCheck(ward, found.days, clock, shift, alike)


def _best_shift(steps: np.ndarray, places: np.ndarray, official: np.ndarray) -> tuple[int, float]:
    """Return at how many hours from these minutes most counts are the official ones, and which share of them."""
    best = (0, -1.0)
    for hours in SHIFTS:
        moved = places + 60 * hours
        inside = (moved >= 0) & (moved < steps.size)
        alike = float((steps[moved[inside]] == official[inside]).mean()) if inside.any() else 0.0
        if alike > best[1]:
            best = (hours, alike)
    return best
