"""What a ward was like: when it was full, how it swings, how long patients stay, how quickly beds turn over."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.wards.occupancy import bed_days, open_beds, present
from bedplan.data.wards.patients import beds_used, on_counted_day, started
from bedplan.data.wards.silence import without_silences
from bedplan.data.wards.specialty import find_home_wards
from bedplan.data.wards.stays import stay_curve, stays_in_window

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.data.beside.capacity import Capacity
    from bedplan.data.cleaning.records import Records

BLOCK_DAYS = 28  # drawn together, so that neighbouring days stay together
DRAWS = 500
LONG_STAYS_DAYS = (7, 14, 21)
JUST_BEFORE = pd.Timedelta(seconds=1)  # who leaves at midnight leaves with the day that ends


@dataclass(frozen=True, slots=True)
class LongStays:
    """Stays of more than so many days: their share of patients and of bed-days, and the beds their later days fill."""

    days: int
    share_of_patients: float
    share_of_bed_days: float
    beds_after: float


@dataclass(frozen=True, slots=True)
class FullTimes:
    """When had the ward no free bed? Shares of time, closed beds not counted as beds; nan where nothing was recorded.

    ``by_month`` (12,) January first; ``by_weekday_and_hour`` (7, 24) Monday first; ``occupancy`` patients ÷ open beds.
    """

    share: float
    by_month: NDArray[np.float64]
    by_weekday_and_hour: NDArray[np.float64]
    over_full_share: float
    occupancy: float
    available_bed_days: float


@dataclass(frozen=True)
class WardDescription:
    """One ward as its records show it, over the file's window less the days in which patients present are missing.

    Every count is over the days that count: not those of periods left out, nor those in which the ward was silent.
    How long patients stay is told by all of them.
    ``hourly`` patients present, by hour; ``midnight_mean`` and ``daily_peak_mean`` averages over days;
    ``by_hour_of_day`` (24,) average patients present. ``variance_over_mean`` of the midnight count, with a 95 %
    interval from days drawn in blocks of 28. ``turnover_interval_days`` and ``throughput`` (patients a bed a year) are
    None without a capacity file. ``delay_beds``: beds used on average after the patients were ready to leave, None where
    the file has no such dates.

    Checked by: tests/data/wards/test_describing.py
    """

    ward: str
    hourly: pd.Series
    midnight_mean: float
    daily_peak_mean: float
    by_hour_of_day: NDArray[np.float64]
    variance_over_mean: float
    variance_interval: tuple[float, float]
    admissions: int
    discharges: int
    bed_days: float
    mean_stay_days: float
    median_stay_days: float
    long_stays: tuple[LongStays, ...]
    discharge_hours: NDArray[np.float64]
    outlier_bed_days: float
    full: FullTimes | None
    turnover_interval_days: float | None
    throughput: float | None
    delay_beds: float | None


def describe_ward(records: Records, ward: str, capacity: Capacity | None = None) -> WardDescription:
    """What was this ward like? Counted by the hour from its stays; nothing is assumed.

    Raises:
        UnreadableRecords: no stays on it, or none that ended.

    Checked by: tests/data/wards/test_describing.py
    """
    records = without_silences(records.settled, ward, settled=True)
    stays = stays_in_window(records, ward)
    counts = present(records, stays, 3_600)
    by_day = counts.reshape(records.days, 24)
    used = records.counted_days
    finished = stays[stays["end"].notna() & on_counted_day(records, stays["end"] - JUST_BEFORE)]
    curve = stay_curve(records, stays, ward)
    days_used = float(bed_days(records, stays).sum())
    beds = capacity and capacity.linked_to(records)
    known = beds if beds and ward in beds.wards else None
    full = None if known is None else full_times(records, ward, present(records, stays, 60), known)
    turnover = throughput = None
    if full is not None and len(finished) and full.available_bed_days > 0:
        turnover = (full.available_bed_days - days_used) / len(finished)
        throughput = len(finished) / full.available_bed_days * 365.0
    midnight = by_day[used, 0].astype(float)
    hours = finished["end"].dt.hour.to_numpy()
    return WardDescription(
        ward=ward,
        hourly=pd.Series(counts, index=pd.date_range(records.window[0], periods=counts.size, freq="h"), name=ward),
        midnight_mean=float(midnight.mean()),
        daily_peak_mean=float(by_day[used].max(axis=1).mean()),
        by_hour_of_day=by_day[used].mean(axis=0),
        variance_over_mean=variance_over_mean(midnight),
        variance_interval=block_interval(midnight, seed=1),
        admissions=started(records, stays["start"]),
        discharges=len(finished),
        bed_days=days_used,
        mean_stay_days=curve.mean_days,
        median_stay_days=_median(stays),
        long_stays=tuple(_long_stays(records, stays, days) for days in LONG_STAYS_DAYS),
        discharge_hours=np.bincount(hours, minlength=24) / max(len(finished), 1),
        outlier_bed_days=_outlier_bed_days(records, ward),
        full=full,
        turnover_interval_days=turnover,
        throughput=throughput,
        delay_beds=_delay_beds(records, stays),
    )


def full_times(records: Records, ward: str, minutes: NDArray[np.int32], capacity: Capacity) -> FullTimes:
    """When had this ward no free bed? ``minutes``: patients present each minute of the window.

    By the minute, because beds change hands on the hour. Beds closed on a day are not beds that day; hours of days with
    no open bed at all are left out.
    """
    beds = open_beds(records, ward, capacity, 24)
    use = np.repeat(records.counted_days, 24) & (beds > 0)
    hours = pd.date_range(records.window[0], periods=beds.size, freq="h")
    by_hour = minutes.reshape(-1, 60)
    full = (by_hour >= beds[:, None]).mean(axis=1)
    over_full = (by_hour > beds[:, None]).mean(axis=1)
    week = hours.day_of_week.to_numpy() * 24 + hours.hour.to_numpy()
    return FullTimes(
        share=float(full[use].mean()) if use.any() else 0.0,
        by_month=_shares(hours.month.to_numpy()[use] - 1, full[use], 12),
        by_weekday_and_hour=_shares(week[use], full[use], 168).reshape(7, 24),
        over_full_share=float(over_full[use].mean()) if use.any() else 0.0,
        occupancy=float(by_hour[use].sum() / 60.0 / beds[use].sum()) if use.any() else 0.0,
        available_bed_days=float(beds[use].sum()) / 24.0,
    )


def _shares(group: NDArray[np.int64], part: NDArray[np.float64], groups: int) -> NDArray[np.float64]:
    """Return the mean part of each group's hours for which something holds; nan where nothing was recorded."""
    sums, hours = np.bincount(group, weights=part, minlength=groups), np.bincount(group, minlength=groups)
    return np.divide(sums, hours, out=np.full(groups, np.nan), where=hours > 0)


def variance_over_mean(counts: NDArray[np.float64]) -> float:
    """How far does a count swing? 1 = as much as chance alone where nobody is turned away; 0 for an empty ward."""
    return float(counts.var(ddof=1) / counts.mean()) if counts.size > 1 and counts.mean() > 0 else 0.0


def block_interval(counts: NDArray[np.float64], *, seed: int, block: int = BLOCK_DAYS) -> tuple[float, float]:
    """How far may variance ÷ mean be off by chance? 95 % interval from blocks of days drawn anew, ends joined.

    Days follow one another, so that single days drawn anew would promise too much.

    Source: Politis & Romano 1992 (circular block bootstrap).
    Checked by: tests/data/wards/test_describing.py
    """
    if counts.size < 2 * block:
        return 0.0, float("inf")
    rng = np.random.default_rng(seed)
    blocks = -(-counts.size // block)
    starts = rng.integers(0, counts.size, (DRAWS, blocks))
    places = (starts[:, :, None] + np.arange(block)) % counts.size
    drawn = counts[places.reshape(DRAWS, -1)[:, : counts.size]]
    means = drawn.mean(axis=1)
    ratios = drawn.var(axis=1, ddof=1) / np.maximum(means, 1e-12)
    low, high = np.quantile(ratios, [0.025, 0.975])
    return float(low), float(high)


def _delay_beds(records: Records, stays: pd.DataFrame) -> float | None:
    """Return the beds used on average by patients who were ready to leave; None where no date says so."""
    if "ready" not in stays or stays["ready"].isna().all():
        return None
    ready = stays[stays["ready"].notna()]
    since = np.maximum(ready["ready"].to_numpy(), ready["start"].to_numpy())
    return beds_used(records, ready.assign(start=since))


def _median(stays: pd.DataFrame) -> float:
    """Return the median of finished stays in days: for description, never for sizing."""
    finished = stays[stays["end"].notna()]
    return float((finished["end"] - finished["start"]).median() / pd.Timedelta(days=1))


def _long_stays(records: Records, stays: pd.DataFrame, days: int) -> LongStays:
    """Return what stays beyond so many days take, of those there on a day that counts."""
    end = stays["end"].fillna(records.window[1])
    length = ((end - stays["start"]) / pd.Timedelta(days=1)).to_numpy()
    used = bed_days(records, stays)
    there = (used > 0) | on_counted_day(records, stays["start"])
    is_long = length > days
    later = stays["start"] + pd.Timedelta(days=days)
    after = beds_used(records, stays.assign(start=np.maximum(later.to_numpy(), stays["start"].to_numpy())))
    total = max(float(used.sum()), 1e-9)
    of_patients = float(is_long[there].mean()) if there.any() else 0.0
    return LongStays(days, of_patients, float(used[is_long].sum()) / total, after)


def _outlier_bed_days(records: Records, ward: str) -> float:
    """Return the bed-days that other wards' patients took on this ward; 0 where specialties aren't known."""
    homes = find_home_wards(records)
    if homes is None:
        return 0.0
    here = homes.stays[(homes.stays["ward"] == ward) & homes.stays["is_outlier"]]
    return float(here["bed_days"].sum())
