"""A curve answers for the counts it was computed for, and nothing can change it afterwards."""

from __future__ import annotations

import math
import re

import numpy as np
import pytest

from bedplan.errors import ImpossibleFigure
from bedplan.models import BedCurve, Demand, LengthOfStay, Waits, bed_counts


def curve(beds: list[int]) -> BedCurve:
    """Return a hand-made curve: one tenth less is turned away with each bed count; March worst, August best."""
    counts = bed_counts(beds)
    year = 1.0 - 0.1 * np.arange(counts.size)
    months = np.tile(year, (12, 1))
    months[2] *= 1.5
    months[7] *= 0.5
    return BedCurve("hand made", "leaves", Demand(1.0, LengthOfStay(1.0)), counts, year, year / 2, months)


@pytest.mark.parametrize(
    ("given", "expected"), [(3, [3]), (0, [0]), ([0, 4, 20_000], [0, 4, 20_000]), (range(3), [0, 1, 2]), ([2.0], [2])]
)
def test_whole_ascending_counts_are_taken(given: object, expected: list[int]) -> None:
    """One count, a list, a range and whole floats are all bed counts, kept as read-only whole numbers."""
    counts = bed_counts(given)

    assert counts.tolist() == expected
    assert counts.dtype == np.int64
    assert not counts.flags.writeable


@pytest.mark.parametrize("beds", [-1, 1.5, math.nan, math.inf, 20_001, [3, 1.5]])
def test_impossible_counts_are_quoted(beds: object) -> None:
    """A count that is negative, not whole, endless or above 20,000 is quoted in the message."""
    quoted = beds[-1] if isinstance(beds, list) else beds
    with pytest.raises(ImpossibleFigure, match=rf"^{quoted:g} beds is not possible: .*whole numbers from 0 to 20,000"):
        bed_counts(beds)


@pytest.mark.parametrize("beds", ["4", None, True, {}, ["4", "5"], [4, None]])
def test_what_is_no_count_is_quoted(beds: object) -> None:
    """Text, nothing, yes and no are no bed counts, alone or in a list, and not on any curve either."""
    with pytest.raises(ImpossibleFigure, match=rf"^{re.escape(repr(beds))} beds is not possible: "):
        bed_counts(beds)
    with pytest.raises(ImpossibleFigure, match=rf"^{re.escape(repr(beds))} beds is not possible: "):
        curve([4, 6, 9]).at(beds)


@pytest.mark.parametrize(("beds", "says"), [([], "at least one"), ([[1], [2]], "plain list"), ([2, 2], "must go up")])
def test_counts_come_as_a_plain_rising_list(beds: object, says: str) -> None:
    """None at all, a table of counts, and counts that don't rise are refused."""
    with pytest.raises(ImpossibleFigure, match=says):
        bed_counts(beds)


def test_a_point_reads_one_count() -> None:
    """A point carries the year's share, the occupancy and the twelve months of exactly its count."""
    point = curve([4, 6, 9]).at(6)

    assert point.beds == 6
    assert point.turn_away_probability == pytest.approx(0.9)
    assert point.occupancy == pytest.approx(0.45)
    assert point.by_month == pytest.approx([0.9, 0.9, 1.35, 0.9, 0.9, 0.9, 0.9, 0.45, 0.9, 0.9, 0.9, 0.9])
    assert point.worst_month == 2


@pytest.mark.parametrize("beds", [3, 5, 10, 6.5])
def test_a_count_off_the_curve_is_an_error_not_a_guess(beds: float) -> None:
    """Nothing is read between or beyond the counts a curve was computed for."""
    with pytest.raises(ImpossibleFigure, match=rf"{beds:g} beds is not on this curve, which runs from 4 to 9 beds"):
        curve([4, 6, 9]).at(beds)


@pytest.mark.parametrize("name", ["beds", "turn_away_probability", "occupancy", "by_month"])
def test_a_curve_can_not_be_changed(name: str) -> None:
    """Pages, documents and caches share one curve, so writing into its arrays fails."""
    with pytest.raises(ValueError, match="read-only"):
        getattr(curve([4, 6, 9]), name)[0] = 0


@pytest.mark.parametrize("hours", [-1.0, math.nan, math.inf, None, "4", [4.0]])
def test_a_wait_is_a_number_of_hours(hours: object) -> None:
    """Waits below 0, without end, missing or written as text are quoted, for the year and by month."""
    waits = Waits(np.zeros(2), lambda over: np.full(2, over), lambda over: np.full((12, 2), over))

    assert waits.share_over(4).tolist() == [4.0, 4.0]
    for ask in (waits.share_over, waits.share_over_by_month):
        with pytest.raises(ImpossibleFigure, match=r"A wait of .* hours is not possible: it is 0 or more"):
            ask(hours)
