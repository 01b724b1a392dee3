"""Would this have predicted last year? Earlier records alone against what then happened."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.arrivals import arrivals_of
from bedplan.data.occupancy import present
from bedplan.data.projecting import CensusOutlook, as_of, outlook
from bedplan.data.stays import stay_curve, stays_in_window
from bedplan.errors import UnreadableRecords
from bedplan.models import average_beds

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.data.capacity import Capacity
    from bedplan.data.records import Records

TESTED_DAYS = 365
LEAST_TRAINING_DAYS = 365
SAME_WEEK_DAYS = 364
STEPS = 12
SHARES = (0.1, 0.25, 0.5, 0.75, 0.9)  # quantiles that the pinball loss is averaged over
TOLERANCE = 0.10  # a band of 80 % that held under 70 % of days did not hold; common practice, no source


@dataclass(frozen=True)
class Backtest:
    """What the earlier records would have said about the last year, and what happened.

    ``days``: date, present, expected, low_80, high_80, low_95, high_95, last_year (the same weekday 364 days before).
    ``held_80``, ``held_95``: shares of days inside the bands; ``should_hold_80``, ``should_hold_95``: what whole
    counts make of them. ``pit`` (10,): shares of days in each tenth of what was expected; level = honest.
    ``errors`` and ``pinball``: mean absolute error and mean pinball loss of "model", "average" and "last year".
    ``months``: origin, held_80, held_95, expected, present; twelve steps, each from what was known at its start.
    ``brier_full`` (model, past share) scores the chance of a full ward; None without a capacity file.

    Checked by: tests/data/test_backtesting.py
    """

    ward: str
    origin: pd.Timestamp
    clock: str
    days: pd.DataFrame
    held_80: float
    held_95: float
    should_hold_80: float
    should_hold_95: float
    pit: NDArray[np.float64]
    errors: dict[str, float]
    pinball: dict[str, float]
    average_formula_beds: int
    days_above_average: int
    months: pd.DataFrame
    brier_full: tuple[float, float] | None

    @property
    def bands_held(self) -> bool:
        """Did about as many days lie inside the bands as should?"""
        return self.held_80 >= self.should_hold_80 - TOLERANCE and self.held_95 >= self.should_hold_95 - TOLERANCE / 2

    @property
    def passed(self) -> bool:
        """Did the bands hold, and was the model no worse than looking at the same week last year?"""
        return self.bands_held and self.pinball["model"] <= self.pinball["last year"]

    @property
    def verdict(self) -> str:
        """What came of it, in one sentence?"""
        word = "The check passed" if self.passed else "The bands held, but the same week last year was nearer"
        word = word if self.bands_held else "The check failed, so use a wider range on this ward"
        return (
            f"{word}: trained only on records before {self.origin.day} {self.origin:%B %Y}, the 80 % band held {self.held_80:.0%} of "
            f"the next {len(self.days)} days ({self.should_hold_80:.0%} expected of whole counts); on average it was "
            f"{self.errors['model']:.1f} patients off, the same week of the year before {self.errors['last year']:.1f}; the "
            f"average formula's {self.average_formula_beds} beds were exceeded on {self.days_above_average} days."
        )


def backtest(records: Records, ward: str, *, capacity: Capacity | None = None, clock_hour: int = 11) -> Backtest:
    """Would the earlier records have predicted how full this ward was last year?

    The last 365 days are put aside; what was known before them predicts the patients present each day at
    ``clock_hour``. Then twelve monthly steps, each from what was known at its start. Beside it the average formula and
    the same week of the year before.

    Raises:
        UnreadableRecords: less than two years of records, or no stays on the ward before the last year.

    Checked by: tests/data/test_backtesting.py
    """
    if records.days < TESTED_DAYS + LEAST_TRAINING_DAYS:
        raise UnreadableRecords(
            [f"A check on last year needs two years of records; {records.name} covers {records.days:,} days."]
        )
    origin = records.window[1] - pd.Timedelta(days=TESTED_DAYS)
    stays = stays_in_window(records, ward)
    seen = present(records, stays, 3_600).reshape(records.days, 24)[:, clock_hour].astype(float)
    known = as_of(records, origin)
    beds = None if capacity is None or ward not in capacity.wards else capacity.open_beds_by_day(ward, records.calendar)
    tested = slice(records.days - TESTED_DAYS, records.days)
    ahead = _with_beds(outlook(known, ward, TESTED_DAYS, clock_hour), beds, tested)
    actual, last_year = seen[tested], seen[records.days - TESTED_DAYS - SAME_WEEK_DAYS : records.days - SAME_WEEK_DAYS]
    days = _table(records.calendar[tested], actual, ahead, last_year)
    formula, average = _average(known, ward)
    naive = _naive(seen[: records.days - TESTED_DAYS], last_year)
    level = CensusOutlook(np.full(TESTED_DAYS, average), np.full(TESTED_DAYS, 1e-3), None)
    return Backtest(
        ward=ward,
        origin=origin,
        clock=f"{clock_hour:02d}:00",
        days=days,
        held_80=_held(days, 80),
        held_95=_held(days, 95),
        should_hold_80=ahead.expected_coverage(0.80),
        should_hold_95=ahead.expected_coverage(0.95),
        pit=_pit(ahead, actual),
        errors={
            "model": float(np.abs(actual - ahead.mean).mean()),
            "average": float(np.abs(actual - average).mean()),
            "last year": float(np.abs(actual - last_year).mean()),
        },
        pinball={
            name: pinball(one, actual) for name, one in (("model", ahead), ("average", level), ("last year", naive))
        },
        average_formula_beds=formula,
        days_above_average=int((actual > formula).sum()),
        months=_steps(records, ward, seen, beds, clock_hour),
        brier_full=None if beds is None else _brier(ahead, actual, seen, beds.to_numpy(), tested),
    )


def _with_beds(ahead: CensusOutlook, beds: pd.Series | None, days: slice) -> CensusOutlook:
    """Return the outlook with the open beds of those days as its ceiling."""
    return ahead if beds is None else replace(ahead, beds=beds.to_numpy(dtype=np.int64)[days])


def _table(
    calendar: pd.DatetimeIndex, actual: NDArray[np.float64], ahead: CensusOutlook, last_year: NDArray[np.float64]
) -> pd.DataFrame:
    """Return one row a day."""
    (low_80, high_80), (low_95, high_95) = ahead.band(0.80), ahead.band(0.95)
    return pd.DataFrame(
        {
            "date": calendar,
            "present": actual.astype(int),
            "expected": ahead.mean,
            "low_80": low_80,
            "high_80": high_80,
            "low_95": low_95,
            "high_95": high_95,
            "last_year": last_year.astype(int),
        }
    )


def _held(days: pd.DataFrame, share: int) -> float:
    """Return the share of days inside a band."""
    return float(days["present"].between(days[f"low_{share}"], days[f"high_{share}"]).mean())


def _pit(ahead: CensusOutlook, actual: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the shares of days in each tenth of what was expected (probability integral transform, middle of each step)."""
    middle = (ahead.chance_of_at_most(actual) + ahead.chance_of_at_most(actual - 1.0)) / 2
    return np.histogram(middle, bins=10, range=(0.0, 1.0))[0] / actual.size


def pinball(ahead: CensusOutlook, actual: NDArray[np.float64]) -> float:
    """How good are the bands, wide ones and misses both counted? Mean pinball loss over five quantiles; less is better.

    Source: Koenker & Bassett 1978 (the loss that quantiles minimise).
    Checked by: tests/data/test_backtesting.py
    """
    losses = []
    for share in SHARES:
        short = actual - ahead.quantile(share)
        losses.append(np.maximum(share * short, (share - 1.0) * short).mean())
    return float(np.mean(losses))


def _average(known: Records, ward: str) -> tuple[int, float]:
    """Return the average formula's beds and its average patients present, from the earlier records."""
    stays = stays_in_window(known, ward)
    per_year, mean_stay = arrivals_of(known, stays["start"]).per_year, stay_curve(known, stays, ward).mean_days
    return math.ceil(average_beds(per_year, mean_stay)), per_year * mean_stay / 365.0


def _naive(past: NDArray[np.float64], last_year: NDArray[np.float64]) -> CensusOutlook:
    """Return the same week last year as an outlook; its spread is what it was off by before, or that of chance."""
    if past.size > SAME_WEEK_DAYS + 28:
        spread = float((past[SAME_WEEK_DAYS:] - past[:-SAME_WEEK_DAYS]).std())
    else:
        spread = math.sqrt(2.0) * float(past.std())
    return CensusOutlook(last_year, np.full(last_year.size, max(spread, 0.1)), None)


def _steps(
    records: Records, ward: str, seen: NDArray[np.float64], beds: pd.Series | None, clock_hour: int
) -> pd.DataFrame:
    """Return twelve monthly steps, each predicted from what was known at its start."""
    rows = []
    bounds = np.linspace(records.days - TESTED_DAYS, records.days, STEPS + 1).round().astype(int)
    for first, last in pairwise(bounds):
        origin = records.window[0] + pd.Timedelta(days=int(first))
        ahead = _with_beds(
            outlook(as_of(records, origin), ward, int(last - first), clock_hour), beds, slice(first, last)
        )
        days = _table(records.calendar[first:last], seen[first:last], ahead, seen[first:last])
        rows.append(
            (origin, _held(days, 80), _held(days, 95), float(ahead.mean.mean()), float(seen[first:last].mean()))
        )
    return pd.DataFrame(rows, columns=["origin", "held_80", "held_95", "expected", "present"])


def _brier(
    ahead: CensusOutlook, actual: NDArray[np.float64], seen: NDArray[np.float64], beds: NDArray[np.int64], tested: slice
) -> tuple[float, float]:
    """Return the Brier score of the chance of a full ward, and that of always saying the past share.

    Source: Brier 1950.
    """
    full = (actual >= beds[tested]).astype(float)
    chance = 1.0 - CensusOutlook(ahead.mean, ahead.deviation, None).chance_of_at_most(beds[tested] - 1.0)
    usual = float((seen[: tested.start] >= beds[: tested.start]).mean())
    return float(((chance - full) ** 2).mean()), float(((usual - full) ** 2).mean())
