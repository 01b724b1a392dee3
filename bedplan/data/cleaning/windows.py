"""From when to when is a file complete, and by which date was it chosen? Found from the rows: exports seldom say."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.files.blocks import in_blocks, order_of, taken
from bedplan.data.files.dates import DAY_SECONDS, MISSING

if TYPE_CHECKING:
    import datetime as dt

    from numpy.typing import NDArray

    from bedplan.data.values.rows import Rows, Way

FEWEST_TIMES = 50  # to know how an export was chosen
FEWEST_IN = 3.0  # patients in on average; below, nobody in on one day is nothing odd
MOVE_GAP_SECONDS = 3_600  # longer between two wards and it is another time in hospital
THIN = 0.9  # less than this share of the usual starts before the first end: patients already in, not admissions
MANY_MOVES = 0.02  # of ward stays that began with a move, from which wards miss arrivals where patients are missing
MOST_QUIET_ARRIVALS = 20.0  # usual gaps between starts after which a silence means that the file stopped
FEW_QUIET_ARRIVALS = 5.0  # the same where hardly anybody is still in by then
ALMOST_ALL = 0.99  # of stays are shorter than what is left out at an end where patients are missing
MOST_LEFT_OUT = 1 / 3  # of the file
FEWEST_DAYS = 90  # of which some can be left out
NIGHTS = 9
MOST_LOOKED_AT = 100_000
# By what an export was chosen.
ALL_STAYS, BY_ADMISSION, BY_DISCHARGE = "all stays that touch the period", "admission date", "discharge date"
BY_BOTH = "admission date and by discharge date"


@dataclass(frozen=True, slots=True)
class TimesInHospital:
    """Times that patients spent in hospital, each from the first of their wards to the last.

    ``start`` and ``end`` (n,) in seconds, ``MISSING`` = still in; ``ward`` (n,) code of the last ward; ``moves``: share
    of ward stays that began with a move from another ward.
    """

    start: NDArray[np.int64]
    end: NDArray[np.int64]
    ward: NDArray[np.int64]
    moves: float = 0.0


@dataclass(frozen=True, slots=True)
class Period:
    """What a file covers: two midnights, in seconds, between which it holds every start of a stay.

    ``warm_up_days``: so many days from ``first`` show too few patients present, because those in already are missing.
    ``chosen_by``: one of the four below; nothing where too few patients were in to tell. ``note`` says the same, and
    what was done about it.
    """

    first: int
    last: int
    warm_up_days: int = 0
    chosen_by: str = ""
    note: str = ""

    @property
    def is_partial(self) -> bool:
        """Does the file leave out patients who were in at its start, or still in at its end?"""
        return self.chosen_by not in ("", ALL_STAYS)

    @property
    def window(self) -> tuple[int, int]:
        """Return the two midnights."""
        return self.first, self.last

    def narrowed(self, chosen: tuple[int, int] | None) -> Period:
        """Return the period that a person chose instead, used as it stands; days of warm-up inside it stay known."""
        if chosen is None:
            return self
        days = self.warm_up_days + (self.first - chosen[0]) // DAY_SECONDS
        late = (chosen[1] - self.last) // DAY_SECONDS
        told = f" The period chosen reaches {late:,} days past what is complete: figures there are too low."
        return replace(
            self,
            first=chosen[0],
            last=chosen[1],
            warm_up_days=max(days, 0) if self.warm_up_days else 0,
            note=self.note + told if late > 0 and self.is_partial else self.note,
        )


def seen_until(rows: Rows, has_times: bool) -> int:
    """Up to when was the file watched? The midnight after the last thing that happened; 0 where nothing did."""
    live = rows.live
    if not live.any():
        return 0
    last = max(int(rows.start[live].max()), int(rows.end[live].max()))
    return -(-(last + (0 if has_times else 1)) // DAY_SECONDS) * DAY_SECONDS


def chosen_window(window: tuple[dt.date, dt.date] | None) -> tuple[int, int] | None:
    """Return a window somebody chose, first and last day included, in seconds."""
    if window is None:
        return None
    first, last = (int(pd.Timestamp(day).normalize().timestamp()) for day in window)
    return first, last + DAY_SECONDS


def times_in_hospital(way: Way, *, knows_patients: bool, knows_spells: bool) -> TimesInHospital:
    """When did each patient come to hospital and leave it? ``way``: stays by patient, then start.

    Exports are mostly chosen by these two, not by when a patient came to a ward.
    """
    goes_on = np.zeros(way.start.size, dtype=bool)

    def look(block: slice) -> None:
        """Find the moves from one ward to the next within one block, and from it to the next."""
        _, patient, spell, _, start, end = (every[block.start : block.stop + 1] for every in way)
        together = (end[:-1] != MISSING) & (start[1:] - end[:-1] <= MOVE_GAP_SECONDS)
        if knows_spells:
            together |= spell[1:] == spell[:-1]
        goes_on[block.start + 1 : block.stop + 1] = (patient[1:] == patient[:-1]) & together

    if knows_patients:
        in_blocks(goes_on.size, look)
    heads = np.flatnonzero(~goes_on)
    tails = np.append(heads[1:], goes_on.size)[: heads.size] - 1
    moves = float(goes_on.mean()) if goes_on.size else 0.0
    return TimesInHospital(taken(way.start, heads), taken(way.end, tails), taken(way.ward, tails), moves)


def find_period(times: TimesInHospital, until: int) -> Period:
    """Between which two midnights does the file hold every stay, and which patients does it leave out?

    Where patients in at the start are in the file, the first start comes long before the first end: as long as the
    longest of them had been in. Where the file begins with an admission, the first end follows soon. Of Poisson
    arrivals the second is the likelier exactly where the first end follows within one mean stay. Towards the end the
    same holds backwards: where the last end follows the last start within one mean stay and nobody is still in, those
    who were have been left out. There, admissions thin out for as long as stays last, so the time within which 99 % of
    stays end is left out; what is left of the error is under 1 % of one day's admissions.

    Checked by: tests/data/cleaning/test_windows.py
    """
    start, end = times.start, times.end
    finished = end != MISSING
    first_start, stay = int(start.min()), (end - start)[finished]
    if not stay.size:
        return Period(_midnight(first_start), max(until, _midnight(first_start) + DAY_SECONDS))
    mean = float(stay.mean())
    first_end = int(end.min(where=finished, initial=np.iinfo(np.int64).max))
    early = int((start < first_end).sum())
    thin = early * (until - first_end) < THIN * (start.size - early) * (first_end - first_start)
    held_before = first_end - first_start > mean and thin
    first = _midnight(first_end if held_before else first_start)
    last, held_after = _end(times, first, until, mean)
    last = max(last, first + DAY_SECONDS)
    return _told(Period(first, last), times, stay, held_before=held_before, held_after=held_after)


def _midnight(moment: int) -> int:
    """Return the midnight before a moment."""
    return moment // DAY_SECONDS * DAY_SECONDS


def _end(times: TimesInHospital, first: int, until: int, mean: float) -> tuple[int, bool]:
    """Return the last moment for which every start is known, and whether those in by then are in the file."""
    start, end = times.start, times.end
    if start.size < FEWEST_TIMES:
        return until, True
    last_start = int(start.max())
    usual_gap = (last_start - int(np.median(start))) / (start.size / 2)
    quiet, still_in = until - last_start, int((end == MISSING).sum())
    usual_in = _usually_in(times, first, last_start)
    fewest = min(usual_in / 2, usual_in - 3 * math.sqrt(usual_in))  # by chance less than 1 in 700
    stopped = quiet > mean and still_in < usual_in / 2 and (not still_in or quiet > FEW_QUIET_ARRIVALS * usual_gap)
    if stopped or quiet > max(MOST_QUIET_ARRIVALS * usual_gap, 3 * DAY_SECONDS):
        last = _midnight(last_start) + DAY_SECONDS
        return last, int((end >= last).sum()) + still_in >= fewest
    return until, still_in > 0 and still_in >= fewest


def _usually_in(times: TimesInHospital, first: int, last: int) -> float:
    """Return how many were in at midnight in the middle half of this time: the median of a few days."""
    every = max(times.start.size // MOST_LOOKED_AT, 1)  # one patient in so many is enough of a large file
    start, end = times.start[::every].copy(), times.end[::every].copy()
    nights = np.linspace(first + (last - first) / 4, last - (last - first) / 4, NIGHTS) // DAY_SECONDS * DAY_SECONDS
    present = [((start <= night) & ((end > night) | (end == MISSING))).sum() for night in nights]
    return every * float(np.median(present))


def _told(
    period: Period, times: TimesInHospital, stay: NDArray[np.int64], *, held_before: bool, held_after: bool
) -> Period:
    """Leave out what shows too few, and say so; where too few patients are in to tell, change nothing.

    ``stay``: the lengths of those times that are over, in seconds.
    """
    if times.start.size < FEWEST_TIMES or stay.mean() < DAY_SECONDS:
        return period
    if _usually_in(times, period.first, period.last) < FEWEST_IN:
        return period
    if held_before and held_after:
        return replace(period, chosen_by=ALL_STAYS, note="This file holds all stays that touch its period.")
    span = (period.last - period.first) // DAY_SECONDS
    days = min(_longest_days(times, stay), int(span * MOST_LEFT_OUT)) if span >= FEWEST_DAYS else 0
    moved = times.moves >= MANY_MOVES
    first = period.first + (days * DAY_SECONDS if moved and not held_before else 0)
    last = period.last - (0 if held_after else days * DAY_SECONDS)
    chosen_by = BY_DISCHARGE if held_before else BY_ADMISSION if held_after else BY_BOTH
    return Period(first, last, 0 if held_before or moved else days, chosen_by, _note(chosen_by, days, moved=moved))


def _note(chosen_by: str, days: int, *, moved: bool) -> str:
    """Say by which date the file was chosen, what that leaves out, and what was done about it."""
    told = [f"This file holds stays by {chosen_by}."]
    if not days:
        told.append("It is too short to leave out the days on which patients are missing: counts there are too low.")
    elif chosen_by != BY_DISCHARGE:
        missing = "No stay starts before the first day, so patients who were in already seem to be missing: "
        done = (
            f"its first {days:,} days show too few patients, and too few moves between wards, and are left out."
            if moved
            else f"counts of patients present are too low in its first {days:,} days and leave them out; arrivals and "
            "lengths of stay are complete."
        )
        told.append(missing + done)
    if days and chosen_by != BY_ADMISSION:
        told.append(
            f"Patients who were still in at its end are missing: its last {days:,} days show too few admissions and too "
            "few patients, and are left out."
        )
    if chosen_by == BY_BOTH:
        told.append("The longest stays are missing too: stays look somewhat too short, and beds wanted too few.")
    return " ".join([*told, "Ask for all stays that touch the period."])


def _longest_days(times: TimesInHospital, stay: NDArray[np.int64]) -> int:
    """Within how many days do 99 % of stays end, on the ward where that takes longest? Whole days."""
    ward = times.ward[times.end != MISSING]
    groups = np.split(taken(stay, order_of(ward)), np.cumsum(np.bincount(ward))[:-1])
    groups = [group for group in groups if group.size >= FEWEST_TIMES] or [stay]
    return math.ceil(max(float(np.quantile(group / DAY_SECONDS, ALMOST_ALL)) for group in groups))
