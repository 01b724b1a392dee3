"""The period a file covers, and what becomes of the answer where an export leaves patients out at its ends."""

from __future__ import annotations

import datetime as dt
import math
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pytest

from bedplan.data import IntakeChoices, Records, backtest, describe_ward, estimate_demand, hidden_demand, read_records
from bedplan.data.cleaning.windows import (
    ALL_STAYS,
    BY_ADMISSION,
    BY_BOTH,
    BY_DISCHARGE,
    Period,
    TimesInHospital,
    find_period,
)
from bedplan.data.files.dates import DAY_SECONDS, MISSING
from bedplan.errors import BedplanError
from bedplan.models import LengthOfStay

if TYPE_CHECKING:
    from numpy.typing import NDArray

FIRST, LAST = 19_000 * DAY_SECONDS, 19_365 * DAY_SECONDS


def ward(seed: int, mean_days: float) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return starts and ends of a ward that ran long before and after the window, three patients a day."""
    rng = np.random.default_rng(seed)
    start = rng.integers(FIRST - 300 * DAY_SECONDS, LAST + 50 * DAY_SECONDS, 2_145)
    return np.sort(start), np.sort(start) + (rng.exponential(mean_days, start.size) * DAY_SECONDS).astype(np.int64) + 60


def period(start: NDArray[np.int64], end: NDArray[np.int64], until: int) -> Period:
    """Return the period of one ward's stays."""
    return find_period(TimesInHospital(start, end, np.zeros(start.size, dtype=np.int64)), until)


@pytest.mark.parametrize("mean_days", [0.5, 5.0, 20.0])
@pytest.mark.parametrize("seed", [1, 2, 3])
def test_all_stays_touching_a_window(seed: int, mean_days: float) -> None:
    """Patients in already don't stretch the window: it begins within two days of its true start and ends at its end."""
    start, end = ward(seed, mean_days)
    touching = (end >= FIRST) & (start < LAST)
    start, end = start[touching], np.where(end[touching] < LAST, end[touching], MISSING)
    found = period(start, end, LAST)

    assert abs(found.first - FIRST) <= 2 * DAY_SECONDS
    assert found.last == LAST
    assert found.chosen_by == (ALL_STAYS if mean_days > 1 else "")


@pytest.mark.parametrize("mean_days", [0.5, 5.0, 20.0])
@pytest.mark.parametrize("seed", [1, 2, 3])
def test_stays_chosen_by_admission_date(seed: int, mean_days: float) -> None:
    """A file of admissions begins with the first of them, and ends with the last though discharges come later."""
    start, end = ward(seed, mean_days)
    chosen = (start >= FIRST) & (start < LAST)
    found = period(start[chosen], end[chosen], int(end[chosen].max()))

    assert abs(found.first - FIRST) <= 2 * DAY_SECONDS
    assert abs(found.last - LAST) <= 2 * DAY_SECONDS
    assert found.chosen_by == (BY_ADMISSION if mean_days > 1 else "")


@pytest.mark.parametrize("mean_days", [5.0, 20.0])
@pytest.mark.parametrize("seed", [1, 2, 3])
def test_stays_chosen_by_discharge_date(seed: int, mean_days: float) -> None:
    """The days at the end in which those still in are missing are left out: as many as 99 % of stays last."""
    start, end = ward(seed, mean_days)
    chosen = (end >= FIRST) & (end < LAST)
    found = period(start[chosen], end[chosen], LAST)
    # Exponential stays: 99 % have ended within ln 100 = 4.6 means.
    left_out = (LAST - found.last) / DAY_SECONDS

    assert abs(found.first - FIRST) <= 2 * DAY_SECONDS
    assert left_out == pytest.approx(min(4.605 * mean_days, 365 / 3), rel=0.2)
    assert found.chosen_by == BY_DISCHARGE
    assert found.warm_up_days == 0  # those in at the start are there


def test_a_person_can_say_what_the_window_is() -> None:
    """The planner's own window is used as it stands, its last day included."""
    content = b"ward,start,end\nHeron,2024-01-01 10:00,2024-01-04 10:00\n"
    chosen = IntakeChoices(window=(dt.date(2023, 12, 1), dt.date(2024, 1, 31)))

    assert read_records(content, choices=chosen).days == 62
    with pytest.raises(BedplanError, match="ends before it starts"):
        read_records(content, choices=IntakeChoices(window=(dt.date(2024, 2, 1), dt.date(2024, 1, 1))))


# Wards whose truth is known: (patients a day, mean stay, variation, days of the file).
WARDS = {"acute": (6.0, 5.0, 1.1, 1_096), "long": (4.0, 12.0, 1.2, 730), "short": (15.0, 2.0, 0.8, 365)}
SEEDS = range(10)
CUTS = {"admission": BY_ADMISSION, "discharge": BY_DISCHARGE, "touching": ALL_STAYS}


def cut_file(name: str, seed: int, cut: str) -> Records:
    """Return the records of a made-up ward, cut by admission date, by discharge date, by both, or all that touch."""
    per_day, mean_days, variation, days = WARDS[name]
    rng, run_in = np.random.default_rng([seed, days]), 400
    came = np.sort(rng.uniform(-run_in, days, rng.poisson(per_day * (days + run_in))))
    left = came + LengthOfStay(mean_days, variation).sample(came.size, rng)
    inside = {
        "admission": came >= 0,
        "discharge": (left >= 0) & (left < days),
        "touching": left >= 0,
        "both": (came >= 0) & (left < days),
    }[cut]
    moments = (
        pd.to_datetime(FIRST + (x[inside] * 1_440).astype(np.int64) * 60, unit="s").strftime("%Y-%m-%d %H:%M")
        for x in (came, left)
    )
    still_in = (left[inside] >= days) & (cut == "touching")
    rows = [f"Heron,{a},{'' if open_ else b}" for a, b, open_ in zip(*moments, still_in, strict=True)]
    return read_records("\n".join(["ward,start,end", *rows, ""]).encode(), name="cut.csv")


@pytest.mark.parametrize("cut", CUTS)
@pytest.mark.parametrize("name", WARDS)
def test_beds_wanted_however_the_file_was_cut(name: str, cut: str) -> None:
    """In ten files at least eight 90 % intervals hold the true beds wanted, and their mean is within 2 % of it."""
    per_day, mean_days, *_ = WARDS[name]
    found = []
    for seed in SEEDS:
        records = cut_file(name, seed, cut)
        assert records.chosen_by == CUTS[cut]
        estimate = estimate_demand(records, "Heron")
        error = 1.645 * math.hypot(estimate.uncertainty.arrivals_error, estimate.uncertainty.stay_error)
        miss = math.log(estimate.beds_wanted / (per_day * mean_days))
        found.append((miss, abs(miss) <= error))
    misses, held = zip(*found, strict=True)

    assert sum(held) >= 8
    assert abs(np.mean(misses)) <= 0.02


@pytest.mark.parametrize("cut", [*CUTS, "both"])
def test_patients_present_however_the_file_was_cut(cut: str) -> None:
    """Counts leave out the ends where patients are missing: on average they hold the 30 who were in, within 3 %."""
    means = [describe_ward(cut_file("acute", seed, cut), "Heron").midnight_mean for seed in SEEDS]

    assert np.mean(means) == pytest.approx(30.0, rel=0.03)


@pytest.mark.parametrize("cut", ["admission", "discharge"])
def test_the_thin_ends_are_thin(cut: str) -> None:
    """What is left out had to be: over the days of the cut file as it stands, fewer than nine in ten of 48 are in."""
    records = cut_file("long", 0, cut)
    start, end = (records.stays[key].to_numpy() for key in ("start", "end"))
    first, last = (np.datetime64(moment, "s") for moment in records.window)
    edges = (
        (first, first + np.timedelta64(records.warm_up_days, "D"))
        if cut == "admission"
        else (last, np.datetime64(records.seen_until, "s"))
    )
    days = np.arange(edges[0], edges[1], np.timedelta64(1, "D"))
    present = np.array([((start <= day) & (end > day)).sum() for day in days])

    assert present.mean() < 0.9 * 48
    assert (edges[1] - edges[0]) / np.timedelta64(1, "D") > 40


@pytest.mark.parametrize(
    ("cut", "told"),
    [
        ("admission", "by admission date. No stay starts before the first day"),
        ("discharge", "by discharge date. Patients who were still in at its end are missing"),
        ("both", "The longest stays are missing too: stays look somewhat too short"),
    ],
)
def test_what_an_export_leaves_out_is_told(cut: str, told: str) -> None:
    """The intake report and the estimate both say by which date the file was chosen and what was done about it."""
    records = cut_file("acute", 1, cut)
    estimate = estimate_demand(records, "Heron")

    assert any(told in note for note in records.report.notes)
    assert any(told in note for note in estimate.notes)
    assert (cut == "both") == (records.chosen_by == BY_BOTH)


def test_a_complete_file_is_said_to_be_one() -> None:
    """The intake report says so; the estimate has nothing to add."""
    records = cut_file("acute", 1, "touching")

    assert "This file holds all stays that touch its period." in records.report.notes
    assert not any("This file holds" in note for note in estimate_demand(records, "Heron").notes)


def test_hidden_demand_and_the_check_leave_the_warm_up_out() -> None:
    """A file of admissions is checked, and its demand found, over days on which everybody in is known."""
    records = cut_file("acute", 2, "admission")
    first = records.window[0] + pd.Timedelta(days=records.warm_up_days)

    assert records.warm_up_days > 14
    assert hidden_demand(records, "Heron").beds_wanted == pytest.approx(30.0, rel=0.06)
    assert backtest(records, "Heron").passed
    assert records.settled.window == (first, records.window[1])
    assert records.settled.settled is records.settled


def moving_hospital(cut: str) -> Records:
    """Return two wards, all of whose patients move from the first to the second; cut by their dates in hospital."""
    rng, days = np.random.default_rng(9), 730
    came = np.sort(rng.uniform(-300, days + 100, 8 * (days + 400)))
    moved = came + rng.gamma(2.0, 1.0, came.size)
    left = moved + rng.gamma(2.0, 3.0, came.size)
    inside = (came >= 0) & (came < days) if cut == "admission" else (left >= 0) & (left < days)
    text = [
        pd.to_datetime(FIRST + (x[inside] * 1_440).astype(np.int64) * 60, unit="s").strftime("%Y-%m-%d %H:%M")
        for x in (came, moved, left)
    ]
    rows = [f"p{n},s{n},Acute,{a},{b}\np{n},s{n},Later,{b},{c}" for n, (a, b, c) in enumerate(zip(*text, strict=True))]
    return read_records("\n".join(["patient_key,spell_key,ward,start,end", *rows, ""]).encode(), name="moves.csv")


@pytest.mark.parametrize("cut", ["admission", "discharge"])
def test_wards_fed_by_moves_in_a_file_chosen_by_hospital_dates(cut: str) -> None:
    """Moves of patients in already are missing as well, so those days are left out: 8 a day want 16 and 48 beds."""
    records = moving_hospital(cut)

    assert records.chosen_by == CUTS[cut]
    assert records.warm_up_days == 0
    for name, beds in (("Acute", 16.0), ("Later", 48.0)):
        estimate = estimate_demand(records, name)
        low, high = estimate.uncertainty.beds_wanted
        assert low < beds < high
        assert describe_ward(records, name).midnight_mean == pytest.approx(beds, rel=0.05)


def test_a_window_that_reaches_into_a_thin_end_is_told() -> None:
    """Who chooses the days that were left out is told that figures there are too low."""
    records = cut_file("acute", 1, "discharge")
    stays = records.stays
    rows = [f"Heron,{a:%Y-%m-%d %H:%M},{b:%Y-%m-%d %H:%M}" for a, b in zip(stays["start"], stays["end"], strict=True)]
    first, last = records.window[0].date(), (records.seen_until - pd.Timedelta(days=1)).date()
    content = "\n".join(["ward,start,end", *rows, ""]).encode()
    chosen = read_records(content, name="cut.csv", choices=IntakeChoices(window=(first, last)))

    assert chosen.days == records.days + (records.seen_until - records.window[1]).days
    assert any("days past what is complete: figures there are too low" in note for note in chosen.report.notes)


def test_a_file_too_short_to_trim_says_so() -> None:
    """Fifty days of admissions keep all their days, and the report says that counts of patients are too low."""
    start, end = ward(1, 5.0)
    chosen = (start >= FIRST) & (start < FIRST + 50 * DAY_SECONDS)
    found = period(start[chosen], end[chosen], int(end[chosen].max()))

    assert found.chosen_by == BY_ADMISSION
    assert (found.warm_up_days, (found.last - found.first) // DAY_SECONDS) == (0, 50)
    assert "too short to leave out the days" in found.note


def test_a_crowd_on_the_first_day_misleads_nobody() -> None:
    """A thousand short stays entered for one day don't make those still in at the end look too few."""
    start, end = ward(2, 5.0)
    touching = (end >= FIRST) & (start < LAST)
    start, end = start[touching], np.where(end[touching] < LAST, end[touching], MISSING)
    crowd = np.full(1_000, FIRST + 3_600)
    found = period(np.concatenate([start, crowd]), np.concatenate([end, crowd + 7_200]), LAST)

    assert found.last == LAST
    assert found.chosen_by in (ALL_STAYS, BY_ADMISSION)
