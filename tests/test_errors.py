"""The error tree: a page catches one kind, careless callers still catch the fitting built-in one."""

from __future__ import annotations

import pytest

from bedplan.errors import BedplanError, ImpossibleFigure, TargetOutOfReach, UnreadableRecords


@pytest.mark.parametrize("kind", [ImpossibleFigure, TargetOutOfReach])
def test_a_page_catches_every_kind_as_it_stands(kind: type[BedplanError]) -> None:
    """Every kind is the one kind a page catches, and its text is the sentence it was raised with."""
    with pytest.raises(BedplanError) as caught:
        raise kind("A sentence.")

    assert str(caught.value) == "A sentence."


def test_an_impossible_figure_is_a_value_error() -> None:
    """Callers who only know Python's own errors catch an impossible figure too."""
    assert issubclass(ImpossibleFigure, ValueError)
    assert not issubclass(TargetOutOfReach, ValueError)


def test_unreadable_records_list_every_problem_in_order() -> None:
    """All problems come at once, in file order, and the text holds each of them."""
    problem = UnreadableRecords(line for line in ("No column holds the start.", "Row 7 has no ward."))

    assert isinstance(problem, BedplanError)
    assert problem.problems == ("No column holds the start.", "Row 7 has no ward.")
    assert str(problem) == "No column holds the start. Row 7 has no ward."
