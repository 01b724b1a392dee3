"""Times in which nobody came though a ward is never so quiet by chance: closed, not yet open, or missing from the file."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.files.dates import DAY_SECONDS

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.data.cleaning.records import Records

    Days = NDArray[np.bool_]

LEAST_CHANCE = 1e-6  # over a whole file: silences likelier than that are left to chance
NEAR_DAYS = 91  # before and after a silence, from which the usual rate is taken
FEWEST_ARRIVALS = 50
ROUNDS = 6
MOST_SETTLING = 4  # of the days that count, one in so many may be left out for that
SETTLING_STAYS = 3.0  # mean stays after a silence until as many are in as usual; common practice, no source
MOST_TOLD = 3


def find_silences(records: Records, ward: str) -> tuple[tuple[pd.Timestamp, pd.Timestamp], ...]:
    """In which days (first, last) came nobody to this ward, though chance would hardly ever leave it so quiet?

    A run of days without anyone counts where the usual rate around it expects so many that chance leaves one such run
    in a million files: expected ÷ (variance ÷ mean of daily arrivals) > ln(arrivals × 1,000,000). The usual rate is the
    lowest of the 13 weeks before, the 13 weeks after, and the whole file, by weekday. Quiet wards, wards that open
    slowly and wards closed at weekends are left as they are.

    Checked by: tests/data/wards/test_silence.py
    """
    start = records.of_ward(ward)["start"].to_numpy().astype("datetime64[s]").astype(np.int64)
    place = (start - int(records.window[0].timestamp())) // DAY_SECONDS
    counts = np.bincount(place[(place >= 0) & (place < records.days)], minlength=records.days).astype(float)
    first, last = _runs(counts, records.counted_days)
    if counts.sum() < FEWEST_ARRIVALS or not first.size:
        return ()
    weekday = records.calendar.day_of_week.to_numpy()
    silent, swing = np.zeros(first.size, dtype=bool), 1.0
    for _ in range(ROUNDS):
        used = records.counted_days & ~_inside(first[silent], last[silent], records.days)
        usual = _usual(counts, weekday, used)
        expected = _expected(counts, usual, used, records.counted_days, (first, last))
        found = expected > swing * math.log(counts.sum() / LEAST_CHANCE)
        if (found == silent).all():
            break
        silent = found
        used &= ~_inside(first[silent], last[silent], records.days)
        usual = _usual(counts, weekday, used)
        swing = max(float(((counts - usual)[used] ** 2).sum()) / max(float(usual[used].sum()), 1e-9), 1.0)
    day = records.calendar
    return tuple((day[begin], day[end]) for begin, end in zip(first[silent], last[silent], strict=True))


def without_silences(records: Records, ward: str, *, settled: bool = False) -> Records:
    """What is left for this ward's rates? The same records, with its silences among the periods left out.

    ``settled`` leaves out, for counts of patients present, the days after each silence too in which the ward filled.
    """
    silences = find_silences(records, ward)
    if not silences:
        return records
    counts = records.counted_days.copy()
    for first, last in silences:
        counts &= ~((records.calendar >= first) & (records.calendar <= last))
    if settled:
        stays = records.of_ward(ward)
        mean_days = ((stays["end"] - stays["start"]).dt.total_seconds() / DAY_SECONDS).mean()
        filling = min(SETTLING_STAYS * mean_days, counts.sum() / MOST_SETTLING) if mean_days > 0 else 0.0
        for _, last in silences:
            counts &= ~((records.calendar > last) & (records.calendar <= last + pd.Timedelta(days=math.ceil(filling))))
    first, last = _runs(counts, np.ones(counts.size, dtype=bool))
    return replace(records, excluded=tuple(zip(records.calendar[first], records.calendar[last], strict=True)))


def silence_notes(records: Records, ward: str) -> list[str]:
    """Say when nobody came, how many would have been usual there, and what was done about it."""
    silences = find_silences(records, ward)
    if not silences:
        return []
    fewer = without_silences(records, ward)
    starts = records.of_ward(ward)["start"]
    came = int(((starts >= records.window[0]) & (starts < records.window[1])).sum())
    per_day = came / max(int(fewer.counted_days.sum()), 1)
    longest = sorted(sorted(silences, key=lambda one: one[0] - one[1])[:MOST_TOLD])
    told = ", ".join(_told(records, first, last) for first, last in longest)
    more = f", nor in {len(silences) - MOST_TOLD} shorter times" if len(silences) > MOST_TOLD else ""
    days = int(records.counted_days.sum() - fewer.counted_days.sum())
    return [
        (
            f"Nobody came {told}{more}, where about {per_day * days:,.0f} patients would have been usual: the ward was "
            f"closed then, or is missing from the file. These {days:,} days are left out of rates and rhythm. A ward "
            "that closes each year needs its beds in the rest of the year only."
        )
    ]


def _told(records: Records, first: pd.Timestamp, last: pd.Timestamp) -> str:
    """Write when a silence was: before the first patient, after the last, or from day to day."""
    if first <= records.window[0]:
        return f"until {last.day} {last:%B %Y}"
    if last + pd.Timedelta(days=1) >= records.window[1]:
        return f"from {first.day} {first:%B %Y} on"
    return f"from {first.day} {first:%B %Y} to {last.day} {last:%B %Y}"


def _runs(counts: NDArray[np.float64], used: Days) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return first and last day of every run of days without anyone; days left out don't end a run."""
    empty = np.concatenate(([False], (counts == 0) | ~used, [False]))
    change = np.flatnonzero(empty[1:] != empty[:-1])
    return change[::2], change[1::2] - 1


def _inside(first: NDArray[np.int64], last: NDArray[np.int64], days: int) -> Days:
    """Return which days lie in any of these runs."""
    change = np.bincount(first, minlength=days + 1) - np.bincount(last + 1, minlength=days + 1)
    return np.cumsum(change[:days]) > 0


def _usual(counts: NDArray[np.float64], weekday: NDArray[np.int64], used: Days) -> NDArray[np.float64]:
    """Return how many come on average on each day's weekday."""
    days = np.maximum(np.bincount(weekday[used], minlength=7), 1)
    return (np.bincount(weekday[used], weights=counts[used], minlength=7) / days)[weekday]


def _expected(
    counts: NDArray[np.float64],
    usual: NDArray[np.float64],
    used: Days,
    counted: Days,
    runs: tuple[NDArray[np.int64], NDArray[np.int64]],
) -> NDArray[np.float64]:
    """Return how many each run would have seen at the lowest of the rates around it, itself not among them."""
    came, weight = (np.concatenate(([0.0], np.cumsum(part[used]))) for part in (counts, usual))
    place = np.concatenate(([0], np.cumsum(used)))  # of each day among those used
    in_run = np.concatenate(([0.0], np.cumsum(usual * counted)))
    first, last = runs
    before, after = place[first], place[last + 1]
    low = np.ones(first.size)
    for begin, end in (
        (np.maximum(before - NEAR_DAYS, 0), before),
        (after, np.minimum(after + NEAR_DAYS, came.size - 1)),
    ):
        some = weight[end] - weight[begin] > 0
        rate = (came[end] - came[begin]) / np.where(some, weight[end] - weight[begin], 1.0)
        low = np.where(some, np.minimum(low, rate), low)
    return low * (in_run[last + 1] - in_run[first])
