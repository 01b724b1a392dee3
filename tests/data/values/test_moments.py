"""Times of day beside a date, as people and spreadsheets write them."""

from __future__ import annotations

import pytest

from bedplan.data.values.moments import minutes_of


@pytest.mark.parametrize(
    ("clock", "minutes"),
    [
        ("08:00", 480),
        ("0800", 480),
        ("800", 480),
        ("8", 480),
        ("08", 480),
        ("8.05", 485),
        ("8h05", 485),
        ("08:05:59", 485),
        ("14:05 Uhr", 845),
        ("2:05 pm", 845),
        ("12:30 AM", 30),
        ("1899-12-30 08:00:00", 480),
        ("24:00", 1_440),
        ("24:01", None),
        ("13:00 pm", None),
        ("08:60", None),
        ("²", None),
        ("noon", None),
        ("-3", None),
    ],
)
def test_times_of_day_in_many_spellings(clock: str, minutes: int | None) -> None:
    """A time is read, or it is said that it can't be; nothing stops the reading."""
    assert minutes_of(clock) == minutes
