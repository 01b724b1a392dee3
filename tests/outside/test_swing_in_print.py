"""Patients who come together, rates that nobody knows for sure, and booked lists: figures from outside this program."""

from __future__ import annotations

import numpy as np
import pytest

from bedplan.models import MODELS, BedCurve, BookedList, Demand, LengthOfStay

EXPONENTIAL = LengthOfStay(4.0, 1.0, "gamma")


def everyone_stays(demand: Demand, most: int = 300) -> BedCurve:
    """Return the curve of a ward that turns nobody away."""
    return MODELS["unlimited_beds"](demand, np.arange(most + 1))


def chances(curve: BedCurve) -> np.ndarray:
    """Return the chance of each number of patients."""
    return np.concatenate([[1 - curve.overfull_share_of_hours[0]], -np.diff(curve.overfull_share_of_hours)])


def test_patients_who_come_in_threes() -> None:
    """Two groups of three a day for a day's exponential stay: 6 patients on average, variance 12, over 10 in 10.6 %."""
    # Source: Daw & Pender 2019, arXiv 1805.02117 (patients in a ward of groups; moments derived from it); the chance of
    # more than 10 by a Markov chain; were they to come alone it would be 4.3 %. Variance ÷ mean of a day's arrivals is 3.
    curve = everyone_stays(Demand(6.0, LengthOfStay(1.0, 1.0, "gamma"), clustering=3.0))
    mean = float((curve.beds * chances(curve)).sum())
    variance = float((curve.beds**2 * chances(curve)).sum()) - mean**2
    assert (mean, variance) == pytest.approx((6.0, 12.0), rel=1e-6)
    assert curve.overfull_share_of_hours[10] == pytest.approx(0.106040, rel=0.02)


def test_groups_of_any_size() -> None:
    """Groups of two on average, each as likely as not to be joined by one more, fill beds with variance ÷ mean 2."""
    # Source: peakedness z = 1 + E[X(X-1)] ÷ 2E[X] for groups of X and exponential stays; Whitt 1984; Eckberg 1983 (from
    # memory). Geometric X of mean 2: E[X] = 2, E[X²] = 6, so a day's arrivals have variance ÷ mean 6 ÷ 2 = 3.
    sizes = np.arange(1, 200)
    clustering = float((sizes**2 / 2.0**sizes).sum() / (sizes / 2.0**sizes).sum())
    assert clustering == pytest.approx(3.0, rel=1e-12)
    curve = everyone_stays(Demand(3.0, EXPONENTIAL, clustering=clustering))
    mean = float((curve.beds * chances(curve)).sum())
    variance = float((curve.beds**2 * chances(curve)).sum()) - mean**2
    assert (mean, variance / mean) == pytest.approx((12.0, 2.0), rel=1e-6)


@pytest.mark.parametrize(("group", "beds", "load", "share"), [(2, 30, 25, 0.0823399), (3, 40, 30, 0.0505266)])
def test_groups_turned_away(group: int, beds: int, load: int, share: float) -> None:
    """Pairs in 30 beds and threes in 40 are turned away as the exact Markov chain of groups says."""
    # Source: the chain, worked out apart from this program; Erlang's formula is 36 and 71 % too low here. Peakedness of
    # groups: Fredericks 1980, Bell System Technical Journal 59:807-827
    curve = MODELS["seasonal_loss"](Demand(load / 4.0, EXPONENTIAL, clustering=float(group)), [beds])
    assert float(curve.turn_away_probability[0]) == pytest.approx(share, rel=0.01)
    assert float(MODELS["erlang_loss"](Demand(load / 4.0, EXPONENTIAL), [beds]).turn_away_probability[0]) < 0.7 * share


@pytest.mark.parametrize(("patients", "share"), [(25, 0.175314), (30, 0.050612)])
def test_a_rate_that_is_not_known(patients: int, share: float) -> None:
    """A load of 20 that may be off by 20 % fills more beds than chance alone would: the negative binomial."""
    # Source: Greenwood & Yule 1920, Journal of the Royal Statistical Society 83 (gamma-mixed Poisson), k = 25; with the
    # rate known the shares would be 0.112185 and 0.013475. On beds: Jongbloed & Koole 2001, Applied Stochastic Models in
    # Business and Industry 17:307-318
    curve = everyone_stays(Demand(5.0, EXPONENTIAL, rate_variation=0.2))
    assert float(curve.overfull_share_of_hours[patients]) == pytest.approx(share, abs=1e-6)


def test_an_unknown_rate_turns_more_away() -> None:
    """25 beds turn away 7.54 % when the load is 20 give or take 20 %, and 5.02 % when it is surely 20."""
    # Source: average of Erlang's formula over a gamma load, weighted by patients, by quadrature; idea of Jongbloed & Koole
    # 2001, Applied Stochastic Models in Business and Industry 17:307-318
    for variation, share in ((0.0, 0.0502218), (0.2, 0.0754042)):
        curve = MODELS["seasonal_loss"](Demand(5.0, EXPONENTIAL, rate_variation=variation), [25])
        assert float(curve.turn_away_probability[0]) == pytest.approx(share, abs=2e-6)


def test_three_booked_patients() -> None:
    """Three booked for each day, who come with chances 0.1, 0.2 and 0.3: nobody in 50.4 % of days, all in 0.6 %."""
    # Source: the Poisson-binomial 0.504, 0.398, 0.092, 0.006; Hong 2013, Computational Statistics & Data Analysis 59:41-51.
    # Each lies in for a day from the hour of arrival, so that in one hour of 24 two days' patients overlap.
    day = LengthOfStay(1.0, 0.0)
    lists = tuple(BookedList((1,) * 7, day, attends=chance) for chance in (0.1, 0.2, 0.3))
    found = chances(everyone_stays(Demand(0.0, day, booked=lists), 6))
    assert found[:4].tolist() == pytest.approx([0.504, 0.398, 0.092, 0.006], abs=0.002)


def test_booked_patients_swing_less_than_chance() -> None:
    """A booked ward's number of patients varies less than its mean, a ward of emergencies as much as its mean."""
    # Source: Gallivan & Utley 2005, IMA Journal of Management Mathematics 16:173-186
    stay = LengthOfStay(3.0, 0.6)
    booked = everyone_stays(Demand(0.0, stay, booked=(BookedList((4, 4, 4, 4, 4, 4, 4), stay, attends=0.9),)))
    emergencies = everyone_stays(Demand(3.6, stay))
    for curve, low, high in ((booked, 0.0, 0.9), (emergencies, 0.999, 1.001)):
        mean = float((curve.beds * chances(curve)).sum())
        variance = float((curve.beds**2 * chances(curve)).sum()) - mean**2
        assert mean == pytest.approx(10.8, rel=1e-3)
        assert low < variance / mean < high
