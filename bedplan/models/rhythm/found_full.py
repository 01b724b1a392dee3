"""Who comes, and who finds no free bed, by month and weekday: what a model of the hour-by-hour year reads into a curve."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from bedplan.models.rhythm.year import MONTHS, WEEKDAYS, month_of_hour, weekday_of_hour

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    Places = NDArray[np.int64]

GROUPS = MONTHS * WEEKDAYS
group_of_hour = month_of_hour * WEEKDAYS + weekday_of_hour
month_of_group, weekday_of_group = np.divmod(np.arange(GROUPS), WEEKDAYS)
_ALL_YEAR = np.zeros(GROUPS, dtype=np.int64)
_EVERYONE = 1.0 - 1e-14


class FoundFull(NamedTuple):
    """Patients a year, ``(84,)`` by month and weekday, and those of them who find no free bed, ``(84, n)``."""

    patients: Array
    full: Array

    def share(self, by: Places) -> Array:
        """Return the share who find no free bed in each of the larger groups that ``by`` ``(84,)`` puts them in."""
        is_in = (by == np.arange(by.max() + 1)[:, None]).astype(float)
        share = is_in @ self.full / np.maximum(is_in @ self.patients, 1e-300)[:, None]
        return np.where(share > _EVERYONE, 1.0, share)


def shares_full(unbooked: FoundFull, booked: FoundFull | None) -> dict[str, Array | None]:
    """Which share finds no free bed, over the year, by month, by weekday and by group? As a ``BedCurve`` calls them.

    Checked by: tests/models/test_seasonal.py, tests/models/test_unlimited.py
    """
    everyone = unbooked
    if booked is not None:
        everyone = FoundFull(unbooked.patients + booked.patients, unbooked.full + booked.full)
    return {
        "turn_away_probability": everyone.share(_ALL_YEAR)[0],
        "by_month": everyone.share(month_of_group),
        "by_weekday": everyone.share(weekday_of_group),
        "unbooked_turn_away": unbooked.share(_ALL_YEAR)[0],
        "booked_turn_away": None if booked is None else booked.share(_ALL_YEAR)[0],
    }
