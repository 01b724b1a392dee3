"""Patients who give up waiting: figures that are none, and the ends of the formula (its values: test_waiting.py)."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import pytest

from bedplan.errors import ImpossibleFigure
from bedplan.models import Demand, LengthOfStay, WardRun, erlang_a, simulate_ward

if TYPE_CHECKING:
    from collections.abc import Callable


@pytest.mark.parametrize(
    ("ask", "says"),
    [
        (lambda: erlang_a(None, 6, 1.0), "load of None beds"),
        (lambda: erlang_a("5", 6, 1.0), "load of '5' beds"),
        (lambda: erlang_a(math.inf, 6, 1.0), "load of inf beds"),
        (lambda: erlang_a([], 6, 1.0), r"load of \[\] beds"),
        (lambda: erlang_a(5.0, "6", 1.0), "'6' beds"),
        (lambda: erlang_a(5.0, -6, 1.0), "-6 beds"),
        (lambda: erlang_a(5.0, 6, None), "patience of None mean stays"),
        (lambda: erlang_a(5.0, 6, [1.0, 0.0]), "patience of 0 mean stays"),
        (lambda: erlang_a((1.0, 2.0), (1, 2, 3), 1.0), r"shapes \(2,\), \(3,\), \(\) don't go together"),
        (lambda: erlang_a(5.0, 6, 1.0).share_waiting_over(-1.0), "wait of -1 mean stays"),
        (lambda: erlang_a(5.0, 6, 1.0).share_waiting_over(math.nan), "wait of nan mean stays"),
        (lambda: erlang_a(5.0, 6, 1.0).share_waiting_over(None), "wait of None mean stays"),
    ],
)
def test_what_is_no_figure_is_quoted(ask: Callable[[], object], says: str) -> None:
    """Loads, beds, patience and waits outside their meaning are refused in a sentence."""
    with pytest.raises(ImpossibleFigure, match=says):
        ask()


def test_nobody_waits_longer_than_they_wait_at_all() -> None:
    """Everyone who waits waits longer than no time, fewer longer ones, and nobody for ever."""
    ward = erlang_a(30.0, 28, 0.5)
    over = [float(ward.share_waiting_over(stays)) for stays in (0.0, 0.1, 1.0, 1e9)]

    assert over[0] == pytest.approx(float(ward.share_who_wait))
    assert over == sorted(over, reverse=True)
    assert over[-1] == 0.0


def test_simulated_patients_of_a_crowded_ward_give_up_as_often() -> None:
    """More wanted than there are beds, and patience of half a stay: shares as simulated patients see them."""
    ward = simulate_ward(
        Demand(7.5, LengthOfStay(4.0, 1.0, "gamma")), 28, seed=4, when_full="waits", run=WardRun(patience_days=2.0)
    )
    ours = erlang_a(30.0, 28, 0.5)

    assert ward.gave_up == pytest.approx(float(ours.share_who_give_up), rel=0.03)
    assert ward.turn_away_probability == pytest.approx(float(ours.share_who_wait), rel=0.02)
