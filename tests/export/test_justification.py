"""What a justification says: the figures of its objects, nothing small that points at a person, nothing unsaid."""

from __future__ import annotations

import datetime as dt
from dataclasses import replace
from typing import TYPE_CHECKING

import pytest

from bedplan import wording
from bedplan.errors import ImpossibleFigure
from bedplan.export import Justification, Source
from bedplan.export.justification import count_or_withheld

if TYPE_CHECKING:
    from pathlib import Path


def test_decision_says_beds_limit_and_that_last_year_is_unchecked(justification: Justification) -> None:
    """The decision box asks for the beds the limit takes and says that last year was not checked yet."""
    first, last, *_ = justification.decision_lines()

    assert f"approve {justification.cases[0].decision.beds} staffed beds (today 20)" in first
    assert "every month within 5.0\u00a0% (1 in 20) turned away" in first
    assert last == f"Curlew, check on last year: {wording.NOT_YET_CHECKED}"


def test_wards_that_wait_are_not_said_to_turn_away(justification: Justification) -> None:
    """The line of a ward whose patients wait speaks of finding it full."""
    line = justification.decision_lines()[2]

    assert "finding the ward full" in line
    assert "turned away" not in line


def test_table_holds_the_curve(justification: Justification) -> None:
    """Each row of the table is the curve's own point at that bed count."""
    case = justification.cases[0]
    for row in case.table():
        point = case.curve.at(int(row["Staffed beds"]))

        assert row["As a share"] == wording.percent(point.turn_away_probability)
        assert row["Occupancy that results"] == wording.percent(point.occupancy, 0)


@pytest.mark.parametrize(("count", "shown"), [(0, "0"), (1, "*"), (7, "*"), (8, "8"), (1234, "1,234")])
def test_small_counts_are_withheld(count: int, shown: str) -> None:
    """Counts of 1 to 7 rows are withheld in documents."""
    assert count_or_withheld(count) == shown


def test_fingerprint_moves_with_any_figure(justification: Justification) -> None:
    """Another setting, limit or records file gives another fingerprint; another date does not."""
    case = justification.cases[0]
    other_setting = replace(justification, cases=(replace(case, settings=(("Demand", "+6 %"),)),))
    same = replace(justification, cases=(case,))

    assert other_setting.fingerprint() != same.fingerprint()
    assert replace(same, source=replace(same.source, fingerprint="cd" * 32)).fingerprint() != same.fingerprint()
    assert replace(same, prepared=dt.date(2030, 1, 1)).fingerprint() == same.fingerprint()


def test_typed_totals_say_so() -> None:
    """A justification from typed totals never pretends that a file was read."""
    assert "no file of ward stays was read" in Source("Totals typed by the planner").sentences()[0]


def test_needs_a_ward() -> None:
    """A justification of no ward is refused in a sentence."""
    with pytest.raises(ImpossibleFigure, match="no ward to justify"):
        Justification((), Source("x"), dt.date(2026, 1, 1))


def test_demo_source_balances(demo_data: Path) -> None:
    """The demo's rows in are its rows used, repaired and set aside, and the fingerprint is the file's SHA-256."""
    import hashlib  # noqa: PLC0415

    from bedplan.data import read_records  # noqa: PLC0415

    source = Source.from_records(read_records(demo_data / "stays.csv"))

    assert source.rows_in == source.used + source.repaired + source.set_aside
    assert source.fingerprint == hashlib.sha256((demo_data / "stays.csv").read_bytes()).hexdigest()
    assert source.window == "01 April 2022 to 31 March 2025"
