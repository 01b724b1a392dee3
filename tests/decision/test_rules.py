"""The fewest beds that meet a limit: against printed arithmetic, hand-made curves and impossible figures."""

from __future__ import annotations

import math
from fractions import Fraction

import numpy as np
import pytest
from scipy import optimize

from bedplan.decision import OccupancyLimit, OverfullLimit, TurnAwayLimit, WaitLimit, decide
from bedplan.errors import ImpossibleFigure, TargetOutOfReach
from bedplan.models import BedCurve, Demand, LengthOfStay, Waits, erlang_loss
from tests.erlang_sum import exact_share

# Beds that keep the share turned away to a limit, and the occupancy in percent that results, for steady demand.
# Erlang B worked by hand (Erlang 1917, insensitive to the spread of stay); re-computed below from its defining sum.
# load: ((beds at 5 %, occupancy), (beds at 2 %, occupancy), (beds at 1 %, occupancy))
BEDS_FOR_LIMIT = {
    3: ((7, 42), (8, 37), (8, 37)),
    5: ((9, 53), (10, 49), (11, 45)),
    8: ((13, 60), (14, 56), (15, 53)),
    10: ((15, 64), (17, 58), (18, 55)),
    15: ((20, 72), (23, 64), (24, 62)),
    20: ((26, 74), (28, 70), (30, 66)),
    25: ((31, 77), (34, 72), (36, 69)),
    30: ((36, 80), (39, 75), (42, 71)),
    40: ((46, 83), (50, 79), (53, 75)),
    60: ((66, 87), (71, 83), (75, 79)),
    100: ((105, 91), (113, 87), (117, 85)),
    200: ((202, 94), (214, 92), (221, 90)),
}
LIMITS = (0.05, 0.02, 0.01)
# Beds, and the share in percent turned away when they really run with 85 % in use. Erlang B re-computed; the finding
# itself is de Bruin et al. 2010, Annals of Operations Research 178:23-43.
RUNNING_AT_85_PERCENT = {8: 38.6, 10: 32.7, 20: 17.3, 28: 11.8, 30: 10.8, 40: 7.4, 60: 4.0, 100: 1.52, 200: 0.25}


def share_by_sum(load: float, beds: int) -> float:
    """Return Erlang's share from its defining sum, each term by its logarithm."""
    logs = [n * math.log(load) - math.lgamma(n + 1) for n in range(beds + 1)]
    return 1.0 / math.fsum(math.exp(one - logs[-1]) for one in logs)


def steady(load: float, most: int) -> BedCurve:
    """Return the steady-demand curve from none to ``most`` beds."""
    return erlang_loss(Demand(load, LengthOfStay(1.0)), range(most + 1))


def hand_made(shares: list[float], months: list[list[float]] | None = None, **others: object) -> BedCurve:
    """Return a curve with these shares at 0, 1, 2, … beds; months (12 rows) default to the year's."""
    year = np.array(shares)
    by_month = np.tile(year, (12, 1)) if months is None else np.array(months)
    demand = Demand(2.0, LengthOfStay(1.0))
    return BedCurve("hand made", "leaves", demand, np.arange(year.size), year, year * 0 + 0.5, by_month, **others)


@pytest.mark.parametrize("load", BEDS_FOR_LIMIT)
@pytest.mark.parametrize("place", range(3), ids=["5 %", "2 %", "1 %"])
def test_steady_limits_cost_the_printed_beds(load: int, place: int) -> None:
    """Each limit costs the beds of the table, and leaves the occupancy of the table."""
    beds, occupancy_percent = BEDS_FOR_LIMIT[load][place]
    limit = LIMITS[place]
    assert exact_share(Fraction(load), beds) <= limit < exact_share(Fraction(load), beds - 1)

    decision = decide(steady(load, beds + 20), TurnAwayLimit(limit))

    assert decision.beds == beds
    assert decision.point.turn_away_probability == pytest.approx(float(exact_share(Fraction(load), beds)), rel=1e-12)
    assert abs(100 * decision.point.occupancy - occupancy_percent) <= 0.5


@pytest.mark.parametrize(("beds", "percent"), RUNNING_AT_85_PERCENT.items())
def test_running_at_85_percent_turns_away_the_printed_share(beds: int, percent: float) -> None:
    """A ward whose fewest beds for 85 % in use is n turns away a share that depends on n, not on 85 %."""
    load = optimize.brentq(lambda load: load * (1 - share_by_sum(load, beds)) / beds - 0.85, 0.5 * beds, 4.0 * beds)

    decision = decide(steady(load, beds + 5), OccupancyLimit(0.85 + 1e-9))

    assert decision.beds == beds
    assert 100 * decision.point.turn_away_probability == pytest.approx(percent, abs=0.005 if percent < 2 else 0.05)


def test_the_limit_itself_is_allowed() -> None:
    """A share exactly at the limit meets it."""
    assert decide(hand_made([1.0, 0.5, 0.05, 0.01]), TurnAwayLimit(0.05)).beds == 2


def test_every_larger_count_meets_the_limit_too() -> None:
    """A count that meets the limit by a ripple of the curve, with a larger one that fails, is not the answer."""
    assert decide(hand_made([1.0, 0.04, 0.06, 0.01]), TurnAwayLimit(0.05)).beds == 3


def test_a_year_hides_its_worst_month() -> None:
    """The yearly limit is met with fewer beds than the limit in every month, and the worst month is named."""
    months = [[1.0, 0.3, 0.1, 0.04] if month == 6 else [1.0, 0.1, 0.01, 0.0] for month in range(12)]
    curve = hand_made([1.0, 0.12, 0.018, 0.003], months)

    year, every = decide(curve, TurnAwayLimit(0.05, within="year")), decide(curve, TurnAwayLimit(0.05))

    assert (year.beds, every.beds) == (2, 3)
    assert year.worst_month == every.worst_month == 6
    assert every.curve is curve
    assert every.point.by_month[6] == 0.04


def test_nobody_needs_no_beds() -> None:
    """Without demand every limit is met by no beds at all."""
    curve = erlang_loss(Demand(0.0, LengthOfStay(4.0)), range(5))

    assert decide(curve, TurnAwayLimit(0.01)).beds == 0
    assert decide(curve, OccupancyLimit(0.85)).beds == 0


def test_no_beds_never_meet_an_occupancy_limit_when_someone_comes() -> None:
    """A ward of no beds has nothing in use, and still doesn't meet an occupancy limit."""
    assert decide(steady(0.01, 3), OccupancyLimit(0.85)).beds == 1


def test_out_of_reach_says_how_near_it_came() -> None:
    """Where even the largest count fails, the message names that count and the figure there."""
    with pytest.raises(TargetOutOfReach, match=r"Even 2 beds .* 5\.0%: it is 20\.0% there"):
        decide(hand_made([1.0, 0.5, 0.2]), TurnAwayLimit(0.05))


def test_hours_over_full_are_read_from_wards_that_turn_nobody_away() -> None:
    """The over-full limit reads the share of hours: the year's, or the worst month's."""
    overfull = np.array([1.0, 0.4, 0.04, 0.01])
    by_month = np.tile(overfull, (12, 1))
    by_month[0] = [1.0, 0.6, 0.2, 0.05]
    curve = hand_made([1.0, 0.9, 0.8, 0.7], overfull_share_of_hours=overfull, overfull_by_month=by_month)

    assert decide(curve, OverfullLimit(0.05, within="year")).beds == 2
    assert decide(curve, OverfullLimit(0.05)).beds == 3
    assert decide(curve, OverfullLimit(0.05)).worst_month == 0


def test_waits_are_read_from_wards_whose_patients_wait() -> None:
    """The wait limit reads the share waiting longer than its hours: the year's, or the worst month's."""

    def share_over(hours: float) -> np.ndarray:
        return np.array([1.0, 0.8, 0.4, 0.1]) * math.exp(-hours / 4.0)

    def share_over_by_month(hours: float) -> np.ndarray:
        months = np.tile(share_over(hours), (12, 1))
        months[1] *= 2.0
        return months

    curve = hand_made([1.0, 0.8, 0.4, 0.1], waits=Waits(np.zeros(4), share_over, share_over_by_month))

    # 0.4 × e^(−1) = 0.147; twice that is 0.294
    assert decide(curve, WaitLimit(4.0, 0.15, within="year")).beds == 2
    assert decide(curve, WaitLimit(4.0, 0.15)).beds == 3
    assert decide(curve, WaitLimit(4.0, 0.3)).worst_month == 1


@pytest.mark.parametrize("share", [0, 1, -0.05, 5, math.nan, math.inf])
@pytest.mark.parametrize(
    "limit",
    [TurnAwayLimit, OccupancyLimit, OverfullLimit, lambda share: WaitLimit(4.0, share)],
    ids=["turn-away", "occupancy", "over-full", "wait"],
)
def test_a_limit_is_a_share(limit: type, share: float) -> None:
    """None and all are no limits, and five is not 5 %: the message quotes the figure and says what is allowed."""
    with pytest.raises(ImpossibleFigure, match=rf"{share:g} is not possible.*above 0 and below 1"):
        limit(share)


@pytest.mark.parametrize(
    "limit", [TurnAwayLimit, OverfullLimit, lambda share, span: WaitLimit(4.0, share, span)], ids=["t", "o", "w"]
)
def test_a_limit_holds_for_a_known_span(limit: type) -> None:
    """Only the year and every month are spans."""
    with pytest.raises(ImpossibleFigure, match="'winter' is not a span"):
        limit(0.05, "winter")


@pytest.mark.parametrize("hours", [-1.0, 721.0, math.nan])
def test_a_wait_is_a_number_of_hours(hours: float) -> None:
    """A wait lies between none and 30 days."""
    with pytest.raises(ImpossibleFigure, match="hours is not possible"):
        WaitLimit(hours, 0.05)


@pytest.mark.parametrize("within", ["year", "every_month"])
def test_a_limit_needs_a_model_that_knows_its_figure(within: str) -> None:
    """Waits and over-full hours can't be read from a curve whose patients leave."""
    with pytest.raises(ImpossibleFigure, match="nobody waits"):
        decide(steady(5.0, 10), WaitLimit(4.0, 0.05, within))
    with pytest.raises(ImpossibleFigure, match="never puts more patients"):
        decide(steady(5.0, 10), OverfullLimit(0.05, within))
