"""What a planner can decide about a file before it is read."""

from __future__ import annotations

import datetime as dt
import zoneinfo
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from bedplan.errors import ImpossibleFigure, UnreadableRecords
from bedplan.wording import PLACES

if TYPE_CHECKING:
    from collections.abc import Mapping

    from bedplan.data.values.ready import ReadyDates

DAY_FIRST, MONTH_FIRST, ROW_BY_ROW = DATE_ORDERS = ("day first", "month first", "row by row")
AS_THEY_STAND, EXCHANGED = "as they stand", "day and month exchanged up to day 12"
DATE_ANSWERS = (*DATE_ORDERS, AS_THEY_STAND, EXCHANGED)
PLACE_KINDS = tuple(PLACES)
HELD, GIVEN_AWAY = "held", "given away"


def check_date_order(date_order: str | None) -> None:
    """Refuse an answer that is none.

    Raises:
        ImpossibleFigure: an order nobody knows.
    """
    if date_order not in (None, *DATE_ANSWERS):
        raise ImpossibleFigure(f"The date order {date_order!r} is not known: answer {', '.join(DATE_ANSWERS)}.")


@dataclass(frozen=True, slots=True)
class IntakeChoices:
    """Answers to the questions a file can raise; nothing here is guessed for the planner.

    ``ward_names``: name in the file → name to use (a renamed or merged ward). ``places``: ward → what it is
    (``"bed ward"``, ``"waiting place"``, ``"procedure place"``, ``"virtual"``, ``"cot"``, ``"delivery"``, ``"leave"``),
    where the program's own list of names is wrong. ``window``: first day and last day (included) for which the file
    is complete. ``excluded``: periods (first day, last day) left out of rates and rhythms, and ``excluded_because``: why,
    in the same order, such as "pandemic".
    ``time_zone``: the hospital's zone (``"Europe/London"``), to bring times with an offset to its clock.
    ``bed_on_leave``: ``"held"`` (leave counts on the ward that was left) or ``"given away"`` while a patient is on leave.
    ``ready_dates``: a file of its own that says when patients were ready to leave, as ``read_ready_dates`` gives it.

    Raises:
        ImpossibleFigure: a kind of place, a time zone or an answer nobody knows, or a period that ends before it starts.

    Checked by: tests/data/values/test_choices.py
    """

    ward_names: Mapping[str, str] = field(default_factory=dict)
    places: Mapping[str, str] = field(default_factory=dict)
    window: tuple[dt.date, dt.date] | None = None
    excluded: tuple[tuple[dt.date, dt.date], ...] = ()
    excluded_because: tuple[str, ...] = ()
    time_zone: str | None = None
    bed_on_leave: str | None = None
    ready_dates: ReadyDates | None = field(default=None, compare=False, repr=False)

    def __post_init__(self) -> None:
        """Check every answer once, here."""
        for ward, kind in self.places.items():
            if kind not in PLACE_KINDS:
                raise ImpossibleFigure(f"{ward} can't be a {kind!r}: a place is one of {', '.join(PLACE_KINDS)}.")
        if self.bed_on_leave not in (None, HELD, GIVEN_AWAY):
            raise ImpossibleFigure(f"A bed can't be {self.bed_on_leave!r} on leave: it is {HELD} or {GIVEN_AWAY}.")
        for first, last in (*((self.window,) if self.window else ()), *self.excluded):
            if last < first:
                raise ImpossibleFigure(f"A period from {first} to {last} ends before it starts: swap the two days.")
        try:
            zoneinfo.ZoneInfo(self.time_zone or "UTC")
        except (zoneinfo.ZoneInfoNotFoundError, ValueError, OSError) as problem:
            raise ImpossibleFigure(
                f"The time zone {self.time_zone!r} is not known: write it as in Europe/London."
            ) from problem

    def said(self) -> tuple[str, ...]:
        """What did the planner decide about this file, in sentences for the page and the document?"""
        places = [
            f"“{place}” is taken for: {PLACES[kind]}, as the planner said." for place, kind in self.places.items()
        ]
        window = (
            [f"The file is taken as complete from {_span(*self.window)}, as the planner said."] if self.window else []
        )
        left_out = [
            f"{_span(first, last)} is left out of rates and rhythms{f': {why}' if why else ''}."
            for (first, last), why in self.left_out()
        ]
        leave = [f"While a patient is on leave the bed is {self.bed_on_leave}, as the planner said."]
        return (*places, *window, *left_out, *(leave if self.bed_on_leave else ()))

    def left_out(self) -> tuple[tuple[tuple[dt.date, dt.date], str], ...]:
        """Which periods are left out, and why? "" where nobody said."""
        because = (*self.excluded_because, *("" for _ in self.excluded))
        return tuple(zip(self.excluded, because, strict=False))

    def check_days(self, name: str, first: dt.date, last: dt.date) -> None:
        """Refuse days that leave nothing of a file whose stays run from ``first`` to ``last``.

        Raises:
            UnreadableRecords: no stay touches the days for which the file is complete, or all of them are left out.
        """
        begins, ends = self.window or (first, last)
        if ends < first or begins > last:
            raise UnreadableRecords(
                [f"The stays in {name} run from {_span(first, last)}: choose first and last days within that time."]
            )
        days = (ends - begins).days + 1
        if all(
            any(since <= begins + dt.timedelta(days=day) <= until for since, until in self.excluded)
            for day in range(days)
        ):
            raise UnreadableRecords([f"The periods left out leave no day of {name} to count: leave out less."])


def _span(first: dt.date, last: dt.date) -> str:
    """Say a period, both days included."""
    return f"{first:%d %B %Y} to {last:%d %B %Y}"


@dataclass(frozen=True, slots=True)
class DateQuestion:
    """Is 03/04 the 3rd of April or the 4th of March? Carried by the error as ``.question``.

    ``examples``: (as written, read one way, read the other way), the two ways in ``readings``; ``ends_before_start``:
    answer → stays that would end before they start; ``answers``: what ``read_records(date_order=…)`` takes.
    """

    examples: tuple[tuple[str, str, str], ...]
    ends_before_start: Mapping[str, int]
    answers: tuple[str, ...]
    readings: tuple[str, str] = DATE_ORDERS[:2]
