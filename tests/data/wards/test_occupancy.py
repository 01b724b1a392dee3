"""Patients present and bed-days, against counting one by one."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pytest

from bedplan.data import read_records
from bedplan.data.wards.occupancy import bed_days, present, present_by_ward

if TYPE_CHECKING:
    from collections.abc import Callable

    from bedplan.data import Records


@pytest.fixture(scope="module")
def ward() -> Records:
    """Return three hundred random stays of three weeks, some unfinished."""
    rng = np.random.default_rng(9)
    rows = []
    for n in range(300):
        start = pd.Timestamp("2024-01-01") + pd.Timedelta(minutes=int(rng.integers(0, 21 * 1_440)))
        end = start + pd.Timedelta(minutes=int(rng.integers(60, 7 * 1_440)))
        rows.append(f"p{n},Heron,{start:%Y-%m-%d %H:%M},{end if end < pd.Timestamp('2024-01-22') else ''}")
    return read_records("\n".join(["patient_key,ward,start,end", *rows]).encode())


@pytest.mark.parametrize("step_minutes", [1, 60, 1_440])
def test_counts_are_those_of_looking_at_every_moment(ward: Records, step_minutes: int) -> None:
    """At each moment, those who have come and not yet left are present; on the minute of leaving, no more."""
    counts = present(ward, ward.stays, step_minutes * 60)
    moments = pd.date_range(ward.window[0], periods=counts.size, freq=f"{step_minutes}min")
    look = range(0, counts.size, max(counts.size // 400, 1))
    slow = [int(((ward.stays["start"] <= moments[n]) & ~(ward.stays["end"] <= moments[n])).sum()) for n in look]

    assert counts[list(look)].tolist() == slow


def test_bed_days_are_the_hours_within_the_window(read: Callable[..., Records]) -> None:
    """A stay from before the window counts from its start only; one unfinished counts to its end."""
    early = [f"p{n},p{n},Heron,2024-03-{n % 28 + 1:02d} 10:00,2024-03-{n % 28 + 1:02d} 22:00" for n in range(60)]
    records = read("a,a,Heron,2024-01-01 00:00,2024-03-01 12:00", "b,b,Heron,2024-03-20 06:00,", *early)
    days = pd.Series(bed_days(records, records.stays), index=records.stays["start"])

    assert records.window == (pd.Timestamp("2024-03-01"), pd.Timestamp("2024-03-29"))
    assert days[pd.Timestamp("2024-01-01")] == pytest.approx(0.5)
    assert days[pd.Timestamp("2024-03-20 06:00")] == pytest.approx(8.75)


def test_mean_census_is_bed_days_over_days(ward: Records) -> None:
    """Little's law as an identity: patients present, minute by minute, add up to the bed-days."""
    counts = present(ward, ward.stays, 60)

    assert counts.mean() == pytest.approx(bed_days(ward, ward.stays).sum() / ward.days, rel=1e-4)


@pytest.mark.parametrize("step_minutes", [60, 1_440])
def test_all_wards_at_once_are_the_wards_one_by_one(larkmere: Records, step_minutes: int) -> None:
    """Counting every ward in one go gives each ward's own counts."""
    together = present_by_ward(larkmere, step_minutes * 60)

    assert set(together) == set(larkmere.wards)
    for ward in larkmere.wards:
        assert (together[ward] == present(larkmere, larkmere.of_ward(ward), step_minutes * 60)).all()
