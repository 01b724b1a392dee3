"""The formula and a simulation of the same ward stand side by side, and a low formula is caught."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from bedplan.decision import BedChanges, Closure, Ward, check_by_simulation
from bedplan.errors import ImpossibleFigure
from bedplan.models import MODELS, Demand, LengthOfStay, erlang_b


def ward(**rhythm: tuple[float, ...]) -> Ward:
    """Return a ward of 10 beds with a load of 8."""
    return Ward("Merlin", 10, Demand(2.0, LengthOfStay(4.0, 1.3), **rhythm))


@pytest.mark.parametrize("seed", range(3))
def test_exact_formula_is_inside_the_range(seed: int) -> None:
    """With steady demand the loss formula is exact, so that it is never far outside the simulated range."""
    one = ward()
    check = check_by_simulation(one, one.curve("erlang_loss"), 10, seed=seed)
    half = (check.interval[1] - check.interval[0]) / 2

    assert check.formula == pytest.approx(float(erlang_b(8.0, 10)))
    assert abs(check.simulated - check.formula) < 2 * half  # four standard errors
    assert check.arrivals > 100_000


def test_formula_that_leaves_the_season_out_is_caught() -> None:
    """A strong season makes the steady formula too low, and the check says how far."""
    season = (2.0, 1.8, 1.4, 1.0, 0.6, 0.4, 0.4, 0.4, 0.6, 0.8, 1.2, 1.4)
    one = ward(month_factors=season)
    check = check_by_simulation(one, MODELS["erlang_loss"](one.demand, np.arange(20)), 10)

    assert check.low > 0.1


@pytest.mark.parametrize("seed", range(3))
def test_everyone_placed_at_once_is_checked_as_such(seed: int) -> None:
    """The formula in which everyone is placed is exact with steady demand: it lies in the range of patients who are.

    Those who would wait in line instead keep beds busier, and more find the ward full.
    """
    one = replace(ward(), when_full="waits")
    check = check_by_simulation(one, one.curve("unlimited_beds"), 10, seed=seed)
    half = (check.interval[1] - check.interval[0]) / 2

    # a Poisson number of mean 8 is there, whatever the stays (Palm 1943)
    assert check.formula == pytest.approx(stats.poisson.sf(9, 8), rel=1e-5)
    assert abs(check.simulated - check.formula) < 2 * half  # four standard errors
    assert check.if_they_queue > 1.2 * check.simulated
    assert check_by_simulation(one, one.curve("waiting"), 10).if_they_queue is None


@pytest.mark.parametrize("model", ["seasonal_loss", "unlimited_beds"])
def test_changing_beds_are_simulated_too(model: str) -> None:
    """A closure at random, fewer beds at weekends, a summer and missing beds: formula and patients agree to 1 in 20."""
    changes = BedChanges(
        (Closure.expected(3, 4.0, 10.0),),
        (0,) * 6 + (-2, -2) + (0,) * 4,
        unassignable=0.5,
        extra_by_weekday=(0,) * 5 + (-2,) * 2,
    )
    one = replace(ward(), bed_changes=changes)
    check = check_by_simulation(one, one.curve(model), 12)

    assert check.interval[0] * 0.95 < check.formula < check.interval[1] * 1.05
    assert check.simulated > 1.5 * check_by_simulation(ward(), ward().curve(model), 12).simulated


def test_a_five_day_ward_takes_nobody_in_at_weekends() -> None:
    """Two of seven patients of a ward closed at weekends find no bed, however many there are."""
    one = replace(ward(), bed_changes=BedChanges(open_weekdays=(True,) * 5 + (False,) * 2))

    assert check_by_simulation(one, one.curve(), 19).simulated == pytest.approx(2 / 7, abs=0.005)


def test_a_curve_of_another_demand_is_refused() -> None:
    """A curve is checked by its own ward only."""
    with pytest.raises(ImpossibleFigure, match="another demand than that of Merlin"):
        check_by_simulation(ward(), Ward("Teal", 10, Demand(1.0, LengthOfStay(4.0))).curve(), 10)


def test_nothing_to_check_is_a_sentence() -> None:
    """The average formula can't be checked by chance."""
    one = ward()
    with pytest.raises(ImpossibleFigure, match="leaves chance out"):
        check_by_simulation(one, one.curve("average_occupancy"), 10)
