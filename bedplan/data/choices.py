"""What a planner can decide about a file before it is read."""

from __future__ import annotations

import zoneinfo
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from bedplan.errors import ImpossibleFigure

if TYPE_CHECKING:
    import datetime as dt
    from collections.abc import Mapping

DATE_ORDERS = ("day first", "month first", "row by row")
PLACE_KINDS = ("bed ward", "waiting place", "procedure place", "virtual", "cot", "delivery", "leave")


def check_date_order(date_order: str | None) -> None:
    """Refuse an answer that is none.

    Raises:
        ImpossibleFigure: an order nobody knows.
    """
    if date_order not in (None, *DATE_ORDERS):
        raise ImpossibleFigure(f"The date order {date_order!r} is not known: answer {', '.join(DATE_ORDERS)}.")


@dataclass(frozen=True, slots=True)
class IntakeChoices:
    """Answers to the questions a file can raise; nothing here is guessed for the planner.

    ``ward_names``: name in the file → name to use (a renamed or merged ward). ``places``: ward → what it is
    (``"bed ward"``, ``"waiting place"``, ``"procedure place"``, ``"virtual"``, ``"cot"``, ``"delivery"``, ``"leave"``),
    where the program's own list of names is wrong. ``window``: first day and last day (included) for which the file
    is complete. ``excluded``: periods (first day, last day) left out of rates and rhythms, such as a pandemic.
    ``time_zone``: the hospital's zone (``"Europe/London"``), to bring times with an offset to its clock.

    Raises:
        ImpossibleFigure: a kind of place or a time zone nobody knows, or an excluded period that ends before it starts.

    Checked by: tests/data/test_choices.py
    """

    ward_names: Mapping[str, str] = field(default_factory=dict)
    places: Mapping[str, str] = field(default_factory=dict)
    window: tuple[dt.date, dt.date] | None = None
    excluded: tuple[tuple[dt.date, dt.date], ...] = ()
    time_zone: str | None = None

    def __post_init__(self) -> None:
        """Check every answer once, here."""
        for ward, kind in self.places.items():
            if kind not in PLACE_KINDS:
                raise ImpossibleFigure(f"{ward} can't be a {kind!r}: a place is one of {', '.join(PLACE_KINDS)}.")
        for first, last in self.excluded:
            if last < first:
                raise ImpossibleFigure(f"A period from {first} to {last} ends before it starts: swap the two days.")
        try:
            zoneinfo.ZoneInfo(self.time_zone or "UTC")
        except (zoneinfo.ZoneInfoNotFoundError, ValueError, OSError) as problem:
            raise ImpossibleFigure(
                f"The time zone {self.time_zone!r} is not known: write it as in Europe/London."
            ) from problem


@dataclass(frozen=True, slots=True)
class DateQuestion:
    """Is 03/04 the 3rd of April or the 4th of March? Carried by the error as ``.question``.

    ``examples``: (as written, read day first, read month first); ``ends_before_start``: answer → stays that would end
    before they start; ``answers``: what ``read_records(date_order=…)`` takes.
    """

    examples: tuple[tuple[str, str, str], ...]
    ends_before_start: Mapping[str, int]
    answers: tuple[str, ...]
