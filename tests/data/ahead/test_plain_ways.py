"""The plainer ways that have to be beaten, as bands: against counting by hand and other packages' laws."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from bedplan.data import backtest
from bedplan.data.ahead.plain_ways import average_chances, ended_at, same_week_chances
from tests.data.made_wards import MadeWard, made_records, with_beds


def ranked(chances: np.ndarray, happened: int) -> float:
    """Return one day's ranked probability score by its other form: E|X − y| − E|X − X'| ÷ 2.

    Source: Gneiting & Raftery 2007, equation 21.
    """
    likely, counts = np.diff(chances, prepend=0.0), np.arange(chances.size)
    return float(likely @ np.abs(counts - happened) - likely @ np.abs(counts[:, None] - counts) @ likely / 2)


def test_past_errors_make_the_band_of_the_same_week() -> None:
    """Each day: the count of 364 days before plus every error known when its stretch began, counted one by one."""
    census = np.random.default_rng(1).poisson(9.0, 900)
    counted = np.ones(900, dtype=bool)
    counted[600:620] = False
    told = same_week_chances(census, counted, [500, 700])

    assert told.shape[0] == 400
    for day, begin in ((500, 500), (699, 500), (700, 700), (899, 700)):
        known = [d for d in range(364, begin) if counted[d] and counted[d - 364]]
        likely = [census[day - 364] + census[d] - census[d - 364] for d in known]
        assert len(known) >= 91
        for count in (0, 5, 9, 20):
            assert told[day - 500, count] == pytest.approx(np.mean([one <= count for one in likely]))


def test_the_same_week_is_that_of_the_same_weekday() -> None:
    """A ward whose counts depend on the weekday alone is told without any error."""
    census = np.tile([3, 9, 8, 8, 7, 2, 1], 160)
    told = same_week_chances(census, np.ones(census.size, dtype=bool), [700, 900])

    assert all(ranked(row, day) == 0.0 for row, day in zip(told, census[700:], strict=True))


def test_a_first_year_has_no_errors_yet() -> None:
    """Before 91 errors are known, one count tells another by the negative binomial of Jeffreys' rule."""
    census = np.random.default_rng(2).poisson(6.0, 800)
    told = same_week_chances(census, np.ones(800, dtype=bool), [400])

    wanted = stats.nbinom.cdf(np.arange(40), census[36] + 0.5, 0.5)
    assert told[0, :40] == pytest.approx(wanted)


def test_the_average_formula_has_the_band_of_chance() -> None:
    """Poisson's law around the average, every day alike, and its tail is all there."""
    told = average_chances(7.4, 3, 12)

    assert told.shape[0] == 3
    assert told[2] == pytest.approx(stats.poisson.cdf(np.arange(told.shape[1]), 7.4))
    assert told[0, -1] == pytest.approx(1.0, abs=1e-12)


def test_bands_end_at_the_beds() -> None:
    """With 5 beds nobody more is told, and below nothing changes; without beds all stays."""
    told = average_chances(7.4, 2, 12)
    ended = ended_at(told, np.array([5, 30]))

    assert (ended[0, 5:] == 1.0).all()
    assert (ended[0, :5] == told[0, :5]).all()
    assert (ended[1, :30] == told[1, :30]).all()
    assert ended_at(told, None) is told


@pytest.mark.parametrize("beds", [None, 34])
def test_the_check_scores_them_as_by_hand(beds: int | None) -> None:
    """Both scores of a made-up ward, worked out day by day from its records by the score's other form."""
    records = made_records(MadeWard(6.0, 5.0, 1.1, beds=beds), 3)
    result = backtest(records, "Heron", capacity=None if beds is None else with_beds(beds))
    stays, start = records.stays, result.days["date"].iloc[0]
    year = stays[(stays["start"] < start) & (stays["start"] >= start - np.timedelta64(365, "D"))]
    left = stays[(stays["end"] < start) & (stays["end"] >= start - np.timedelta64(365, "D"))]
    average = len(year) * (left["end"] - left["start"]).dt.total_seconds().mean() / 86_400 / 365
    counts = np.arange(90)
    likely = stats.poisson.cdf(counts, average)
    likely = np.where(counts >= (beds or 99), 1.0, likely)

    wanted = np.mean([ranked(likely, seen) for seen in result.days["present"]])
    assert result.average_formula_score == pytest.approx(wanted, rel=1e-6)
    assert result.average_formula_error == pytest.approx((result.days["present"] - average).abs().mean())
    off = result.days["present"] - result.days["same_week_last_year"]
    assert result.same_week_error == pytest.approx(off.abs().mean())
    assert result.same_week_error / 2 < result.same_week_score < result.same_week_error
