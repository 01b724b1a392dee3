"""A ward's demand against wards whose truth is known."""

from __future__ import annotations

import re
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pytest

from bedplan.data import IntakeChoices, estimate_demand, read_capacity, read_records
from bedplan.models import LengthOfStay
from tests.data.made_wards import MadeWard, as_records, made_records

if TYPE_CHECKING:
    from pathlib import Path

    from bedplan.data import Records

MONTHS = np.array([1.24, 1.15, 1.02, 0.95, 0.92, 0.88, 0.86, 0.84, 0.92, 1.00, 1.06, 1.16])
HOURS = np.array(
    [2.2, 1.8, 1.5, 1.3, 1.2, 1.3, 1.6, 2.2, 3.2, 4.3, 5.2, 5.8, 6, 6, 5.9, 5.8, 5.8, 5.8, 5.7, 5.4, 5, 4.4, 3.6, 2.9]
)


def invented_ward(per_day: float, days: int, stay: LengthOfStay, seed: int, growth: float = 0.0) -> Records:
    """Return the records of a ward nobody is turned away from, all stays that touch the window."""
    rng = np.random.default_rng(seed)
    run_in = 200
    calendar = pd.date_range("2022-04-01", periods=days) if days else None
    whole = pd.date_range(calendar[0] - pd.Timedelta(days=run_in), periods=days + run_in)
    rate = per_day * MONTHS[whole.month - 1] * (1 + growth) ** ((np.arange(whole.size) - run_in) / 365.25)
    counts = rng.poisson(rate)
    came = np.repeat(whole.to_numpy().astype("datetime64[s]"), counts)
    came = came + rng.choice(24, came.size, p=HOURS / HOURS.sum()) * np.timedelta64(3600, "s")
    came = came + rng.integers(0, 60, came.size) * np.timedelta64(60, "s")
    left = came + (stay.sample(came.size, rng) * 86_400).astype("timedelta64[s]")
    first, last = calendar[0].to_datetime64(), (calendar[-1] + pd.Timedelta(days=1)).to_datetime64()
    touching = (left >= first) & (came < last)
    lines = [
        f"p{n},Heron,{str(a).replace('T', ' ')},{str(b).replace('T', ' ') if b < last else ''}"
        for n, (a, b) in enumerate(zip(came[touching], left[touching], strict=True))
    ]
    return read_records("\n".join(["patient_key,ward,start,end", *lines]).encode())


@pytest.fixture(scope="module")
def ward() -> Records:
    """Three years of six patients a day for five days."""
    return invented_ward(6.0, 1_096, LengthOfStay(5.0, 1.1), seed=21)


def test_arrivals_stay_and_beds_of_a_known_ward(ward: Records) -> None:
    """Six a day for five days want 30 beds; each figure lies inside its own interval widened by half."""
    estimate = estimate_demand(ward, "Heron")
    for figure, interval, truth in (
        (estimate.arrivals_per_day, estimate.arrivals_interval, 6.0),
        (estimate.mean_stay_days, estimate.mean_stay_interval, 5.0),
        (estimate.beds_wanted, estimate.uncertainty.beds_wanted, 30.0),
    ):
        low, high = interval
        assert low < figure < high
        assert figure - 1.5 * (figure - low) < truth < figure + 1.5 * (high - figure)

    assert estimate.variation == pytest.approx(1.1, abs=0.1)
    assert estimate.demand.length_of_stay.shape == "lognormal"


def test_the_rhythm_of_a_known_ward(ward: Records) -> None:
    """Months and hours come back; weekdays, which had none, stay near 1; no growth is invented."""
    estimate = estimate_demand(ward, "Heron")

    assert estimate.month_factors == pytest.approx(MONTHS / MONTHS.mean(), abs=0.09)
    assert estimate.hour_factors == pytest.approx(HOURS / HOURS.mean(), abs=0.25)
    assert estimate.weekday_factors == pytest.approx([1.0] * 7, abs=0.06)
    assert abs(estimate.growth_per_year) < 3 * estimate.growth_error
    assert estimate.demand.clustering == 1.0


def test_admissions_a_year_are_counted_not_modelled(ward: Records) -> None:
    """With more than two years, the admissions quoted are those of the last 365 days."""
    estimate = estimate_demand(ward, "Heron")
    starts = ward.stays["start"]

    assert estimate.admissions_per_year == (starts >= ward.window[1] - pd.Timedelta(days=365)).sum()
    assert estimate.counted_from == ward.window[1] - pd.Timedelta(days=365)


def test_part_of_a_year_is_freed_from_its_season() -> None:
    """Fourteen months with two winters don't make the year busier than it is."""
    records = invented_ward(12.0, 426, LengthOfStay(3.0, 1.0), seed=5)  # April to the May after next
    estimate = estimate_demand(records, "Heron")

    low, high = estimate.arrivals_interval
    assert low < 12.0 < high


def test_patients_in_at_the_start_do_not_lengthen_the_stay() -> None:
    """In a short window of long stays, those found in the beds are the long ones; the estimate is not misled."""
    records = invented_ward(10.0, 60, LengthOfStay(12.0, 1.2), seed=6)
    estimate = estimate_demand(records, "Heron")
    stays = records.stays
    in_already = stays[stays["start"] < records.window[0]]
    theirs = ((in_already["end"] - in_already["start"]) / pd.Timedelta(days=1)).mean()

    assert abs(estimate.mean_stay_days - 12.0) < 3 * estimate.uncertainty.stay_error * 12.0
    assert theirs > 1.3 * 12.0  # those in at the start are the long ones
    assert any("unfinished" in note for note in estimate.notes)


def test_excluded_days_are_left_out() -> None:
    """A quarter in which nobody came, excluded, leaves the rate of the other days."""
    rows = [
        f"p{n}{k},Heron,{day:%Y-%m-%d} {8 + 4 * k:02d}:00,{day + pd.Timedelta(days=3):%Y-%m-%d} 12:00"
        for n, day in enumerate(pd.date_range("2023-01-01", periods=365))
        for k in range(2)
        if not 4 <= day.month <= 6
    ]
    content = "\n".join(["patient_key,ward,start,end", *rows]).encode()
    chosen = IntakeChoices(excluded=((pd.Timestamp("2023-04-01").date(), pd.Timestamp("2023-06-30").date()),))
    estimate = estimate_demand(read_records(content, choices=chosen), "Heron")

    assert estimate.arrivals_per_day == pytest.approx(2.0, rel=0.02)
    assert any("left out" in note for note in estimate.notes)


def test_admissions_are_never_called_arrivals(larkmere: Records, demo_data: Path) -> None:
    """Every estimate says that records hold admissions only; today's beds come from the capacity file."""
    capacity = read_capacity(demo_data / "capacity.csv")
    for ward in larkmere.wards:
        estimate = estimate_demand(larkmere, ward, capacity=capacity)
        assert any("Admissions are not arrivals" in note for note in estimate.notes)
        assert estimate.beds_today == capacity.beds_today(ward)
        assert estimate.measured_stay.mean_days == pytest.approx(estimate.mean_stay_days)


def test_the_demos_stays_are_those_it_was_made_of(larkmere: Records) -> None:
    """Wards whose stays the generator draws directly come back: mean within 5 %, spread within 15 %.

    Dunlin: lognormal 3.2 days plus the wait for a discharge round, about 3.5 in ten runs of the demo; Merlin: 4.05 days.
    """
    for ward, mean, variation in (("Dunlin", 3.53, 0.89), ("Merlin", 4.05, 1.29), ("Sandpiper", 3.84, 0.50)):
        estimate = estimate_demand(larkmere, ward)
        assert estimate.mean_stay_days == pytest.approx(mean, rel=0.08)
        assert estimate.variation == pytest.approx(variation, rel=0.15)


def test_booked_patients_can_be_put_into_their_list(larkmere: Records) -> None:
    """Sandpiper's lists were 8, 7, 5, 1, 1, 0, 0 places, filled with chance 0.95 less cancellations: found again."""
    estimate = estimate_demand(larkmere, "Sandpiper", booked_apart=True)
    (booked,) = estimate.demand.booked

    assert estimate.demand.arrivals_per_day == pytest.approx(0.0, abs=1e-9)
    assert booked.per_weekday == pytest.approx((8, 7, 5, 1, 1, 0, 0), abs=1)
    assert sum(booked.per_weekday[5:]) == 0
    assert estimate.beds_wanted == pytest.approx(estimate_demand(larkmere, "Sandpiper").beds_wanted, rel=0.01)
    assert estimate.booked_share == 1.0
    assert booked.hour == 13
    # Nobody is left who was not booked; the drift is then that of all who came, which the note names.
    assert estimate.demand.rate_variation == estimate_demand(larkmere, "Sandpiper").demand.rate_variation


def test_emergency_wards_have_no_list(larkmere: Records) -> None:
    """Asking for booked patients apart changes nothing where there are none."""
    assert estimate_demand(larkmere, "Dunlin", booked_apart=True).demand.booked == ()


def test_stays_that_grew_longer_are_told() -> None:
    """Four days in two years and six in the third is a change the reader must know; the same stays all along are not."""

    def ward(last_year_days: float) -> Records:
        rng = np.random.default_rng(14)
        rows = []
        for n, day in enumerate(pd.date_range("2021-01-01", periods=1_090)):
            mean = last_year_days if n > 730 else 4.0
            end = day + pd.Timedelta(hours=float(rng.gamma(2.0, mean / 2.0) * 24) + 1.0)
            rows.append(f"p{n},Heron,{day + pd.Timedelta(hours=1):%Y-%m-%d %H:%M},{end:%Y-%m-%d %H:%M}")
        return read_records("\n".join(["patient_key,ward,start,end", *rows]).encode())

    assert any("grew longer" in note for note in estimate_demand(ward(6.0), "Heron").notes)
    assert not any("grew" in note for note in estimate_demand(ward(4.0), "Heron").notes)


def test_one_default_time_is_no_rhythm() -> None:
    """Where every stay starts at ten o'clock the hours say nothing, so none is busier than another."""
    days = [f"2024-{1 + day // 28:02d}-{1 + day % 28:02d}" for day in range(330)]
    rows = "".join(f"P{k},A,{day} 10:00,{day} 20:00\n" for k, day in enumerate(days))
    records = read_records(f"patient_key,ward,start,end\n{rows}".encode(), name="ten.csv")

    assert estimate_demand(records, "A").hour_factors == (1.0,) * 24


def _lately(per_day: float, seed: int, *, share: float = 0.0, last_days: int = 0) -> list[str]:
    """Return what an estimate says of recent arrivals: a made ward, those of its last days drawn a second time in part."""
    records = made_records(MadeWard(per_day, 3.0, 1.1), seed)
    if last_days:
        more = made_records(MadeWard(per_day * share, 3.0, 1.1), seed + 1_000)
        late = more.stays[more.stays["start"] >= more.window[1] - pd.Timedelta(days=last_days)]
        both = pd.concat([records.stays, late]).assign(
            ward=pd.Categorical(["Heron"] * (len(records.stays) + len(late)))
        )
        records = replace(records, stays=both.reset_index(drop=True))
    return [note for note in estimate_demand(records, "Heron").notes if note.startswith("Arrivals ")]


def test_arrivals_that_grew_lately_are_told() -> None:
    """Thirty percent more for eight weeks, or for half a year, is said in most wards, with the way it errs."""
    for last_days in (56, 182):
        told = [_lately(6.0, seed, share=0.3, last_days=last_days) for seed in range(8)]
        assert sum(bool(notes) for notes in told) >= 6
        assert all("grew by" in note and "too few beds" in note for notes in told for note in notes)


def test_steady_arrivals_are_not_called_changed() -> None:
    """A note by chance is to come to about one steady ward in a hundred: three or more of forty would refute that.

    Were it one in a hundred, three or more of forty would come once in 130 times.
    """
    assert sum(bool(_lately(per_day, seed)) for per_day in (1.5, 6.0) for seed in range(20)) <= 2


def test_bed_days_grow_faster_than_heads_where_stays_grow() -> None:
    """Heads that don't grow and stays that grow 8 % a year: beds follow the bed-days, drawn in part towards the heads."""
    found = [
        estimate_demand(made_records(MadeWard(8.0, 8.0, 1.2, growth=0.0, stays_grow=0.08), seed), "Heron")
        for seed in range(6)
    ]

    apart = [one.bed_days_growth_per_year - one.growth_per_year for one in found]
    assert 0.02 < np.mean(apart) < 0.09
    assert all(one.bed_days_growth_error >= 0.5 * one.growth_error for one in found)


def test_the_error_of_growth_holds_the_truth() -> None:
    """Bed-days that grow 2 % a year lie within two standard errors in at least 16 of 20 wards.

    With 95 chances in 100 each, fewer than 16 would come once in 390 times; the same patients pass from one band of
    days to the next, so that bands taken for independent would claim half the error.
    """
    held = 0
    for seed in range(20):
        found = estimate_demand(made_records(MadeWard(1.2, 8.0, 1.2), seed), "Heron")
        held += abs(found.bed_days_growth_per_year - 0.02) < 1.96 * found.bed_days_growth_error

    assert held >= 16


def test_a_short_file_has_no_growth_of_bed_days() -> None:
    """A year can't tell growth of heads or of bed-days."""
    found = estimate_demand(made_records(MadeWard(6.0, 5.0, 1.1, days=365), 1), "Heron")

    assert (found.growth_per_year, found.bed_days_growth_per_year, found.bed_days_growth_error) == (0.0, 0.0, 0.0)


def test_a_drift_says_which_way_it_errs() -> None:
    """A level that moves by 20 % each month is told, with the way the figure errs; a short file can't tell any."""
    rng = np.random.default_rng(5)
    level = np.repeat(np.exp(0.2 * rng.normal(size=40)), 28)[:1_096]
    came = np.repeat(np.arange(1_096.0), rng.poisson(8.0 * level)) + 0.5
    long = estimate_demand(as_records(came, came + 2.0, 1_096), "Heron")
    short = estimate_demand(as_records(came[came < 200], came[came < 200] + 2.0, 200), "Heron")

    (note,) = (note for note in long.notes if "drift by about" in note)
    assert "too few beds" in note
    assert 12 <= int(re.search(r"about (\d+)", note)[1]) <= 26
    assert not any("drift by about" in note for note in short.notes)
    assert any("Too few days to tell how far arrivals drift" in note for note in short.notes)
    assert short.demand.rate_variation > 0.0  # none at all would ask for too few beds
