"""Stays whole years too long: a year mistyped to another year of the file, which no lonely date betrays."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.cleaning.single_rows import LEAST_LONG_STAY_SECONDS
from bedplan.data.files.blocks import in_blocks
from bedplan.data.files.dates import DAY_SECONDS

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.data.values.rows import Rows

YEAR_SECONDS = 31_557_600
LEAST_SECONDS = 364 * DAY_SECONDS  # a year less a day, for clocks and leap years
FEWEST_OTHERS = 50  # stays on the ward, below which nobody can say what is usual there
FEWEST_LONG, MOST_LONG_SHARE = 2, 0.01  # more stays of a year on a ward are its way; common practice, no source
FAR_LONGER = 3  # times as long as any other stay on the ward; common practice, no source
USUAL_SHARE = 0.95  # of the ward's other stays are as short as what is left over beyond whole years


@dataclass(frozen=True, slots=True)
class _Found:
    """One ward's stays of a year or more that are far longer than any other: which to set aside, which to name."""

    ward: str
    aside: NDArray[np.int64]
    kept: NDArray[np.int64]
    longest_days: float


def set_whole_years_aside(rows: Rows, wards: tuple[str, ...]) -> list[str]:
    """Set aside stays that are far longer than any other on their ward and usual there but for whole years; say which.

    Far longer: a year or more, and more than three times as long as any other stay on the ward, of which there are 50 or more. Usual: what is
    beyond whole years is as short as 95 in 100 of the others. A true stay of a year meets that by chance about as
    often as a usual stay is long against a year. Other stays far longer count, and are named. Wards on which more than
    two stays, and 1 in 100, last a year are left as they are.

    Checked by: tests/data/cleaning/test_wholeyears.py
    """
    found = [_on_ward(rows, ward, wards[ward]) for ward in _with_long_stays(rows, len(wards))]
    notes = []
    for one in found:
        rows.mark(one.aside, "whole years")
        notes += [_told(rows, one, one.aside, set_aside=True)] if one.aside.size else []
        notes += [_told(rows, one, one.kept, set_aside=False)] if one.kept.size else []
    return notes


def _with_long_stays(rows: Rows, wards: int) -> list[int]:
    """Return the wards on which a few of many stays last a year or longer, one of them far longer than any other stay."""

    def long_stays(block: slice) -> NDArray[np.int64]:
        """Return one block's stays that are longer than most, each with its ward, (2, stays)."""
        stay = rows.end[block] - rows.start[block]
        which = np.flatnonzero(stay >= LEAST_LONG_STAY_SECONDS)
        which = which[_finished(rows, block.start + which)]
        return np.array([rows.ward[block][which], stay[which]])

    ward, stay = np.concatenate([np.zeros((2, 0), int), *in_blocks(rows.start.size, long_stays)], axis=1)
    is_long, others, longest = stay >= LEAST_SECONDS, np.full(wards, LEAST_LONG_STAY_SECONDS), np.zeros(wards, int)
    np.maximum.at(others, ward[~is_long], stay[~is_long])
    np.maximum.at(longest, ward, stay)
    long = np.bincount(ward[is_long], minlength=wards) * (longest > FAR_LONGER * others)
    if not long.any():
        return []
    counts = in_blocks(
        rows.start.size, lambda block: np.bincount(rows.ward[block][_finished(rows, block)], minlength=wards)
    )
    every = np.sum(counts, axis=0)
    few = np.maximum(FEWEST_LONG, MOST_LONG_SHARE * every)
    return np.flatnonzero((long > 0) & (long <= few) & (every - long >= FEWEST_OTHERS)).tolist()


def _finished(rows: Rows, block: slice | NDArray[np.int64]) -> NDArray[np.bool_]:
    """Return which of some stays ended."""
    return ~(rows.aside[block] | rows.merged[block]) & (rows.end[block] >= rows.start[block]) & (rows.ward[block] >= 0)


def _on_ward(rows: Rows, ward: int, name: str) -> _Found:
    """Part one ward's long stays into those to set aside and those to name."""
    here = np.flatnonzero(rows.ward == ward)
    here = here[_finished(rows, here)]
    stay = rows.end[here] - rows.start[here]
    is_long = stay >= LEAST_SECONDS
    others = stay[~is_long]
    longest = max(int(others.max()), LEAST_LONG_STAY_SECONDS)
    usual = int(np.quantile(others, USUAL_SHARE, method="inverted_cdf"))
    far = is_long & (stay > FAR_LONGER * longest)
    beyond = stay - (stay + 2 * DAY_SECONDS) // YEAR_SECONDS * YEAR_SECONDS  # leap years move it by a day either way
    is_usual = (beyond >= -DAY_SECONDS) & (beyond <= usual + DAY_SECONDS)
    return _Found(name, here[far & is_usual], here[far & ~is_usual], int(others.max()) / DAY_SECONDS)


def _told(rows: Rows, found: _Found, which: NDArray[np.int64], *, set_aside: bool) -> str:
    """Quote the longest of these stays, and what becomes of them."""
    days = (rows.end[which] - rows.start[which]) / DAY_SECONDS
    worst = which[int(days.argmax())]
    size, one = which.size, which.size == 1
    dates = f"{_day(rows.start[worst])} to {_day(rows.end[worst])}"
    told = "1 stay" if one else f"{size:,} stays, one of them"
    told = f"{told} on {found.ward}, {dates}, {'lasts' if one else 'last'} {days.max():,.0f} days"
    told += f"; no other stay there lasts more than {np.ceil(found.longest_days):,.0f}"
    if set_aside:
        was = "it is" if one else "they are"
        return f"{told}. But for whole years {was} usual: a mistyped year? {was.capitalize()} set aside, with {days.sum():,.0f} bed-days."
    counts = "It counts" if one else "They count"
    return f"{told}. {counts}, with {days.sum():,.0f} bed-days: are the dates right?"


def _day(seconds: np.int64) -> str:
    """Return a day in words."""
    moment = pd.Timestamp(int(seconds), unit="s")
    return f"{moment.day} {moment:%B %Y}"
