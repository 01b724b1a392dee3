"""A ward read once a day, against counting patients one by one."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from bedplan.data.ahead.readings import take_readings
from bedplan.data.ahead.stay_bands import fit_stay_bands, growth_of_bed_days
from tests.data.made_wards import FIRST_DAY, MadeWard, as_records, made_records

SMALL = MadeWard(3.0, 6.0, 1.2, days=400)


def by_hand(records, hour: int, from_readings: int = 0, to_readings: int = 10**6) -> list[int]:  # noqa: ANN001
    """Count patients in at each reading, and for how many they had been in already, one by one."""
    found = []
    for day in records.calendar:
        moment = day + pd.Timedelta(hours=hour)
        number = 0
        for start, end in zip(records.stays["start"], records.stays["end"], strict=True):
            if start <= moment and (pd.isna(end) or end > moment):
                first = start.normalize() + pd.Timedelta(hours=hour)
                first += pd.Timedelta(days=int(first < start))
                number += from_readings <= (moment - first).days < to_readings
        found.append(number)
    return found


@pytest.mark.parametrize(("dates_only", "hour"), [(False, 11), (True, 0)])
def test_patients_at_a_reading_as_counted_one_by_one(dates_only: bool, hour: int) -> None:
    """At 11:00, or at midnight for dates alone; those in their first two readings, and those after three weeks."""
    records = made_records(MadeWard(3.0, 6.0, 1.2, days=60), seed=0, dates_only=dates_only)
    readings = take_readings(records, "Heron")

    assert readings.hour == hour
    assert readings.present().tolist() == by_hand(records, hour)
    assert readings.present(0, 2).tolist() == by_hand(records, hour, 0, 2)
    assert readings.present(21).tolist() == by_hand(records, hour, 21)


def test_arrivals_are_those_since_the_reading_before() -> None:
    """Every patient who comes between two readings is counted once; the first day, half unseen, doesn't count."""
    records = made_records(SMALL, seed=1)
    readings = take_readings(records, "Heron")
    start = records.stays["start"]
    third = (start > FIRST_DAY + pd.Timedelta("1D 11h")) & (start <= FIRST_DAY + pd.Timedelta("2D 11h"))

    assert readings.arrivals.counts[2] == third.sum()
    assert readings.arrivals.counted.tolist() == [False] + [True] * 399


def test_a_ward_that_opened_late_does_not_count_as_empty() -> None:
    """Days before the first patient are left out, and at most three mean stays after, in which it fills."""
    begin = np.arange(200.0, 400.0, 0.5)
    readings = take_readings(as_records(begin, begin + 3.0, 400), "Heron")

    assert not readings.arrivals.counted[:200].any()
    assert readings.arrivals.counted[200 + 3 * 3 + 1 :].all()


def test_how_long_patients_stay_is_known_from_readings() -> None:
    """The share still in after so many readings is that of all patients drawn, though a tenth is cut off by the end."""
    ward = MadeWard(8.0, 9.0, 1.0, days=120)
    curves = []
    for seed in range(12):
        readings = take_readings(made_records(ward, seed), "Heron")
        curves.append(readings.stay_curve(readings.days).at(np.arange(30)))
    # The truth: many patients watched for a hundred times as long, where next to none is cut off.
    whole = take_readings(made_records(MadeWard(8.0, 9.0, 1.0, days=4_000), seed=99), "Heron")
    inside = (whole.first > 0) & (whole.first < 3_500)
    readings_in = (whole.last - whole.first + 1)[inside]
    truth = np.array([(readings_in > day).mean() for day in range(30)])

    assert np.mean(curves, axis=0) == pytest.approx(truth, abs=0.02)


def test_weekdays_on_which_more_leave_are_seen() -> None:
    """Where nobody leaves at a weekend, who came on Thursday is in on Sunday as surely as on Saturday."""
    rng = np.random.default_rng(0)
    begin = np.sort(rng.uniform(0, 700, 4_000))
    leave = begin + rng.exponential(3.0, begin.size)
    weekday = (np.floor(leave).astype(int) + 4) % 7  # 1 April 2022 was a Friday
    leave = np.where(weekday == 5, np.floor(leave) + 2.5, np.where(weekday == 6, np.floor(leave) + 1.5, leave))
    readings = take_readings(as_records(begin, leave, 700), "Heron")
    still_in = readings.still_in(700, readings.stay_curve(700))

    thursday = still_in[3]
    # Saturday's reading at 11:00 is two readings on; who is in then stays past Sunday's and Monday's.
    assert thursday[3] / thursday[2] > 0.93
    assert thursday[1] / thursday[0] < 0.85
    level = readings.present()[100:].mean()
    assert still_in.sum(axis=1).mean() * 4_000 / 700 == pytest.approx(level, rel=0.03)


def test_bed_days_grow_where_stays_do() -> None:
    """Stays that lengthen by 8 % a year, arrivals as before: bed-days grow, most in the long tail, and heads don't."""
    growth, heads, tail = [], [], []
    for seed in range(4):
        readings = take_readings(made_records(MadeWard(8.0, 8.0, 1.2, growth=0.0, stays_grow=0.08), seed), "Heron")
        bands = fit_stay_bands(readings, readings.days, 0.0)
        growth.append(growth_of_bed_days(bands)[0])
        heads.append(bands[0].growth_per_year)
        tail.append(bands[3].growth_per_year)
        assert sum(band.beds_in_use for band in bands) == pytest.approx(readings.present()[-365:].mean(), rel=1e-6)

    # Drawn towards the growth of arrivals, so short of the whole 8 %, never past it on average.
    assert 0.025 < np.mean(growth) < 0.09
    assert np.mean(heads) < np.mean(growth) < np.mean(tail) + 0.02
