"""Real patients in real intensive-care beds: the daily count, its busiest days and its week, from a file of their stays.

Stays of 1,166 patients discharged alive, or still in, from several intensive-care units of the SIR-3 cohort, in the R package kmi (data
set icu.pneu, GPL), Debian package r-cran-kmi 0.5.5-2. Source: Beyersmann et al. 2006, Infection Control and Hospital
Epidemiology 27:493-499. The data count days back from the end of the study; that end is laid on 1 July 2001 here, so
weekdays are told apart but not named. Figures beside them were computed from the data by another program.
"""

from __future__ import annotations

import datetime as dt
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
import pytest
import rdata
from scipy import stats

from bedplan.data import IntakeChoices, describe_ward, estimate_demand, read_records
from bedplan.data.ahead.rhythm import fit_rhythm
from bedplan.models import MODELS

if TYPE_CHECKING:
    import pandas as pd

    from bedplan.data import Records

STUDY_END = dt.date(2001, 7, 1)
MEAN = 30.54  # patients in, over the last 450 days
IN_PACKAGE = "usr/lib/R/site-library/kmi/data/icu.pneu.rda"


@pytest.fixture(scope="module")
def stays(root: Path) -> bytes:
    """Return the stays as a file of dates; a blank end = still in when the study ended."""
    path = next((place / IN_PACKAGE for place in (root / ".debian", Path("/")) if (place / IN_PACKAGE).exists()), None)
    if path is None:
        pytest.skip(
            "the Debian package r-cran-kmi is not here: apt-get download r-cran-kmi && dpkg-deb -x r-cran-kmi_*.deb .debian"
        )
    table = rdata.read_rda(path, default_encoding="ascii")["icu.pneu"]
    patients = table.groupby("id").tail(1)
    patients = patients[patients["event"] == 3]  # 2 = died: their days before the study's end are not in the data
    rows = []
    for before_end, days, left in zip(patients["adm.cens.exit"], patients["stop"], patients["status"], strict=True):
        came = STUDY_END - dt.timedelta(days=int(before_end))
        rows.append(f"Intensive care,{came},{came + dt.timedelta(days=int(days)) if left else ''}")
    return "\n".join(["Unit,In,Out", *rows, ""]).encode()


def last_days(stays: bytes, days: int) -> Records:
    """Return the records of the study's last days."""
    window = (STUDY_END - dt.timedelta(days=days), STUDY_END - dt.timedelta(days=1))
    return read_records(stays, name="icu.csv", choices=IntakeChoices(window=window))


@pytest.fixture(scope="module")
def settled(stays: bytes) -> Records:
    """Return the last 450 days of 540, when the units had filled."""
    return last_days(stays, 450)


@pytest.fixture(scope="module")
def whole(stays: bytes) -> Records:
    """Return the 540 days in which patients were taken into the study."""
    return last_days(stays, 540)


def at_midnight(records: Records) -> pd.Series:
    """Return the patients in at each midnight."""
    hourly = describe_ward(records, "Intensive care").hourly
    return hourly[hourly.index.hour == 0]


def test_the_real_daily_count(settled: Records) -> None:
    """The count rebuilt from the stays has the mean, the swing and the busy days of the real one."""
    ward, counts = describe_ward(settled, "Intensive care"), at_midnight(settled)

    assert settled.days == 450
    assert ward.midnight_mean == pytest.approx(MEAN, abs=0.005)
    assert ward.variance_over_mean == pytest.approx(0.99, abs=0.005)
    assert ward.variance_interval[0] < 1.0 < ward.variance_interval[1]
    assert np.quantile(counts, [0.5, 0.9, 0.95, 0.99]).tolist() == pytest.approx([30, 38, 40, 42.5], abs=0.05)
    assert (counts >= 36).mean() == pytest.approx(0.204, abs=5e-4)


def test_everyone_finds_a_bed_tells_the_busy_days(settled: Records) -> None:
    """From arrivals and stays alone the curve tells the real 1-in-20 day to the bed, and the others within a bed and a half.

    Poisson about the real mean: 38, 40 and 44 beds; the real count: 38, 40 and 42.5.
    """
    demand = estimate_demand(settled, "Intensive care").demand
    over = MODELS["unlimited_beds"](demand, np.arange(80)).overfull_share_of_hours
    beds = [int(np.argmax(over <= share)) for share in (0.10, 0.05, 0.01)]

    assert demand.offered_load == pytest.approx(MEAN, rel=0.01)
    assert beds == stats.poisson.ppf([0.90, 0.95, 0.99], MEAN).tolist() == [38, 40, 44]
    assert beds == pytest.approx(np.quantile(at_midnight(settled), [0.90, 0.95, 0.99]).tolist(), abs=1.5)
    # More than 35 in: 18.3 % by Poisson about the real mean, 20.4 % in truth.
    assert over[35] == pytest.approx(0.183, abs=0.01)


def test_arrivals_and_patients_still_in(whole: Records) -> None:
    """1,133 patients in 540 days are 2.10 a day, as scattered as chance; 21 were still in and are not dropped."""
    estimate = estimate_demand(whole, "Intensive care")

    assert describe_ward(whole, "Intensive care").admissions == 1_133
    assert estimate.arrivals_per_day == pytest.approx(2.10, abs=0.005)
    assert estimate.unfinished == 21
    assert estimate.demand.clustering == 1.0
    # Arrivals × mean stay, and the mean count of the settled days: two ways to one figure (Little 1961).
    assert estimate.beds_wanted == pytest.approx(MEAN, rel=0.03)


def test_the_week_is_found(whole: Records) -> None:
    """Two days of the seven, one after the other, have few discharges, and two, as near, few arrivals."""
    ends = whole.stays["end"].dropna()
    ends = ends[(ends >= whole.window[0]) & (ends < whole.window[1])]
    discharges = np.bincount((ends - whole.window[0]).dt.days, minlength=whole.days).astype(float)
    weekdays = whole.calendar.day_of_week.to_numpy()
    leaving = np.array(fit_rhythm(discharges, whole.calendar.month.to_numpy() - 1, weekdays).weekday_factors)
    coming = np.array(estimate_demand(whole, "Intensive care").weekday_factors)

    assert sorted(np.bincount(weekdays, weights=discharges)) == [46, 67, 185, 199, 204, 207, 216]
    quiet = np.flatnonzero(leaving < 0.6)
    assert quiet.size == 2
    assert (quiet[1] - quiet[0]) % 7 in (1, 6)
    assert min(np.delete(leaving, quiet)) > 1.0
    # Arrivals by day of the seven: 176 150 174 116 130 177 210.
    low = np.sort(np.argsort(coming)[:2])
    assert (low[1] - low[0]) % 7 in (1, 6)
    assert sorted(coming)[:2] == pytest.approx([116 * 7 / 1_133, 130 * 7 / 1_133], abs=0.06)
