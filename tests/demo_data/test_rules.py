"""The Larkmere demo follows its rules: who comes, who waits, who lies elsewhere, what is true and what is recorded."""

from __future__ import annotations

from collections import Counter
from dataclasses import replace
from datetime import timedelta
from math import sqrt
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pytest
from scipy import stats

from demo_data.hospital import LARKMERE, StayLengths
from demo_data.patients import StayChances, stay_end

if TYPE_CHECKING:
    from collections.abc import Callable

    ReadDemo = Callable[[str], pd.DataFrame]

WINDOW = pd.Timestamp("2022-04-01"), pd.Timestamp("2025-04-01")
FIVE_ERRORS = 5  # standard errors: chance alone passes this once in about two million times


def test_refusals_are_only_partly_recorded(read_demo: ReadDemo, wants: pd.DataFrame) -> None:
    """Merlin records all it turns away, Curlew and Dunlin about 60 %, nobody else any; none is invented."""
    lost = wants[wants["outcome"] == "lost"]
    really = set(zip(lost["wanted_at"].dt.strftime("%Y-%m-%d %H:%M"), lost["wanted_ward"], strict=True))
    recorded = read_demo("refusals")
    assert set(zip(recorded["time"], recorded["ward"], strict=True)) <= really
    written_down, true = Counter(recorded["ward"]), Counter(lost["wanted_ward"])
    assert set(written_down) == {"Merlin", "Curlew", "Dunlin"}
    assert written_down["Merlin"] == true["Merlin"]
    for ward in ("Curlew", "Dunlin"):
        error = sqrt(0.6 * 0.4 * true[ward])
        assert written_down[ward] == pytest.approx(0.6 * true[ward], abs=FIVE_ERRORS * error)
    marked = Counter(wants.loc[wants["recorded"] == "yes", "wanted_ward"])
    assert marked == written_down


def test_requests_and_cancellations_are_the_true_ones(read_demo: ReadDemo, wants: pd.DataFrame) -> None:
    """Every want for Heron is a request with its wait; every cancelled case is in the cancellations."""
    heron, requests = wants[wants["wanted_ward"] == "Heron"], read_demo("bed_requests")
    assert requests["requested_at"].tolist() == heron["wanted_at"].tolist()
    waited = (requests["placed_at"] - requests["requested_at"]).dt.total_seconds() / 3600
    assert pd.to_numeric(requests["wait_hours"]).tolist() == pytest.approx(waited.tolist(), abs=0.005, nan_ok=True)
    cancelled = wants.loc[wants["outcome"] == "cancelled", "wanted_at"].dt.strftime("%Y-%m-%d")
    assert read_demo("cancellations")["planned_date"].tolist() == cancelled.tolist()


def test_arrivals_follow_the_rhythm(wants: pd.DataFrame) -> None:
    """Patients from outside come as often as each ward's rate, growth, months and weekdays say."""
    chest = [0.97, 0.90, 0.84, 0.80, 0.80, 0.88, 1.00, 1.10, 1.24, 1.30, 1.18, 1.06]
    medical = [0.99, 0.95, 0.93, 0.92, 0.92, 0.95, 1.00, 1.04, 1.09, 1.13, 1.08, 1.03]
    rates = {
        "Heron": (14.3, 0.025, medical),
        "Kestrel": (0.35, 0.0, chest),
        "Plover": (0.20, 0.03, medical),
        "Teal": (0.60, 0.025, [1.0] * 12),
        "Curlew": (3.35, 0.01, [1.0] * 12),
        "Dunlin": (2.55, 0.0, [1.0] * 12),
        "Merlin": (1.22, 0.01, [1.0] * 12),
    }
    weekdays = [1.10, 1.03, 1.02, 1.01, 1.03, 0.91, 0.90]
    days = pd.date_range(*WINDOW, freq="D", inclusive="left")
    outside = wants[wants["came_from"] == "outside"]
    for ward, (rate, growth, months) in rates.items():
        expected = np.array(
            [
                rate
                * (1 + growth) ** ((day - WINDOW[0]).days / 365.25)
                * months[day.month - 4]
                * weekdays[day.weekday()]
                for day in days
            ],
        )
        at = outside.loc[outside["wanted_ward"] == ward, "wanted_at"].dt
        for part in ("month", "day_of_week", "year"):
            sums = pd.Series(expected).groupby(getattr(days, part)).sum()
            came = getattr(at, part).value_counts().reindex(sums.index, fill_value=0)
            assert (np.abs(came - sums) < FIVE_ERRORS * np.sqrt(sums)).all(), (ward, part)


def test_booked_cases_follow_the_lists(wants: pd.DataFrame) -> None:
    """Sandpiper's lists offer 8, 7, 5, 1, 1, 0, 0 slots from Monday, each filled with chance 0.95."""
    booked = wants[wants["wanted_ward"] == "Sandpiper"]
    assert (booked["came_from"] == "booked").all()
    days = pd.date_range(*WINDOW, freq="D", inclusive="left")
    for weekday, slots in enumerate((8, 7, 5, 1, 1, 0, 0)):
        offered = slots * np.count_nonzero(days.day_of_week == weekday)
        came = np.count_nonzero(booked["wanted_at"].dt.day_of_week == weekday)
        assert came == pytest.approx(0.95 * offered, abs=FIVE_ERRORS * sqrt(0.95 * 0.05 * offered))


def test_hours_of_arrival_and_discharge_follow_their_shares(stays: pd.DataFrame, wants: pd.DataFrame) -> None:
    """Patients come, and wards with a discharge round let them go, by the hour shares (chi-square, 1 in a million)."""
    come = [
        2.2,
        1.8,
        1.5,
        1.3,
        1.2,
        1.3,
        1.6,
        2.2,
        3.2,
        4.3,
        5.2,
        5.8,
        6.0,
        6.0,
        5.9,
        5.8,
        5.8,
        5.8,
        5.7,
        5.4,
        5.0,
        4.4,
        3.6,
        2.9,
    ]
    go = [0, 0, 0, 0, 0, 0, 0, 0.5, 1, 2.5, 5, 7.5, 8.5, 9.5, 12, 13.5, 12.5, 10, 7, 4.5, 2.5, 1.5, 0.7, 0.3]
    arrivals = wants.loc[wants["came_from"] == "outside", "wanted_at"]
    discharges = stays.loc[~stays["ward"].isin(["Heron", "Merlin"]), "end"].dropna()
    for times, shares in ((arrivals, come), (discharges, go)):
        counted = np.bincount(times.dt.hour, minlength=24)
        expected = len(times) * np.array(shares) / sum(shares)
        assert counted[expected == 0].sum() == 0
        possible = expected > 0
        assert stats.chisquare(counted[possible], expected[possible]).pvalue > 1e-6


def test_outliers_waited_first(wants: pd.DataFrame) -> None:
    """Nobody lies elsewhere before 12 hours (Teal) or 24 (Kestrel, Plover), nor anywhere but the wards allowed."""
    outliers = wants[wants["outcome"] == "outlier"]
    allowed = {"Teal": {"Plover", "Kestrel"}, "Kestrel": {"Curlew", "Plover"}, "Plover": {"Curlew", "Kestrel"}}
    assert set(outliers["wanted_ward"]) == set(allowed)
    for ward, rows in outliers.groupby("wanted_ward"):
        assert set(rows["outlier_on"]) <= allowed[ward]
        waited = (rows["placed_at"] - rows["wanted_at"]).dt.total_seconds() / 3600
        assert waited.min() >= (12 if ward == "Teal" else 24)
    assert (outliers["found_full"] == "yes").all()


def test_outliers_show_in_the_stays(stays: pd.DataFrame, wants: pd.DataFrame) -> None:
    """A stay on another ward than that of the patient's specialty is an outlier's, and the other way round."""
    own = {
        "Kestrel": "respiratory medicine",
        "Plover": "care of older people",
        "Teal": "stroke and neurology",
        "Curlew": "emergency surgery",
    }
    begun = stays[(stays["start"] >= WINDOW[0]) & stays["ward"].isin(list(own))]
    seen = begun[begun["home_specialty"] != begun["ward"].map(own)]
    true = wants[(wants["outcome"] == "outlier")]
    assert set(zip(true["patient_key"], true["placed_at"], true["outlier_on"], strict=True)) <= set(
        zip(seen["patient_key"], seen["start"], seen["ward"], strict=True),
    )
    wanted_before = seen[~seen["patient_key"].isin(true["patient_key"])]
    assert (wanted_before["start"] < WINDOW[0] + timedelta(days=7)).all()  # wanted in March, placed in April


def test_true_load_is_made_of_its_parts(read_demo: ReadDemo, stays: pd.DataFrame) -> None:
    """The beds Teal's patients used, added up from the stays, are the truth's; so are those of them on Teal."""
    load = read_demo("truth_daily_load").query("ward == 'Teal'")
    clipped = stays["left"].clip(upper=WINDOW[1]) - stays["start"].clip(lower=WINDOW[0])
    days = clipped.dt.total_seconds() / 86400
    on_ward = days[stays["ward"] == "Teal"].sum() / 1096
    stroke = (stays["home_specialty"] == "stroke and neurology") & (stays["ward"] != "Heron")
    used = days[stroke].sum() / 1096
    assert len(load) == 1096
    assert load["on_own_ward"].mean() == pytest.approx(on_ward, abs=0.001)
    assert (load["on_own_ward"] + load["as_outliers"]).mean() == pytest.approx(used, abs=0.001)
    assert used > on_ward + 2  # the demo's first hidden problem


@pytest.mark.parametrize(
    ("ward", "rate", "mean_days", "variation", "slip_days"),
    [("Merlin", 1.22 * 1.01**1.5, 4.0, 1.35, 0.0), ("Dunlin", 2.55, 3.2, 0.95, 0.6), ("Heron", 14.84, 1.45, 0.85, 0.0)],
)
def test_beds_wanted_are_arrivals_times_stay(
    read_demo: ReadDemo, ward: str, rate: float, mean_days: float, variation: float, slip_days: float
) -> None:
    """The true load is the rate from outside times the stay asked for (Little's law), refusals included.

    Heron's 14.84 a day is 14.3 grown for a year and a half, its months averaging 1.0025. The
    discharge round and the weekend only lengthen stays, by less than `slip_days`.
    """
    wanted = read_demo("truth_daily_load").query(f"ward == '{ward}'")["beds_wanted"].mean()
    expected = rate * mean_days
    error = expected * sqrt((1 + variation**2) / (rate * 1096))
    assert expected - FIVE_ERRORS * error < wanted < expected + rate * slip_days + FIVE_ERRORS * error


def test_ready_dates_are_those_of_the_long_stay_group(stays: pd.DataFrame, wants: pd.DataFrame) -> None:
    """About 12 % of Plover's patients have a ready date, 60 % of the stay before its end; nobody else has."""
    plover = wants[(wants["wanted_ward"] == "Plover") & wants["placed_at"].notna()]
    ready = stays[stays["ready_date"].notna()]
    assert set(ready["home_specialty"]) == {"care of older people"}
    begun = ready[(ready["start"] >= WINDOW[0]) & (ready["start"] < WINDOW[1] - timedelta(days=200))]
    placed = np.count_nonzero(plover["placed_at"] < WINDOW[1] - timedelta(days=200))
    assert len(begun) == pytest.approx(0.12 * placed, abs=FIVE_ERRORS * sqrt(0.12 * 0.88 * placed))
    ended = ready.dropna(subset="end")
    share = (ended["end"] - ended["ready_date"]) / (ended["end"] - ended["start"])
    assert np.abs(share - 0.6).max() < 0.001


DAY = 1440
EIGHT_THIRTY, HALF_PAST_TEN = (
    0.01,
    0.065,
)  # chances of the discharge round: 0.5 + half of 1, + 1 + 2.5 + half of 5 of 98.7


def days_after(start: int, mean_days: float, discharge_hour: float, weekend: float) -> float:
    """Return when a stay of exactly this many days ends on Dunlin, in days after the run-in began, a Friday."""
    dunlin = replace(LARKMERE.by_name["Dunlin"], stay=StayLengths(mean_days, 1e-9, 0.3))
    return stay_end(dunlin, StayChances(0.5, 0.5, discharge_hour, weekend, 0.5), start) / DAY


def test_discharges_wait_for_the_round_and_the_weekend() -> None:
    """A stay ends on the day it is over, at the drawn hour; 35 % of Saturday's and 45 % of Sunday's wait for Monday."""
    thursday_noon = 6 * DAY + 720
    for stay_days, weekend, weekday in (
        (1, 0.0, 7),
        (2, 0.36, 8),
        (2, 0.34, 10),
        (3, 0.46, 9),
        (3, 0.44, 10),
        (4, 0.0, 10),
    ):
        end = days_after(thursday_noon, stay_days, HALF_PAST_TEN, weekend)
        assert end == pytest.approx(weekday + 10.5 / 24, abs=0.5 / 24)


def test_nobody_goes_home_within_the_first_hour() -> None:
    """A stay whose hour of discharge falls before it is an hour old ends a day later."""
    tuesday_eight = 4 * DAY + 480
    assert days_after(tuesday_eight, 0.4, EIGHT_THIRTY, 0.9) == pytest.approx(5 + 8.5 / 24, abs=0.5 / 24)
    assert days_after(tuesday_eight - 60, 0.4, EIGHT_THIRTY, 0.9) == pytest.approx(4 + 8.5 / 24, abs=0.5 / 24)


@pytest.mark.parametrize(
    ("ward", "mean_days"),
    [
        ("Heron", 1.45),
        ("Kestrel", 6.3),
        ("Teal", 9.0),
        ("Curlew", 3.6),
        ("Dunlin", 3.2),
        ("Sandpiper", 3.5),
        ("Merlin", 4.0),
    ],
)
def test_stays_have_their_mean(ward: str, mean_days: float) -> None:
    """Over chances laid evenly, a ward's stays have its mean; 6 % more in winter on Kestrel, nowhere else."""
    plain = replace(LARKMERE.by_name[ward], leaves_when_stay_ends=True)
    chances = [StayChances((number + 0.5) / 10_000, 0.5, 0.5, 0.5, 0.5) for number in range(10_000)]
    for start, factor in ((0, 1.0), (61 * DAY, 1.06 if ward == "Kestrel" else 1.0)):  # 1 October, 1 December
        lasted = np.mean([stay_end(plain, chance, start) - start for chance in chances]) / DAY
        assert lasted == pytest.approx(factor * mean_days, rel=0.01)


def test_plover_has_two_kinds_of_patient() -> None:
    """12 in 100 of Plover's patients stay 37 days on average, the others 7.8."""
    plover = replace(LARKMERE.by_name["Plover"], leaves_when_stay_ends=True)
    for tail, mean_days in ((0.119, 37.0), (0.121, 7.8)):
        chances = [StayChances((number + 0.5) / 10_000, tail, 0.5, 0.5, 0.5) for number in range(10_000)]
        assert np.mean([stay_end(plover, chance, 0) for chance in chances]) / DAY == pytest.approx(mean_days, rel=0.01)


def test_patients_move_on_by_their_shares(stays: pd.DataFrame, wants: pd.DataFrame) -> None:
    """Heron sends 20.5 % (by season) to Kestrel, 11.8 % to Plover, 7.2 % to Teal; Merlin 35 % to Curlew, 23 % to Kestrel.

    Stroke patients who waited on Heron for Teal are not counted: they wanted Teal before.
    """
    season = {1: 1.30 / 1.13, 8: 0.80 / 0.92}
    ended = stays[stays["start"] >= WINDOW[0]].dropna(subset="end")
    ended = ended[ended["home_specialty"].isin(["acute medicine", "critical care"])]
    shares = [("Heron", "Kestrel", 0.205 * factor, [month]) for month, factor in season.items()]
    shares += [("Heron", "Plover", 0.118, range(1, 13)), ("Heron", "Teal", 0.072, range(1, 13))]
    shares += [("Merlin", "Curlew", 0.35, range(1, 13)), ("Merlin", "Kestrel", 0.23, range(1, 13))]
    for ward, onward, share, months in shares:
        left = ended[(ended["ward"] == ward) & ended["end"].dt.month.isin(months)]
        moved = wants[(wants["came_from"] == ward) & (wants["wanted_ward"] == onward)]
        moved = np.count_nonzero(moved["wanted_at"].dt.month.isin(months))
        error = sqrt(share * (1 - share) * len(left))
        assert moved == pytest.approx(share * len(left), abs=FIVE_ERRORS * error + 5), (ward, onward)
