"""The formula and a simulation of the same ward stand side by side, and a low formula is caught."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from bedplan.decision import Ward, check_by_simulation
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


def test_patients_who_wait_find_the_ward_full_more_often() -> None:
    """Against the model where everyone finds a bed at once, patients who queue keep beds busier."""
    one = replace(ward(), when_full="waits")
    check = check_by_simulation(one, one.curve("unlimited_beds"), 10)

    assert check.interval[0] > check.formula


def test_nothing_to_check_is_a_sentence() -> None:
    """The average formula can't be checked by chance."""
    one = ward()
    with pytest.raises(ImpossibleFigure, match="leaves chance out"):
        check_by_simulation(one, one.curve("average_occupancy"), 10)
