"""The period a file covers, found from its rows for the ways in which exports are chosen."""

from __future__ import annotations

import datetime as dt
from typing import TYPE_CHECKING

import numpy as np
import pytest

from bedplan.data import IntakeChoices, read_records
from bedplan.data.dates import DAY_SECONDS, MISSING
from bedplan.data.windows import find_window
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from numpy.typing import NDArray

FIRST, LAST = 19_000 * DAY_SECONDS, 19_365 * DAY_SECONDS


def ward(seed: int, mean_days: float) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return starts and ends of a ward that ran long before and after the window, three patients a day."""
    rng = np.random.default_rng(seed)
    start = rng.integers(FIRST - 300 * DAY_SECONDS, LAST + 50 * DAY_SECONDS, 2_145)
    return np.sort(start), np.sort(start) + (rng.exponential(mean_days, start.size) * DAY_SECONDS).astype(np.int64) + 60


@pytest.mark.parametrize("mean_days", [0.5, 5.0, 20.0])
@pytest.mark.parametrize("seed", [1, 2, 3])
def test_all_stays_touching_a_window(seed: int, mean_days: float) -> None:
    """Patients in already don't stretch the window: it begins within two days of its true start and ends at its end."""
    start, end = ward(seed, mean_days)
    touching = (end >= FIRST) & (start < LAST)
    start, end = start[touching], np.where(end[touching] < LAST, end[touching], MISSING)
    first, last = find_window(start, end, LAST)

    assert abs(first - FIRST) <= 2 * DAY_SECONDS
    assert last == LAST


@pytest.mark.parametrize("mean_days", [0.5, 5.0, 20.0])
@pytest.mark.parametrize("seed", [1, 2, 3])
def test_stays_chosen_by_admission_date(seed: int, mean_days: float) -> None:
    """A file of admissions begins with the first of them, and ends with the last though discharges come later."""
    start, end = ward(seed, mean_days)
    chosen = (start >= FIRST) & (start < LAST)
    first, last = find_window(start[chosen], end[chosen], int(end[chosen].max()))

    assert abs(first - FIRST) <= 2 * DAY_SECONDS
    assert abs(last - LAST) <= (2 if mean_days > 1 else 4) * DAY_SECONDS


def test_a_person_can_say_what_the_window_is() -> None:
    """The planner's own window is used as it stands, its last day included."""
    content = b"ward,start,end\nHeron,2024-01-01 10:00,2024-01-04 10:00\n"
    chosen = IntakeChoices(window=(dt.date(2023, 12, 1), dt.date(2024, 1, 31)))

    assert read_records(content, choices=chosen).days == 62
    with pytest.raises(UnreadableRecords, match="ends before it starts"):
        read_records(content, choices=IntakeChoices(window=(dt.date(2024, 2, 1), dt.date(2024, 1, 1))))
