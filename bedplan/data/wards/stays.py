"""One ward's stays in the file's window, and the curve of how long they last."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.cleaning.windows import BY_DISCHARGE
from bedplan.data.wards.survival import StayCurve, product_limit
from bedplan.errors import ImpossibleFigure, UnreadableRecords
from bedplan.models import LengthOfStay

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.data.cleaning.records import Records

FEWEST_TO_COMPARE = 100


def stays_in_window(records: Records, ward: str) -> pd.DataFrame:
    """Which of the ward's stays touch the file's window?

    Raises:
        UnreadableRecords: none does.
    """
    stays = records.of_ward(ward)
    first, last = records.window
    touching = stays[(stays["start"] < last) & ~(stays["end"] <= first)]
    if touching.empty:
        raise UnreadableRecords([f"Ward “{ward}” has no stay between {first:%d %B %Y} and {last:%d %B %Y}."])
    return touching


def watched_stays(
    records: Records, stays: pd.DataFrame
) -> tuple[NDArray[np.float64], NDArray[np.bool_], NDArray[np.float64]]:
    """For how many days was each stay seen, has it ended, and after how many days did watching begin? Three ``(n,)``.

    Those in at the window's start are watched from then on only. In a file chosen by discharge date long stays near its
    end are missing, but those who left before the window's end are all there: in a ward that goes on as before they are
    a fair sample, whenever they came.
    """
    day = np.timedelta64(86_400, "s")
    by_discharge = records.chosen_by == BY_DISCHARGE
    if by_discharge:
        stays = stays[stays["end"] <= records.window[1]]
    start = stays["start"].to_numpy()
    finished = stays["end"].notna().to_numpy()
    end = np.where(finished, stays["end"].to_numpy(), np.datetime64(records.seen_until, "s"))
    first = np.datetime64(records.window[0], "s")
    entry = np.maximum((first - start) / day, 0.0) * (not by_discharge)
    return np.maximum((end - start) / day, 0.0), finished, entry


def stay_curve(records: Records, stays: pd.DataFrame, ward: str) -> StayCurve:
    """How long do these patients stay? Unfinished stays count for what was seen of them.

    Raises:
        UnreadableRecords: none of the stays has ended, or none lasts.
    """
    try:
        curve = product_limit(*watched_stays(records, stays))
    except ImpossibleFigure as problem:
        raise UnreadableRecords(
            [f"No stay on ward “{ward}” has ended, so how long patients stay can't be told: check the end column."]
        ) from problem
    if curve.mean_days <= 0:
        raise UnreadableRecords(
            [f"Every stay on ward “{ward}” starts and ends at one time, so how long patients stay can't be told."]
        )
    return curve


def fitted_stay(curve: StayCurve) -> LengthOfStay:
    """Return the lognormal or gamma stay of the measured mean and spread, whichever runs closer to the curve."""
    mean, variation = max(curve.mean_days, 1e-3), min(curve.variation, 20.0)
    grid = np.linspace(0.0, max(curve.longest_days, mean), 400)
    measured = curve.at(grid)
    choices = [LengthOfStay(mean, variation, shape) for shape in ("lognormal", "gamma")]
    return min(choices, key=lambda stay: float(np.abs(stay.survival(grid) - measured).sum()))


def stay_change(records: Records, stays: pd.DataFrame, ward: str) -> tuple[float, float] | None:
    """How long did patients stay before the latest year, and in it? (before, in it), only where the two clearly differ.

    None where the file has less than two years, or where chance explains the difference (two standard errors).

    Checked by: tests/data/demand/test_estimating.py
    """
    since = records.window[1] - pd.Timedelta(days=365)
    late = (stays["end" if records.chosen_by == BY_DISCHARGE else "start"] >= since).to_numpy()
    finished = stays["end"].notna().to_numpy()
    if records.days < 730 or min((late & finished).sum(), (~late & finished).sum()) < FEWEST_TO_COMPARE:
        return None
    before, after = (stay_curve(records, stays[which], ward) for which in (~late, late))
    error = float(np.hypot(before.mean_standard_error, after.mean_standard_error))
    clear = abs(after.mean_days - before.mean_days) > 2.0 * error
    return (before.mean_days, after.mean_days) if clear else None
