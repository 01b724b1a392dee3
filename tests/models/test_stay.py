"""Length of stay against scipy's distributions, quadrature and exact sums."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
import pytest
from scipy import integrate, stats

from bedplan.errors import ImpossibleFigure
from bedplan.models import LengthOfStay

EVERY_STAY = {
    "lognormal": LengthOfStay(4.0),
    "narrow lognormal": LengthOfStay(7.5, 0.3),
    "wide lognormal": LengthOfStay(2.0, 3.0),
    "exponential": LengthOfStay(4.0, 1.0, "gamma"),
    "narrow gamma": LengthOfStay(5.0, 0.2, "gamma"),
    "wide gamma": LengthOfStay(5.0, 2.0, "gamma"),
    "fixed": LengthOfStay(7.0, 0.0),
    "two streams": LengthOfStay.two_streams(0.3, LengthOfStay(3.0, 0.5), LengthOfStay(20.0, 1.2)),
    "fixed among others": LengthOfStay.two_streams(0.3, LengthOfStay(3.0, 0.5, "gamma"), LengthOfStay(10.0, 0.0)),
    "far apart": LengthOfStay.two_streams(0.02, LengthOfStay(1.0, 0.2, "gamma"), LengthOfStay(40.0, 0.1)),
    "measured": LengthOfStay.measured([0, 1, 2, 5, 10], [1, 0.8, 0.5, 0.1, 0]),
    "measured from a day on": LengthOfStay.measured([0.5, 1.0, 6.0], [1, 0.4, 0]),
}
every_stay = pytest.mark.parametrize("stay", EVERY_STAY.values(), ids=EVERY_STAY.keys())


def integral(curve: object, start: float, stay: LengthOfStay) -> float:
    """Integrate a curve of the stay from a day on, piece by piece between its quantiles and its corners."""
    shares = (0.001, 0.05, 0.2, 0.5, 0.8, 0.9, 0.98, 0.999, 0.99999, 1 - 1e-8, 1 - 1e-11, 1 - 1e-14)
    corners = {float(day) for day in stay.quantile(shares)} | {day for day, _ in stay.points} | {7.0, 10.0, start}
    ends = sorted(day for day in corners if day >= start)
    return math.fsum(
        integrate.quad(lambda day: float(curve(day)), low, high, epsabs=1e-13, epsrel=1e-11, limit=200)[0]
        for low, high in pairwise(ends)
    )


@pytest.mark.parametrize(("mean", "variation"), [(4.0, 1.0), (0.2, 0.3), (12.0, 2.5), (8.0, 0.05)])
def test_lognormal_against_scipy(mean: float, variation: float) -> None:
    """A lognormal stay held by mean and variation is scipy's lognormal with the same mean and deviation."""
    stay = LengthOfStay(mean, variation)
    sigma = math.sqrt(math.log(1.0 + variation**2))
    reference = stats.lognorm(sigma, scale=mean / math.sqrt(1.0 + variation**2))
    days, shares = np.array([0.0, 0.01, 0.5, 1.0, 3.0, 10.0, 50.0]) * mean, np.array([0.0, 0.01, 0.3, 0.5, 0.99, 1.0])

    assert reference.mean() == pytest.approx(mean, rel=1e-12)
    assert reference.std() == pytest.approx(variation * mean, rel=1e-12)
    assert stay.survival(days) == pytest.approx(reference.sf(days), rel=1e-9, abs=1e-300)
    assert stay.quantile(shares) == pytest.approx(reference.ppf(shares), rel=1e-12)


@pytest.mark.parametrize(("mean", "variation"), [(4.0, 1.0), (0.2, 0.3), (12.0, 2.5), (8.0, 0.05)])
def test_gamma_against_scipy(mean: float, variation: float) -> None:
    """A gamma stay held by mean and variation is scipy's gamma with the same mean and deviation."""
    stay = LengthOfStay(mean, variation, "gamma")
    reference = stats.gamma(variation**-2, scale=mean * variation**2)
    days, shares = np.array([0.0, 0.01, 0.5, 1.0, 3.0, 10.0]) * mean, np.array([0.0, 0.01, 0.3, 0.5, 0.99, 1.0])

    assert reference.mean() == pytest.approx(mean, rel=1e-12)
    assert reference.std() == pytest.approx(variation * mean, rel=1e-12)
    assert stay.survival(days) == pytest.approx(reference.sf(days), rel=1e-9, abs=1e-300)
    assert stay.quantile(shares) == pytest.approx(reference.ppf(shares), rel=1e-12)


def test_worked_lognormal() -> None:
    """A median of 4·√2 days with σ² = ln 2 is a mean of 8 and a deviation of 8 days."""
    # Source: worked example on lognormal stays, author unknown (read)
    assert float(LengthOfStay(8.0, 1.0).quantile(0.5)) == pytest.approx(4.0 * math.sqrt(2.0), rel=1e-12)


@every_stay
def test_mean_and_spread_are_those_of_the_curve(stay: LengthOfStay) -> None:
    """The stated mean is ∫ S and the stated variation follows from 2·∫ u·S, whatever the shape."""
    mean = integral(stay.survival, 0.0, stay)
    square = 2.0 * integral(lambda day: day * stay.survival(day), 0.0, stay)

    assert stay.mean_days == pytest.approx(mean, rel=1e-8)
    assert stay.variation == pytest.approx(math.sqrt(max(square / mean**2 - 1.0, 0.0)), rel=1e-5, abs=1e-5)


@every_stay
def test_days_beyond_by_quadrature(stay: LengthOfStay) -> None:
    """The days beyond a day, and half their mean square, are the integrals of the curve from that day on."""
    for start in (0.0, 0.3, 2.0, 7.5, 30.0):
        assert float(stay.days_beyond(start)) == pytest.approx(integral(stay.survival, start, stay), rel=1e-6, abs=1e-9)
        beyond = integral(stay.days_beyond, start, stay)
        assert float(stay.squared_days_beyond(start)) == pytest.approx(beyond, rel=1e-4, abs=1e-9)
        assert float(stay.share_of_bed_days_past(start)) == pytest.approx(
            float(stay.days_beyond(start)) / stay.mean_days
        )


@every_stay
def test_shorter_of_two_by_quadrature(stay: LengthOfStay) -> None:
    """The mean of the shorter of two stays is ∫ S²."""
    squared = integral(lambda day: stay.survival(day) ** 2, 0.0, stay)
    assert stay.mean_of_shorter_of_two() == pytest.approx(squared, rel=1e-8)


@every_stay
def test_quantile_undoes_survival(stay: LengthOfStay) -> None:
    """Just before the quantile at most that share has left, just after it at least that share; ends included."""
    shares = np.array([0.0, 1e-6, 0.2, 0.5, 0.7, 0.95, 0.9999])
    days = stay.quantile(shares)

    assert (np.diff(days) >= 0).all()
    assert (stay.survival(np.maximum(days * (1.0 - 1e-9) - 1e-12, 0.0)) >= 1.0 - shares - 1e-9).all()
    assert (stay.survival(days * (1.0 + 1e-9) + 1e-12) <= 1.0 - shares + 1e-9).all()
    assert float(stay.survival(0.0)) == 1.0


@every_stay
def test_answers_keep_the_shape_they_are_asked_in(stay: LengthOfStay) -> None:
    """A table of days gets a table of answers, each cell as if asked alone."""
    days = np.array([[0.0, 1.0, 2.5], [7.0, 9.0, 40.0]])
    for question in (stay.survival, stay.days_beyond, stay.squared_days_beyond):
        answer = question(days)
        assert answer.shape == days.shape
        assert answer[1, 0] == pytest.approx(float(question(7.0)), rel=1e-15)


@every_stay
def test_samples_follow_the_curve(stay: LengthOfStay) -> None:
    """Drawn stays have the mean within five standard errors and pass the Kolmogorov–Smirnov distance at 1 in 10,000."""
    drawn = stay.sample(40_000, np.random.default_rng(1))
    assert drawn.mean() == pytest.approx(stay.mean_days, abs=5.0 * stay.variation * stay.mean_days / 200.0 + 1e-12)

    ranks, places = np.arange(1, drawn.size + 1) / drawn.size, np.sort(drawn)
    above = ranks - (1.0 - stay.survival(places + 1e-9))
    below = (1.0 - stay.survival(places - 1e-9)) - (ranks - 1.0 / drawn.size)
    # Source: Kolmogorov 1933; 2·exp(−2x²) = 1e-4 at x = 2.225
    assert max(above.max(), below.max()) <= 2.225 / math.sqrt(drawn.size)


def test_same_patients_whatever_the_mean() -> None:
    """The same generator draws the same patients for a longer mean stay: each stays longer by the same factor."""
    for shape in ("lognormal", "gamma"):
        short = LengthOfStay(4.0, 0.8, shape).sample(100, np.random.default_rng(5))
        long = LengthOfStay(6.0, 0.8, shape).sample(100, np.random.default_rng(5))
        assert long == pytest.approx(1.5 * short, rel=1e-12)


def test_two_streams_by_hand() -> None:
    """Seven in ten staying exactly 2 days and three in ten exactly 12: mean 5, deviation √21, as worked by hand."""
    stay = LengthOfStay.two_streams(0.3, LengthOfStay(2.0, 0.0), LengthOfStay(12.0, 0.0))
    # 0.7·2 + 0.3·12 = 5; 0.7·4 + 0.3·144 − 25 = 21; shorter of two: 2 unless both are long, 2 + 0.09·10 = 2.9
    assert stay.mean_days == pytest.approx(5.0)
    assert stay.variation == pytest.approx(math.sqrt(21.0) / 5.0)
    assert stay.mean_of_shorter_of_two() == pytest.approx(2.9, rel=1e-12)
    assert stay.survival([1.0, 3.0, 13.0]).tolist() == pytest.approx([1.0, 0.3, 0.0])


def test_one_stream_alone() -> None:
    """A mix in which one stream has no patients is the other stream."""
    alone = LengthOfStay(3.0, 0.5)
    for stay in (
        LengthOfStay.two_streams(0.0, alone, LengthOfStay(20.0)),
        LengthOfStay.two_streams(1.0, LengthOfStay(20.0), alone),
    ):
        assert stay.mean_days == pytest.approx(3.0)
        assert stay.quantile([0.1, 0.5, 0.9]) == pytest.approx(alone.quantile([0.1, 0.5, 0.9]), rel=1e-12)
        assert stay.mean_of_shorter_of_two() == pytest.approx(alone.mean_of_shorter_of_two(), rel=1e-9)


def test_measured_by_hand() -> None:
    """A straight fall from everyone at day 0 to nobody at day 6 is a uniform stay: mean 3, variation 1/√3."""
    stay = LengthOfStay.measured([0, 6], [1, 0])
    assert stay.mean_days == pytest.approx(3.0)
    assert stay.variation == pytest.approx(1.0 / math.sqrt(3.0))
    assert stay.mean_of_shorter_of_two() == pytest.approx(2.0)
    assert stay.quantile([0.25, 0.5]) == pytest.approx([1.5, 3.0])


@pytest.mark.parametrize(
    ("low", "high"), [((0.05, 1.0), (0.95, 20.0)), ((0.5, 3.0), (0.9, 10.0)), ((0.01, 2.0), (0.02, 2.1))]
)
def test_two_quantiles(low: tuple[float, float], high: tuple[float, float]) -> None:
    """A stay known by two statements says both of them back."""
    stay = LengthOfStay.from_two_quantiles(low, high)
    assert float(stay.quantile(low[0])) == pytest.approx(low[1], rel=1e-10)
    assert float(stay.quantile(high[0])) == pytest.approx(high[1], rel=1e-10)


@pytest.mark.parametrize(
    ("build", "words"),
    [
        (lambda: LengthOfStay(0.0), "mean stay of 0 days"),
        (lambda: LengthOfStay(-2.0), "mean stay of -2 days"),
        (lambda: LengthOfStay(math.nan), "mean stay of nan"),
        (lambda: LengthOfStay(4_000.0), "at most 3,650"),
        (lambda: LengthOfStay(4.0, -0.1), "spread of stay of -0.1"),
        (lambda: LengthOfStay(4.0, math.inf), "spread of stay of inf"),
        (lambda: LengthOfStay(4.0, 1.0, "weibull"), "'weibull' is not known"),
        (lambda: LengthOfStay(4.0, 1.0, "measured"), "measured"),
        (lambda: LengthOfStay.two_streams(1.2, LengthOfStay(1.0), LengthOfStay(2.0)), "share of 1.2"),
        (lambda: LengthOfStay.measured([0.0], [1.0]), "1 were given"),
        (lambda: LengthOfStay.measured([], []), "0 were given"),
        (lambda: LengthOfStay.measured([0, 1, 2], [1, 0]), "3 days and 2 shares"),
        (lambda: LengthOfStay.measured([0, 2, 1], [1, 0.5, 0]), "go up"),
        (lambda: LengthOfStay.measured([-1, 2, 3], [1, 0.5, 0]), "A day -1 of"),
        (lambda: LengthOfStay.measured([0, 2, 3], [1, math.nan, 0]), "share of nan"),
        (lambda: LengthOfStay.measured([0, 2, 3], [1, 0.5, 0.2]), "ends at 0"),
        (lambda: LengthOfStay.measured(range(80), np.linspace(1, 0, 80)), "80 were given"),
        (lambda: LengthOfStay.from_two_quantiles((0.9, 1.0), (0.1, 2.0)), "0.9 and 0.1"),
        (lambda: LengthOfStay.from_two_quantiles((0.1, 3.0), (0.9, 2.0)), "3 and 2 days"),
        (lambda: LengthOfStay(4.0).quantile([0.5, 1.2]), "between 0 and 1"),
        (lambda: LengthOfStay(4.0).quantile(-0.1), "between 0 and 1"),
        (lambda: LengthOfStay(None), "mean stay of None days"),
        (lambda: LengthOfStay(4.0, shape="two streams", streams=3), "3 was given"),
        (lambda: LengthOfStay(4.0, shape="measured", points=((0.0, 1.0), 2.0)), "2.0 was given"),
        (lambda: LengthOfStay("4"), "mean stay of '4' days"),
        (lambda: LengthOfStay(4.0, [1.0]), r"spread of stay of \[1.0\]"),
        (lambda: LengthOfStay.two_streams(None, LengthOfStay(1.0), LengthOfStay(2.0)), "share of None"),
        (lambda: LengthOfStay.two_streams(0.5, 1.0, LengthOfStay(2.0)), "1.0 was given"),
        (lambda: LengthOfStay.measured(None, None), "None was given"),
        (lambda: LengthOfStay.measured([0, 1], [1, "none"]), "share of 'none'"),
        (lambda: LengthOfStay.measured([0, 1e-300], [1, 0]), "falls to 0 at once"),
        (lambda: LengthOfStay.from_two_quantiles((0.05, 1.0), (0.0500001, 100.0)), "too far apart"),
        (lambda: LengthOfStay.from_two_quantiles(0.05, (0.95, 9.0)), "0.05 was given"),
        (lambda: LengthOfStay.from_two_quantiles((0.05, "1"), (0.95, 9.0)), "length of stay of '1' days"),
        (lambda: LengthOfStay(4.0).survival(math.nan), "nan days"),
        (lambda: LengthOfStay(4.0).scaled(0.0), "mean stay of 0 days"),
        (lambda: LengthOfStay(4.0).scaled("2"), "Stays '2' times as long"),
        (lambda: LengthOfStay(4.0).sample(1.5, np.random.default_rng(1)), "1.5 stays to draw"),
    ],
)
def test_impossible_figures(build: object, words: str) -> None:
    """A figure outside its meaning is refused in a sentence that quotes it."""
    with pytest.raises(ImpossibleFigure, match=words):
        build()


@every_stay
def test_before_a_stay_begins_and_after_all_have_left(stay: LengthOfStay) -> None:
    """Everyone stays past a day before the first, with all their bed-days ahead; nothing is left in the end."""
    assert stay.survival([-1.0, 0.0]).tolist() == [1.0, 1.0]
    assert stay.share_of_bed_days_past(-1.0) == pytest.approx(1.0)
    assert stay.share_of_bed_days_past(math.inf) < 1e-100
    assert stay.survival(math.inf) < 1e-100
    assert stay.squared_days_beyond(math.inf) < 1e-60
