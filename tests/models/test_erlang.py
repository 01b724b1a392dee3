"""The Erlang loss and delay formulas against 50-digit arithmetic, a printed table and published worked examples."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import mpmath as mp
import numpy as np
import pytest

from bedplan.errors import ImpossibleFigure
from bedplan.models import Demand, LengthOfStay, erlang_b, erlang_b_log, erlang_c, erlang_loss

if TYPE_CHECKING:
    from collections.abc import Iterator

LOADS = [1e-3, 0.03, 0.5, 1.0, 7.3, 23.8, 100.0, 740.0, 2500.5, 1e4]
WHOLE_BEDS = [0, 1, 2, 5, 10, 37, 120, 200, 741, 800, 2600, 9000, 10100, 12000, 15000, 20000]
PARTS_OF_BEDS = [0.01, 0.3, 0.5, 0.99, 1.5, 4.5, 36.2, 120.7, 760.25, 10050.5]

# Offered load that N beds carry at a stated loss. Source: Erlang B table of offered load, 45 rows by 12 loss levels,
# printer unknown (read in transcription; "-" not read). "*" marks cells that 50-digit arithmetic shows to be misprinted.
PRINTED_LOSSES = (0.001, 0.002, 0.005, 0.01, 0.02, 0.03, 0.05, 0.07, 0.1, 0.15, 0.2, 0.3)
PRINTED_TABLE = """
 1 0.001 0.002 0.005 0.010 0.020 0.031 0.053 0.075 - 0.176 0.250 0.429
 2 0.046 0.065 0.105 0.153 0.223 0.282 - 0.470 0.595 0.796 1.000 1.450*
 3 0.194 0.249 - 0.455 0.602 0.715 0.899 1.057 1.271 1.602 1.930 -
 4 0.439 0.535 0.701 - 1.092 1.259 1.525 - - - 2.950* -
 5 0.762 - 1.132 1.361 1.657 1.875 - 2.504 - 3.454 4.010 -
 6 1.1 1.3 - 1.9 2.3 2.5 3.0 3.3 3.8 4.4 5.1 6.5
 7 1.6 1.8 - 2.5 2.9 3.2 3.7 - - 5.5 6.2 7.9
 8 - 2.3 2.7 3.1 - 4.0 - 5.0 5.6 6.5 7.4 9.2
 9 2.6 - - 3.8 4.3 4.7 5.4 5.9 - 7.6 8.5 10.6
10 3.1 3.4 - 4.5 - - 6.2 6.8 - 8.6 9.7 12.0
11 3.7 4.0 4.6 5.2 5.8 6.3 7.1 7.7 - 9.7 10.9 13.3
12 - - - - - 7.1 8.0 8.6 9.5 - 12.0 14.7
13 - 5.3 6.0 6.6 7.4 - 8.8 9.5 10.5 11.9 13.2 16.1
14 - 5.9 6.7 - 8.2 - - - 11.5 - - -
15 - - - 8.1 - 9.6 10.6 11.4 - 14.1 - 18.9
16 6.7 7.3 - 8.9 9.8 - 11.5 12.4 13.5 15.2 16.8 20.3
17 7.4 7.9 - 9.7 10.7 11.4 12.5 - 14.5 16.3 18.0 21.7
18 - 8.6 9.6 - - - 13.4 14.3 15.5 17.4 19.2 -
19 - 9.4 10.3 11.2 12.3 13.1 - - 16.6 18.5 20.4 24.5
20 9.4 10.1 11.1 12.0 13.2 14.0 15.2 - - - - 25.9
21 10.1 10.8 - - 14.0 14.9 16.2 - 18.7 20.8 - 27.3
22 10.8 11.5 12.6 - - 15.8 17.1 18.2 19.7 21.9 - 28.7
23 - 12.3 - - 15.8 16.7 18.1 19.2 - - 25.3 -
24 - 13.0 14.2 15.3 16.6 17.6 19.0 - 21.8 24.2 26.5 31.6
25 - - 15.0 16.1 17.5 18.5 - 21.2 22.8 25.3 27.7 -
26 13.7 14.5 - 17.0 18.4 19.4 - - 23.9 - - 34.4
27 14.4 15.3 - 17.8 - 20.3 21.9 23.2 - 27.6 - 35.8
28 15.2 - - - 20.2 21.2 22.9 - - 28.7 - 37.2
29 - 16.8 18.2 19.5 21.0 22.1 23.8 - 27.0* 29.9 - 38.6
30 16.7 17.6 19.0 20.3 21.9 23.1 24.8 - - 31.0 33.8 40.0
31 17.4 - 19.9 - 22.8 24.0 25.8 27.2 - - - 41.5
32 - - 20.7 - 23.7 24.9 26.7 28.2 30.2 33.3 36.3 42.9
33 - - - 22.9 24.6 25.8 - - 31.3 34.4 37.5 44.3
34 - - - 23.8 25.5 26.8 28.7 30.3 32.4 35.6 38.8 45.7
35 - - 23.2 24.6 26.4 27.7 29.7 31.3 - 36.7 - 47.1
36 21.3 22.4 24.0 25.5 - - - 32.3 - - - 48.6
37 22.1 - 24.8 - 28.2* 29.6 31.6 - 35.6 39.0 42.4 -
38 22.9 24.0 25.7 27.3 - 30.5 - - 36.6 40.2 43.7 51.4
39 - - 26.5 28.2* - 31.5 33.6 - 37.7 - 44.9 52.8
40 24.4 25.6 27.4 29.0 30.9* - 34.6 36.4 38.8 42.5 46.1 54.2
41 - 26.4 - - 31.8* 33.4 35.6 37.5* 39.9 43.6 - 55.7
42 26.0 27.2 29.1 - 32.7* 34.3 36.6 - 41.0* 44.8 - -
43 26.8 28.1 29.9 31.7 33.6* 35.3 37.6 39.5 42.0 45.9 49.9 -
44 27.6 28.9 - - 34.5* 36.3* 38.6 - 43.1 47.1 51.1 -
45 - 29.7 31.7 - - 37.2 39.6 41.6* 44.2 48.2 52.3 61.3
"""
PRINTED_CELLS = [
    (int(row.split()[0]), loss, cell)
    for row in PRINTED_TABLE.strip().splitlines()
    for loss, cell in zip(PRINTED_LOSSES, row.split()[1:], strict=True)
    if cell != "-"
]

# Offered load at a stated loss. Source: Rappaport, Wireless Communications: Principles and Practice, table
# "Capacity of an Erlang B System" (remembered values, each recomputed); the last two: a worked example, author
# unknown (read).
WORKED_LOADS = [
    (2, 0.01, "0.153"),
    (2, 0.005, "0.105"),
    (2, 0.002, "0.065"),
    (2, 0.001, "0.046"),
    (4, 0.01, "0.869"),
    (4, 0.005, "0.701"),
    (4, 0.001, "0.439"),
    (5, 0.01, "1.36"),
    (5, 0.005, "1.13"),
    (5, 0.002, "0.900"),
    (5, 0.001, "0.762"),
    (10, 0.005, "3.96"),
    (10, 0.002, "3.43"),
    (10, 0.001, "3.09"),
    (20, 0.01, "12.0"),
    (20, 0.002, "10.1"),
    (24, 0.01, "15.3"),
    (24, 0.002, "13.0"),
    (24, 0.001, "12.2"),
    (40, 0.01, "29.0"),
    (70, 0.01, "56.1"),
    (70, 0.005, "53.7"),
    (100, 0.01, "84.1"),
    (100, 0.005, "80.9"),
    (100, 0.001, "75.2"),
    (57, 0.01, "44.2"),
    (9, 0.01, "3.783"),
]


def exact_losses(load: float, counts: list[int]) -> dict[int, mp.mpf]:
    """Sum Erlang's own ratio (a^c/c!) / (1 + a + … + a^c/c!) term by term in 50 digits."""
    wanted, term, total, found = set(counts), mp.mpf(1), mp.mpf(1), {}
    for beds in range(max(counts) + 1):
        if beds:
            term *= mp.mpf(load) / beds
            total += term
        if beds in wanted:
            found[beds] = term / total
    return found


def exact_part_loss(load: float, beds: float) -> mp.mpf:
    """Return the loss at a part of a bed from the upper incomplete gamma function, in 50 digits."""
    return 1 / (mp.exp(load) * mp.mpf(load) ** (-mp.mpf(beds)) * mp.gammainc(mp.mpf(beds) + 1, load))


def loads_at(losses: list[float], beds: list[int]) -> np.ndarray:
    """Find the loads at which these beds lose these shares, by halving the gap between a low and a high guess."""
    low, high = np.zeros(len(beds)), 10.0 * np.array(beds)
    for _ in range(60):
        middle = (low + high) / 2.0
        too_high = erlang_b(middle, beds) > losses
        low, high = np.where(too_high, low, middle), np.where(too_high, middle, high)
    return high


def half_a_digit(printed: str) -> float:
    """Return half a unit in the last printed place."""
    return 0.5 * 10.0 ** -len(printed.partition(".")[2])


@pytest.fixture(autouse=True)
def fifty_digits() -> Iterator[None]:
    """Work with 50 digits."""
    with mp.workdps(50):
        yield


@pytest.mark.parametrize("load", LOADS)
def test_whole_beds_to_the_twelfth_digit(load: float) -> None:
    """Loss agrees with 50-digit arithmetic to 1e-12 wherever it is above 1e-300, its logarithm to 1e-9 everywhere."""
    losses = exact_losses(load, WHOLE_BEDS)
    ours, logs = erlang_b(load, WHOLE_BEDS), erlang_b_log(load, WHOLE_BEDS)

    for beds, loss, log in zip(WHOLE_BEDS, ours, logs, strict=True):
        if losses[beds] > mp.mpf("1e-300"):
            assert abs(mp.mpf(float(loss)) / losses[beds] - 1) <= 1e-12
        assert abs(mp.mpf(float(log)) - mp.log(losses[beds])) <= 1e-9


@pytest.mark.parametrize("load", [*LOADS, 1.999, 2.0, 2.001])
def test_parts_of_a_bed_to_the_twelfth_digit(load: float) -> None:
    """Parts of a bed agree with the incomplete gamma function in 50 digits, on both sides of the change of method."""
    for beds in PARTS_OF_BEDS:
        loss = exact_part_loss(load, beds)
        if loss > mp.mpf("1e-300"):
            assert abs(mp.mpf(float(erlang_b(load, beds))) / loss - 1) <= 1e-12
        assert abs(mp.mpf(float(erlang_b_log(load, beds))) - mp.log(loss)) <= 1e-9


def test_parts_of_a_bed_by_the_integral() -> None:
    """Parts of a bed agree with the integral 1/B = a·∫e^(−ay)(1+y)^x dy and with its closed form at half a bed."""
    # Source: Jagerman 1974 (Fortet's representation); x = 1/2: 1/B = 1 + (√π/2)·e^a·erfc(√a)/√a
    for beds, load in ((0.5, 1), (0.5, 2), (1.5, 2), (4.5, 3), (10.5, 8)):
        integral = load * mp.quad(lambda y, a=load, x=beds: mp.exp(-a * y) * (1 + y) ** x, [0, 1, 5, mp.inf])
        assert float(erlang_b(load, beds)) == pytest.approx(float(1 / integral), rel=1e-12)
    for load in (0.2, 1.0, 2.0, 9.0):
        closed = 1 / (1 + math.sqrt(math.pi) / 2 * math.exp(load) * math.erfc(math.sqrt(load)) / math.sqrt(load))
        assert float(erlang_b(load, 0.5)) == pytest.approx(closed, rel=1e-12)


@pytest.mark.parametrize("load", [1e-3, 0.5, 7.3, 23.8, 100.0, 740.0, 2500.5])
def test_delay_to_the_tenth_digit(load: float) -> None:
    """The share who wait agrees to 1e-10 with the delay formula in its own terms, summed in 50 digits."""
    counts = [beds for beds in (1, 2, 8, 30, 101, 741, 800, 2501, 2700) if beds > load]
    for beds in counts:
        below = mp.fsum(mp.exp(k * mp.log(load) - mp.loggamma(k + 1)) for k in range(beds))
        top = mp.exp(beds * mp.log(load) - mp.loggamma(beds + 1)) * beds / (beds - mp.mpf(load))
        share = top / (below + top)
        if share > mp.mpf("1e-300"):
            assert abs(mp.mpf(float(erlang_c(load, beds))) / share - 1) <= 1e-10


def test_delay_with_no_steady_state() -> None:
    """Everyone waits where the load is at or above the beds; nobody waits where nobody comes."""
    assert erlang_c([5.0, 6.0, 1.0], [5, 5, 0]).tolist() == [1.0, 1.0, 1.0]
    assert erlang_c(0.0, [0, 1, 5]).tolist() == [0.0, 0.0, 0.0]


def test_one_bed_at_a_load_of_740() -> None:
    """One bed at a load of 740 loses 740/741, where a quotient of Poisson terms gives inf or nan."""
    assert float(erlang_b(740.0, 1)) == pytest.approx(740.0 / 741.0, rel=1e-15)
    assert float(erlang_b_log(740.0, 1)) == pytest.approx(-math.log1p(1.0 / 740.0), rel=1e-10)


def test_edges() -> None:
    """No beds lose everyone; no demand loses nobody, with a logarithm of minus infinity."""
    assert float(erlang_b(3.0, 0)) == 1.0
    assert float(erlang_b(0.0, 0)) == 1.0
    assert float(erlang_b(0.0, 4)) == 0.0
    assert float(erlang_b_log(0.0, 4)) == -math.inf


def test_answers_broadcast_like_arrays() -> None:
    """A column of loads and a row of beds give a table, each cell as if asked alone."""
    loads, beds = np.array([[0.5], [4.0], [20.0]]), np.array([1.0, 2.5, 8.0, 30.0])
    for formula in (erlang_b, erlang_b_log, erlang_c):
        table = formula(loads, beds)
        assert table.shape == (3, 4)
        for row, load in enumerate(loads[:, 0]):
            assert table[row].tolist() == [float(formula(load, count)) for count in beds]


def test_printed_table() -> None:
    """The load carried at a stated loss rounds to the printed figure, and misses the figures known to be misprinted."""
    beds, losses, printed = zip(*PRINTED_CELLS, strict=True)
    figures = [cell.rstrip("*") for cell in printed]
    distance = np.abs(loads_at(losses, beds) - np.array(figures, dtype=float))
    rounds_to_it = distance <= [half_a_digit(figure) + 1e-9 for figure in figures]

    assert len(PRINTED_CELLS) == 380
    assert rounds_to_it.tolist() == [not cell.endswith("*") for cell in printed]


def test_worked_loads() -> None:
    """The load carried at a stated loss rounds to the published figure."""
    beds, losses, printed = zip(*WORKED_LOADS, strict=True)
    for load, figure in zip(loads_at(losses, beds), printed, strict=True):
        assert load == pytest.approx(float(figure), abs=half_a_digit(figure))


def test_trauma_bays() -> None:
    """Three trauma bays at a load of 2 h ÷ 3 h are all taken for 2.55 % of patients."""
    # Source: Cachon & Terwiesch, Matching Supply with Demand, chapter on Erlang loss (read)
    assert float(erlang_b(2.0 / 3.0, 3)) == pytest.approx(0.0255, abs=5e-5)


def test_loss_falls_ever_more_slowly_with_beds() -> None:
    """Each next bed spares patients, and fewer of them than the bed before it."""
    # Source: Messerli 1972, Bell System Technical Journal 51 (convexity in whole beds)
    losses = erlang_b(8.0, np.arange(0, 61))
    assert (np.diff(losses) < 0).all()
    assert (np.diff(losses, 2) > 0).all()


@pytest.mark.parametrize(
    ("load", "beds", "figure", "tolerance"),
    [
        # 100 calls in 30 minutes of 180 s each: load 10. Source: worked example, author unknown (read)
        (10.0, 11, 0.6821182, 5e-8),
        # County Hospital emergency room, 2 an hour, 20 minutes each. Source: Hillier & Lieberman, Introduction to
        # Operations Research (remembered; recomputed)
        (2.0 / 3.0, 2, 0.167, 5e-4),
        # Obstetrics, 14.8 a day × 2.9 days, load 42.9. Source: Green 2006 (remembered)
        (42.9, 45, 0.666, 5e-4),
        (42.9, 56, 0.037, 5e-4),
        (42.9, 57, 0.026, 5e-4),
    ],
)
def test_published_shares_who_wait(load: float, beds: int, figure: float, tolerance: float) -> None:
    """The share who wait rounds to the published figure."""
    assert float(erlang_c(load, beds)) == pytest.approx(figure, abs=tolerance)


def test_square_root_rule_in_the_limit() -> None:
    """With beds = load + β·√load and a growing load, the share who wait closes in on 1/(1 + β·Φ(β)/φ(β))."""
    # Source: Halfin & Whitt 1981, Operations Research 29
    for beta in (0.5, 1.0, 2.0):
        density = math.exp(-(beta**2) / 2.0) / math.sqrt(2.0 * math.pi)
        limit = 1.0 / (1.0 + beta * 0.5 * math.erfc(-beta / math.sqrt(2.0)) / density)
        gaps = []
        for root in (10, 40, 120):
            beds = root**2
            load = (math.sqrt(beta**2 + 4.0 * beds) - beta) ** 2 / 4.0
            gaps.append(abs(float(erlang_c(load, beds)) - limit))
        assert gaps[0] > gaps[1] > gaps[2]
        assert gaps[2] < 0.004 * limit + 0.001


@pytest.mark.parametrize(
    ("load", "beds", "words"),
    [
        (-1.0, 3, "-1"),
        (math.nan, 3, "nan"),
        (2.0, -1, "-1 beds"),
        (2.0, 20_001, "20,?001 beds"),
        (math.inf, 1, "inf"),
        ("4", 3, "'4'"),
        (None, 3, "None"),
        ([], 3, r"\[\]"),
        (2.0, "3", "'3' beds"),
    ],
)
def test_impossible_figures(load: object, beds: object, words: str) -> None:
    """A figure outside its meaning is refused in a sentence that quotes it."""
    for formula in (erlang_b, erlang_b_log, erlang_c):
        with pytest.raises(ImpossibleFigure, match=words):
            formula(load, beds)


def test_curve_of_a_steady_ward() -> None:
    """A steady ward's curve is the formula itself, alike in every month, with those let in as occupancy and no note."""
    curve = erlang_loss(Demand(6.0, LengthOfStay(4.0)), range(41))
    exact = exact_losses(24.0, list(range(41)))

    assert curve.when_full == "leaves"
    assert curve.notes == ()
    assert curve.turn_away_probability == pytest.approx([float(exact[beds]) for beds in range(41)], rel=1e-12)
    assert (curve.by_month == curve.turn_away_probability).all()
    assert curve.at(30).occupancy == pytest.approx(24.0 * (1.0 - float(exact[30])) / 30.0, rel=1e-12)
    assert curve.at(0).occupancy == 0.0


def test_curve_says_what_it_leaves_out() -> None:
    """Seasons and clusters are left out of the steady figure, and the curve says that the truth is worse."""
    winter = (1.4, 1.2, *(0.94,) * 10)
    seasonal = erlang_loss(Demand(6.0, LengthOfStay(4.0), month_factors=winter), [30])
    clustered = erlang_loss(Demand(6.0, LengthOfStay(4.0), clustering=1.5), [30])

    assert any("seasons" in note for note in seasonal.notes)
    assert any("come together" in note for note in clustered.notes)


def test_turnaround_takes_beds() -> None:
    """5 a day for 4 days on 25 beds made ready in 12 hours turn away what 4.5-day stays do; occupancy is patients'."""
    curve = erlang_loss(Demand(5.0, LengthOfStay(4.0), turnaround_hours=12.0), [25])
    exact = float(exact_losses(22.5, [25])[25])

    assert curve.turn_away_probability[0] == pytest.approx(exact, rel=1e-12)
    assert curve.occupancy[0] == pytest.approx(20.0 * (1.0 - exact) / 25, rel=1e-12)


def test_weekends_without_discharges_lengthen_stays() -> None:
    """Where Saturday's discharges wait two days and Sunday's one, 4 days become 4 + 3/7, and a note says what is missing."""
    curve = erlang_loss(Demand(5.0, LengthOfStay(4.0, 0.7), weekend_slip=(1.0, 1.0)), [25])
    load = 5.0 * (4.0 + 3.0 / 7.0)
    exact = float(exact_losses(load, [25])[25])

    # stays end evenly over the week where patients come evenly
    assert curve.turn_away_probability[0] == pytest.approx(exact, rel=1e-3)
    assert curve.occupancy[0] == pytest.approx(load * (1.0 - exact) / 25, rel=1e-3)
    assert any("hours of discharge" in note for note in curve.notes)


def test_nobody_wants_a_bed() -> None:
    """Where nobody comes nobody is turned away, not even with no beds, and every bed stays empty."""
    curve = erlang_loss(Demand(0.0, LengthOfStay(4.0)), [0, 1, 10])
    assert curve.turn_away_probability.tolist() == [0.0, 0.0, 0.0]
    assert curve.occupancy.tolist() == [0.0, 0.0, 0.0]
