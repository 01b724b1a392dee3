"""What a ward was like, against figures worked out by hand and laws that must hold."""

from __future__ import annotations

import datetime as dt
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pytest
from scipy import stats

from bedplan.data import IntakeChoices, describe_ward, read_capacity
from bedplan.data.wards.describing import block_interval, variance_over_mean
from demo_data.files import in_window
from demo_data.flow import simulate
from demo_data.generate import DEMO_SEED
from demo_data.patients import stay_end

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    from bedplan.data import Capacity, Records


@pytest.fixture(scope="module")
def beds(demo_data: Path) -> Capacity:
    """Return the demo's beds by date."""
    return read_capacity(demo_data / "capacity.csv")


def test_a_ward_worked_out_by_hand(read: Callable[..., Records]) -> None:
    """Two beds, three patients in four days: every figure follows with pencil and paper."""
    records = read(
        "a,a,Heron,2024-01-01 00:00,2024-01-03 12:00",
        "b,b,Heron,2024-01-01 06:00,2024-01-02 06:00",
        "c,c,Heron,2024-01-02 12:00,2024-01-05 00:00",
    )
    capacity = read_capacity(
        b"ward,from,to,staffed_beds,closed_beds\nHeron,2024-01-01,2024-01-03,2,0\nHeron,2024-01-04,,2,1\n"
    )
    ward = describe_ward(records, "Heron", capacity)

    assert records.days == 4
    assert ward.bed_days == pytest.approx(2.5 + 1 + 2.5)
    assert (ward.admissions, ward.discharges) == (3, 3)
    assert ward.midnight_mean == pytest.approx((1 + 2 + 2 + 1) / 4)
    assert ward.daily_peak_mean == pytest.approx((2 + 2 + 2 + 1) / 4)
    # Full: both beds from 06:00 on the 1st to 06:00 on the 2nd, from 12:00 on the 2nd to 12:00 on the 3rd; on the 4th
    # the one open bed all day. Open bed-days: 2 + 2 + 2 + 1.
    assert ward.full.share == pytest.approx((24 + 24 + 24) / 96)
    assert ward.full.available_bed_days == pytest.approx(7)
    assert ward.full.occupancy == pytest.approx(6 / 7)
    assert ward.turnover_interval_days == pytest.approx((7 - 6) / 3)
    assert ward.throughput == pytest.approx(3 / 7 * 365)
    assert ward.full.by_month[0] == pytest.approx(0.75)
    # 1 January 2024 was a Monday: full from 06:00 on; Thursday all day.
    assert ward.full.by_weekday_and_hour[0].tolist() == [0.0] * 6 + [1.0] * 18
    assert ward.full.by_weekday_and_hour[3].tolist() == [1.0] * 24
    assert ward.discharge_hours[[0, 6, 12]] == pytest.approx([1 / 3] * 3)


def test_stay_turnover_and_throughput_agree(larkmere: Records, beds: Capacity) -> None:
    """Bed-days a discharge + turnover interval = days a patient takes of a bed, for every ward (an identity)."""
    for ward in larkmere.wards:
        figures = describe_ward(larkmere, ward, beds)

        assert figures.bed_days / figures.discharges + figures.turnover_interval_days == pytest.approx(
            365 / figures.throughput
        )
        assert figures.by_hour_of_day.mean() == pytest.approx(figures.hourly.mean())
        assert figures.midnight_mean <= figures.daily_peak_mean


def test_closed_beds_are_not_empty_beds(larkmere: Records, beds: Capacity) -> None:
    """Plover lost 12 beds for nine days of February 2024: its denominator does too."""
    figures = describe_ward(larkmere, "Plover", beds)

    assert figures.full.available_bed_days == 30 * 1_096 - 12 * 9 - 6 * 8


def test_the_demos_winter_is_seen(larkmere: Records, beds: Capacity) -> None:
    """Kestrel is full far more of January than of August."""
    figures = describe_ward(larkmere, "Kestrel", beds)

    assert figures.full.by_month[0] > 2 * figures.full.by_month[7]


def test_kestrel_at_eleven_is_what_the_demos_own_census_counted(larkmere: Records, demo_data: Path) -> None:
    """Midnight and 11:00, day by day and on average, are those its generator counted, and more by day."""
    census = pd.read_csv(demo_data / "census.csv").query("ward == 'Kestrel'")
    figures = describe_ward(larkmere, "Kestrel")
    counted = {clock: census.loc[census["time"] == clock, "beds_occupied"].to_numpy() for clock in ("00:00", "11:00")}

    for clock, hour in (("00:00", 0), ("11:00", 11)):
        assert (figures.hourly.to_numpy()[hour::24] == counted[clock]).all()
        assert figures.by_hour_of_day[hour] == pytest.approx(counted[clock].mean())
    assert counted["11:00"].mean() > counted["00:00"].mean()


def test_the_demos_long_stays(larkmere: Records) -> None:
    """Plover's stays past 21 days: the true shares of all who wanted it lie in the 90 % intervals of the records' shares.

    True: each patient's own stay, as its generator draws it, whether or not there was a bed. Intervals: stays drawn anew.
    """
    flow, long_stays = simulate(DEMO_SEED), describe_ward(larkmere, "Plover").long_stays[2]
    plover = flow.hospital.by_name["Plover"]
    wants = [want for want in flow.wants if want.ward == "Plover" and in_window(want) and not want.after_refusal]
    true = np.array([stay_end(plover, want.chances, want.wanted_at) - want.wanted_at for want in wants]) / 1_440
    seen = larkmere.of_ward("Plover")
    seen = (seen["end"].fillna(larkmere.window[1]) - seen["start"]).dt.total_seconds().to_numpy() / 86_400
    drawn = seen[np.random.default_rng(1).integers(0, seen.size, (1_000, seen.size))]
    patients = np.quantile((drawn > 21).mean(axis=1), (0.05, 0.95))
    bed_days = np.quantile((drawn * (drawn > 21)).sum(axis=1) / drawn.sum(axis=1), (0.05, 0.95))

    assert long_stays.days == 21
    assert patients[0] < long_stays.share_of_patients < patients[1]
    assert patients[0] < (true > 21).mean() < patients[1]
    assert bed_days[0] < long_stays.share_of_bed_days < bed_days[1]
    assert bed_days[0] < true[true > 21].sum() / true.sum() < bed_days[1]
    assert long_stays.beds_after == pytest.approx(4.6, abs=0.6)  # in the trial it was planned by


def test_chance_has_variance_over_mean_of_one() -> None:
    """A Poisson count has variance ÷ mean 1, and the interval holds it."""
    counts = np.random.default_rng(1).poisson(25.0, 2_000).astype(float)
    low, high = block_interval(counts, seed=2)

    assert low < 1.0 < high
    assert low < variance_over_mean(counts) < high
    assert high - low < 0.3


def test_days_that_hang_together_widen_the_interval() -> None:
    """Where neighbouring days are alike, blocks promise less than single days drawn anew; the truth is inside.

    Patients present in a ward that never turns away are Poisson, with days correlated by exp(−1/5) for 5-day stays.
    """
    rng = np.random.default_rng(3)
    came = rng.uniform(0, 1_500, rng.poisson(5 * 1_500))
    left = came + rng.exponential(5.0, came.size)
    counts = np.array([((came <= day) & (left > day)).sum() for day in range(50, 1_500)], dtype=float)
    blocks, singles = block_interval(counts, seed=4), block_interval(counts, seed=4, block=1)

    assert blocks[0] < 1.0 < blocks[1]
    assert blocks[1] - blocks[0] > 1.3 * (singles[1] - singles[0])


def test_the_interval_is_as_wide_as_chance_theory_says() -> None:
    """(n − 1) × variance ÷ mean of Poisson counts is χ² with n − 1 degrees of freedom, 95 % of it in the interval.

    Source: index of dispersion, Fisher 1925, Statistical Methods for Research Workers, § 19 (from memory).
    """
    days = 400
    wanted = np.diff(stats.chi2.ppf([0.025, 0.975], days - 1))[0] / (days - 1)
    drawn = (np.random.default_rng(seed).poisson(25.0, days).astype(float) for seed in range(25))
    widths = [np.diff(block_interval(counts, seed=seed, block=1))[0] for seed, counts in enumerate(drawn)]

    assert np.mean(widths) == pytest.approx(wanted, rel=0.05)


def test_without_a_file_of_beds_nothing_is_said_of_beds(larkmere: Records) -> None:
    """Without a capacity file nothing is said about full hours, turnover or throughput."""
    figures = describe_ward(larkmere, "Dunlin")

    assert (figures.full, figures.turnover_interval_days, figures.throughput) == (None, None, None)
    assert figures.hourly.index[0] == pd.Timestamp("2022-04-01")


def test_days_left_out_are_in_no_figure_worked_out_by_hand(read: Callable[..., Records]) -> None:
    """One bed for eight days, the fifth and sixth left out: what happened on them is in no count."""
    rows = (
        "a,a,Heron,2024-01-01 00:00,2024-01-02 12:00,x",  # 1.5 days
        "b,b,Heron,2024-01-02 12:00,2024-01-05 00:00,x",  # 2.5, gone when the fifth day begins
        "c,c,Heron,2024-01-05 06:00,2024-01-05 18:00,x",  # none: came and left while it doesn't count
        "d,d,Heron,2024-01-06 00:00,2024-01-08 12:00,y",  # 1.5 of 2.5, came while it doesn't count
        "e,e,Heron,2024-01-08 12:00,2024-01-09 00:00,x",  # 0.5
        "f,f,Teal,2024-01-01 00:00,2024-01-09 00:00,y",
    )
    left_out = IntakeChoices(excluded=((dt.date(2024, 1, 5), dt.date(2024, 1, 6)),))
    records = read(*rows, headings="patient_key,spell_key,ward,start,end,specialty", choices=left_out)
    ward = describe_ward(records, "Heron", read_capacity(b"ward,from,to,staffed_beds\nHeron,2024-01-01,,1\n"))

    assert (ward.bed_days, ward.admissions, ward.discharges) == (pytest.approx(6), 3, 4)
    # The bed is in use on all of the six days that count.
    assert (ward.full.share, ward.full.available_bed_days, ward.full.occupancy) == (1.0, 6, pytest.approx(1))
    assert ward.turnover_interval_days == pytest.approx(0)
    assert ward.throughput == pytest.approx(4 / 6 * 365)
    assert ward.discharge_hours[[0, 12]] == pytest.approx([0.5, 0.5])
    assert ward.outlier_bed_days == pytest.approx(1.5)  # d, whose specialty is at home on Teal


def test_long_stays_of_days_left_out_are_in_no_figure(read: Callable[..., Records]) -> None:
    """Long stays are counted by the patients there on days that count, and by their bed-days on those days."""
    records = read(
        "a,a,Heron,2024-01-01 00:00,2024-01-02 00:00",
        "b,b,Heron,2024-01-03 00:00,2024-01-13 00:00",
        "c,c,Heron,2024-01-05 00:00,2024-01-12 12:00",
        "d,d,Heron,2024-01-19 00:00,2024-01-20 00:00",
        choices=IntakeChoices(excluded=((dt.date(2024, 1, 5), dt.date(2024, 1, 11)),)),
    )
    long_stays = describe_ward(records, "Heron").long_stays[0]

    # Counted: a 1; b 2 before and 1 after; c the 12th until noon; d 1. Past day 7: b from the 10th, c from the 12th.
    assert long_stays.days == 7
    assert long_stays.share_of_patients == pytest.approx(2 / 4)
    assert long_stays.share_of_bed_days == pytest.approx((3 + 0.5) / (1 + 3 + 0.5 + 1))
    assert long_stays.beds_after == pytest.approx((1 + 0.5) / (19 - 7))


def test_days_ready_on_another_ward_are_not_this_wards(read: Callable[..., Records]) -> None:
    """A patient ready on the 2nd, who came to this ward on the 4th and left on the 6th, took 2 days of 10, not 4."""
    records = read(
        "a,a,Heron,2024-01-04 12:00,2024-01-06 12:00,2024-01-02 12:00",
        "b,b,Heron,2024-01-01 12:00,2024-01-10 12:00,",
        headings="patient_key,spell_key,ward,start,end,ready_date",
    )

    assert describe_ward(records, "Heron").delay_beds == pytest.approx(2 / 10)


def test_beds_used_after_patients_were_ready(read: Callable[..., Records], larkmere: Records) -> None:
    """Two patients ready 2 and 1 days before they left, in 10 days: 0.3 beds; wards without such dates say nothing."""
    records = read(
        "a,a,Heron,2024-01-01 12:00,2024-01-06 12:00,2024-01-04 12:00",
        "b,b,Heron,2024-01-02 12:00,2024-01-10 12:00,2024-01-09 12:00",
        "c,c,Heron,2024-01-02 12:00,2024-01-10 12:00,",
        headings="patient_key,spell_key,ward,start,end,ready_date",
    )

    assert describe_ward(records, "Heron").delay_beds == pytest.approx((2 + 1) / 10)
    assert describe_ward(larkmere, "Dunlin").delay_beds is None
    # The demo's ready dates lie 60 % of the stay before its end, for the long stays of Plover.
    late = larkmere.of_ward("Plover")
    late = late[late["ready"].notna() & late["end"].notna()]
    waited = ((late["end"] - late["ready"]) / (late["end"] - late["start"])).mean()
    assert waited == pytest.approx(0.6, abs=0.01)
