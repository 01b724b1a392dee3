"""The check on last year: honest on wards that go on as before, alarmed by wards that don't, blind to the future."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pytest

from bedplan.data import backtest, read_capacity, read_records
from bedplan.data.backtesting import pinball
from bedplan.data.projecting import CensusOutlook, as_of
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from pathlib import Path

    from bedplan.data import Records

MONTHS = np.array([1.24, 1.15, 1.02, 0.95, 0.92, 0.88, 0.86, 0.84, 0.92, 1.00, 1.06, 1.16])


def unlimited_ward(per_day: float, mean_days: float, seed: int, jump: float = 1.0, days: int = 1_096) -> Records:
    """Return a ward that takes everyone; from the last year on, arrivals are multiplied by ``jump``."""
    rng = np.random.default_rng(seed)
    calendar = pd.date_range("2021-01-01", periods=days + 120)
    rate = per_day * MONTHS[calendar.month - 1] * np.where(np.arange(calendar.size) >= days + 120 - 365, jump, 1.0)
    came = np.repeat(calendar.to_numpy().astype("datetime64[s]"), rng.poisson(rate))
    came = came + rng.integers(0, 1_440, came.size) * np.timedelta64(60, "s")
    left = came + (rng.exponential(mean_days * 86_400, came.size)).astype("timedelta64[s]")
    first, last = calendar[120].to_datetime64(), (calendar[-1] + pd.Timedelta(days=1)).to_datetime64()
    touching = (left >= first) & (came < last)
    lines = [
        f"p{n},Heron,{str(a).replace('T', ' ')},{str(b).replace('T', ' ') if b < last else ''}"
        for n, (a, b) in enumerate(zip(came[touching], left[touching], strict=True))
    ]
    return read_records("\n".join(["patient_key,ward,start,end", *lines]).encode())


@pytest.mark.parametrize(
    ("per_day", "mean_days", "seed"), [(5.0, 6.0, 1), (5.0, 6.0, 2), (1.2, 4.0, 3), (12.0, 2.0, 4)]
)
def test_bands_hold_on_a_ward_that_goes_on_as_before(per_day: float, mean_days: float, seed: int) -> None:
    """Where the future is like the past, the bands hold about as many days as they promise, and beat last year."""
    result = backtest(unlimited_ward(per_day, mean_days, seed), "Heron")

    # Patients present are alike for days on end, so a year has far fewer than 365 independent days: wide limits.
    assert result.held_80 == pytest.approx(result.should_hold_80, abs=0.13)
    assert result.held_95 == pytest.approx(result.should_hold_95, abs=0.06)
    assert result.errors["model"] < result.errors["last year"]
    assert result.pinball["model"] < min(result.pinball["average"], result.pinball["last year"])
    assert result.passed
    assert result.verdict.startswith("The check passed")


def test_a_ward_that_changes_fails_the_check() -> None:
    """Half as many arrivals again in the last year is what the earlier records can't know, and the check says so."""
    result = backtest(unlimited_ward(5.0, 6.0, 5, jump=1.5), "Heron")

    assert result.held_80 < 0.5
    assert not result.passed
    assert "failed" in result.verdict
    assert result.pit[9] > 0.3  # nearly all days above what was expected
    # The monthly steps learn: the last one, with eleven months of the new level known, is nearer than the first.
    missed = (result.months["present"] - result.months["expected"]).abs()
    assert missed.iloc[-1] < 0.75 * missed.iloc[0]


def test_nothing_after_the_origin_is_used() -> None:
    """Changing everything that happened in the last year changes nothing that was predicted for it."""
    records = unlimited_ward(5.0, 6.0, 6)
    origin = records.window[1] - pd.Timedelta(days=365)
    stays = records.stays.copy()
    stays = stays[~((stays["start"] >= origin) & (np.arange(len(stays)) % 2 == 0))]
    later = stays["end"] >= origin
    stays.loc[later, "end"] = stays.loc[later, "end"] + pd.Timedelta(days=30)
    other = backtest(replace(records, stays=stays), "Heron")

    assert other.days["expected"].to_numpy() == pytest.approx(backtest(records, "Heron").days["expected"].to_numpy())
    assert not other.days["present"].equals(backtest(records, "Heron").days["present"])


def test_an_earlier_day_knows_only_earlier_things() -> None:
    """As of a day, later starts are gone and later ends are not yet known."""
    records = unlimited_ward(5.0, 6.0, 7)
    moment = pd.Timestamp("2022-06-15")
    known = as_of(records, moment)

    assert known.stays["start"].max() < moment
    assert known.stays["end"].max() < moment
    still_in = records.stays[(records.stays["start"] < moment) & ~(records.stays["end"] < moment)]
    assert known.stays["end"].isna().sum() == len(still_in)


def test_the_demos_wards(larkmere: Records, demo_data: Path) -> None:
    """On every ward of the demo the bands hold at least as many days as they should, less a tenth."""
    capacity = read_capacity(demo_data / "capacity.csv")
    for ward in larkmere.wards:
        result = backtest(larkmere, ward, capacity=capacity)

        assert result.bands_held, ward
        assert len(result.days) == 365
        assert len(result.months) == 12
        assert result.pit.sum() == pytest.approx(1.0)
        assert (result.days["high_95"] >= result.days["high_80"]).all()
        beds = capacity.open_beds_by_day(ward, pd.DatetimeIndex(result.days["date"])).to_numpy()
        assert (result.days["high_95"] <= beds).all()
        assert 0 <= result.brier_full[0] <= 1


def test_booked_lists_are_foreseen_better_than_by_the_average(larkmere: Records) -> None:
    """Sandpiper's week repeats itself: the model is at least twice as near as the average formula."""
    result = backtest(larkmere, "Sandpiper")

    assert result.errors["model"] < result.errors["average"] / 2


def test_the_pinball_loss_is_least_for_the_true_quantiles() -> None:
    """The published property of the loss: no other spread scores better than the true one."""
    actual = np.random.default_rng(8).normal(30.0, 4.0, 20_000).round()
    mean = np.full(actual.size, 30.0)
    scores = {
        spread: pinball(CensusOutlook(mean, np.full(actual.size, spread), None), actual) for spread in (2.0, 4.0, 8.0)
    }

    assert scores[4.0] < min(scores[2.0], scores[8.0])


def test_bands_of_whole_counts_hold_what_they_say() -> None:
    """What whole counts make of an 80 % band is what really happens to whole counts."""
    mean, deviation = np.full(50_000, 4.3), np.full(50_000, 2.1)
    outlook = CensusOutlook(mean, deviation, None)
    actual = np.maximum(np.random.default_rng(9).normal(4.3, 2.1, 50_000).round(), 0.0)
    low, high = outlook.band(0.80)

    assert outlook.expected_coverage(0.80) >= 0.80
    assert ((actual >= low) & (actual <= high)).mean() == pytest.approx(outlook.expected_coverage(0.80), abs=0.01)


def test_less_than_two_years_cannot_be_checked() -> None:
    """A file of a year and a half says why."""
    with pytest.raises(UnreadableRecords, match="two years"):
        backtest(unlimited_ward(5.0, 6.0, 1, days=500), "Heron")
