"""Ward names that may mean one ward: renamed, merged, or written in two ways. Proposed, never applied unasked."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.files.dates import DAY_SECONDS

if TYPE_CHECKING:
    from numpy.typing import NDArray

FEWEST_STAYS = 20
HANDOVER_DAYS = 14.0
ALIKE = 1.6  # times; a renamed ward admits about as many a day as before


@dataclass(frozen=True, slots=True)
class WardLink:
    """Two names that may be one ward: ``kind`` is ``"renamed"``, ``"merged"``, ``"split"`` or ``"spelling"``."""

    old: tuple[str, ...]
    new: tuple[str, ...]
    kind: str
    since: pd.Timestamp | None

    @property
    def sentence(self) -> str:
        """What should a person confirm?"""
        old, new = (" and ".join(f"“{name}”" for name in names) for names in (self.old, self.new))
        if self.kind == "spelling":
            return f"{old} and {new} may be one ward written in two ways; confirm it to count them together."
        return (
            f"{old} stops and {new} starts about {self.since:%d %B %Y}: {self.kind}? Confirm it to count them together."
        )


@dataclass(frozen=True, slots=True)
class _Life:
    """When a ward's admissions begin and end, and how many a day there are."""

    name: str
    first: float
    last: float
    per_day: float


def propose_links(
    wards: tuple[str, ...], ward: NDArray[np.int64], start: NDArray[np.int64], window: tuple[int, int]
) -> tuple[WardLink, ...]:
    """Which names may be one ward? From when each name is in use, how busy it is, and how it is written.

    Checked by: tests/data/cleaning/test_wardlinks.py
    """
    lives = _lives(wards, ward, start, window)
    span = (window[1] - window[0]) / DAY_SECONDS
    stopped = [life for life in lives if life.last < span - HANDOVER_DAYS]
    started = [life for life in lives if life.first > HANDOVER_DAYS]
    links = []
    for new in started:
        before = [old for old in stopped if abs(old.last - new.first) <= HANDOVER_DAYS and old.name != new.name]
        alike = [old for old in before if 1 / ALIKE <= new.per_day / old.per_day <= ALIKE]
        since = pd.Timestamp(int(window[0] + new.first * DAY_SECONDS), unit="s").normalize()
        if alike:
            links.append(WardLink((alike[0].name,), (new.name,), "renamed", since))
        elif len(before) > 1 and 1 / ALIKE <= new.per_day / sum(old.per_day for old in before) <= ALIKE:
            links.append(WardLink(tuple(old.name for old in before), (new.name,), "merged", since))
    linked = {name for link in links for name in link.new}
    for old in stopped:
        after = [new for new in started if abs(old.last - new.first) <= HANDOVER_DAYS and new.name not in linked]
        if len(after) > 1 and 1 / ALIKE <= sum(new.per_day for new in after) / old.per_day <= ALIKE:
            since = pd.Timestamp(int(window[0] + old.last * DAY_SECONDS), unit="s").normalize()
            links.append(WardLink((old.name,), tuple(new.name for new in after), "split", since))
    return (*links, *_spellings(wards))


def _lives(
    wards: tuple[str, ...], ward: NDArray[np.int64], start: NDArray[np.int64], window: tuple[int, int]
) -> list[_Life]:
    """Return the life of every ward with enough stays, in days from the window's start; ``start`` goes up."""
    inside = slice(*np.searchsorted(start, window))
    ward, start = ward[inside], start[inside]
    stays = np.bincount(ward, minlength=len(wards))
    first, last = np.zeros(len(wards)), np.zeros(len(wards))
    last[ward], first[ward[::-1]] = start, start[::-1]  # the last one written stays
    first, last = ((moment - window[0]) / DAY_SECONDS for moment in (first, last))
    return [
        _Life(name, float(first[code]), float(last[code]), float(stays[code] / max(last[code] - first[code], 1.0)))
        for code, name in enumerate(wards)
        if stays[code] >= FEWEST_STAYS
    ]


def _spellings(wards: tuple[str, ...]) -> list[WardLink]:
    """Return names that are alike once "ward", signs and leading zeros are taken away."""
    seen: dict[str, str] = {}
    links = []
    for name in wards:
        bare = bare_name(name)
        if bare and bare in seen:
            links.append(WardLink((seen[bare],), (name,), "spelling", None))
        elif bare:
            seen[bare] = name
    return links


def bare_name(ward: str) -> str:
    """Return what is left of a ward's name without "ward", signs, capitals and leading zeros."""
    bare = re.sub(r"[^a-z0-9]", "", re.sub(r"\b(ward|unit|wd|w)(?=[\s\d_-]|$)", " ", ward.casefold()))
    return re.sub(r"^0+(?=\d)", "", bare)
