"""Figures somebody gave: numbers pass, whatever they are written in; everything else is quoted in a sentence."""

from __future__ import annotations

import math
from fractions import Fraction

import numpy as np
import pytest

from bedplan.errors import ImpossibleFigure
from bedplan.models.value_objects.figures import (
    ABOVE_ZERO,
    all_of_kind,
    array_of,
    days_given,
    listed,
    number,
    quoted,
    whole,
)


@pytest.mark.parametrize("value", [4, 4.0, np.float64(4), np.float32(4), np.int8(4), Fraction(4)])
def test_a_number_is_a_number_in_any_form(value: object) -> None:
    """Whole numbers, floats, fractions and numpy's numbers come back as plain ones."""
    assert type(number("{} beds", value, (4.0, 4.0), "four")) is float
    assert type(whole("{} beds", value, (4, 4), "four")) is int
    assert number("{} beds", value, (0.0, 9.0), "some") == 4.0


@pytest.mark.parametrize(
    "value",
    [None, "4", [4], (4,), {}, True, np.True_, 4j, np.array(4.0), math.nan, math.inf, -math.inf, -1, 9.1, 10**400],
)
def test_anything_else_is_quoted_with_what_is_allowed(value: object) -> None:
    """No number, no end, too small, too large: one sentence, with the figure in it."""
    with pytest.raises(ImpossibleFigure) as said:
        number("A stay of {} days", value, (0.0, 9.0), "it is 0 to 9")

    assert str(said.value) == f"A stay of {quoted(value)} days is not possible: it is 0 to 9."


def test_how_figures_are_quoted() -> None:
    """Numbers in short, the rest as it was typed, and nothing of four hundred digits."""
    figures = (1.06, 12_345.0, "4", None, math.nan, 10**400)

    assert [quoted(one) for one in figures] == ["1.06", "12345", "'4'", "None", "nan", "a number past 300 digits"]


def test_halves_and_nothing_are_refused_where_whole_or_some_is_needed() -> None:
    """4.5 is no count, and 0 isn't above 0; the smallest number there is, is."""
    with pytest.raises(ImpossibleFigure, match=r"4\.5 beds is not possible: give a whole number\."):
        whole("{} beds", 4.5, (0, 9), "give a whole number")
    with pytest.raises(ImpossibleFigure, match="0 days"):
        number("{} days", 0, (ABOVE_ZERO, 9.0), "it is more than 0")
    assert number("{} days", 1e-300, (ABOVE_ZERO, 9.0), "it is more than 0") == 1e-300


@pytest.mark.parametrize("values", [None, 3, "abc", b"abc", {1: 2}])
def test_what_is_not_a_list_is_quoted(values: object) -> None:
    """A lone figure or a text is no list of figures."""
    with pytest.raises(ImpossibleFigure, match="Factors need 12 numbers, but"):
        listed(values, "Factors need 12 numbers")


def test_lists_come_back_as_tuples_of_their_kind() -> None:
    """Lists, tuples, arrays and ranges pass; a member of another kind is quoted."""
    assert listed(np.arange(3), "") == listed(range(3), "") == listed([0, 1, 2], "") == (0, 1, 2)
    assert all_of_kind(["a", "b"], str, "") == ("a", "b")
    with pytest.raises(ImpossibleFigure, match="Names are texts, but 3 was given"):
        all_of_kind(["a", 3], str, "Names are texts")


def test_arrays_of_figures() -> None:
    """Whole numbers and floats of any shape pass; one figure too large, text, nothing and no figure at all are quoted."""
    assert array_of("{} beds", [[1, 2.5]], (0.0, 9.0), "some").tolist() == [[1.0, 2.5]]
    for bad, says in (
        (10, "10"),
        ([1, math.nan], "nan"),
        ("4", "'4'"),
        (None, "None"),
        ([], r"\[\]"),
        ([[1], [1, 2]], r"\[\[1"),
    ):
        with pytest.raises(ImpossibleFigure, match=rf"^{says}.* beds is not possible: give 0 to 9\."):
            array_of("{} beds", bad, (0.0, 9.0), "give 0 to 9")


def test_days_asked_about() -> None:
    """Any shape of days; before the first reads as its beginning; what isn't a number is quoted."""
    assert days_given("", [[-1.0, 0.0], [2.0, math.inf]]).tolist() == [[0.0, 0.0], [2.0, math.inf]]
    for bad in (None, "4", "x", [1.0, math.nan], [[1.0], [1.0, 2.0]]):
        with pytest.raises(ImpossibleFigure, match="is not possible: give numbers"):
            days_given("A stay of {} days", bad)
