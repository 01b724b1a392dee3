"""Figures that others have printed about beds, loads and full wards, through the program's own front doors.

Where a figure was printed as a method only, it was worked out apart from this program, in 50-digit arithmetic or by a
Markov chain, and the method is named beside it.
"""

from __future__ import annotations

import datetime as dt
import math

import numpy as np
import pytest
from scipy import integrate, optimize, special

from bedplan import wording
from bedplan.data import IntakeChoices, describe_ward, read_capacity, read_records
from bedplan.decision import OverfullLimit, TurnAwayLimit, Ward, decide, patients_per_year, pool_wards
from bedplan.models import (
    MODELS,
    BedCurve,
    Demand,
    LengthOfStay,
    average_beds,
    average_occupancy,
    erlang_b,
    erlang_c,
    erlang_loss,
)

EXPONENTIAL = LengthOfStay(4.0, 1.0, "gamma")


def steady(load: float) -> Demand:
    """Return steady demand of this many beds on average, with exponential stays."""
    return Demand(load / EXPONENTIAL.mean_days, EXPONENTIAL)


def everyone_stays(load: float) -> BedCurve:
    """Return the curve of a ward that turns nobody away."""
    return MODELS["unlimited_beds"](steady(load), np.arange(int(3 * load) + 60))


def occupancy_that_turns_away(share: float, beds: int) -> float:
    """Return the share of beds in use where this share of patients is turned away."""
    load = optimize.brentq(lambda load: float(erlang_b(load, beds)) - share, 1e-6, 3.0 * beds, xtol=1e-12)
    return float(erlang_loss(steady(load), [beds]).occupancy[0])


@pytest.mark.parametrize(
    ("beds", "percent"), [(10, 32.7), (20, 17.3), (30, 10.8), (50, 5.30), (100, 1.52), (200, 0.25)]
)
def test_running_at_85_percent(beds: int, percent: float) -> None:
    """A ward that runs with 85 % of its beds in use turns away many patients if it is small, few if it is large."""
    # Source: method of de Bruin, Bekker, van Zanten & Koole 2010, Annals of Operations Research 178:23-43

    def above(load: float) -> float:
        return float(erlang_loss(steady(load), [beds]).occupancy[0]) - 0.85

    load = optimize.brentq(above, 0.1 * beds, 3.0 * beds, xtol=1e-10)
    half_a_digit = 0.005 if beds >= 50 else 0.05
    assert 100 * float(erlang_b(load, beds)) == pytest.approx(percent, abs=half_a_digit)


@pytest.mark.parametrize(
    ("share", "percents"),
    [
        (0.05, (59.0, 72.4, 78.5, 84.6, 90.5)),
        (0.02, (49.8, 64.6, 71.6, 78.9, 86.2)),
        (0.01, (44.2, 59.6, 67.1, 75.0, 83.2)),
    ],
)
def test_highest_occupancy_for_a_limit(share: float, percents: tuple[float, ...]) -> None:
    """How full 10, 20, 30, 50 and 100 beds may run before more than this share is turned away."""
    # Source: method of de Bruin, Bekker, van Zanten & Koole 2010, Annals of Operations Research 178:23-43
    for beds, percent in zip((10, 20, 30, 50, 100), percents, strict=True):
        assert 100 * occupancy_that_turns_away(share, beds) == pytest.approx(percent, abs=0.05 + 1e-9)


def test_ten_thousand_admissions() -> None:
    """10,000 admissions of 5 days at 85 % are 162 beds, which is where the average formula's line meets the ward."""
    # common practice, no source; 10,000 × 5 ÷ 365 ÷ 0.85 = 161.16
    ward = Ward("Any", 150, Demand(10_000 / 365, LengthOfStay(5.0)), admissions_per_year=10_000)
    assert average_beds(10_000, 5.0) == pytest.approx(161.16, abs=0.005)
    assert ward.average_formula_beds == 162
    assert average_occupancy(ward.demand, [137, 162]).turn_away_probability.tolist() == [0.0, 0.0]
    assert average_occupancy(ward.demand, [136]).turn_away_probability[0] == pytest.approx(1 - 136 * 365 / 50_000)


def test_beds_from_a_population() -> None:
    """Population × admission rate × mean stay × reserve ÷ 365 is the average formula with occupancy 1 ÷ reserve."""
    # Source: Farmer & Emami 1990, Journal of Epidemiology and Community Health 44:307-312 (the formula)
    population, admission_rate, mean_stay_days, reserve = 250_000, 0.1, 7.3, 1.25
    beds = population * admission_rate * mean_stay_days * reserve / 365
    assert average_beds(population * admission_rate, mean_stay_days, 1 / reserve) == pytest.approx(beds, rel=1e-12)


def test_refused_newborns() -> None:
    """1,002 babies admitted and 179 refused in a year are 15.2 % refused, "1 in 7", and 179 a year on the curve again."""
    # Source: Asaduzzaman, Chaussalet et al. 2010, Archives of Disease in Childhood, Fetal and Neonatal edition (counts)
    asked, refused = 1002 + 144 + 35, 144 + 35
    share = refused / asked
    assert wording.percent(share, 1).replace("\u00a0", " ") == "15.2 %"
    assert wording.one_in(share).split() == ["1", "in", "7"]
    load = optimize.brentq(lambda load: float(erlang_b(load, 24)) - share, 1.0, 100.0, xtol=1e-12)
    cots = erlang_loss(Demand(asked / 365, LengthOfStay(load / asked * 365)), [24, 31])
    assert patients_per_year(cots, 24) == pytest.approx(refused, rel=1e-9)
    assert patients_per_year(cots, 31) < refused


@pytest.mark.parametrize(("mean", "distance"), [(20, 3.553413), (100, 7.972199)])
def test_no_forecast_can_be_nearer(mean: int, distance: float) -> None:
    """Even with the right mean, the number of patients misses it by 2·e^−m·m^(m+1)/m! beds on average."""
    # Source: De Moivre's formula for the mean deviation; as a floor for bed forecasts: Davis & Fard 2018, Health Care
    # Management Science
    curve = everyone_stays(mean)
    chance = np.concatenate([[1 - curve.overfull_share_of_hours[0]], -np.diff(curve.overfull_share_of_hours)])
    assert (np.abs(curve.beds - mean) * chance).sum() == pytest.approx(distance, abs=1e-6)
    assert distance == pytest.approx(2 * math.exp(-mean) * mean ** (mean + 1) / math.factorial(mean), abs=5e-7)


@pytest.mark.parametrize(
    ("mean", "share", "beds", "rule_of_thumb"),
    [(100, 0.05, 117, 116.45), (100, 0.01, 124, 123.26), (25, 0.05, 33, 33.2), (25, 0.01, 37, 36.6)],
)
def test_mean_and_its_root(mean: int, share: float, beds: int, rule_of_thumb: float) -> None:
    """Beds that hold all patients 95 or 99 of 100 hours are within a bed of mean + z·√mean."""
    # Source: Poisson quantiles; the rule: Young 1965; Kao & Tung 1981, Management Science 27:547-561
    needed = decide(everyone_stays(mean), OverfullLimit(share, within="year")).beds
    assert needed == beds
    assert abs(needed - rule_of_thumb) <= 1
    # a patient who comes finds one bed fewer than the hour has: the bed in which he or she would lie
    assert decide(everyone_stays(mean), TurnAwayLimit(share, within="year")).beds == beds + 1


def test_what_a_full_ward_admits() -> None:
    """Ten beds that carry 7.026711 patients on average are asked for 8, the one load that fits."""
    # Source: inverse of Erlang's formula, from a worked example with 8 erlang on 10 lines, author unknown (read)
    carried = float(erlang_loss(steady(8.0), [10]).occupancy[0]) * 10
    assert carried == pytest.approx(7.026711, abs=5e-7)
    found = optimize.brentq(
        lambda load: 10 * float(erlang_loss(steady(load), [10]).occupancy[0]) - 7.026711, 0.1, 60.0, xtol=1e-12
    )
    assert found == pytest.approx(8.0, abs=1e-5)


@pytest.mark.parametrize(
    ("wards", "percent", "beds_for_2_percent"), [(1, 12.16611, 14), (2, 6.44109, 24), (4, 2.68384, 42)]
)
def test_like_wards_share_their_beds(wards: int, percent: float, beds_for_2_percent: int) -> None:
    """Wards of 10 beds asked for 8 that share their beds turn away 12.2, 6.4, 2.7 %, and need 14, 24, 42 beds for 2 %."""
    # Source: Smith & Whitt 1981, Bell System Technical Journal 60:39-55 (sharing); Erlang's formula (figures)
    parts = [Ward(f"Ward {number}", 10, steady(8.0)) for number in range(wards)]
    together = pool_wards(parts) if wards > 1 else parts[0]
    curve = together.curve("erlang_loss")
    assert together.beds == 10 * wards
    assert 100 * curve.at(together.beds).turn_away_probability == pytest.approx(percent, abs=5e-6)
    assert decide(curve, TurnAwayLimit(0.02, within="year")).beds == beds_for_2_percent


@pytest.mark.parametrize(
    ("beds", "load", "peakedness", "share"),
    [(30, 20, 2.0, 0.0364969), (30, 25, 1.5, 0.0784626), (30, 25, 0.7, 0.0346690), (30, 25, 1.0, 0.0526032)],
)
def test_beds_in_parts(beds: int, load: int, peakedness: float, share: float) -> None:
    """Erlang's formula at scaled beds and load, as Hayward's rule for bursts needs it, whole beds or not."""
    # Source: Fredericks 1980, Bell System Technical Journal 59:807-827 (the rule)
    assert float(erlang_b(load / peakedness, beds / peakedness)) == pytest.approx(share, abs=1e-7)


@pytest.mark.parametrize(
    ("beds", "load", "mean_stays", "served_in_time", "digits"),
    [
        # 100 calls in 30 minutes of 180 s each. Source: worked example of the R package ErlangC (read)
        (14, 10.0, 20.0 / 180.0, 0.88835, 5e-6),
        (11, 10.0, 20.0 / 180.0, 0.3896138, 5e-8),
        # County Hospital, one doctor: waits over half an hour 0.404. Source: Hillier & Lieberman, Introduction to
        # Operations Research (from memory, recomputed)
        (1, 2.0 / 3.0, 0.5 * 3.0, 1 - 0.404, 5e-4),
    ],
)
def test_served_in_time(beds: int, load: float, mean_stays: float, served_in_time: float, digits: float) -> None:
    """The share who wait no longer than a stated time, in mean stays, rounds to the printed figure."""
    waits_longer = float(erlang_c(load, beds)) * math.exp(-(beds - load) * mean_stays)
    assert 1 - waits_longer == pytest.approx(served_in_time, abs=digits)


def test_one_doctor_or_two() -> None:
    """With one doctor the room is empty a third of the time and 4/3 wait; with two, time there is spread as printed."""
    # Source: Hillier & Lieberman, Introduction to Operations Research, County Hospital, 2 patients an hour, 20 minutes
    # each (from memory, recomputed): time in the room over t hours with two doctors: e^(-3t)·(3 - e^(-t))/2
    curve = MODELS["waiting"](Demand(48.0, LengthOfStay(1 / 72, 1.0, "gamma")), [1, 2])
    waits = curve.waits
    assert 1 - curve.turn_away_probability[0] == pytest.approx(1 / 3, rel=1e-9)
    assert 2 * waits.mean_hours == pytest.approx([4 / 3, 1 / 12], rel=1e-4)
    assert waits.mean_hours + 1 / 3 == pytest.approx([1.0, 3 / 8], rel=1e-4)
    for hours in (0.25, 1.0, 2.0):
        # In treatment for all of it, or for a part after which the rest was spent waiting.
        longer, _ = integrate.quad(lambda u, t=hours: 3 * math.exp(-3 * u) * waits.share_over(t - u)[1], 0, hours)
        printed = math.exp(-3 * hours) * (3 - math.exp(-hours)) / 2
        assert math.exp(-3 * hours) + longer == pytest.approx(printed, rel=1e-4)


@pytest.mark.parametrize(("load", "most"), [(0.3, 12), (8.0, 40), (44.2, 90)])
def test_each_bed_from_the_one_before(load: float, most: int) -> None:
    """One over the share turned away is 1 + beds ÷ load times the same with a bed fewer, from 1 with no bed."""
    # Source: the recursion in Zeng 2003, Mathematical and Computer Modelling 37:1287-1296
    one_over = 1 / erlang_b(load, np.arange(most + 1))
    assert one_over[0] == 1.0
    assert one_over[1:] == pytest.approx(1 + np.arange(1, most + 1) / load * one_over[:-1], rel=1e-12)


def test_a_stay_whose_spread_is_its_mean() -> None:
    """A lognormal stay of mean and spread 8 days has its median at 4·√2 days and a log-variance of ln 2."""
    # Source: worked example on lognormal stays, author unknown (read): μ = ln(4·√2), σ² = ln 2, mean 8, SD 8
    stay = LengthOfStay(8.0, 1.0)
    scale = math.log(4 * math.sqrt(2)), math.sqrt(math.log(2))
    for share in (0.05, 0.5, 0.95):
        assert stay.quantile(share) == pytest.approx(math.exp(scale[0] + scale[1] * special.ndtri(share)), rel=1e-9)


def test_beds_empty_between_two_patients() -> None:
    """A bed whose patients stay 4 days and that is 80 % occupied stands empty for 1 day between two of them."""
    # Source: turnover interval = (available - occupied bed-days) ÷ discharges, an indicator in general use; 4 × 0.2 ÷ 0.8
    first = dt.datetime(2024, 1, 1, 12)  # noqa: DTZ001  records hold local clock times
    starts = [first + dt.timedelta(days=5 * number) for number in range(40)]
    rows = [f"One,{start:%Y-%m-%d %H:%M},{start + dt.timedelta(days=4):%Y-%m-%d %H:%M}" for start in starts]
    choices = IntakeChoices(window=(first.date(), first.date() + dt.timedelta(days=199)))
    records = read_records("\n".join(["ward,start,end", *rows]).encode(), name="one.csv", choices=choices)
    ward = describe_ward(records, "One", read_capacity(b"ward,from,to,staffed_beds\nOne,2024-01-01,,1\n"))

    assert ward.full.occupancy == pytest.approx(0.80, rel=1e-12)
    assert ward.turnover_interval_days == pytest.approx(1.0, rel=1e-12)
    assert ward.throughput == pytest.approx(365 / (4 + 1), rel=1e-12)
