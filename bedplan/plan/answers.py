"""How a file of ward stays is to be read, where a person had to say: kept in a plan, read again from it."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any

from bedplan.data import IntakeChoices

if TYPE_CHECKING:
    from collections.abc import Mapping


@dataclass(frozen=True, slots=True)
class Answers:
    """What a person said about a file: ``columns`` = our name → heading, ``date_order``, and the other ``choices``.

    ``ready_file``: the file of ready dates that a plan was made with; a plan holds its name, not the keys in it.
    """

    columns: Mapping[str, str] = field(default_factory=dict)
    date_order: str | None = None
    choices: IntakeChoices = field(default_factory=IntakeChoices)
    ready_file: str | None = field(default=None, compare=False)

    def with_ready_dates(self, here: Answers) -> Answers:
        """Return these answers with the ready dates in hand, which no plan holds."""
        return replace(self, choices=replace(self.choices, ready_dates=here.choices.ready_dates))

    @property
    def ready_sentence(self) -> str:
        """What has to be given again, or nothing?"""
        if self.ready_file is None or self.choices.ready_dates is not None:
            return ""
        return (
            f"This plan was made with ready dates from {self.ready_file}; a plan holds no keys of patients. Give that file "
            "again, or planning goes on without it."
        )

    def to_read(self) -> dict[str, Any]:
        """Return the answers as the arguments of ``read_records``."""
        return {"columns": self.columns, "date_order": self.date_order, "choices": self.choices}

    def rows(self) -> tuple[tuple[str, str], ...]:
        """Return (what, value) for every answer given, for the document."""
        said = self.choices
        told = {
            "Columns": _pairs(self.columns),
            "Dates": self.date_order,
            "Ward names": _pairs(said.ward_names),
            "Places": _pairs(said.places),
            "Complete": said.window and _span(*said.window),
            "Left out of rates": "; ".join(
                _span(*period) + (f" ({why})" if why else "") for period, why in said.left_out()
            ),
            "Time zone": said.time_zone,
            "Bed while a patient is on leave": said.bed_on_leave,
        }
        return tuple((f"How the file was read: {what.lower()}", value) for what, value in told.items() if value)

    def as_saved(self) -> dict[str, Any]:
        """Return the answers as they stand in a plan file."""
        said = self.choices
        return {
            "columns": dict(self.columns),
            "date_order": self.date_order,
            "ward_names": dict(said.ward_names),
            "places": dict(said.places),
            "window": said.window and [day.isoformat() for day in said.window],
            "excluded": [[*(day.isoformat() for day in period), why] for period, why in said.left_out()],
            "time_zone": said.time_zone,
            "bed_on_leave": said.bed_on_leave,
            "ready_file": said.ready_dates and said.ready_dates.name,
        }


def _pairs(names: Mapping[str, str]) -> str:
    """Say what stands for what."""
    return "; ".join(f"{one} = {other}" for one, other in names.items())


def _span(first: dt.date, last: dt.date) -> str:
    """Say a period, both days included."""
    return f"{first.isoformat()} to {last.isoformat()}"


def saved_answers(held: Mapping[str, Any]) -> Answers:
    """Return the answers that a plan file holds; what an earlier plan left out was not said.

    Raises:
        AttributeError, KeyError, TypeError, ValueError: not as such a file holds them.
        ImpossibleFigure: a kind of place, a time zone or an answer nobody knows.

    Checked by: tests/test_plan.py
    """
    window, left_out = held.get("window"), held.get("excluded", ())
    return Answers(
        _texts(held.get("columns", {})),
        _text(held.get("date_order")),
        IntakeChoices(
            ward_names=_texts(held.get("ward_names", {})),
            places=_texts(held.get("places", {})),
            window=_period(window) if window else None,
            excluded=tuple(_period(period[:2]) for period in left_out),
            excluded_because=tuple(str(period[2]) if len(period) > 2 else "" for period in left_out),
            time_zone=_text(held.get("time_zone")),
            bed_on_leave=_text(held.get("bed_on_leave")),
        ),
        _text(held.get("ready_file")),
    )


def _texts(held: Mapping[str, Any]) -> dict[str, str]:
    """Return texts by text."""
    return {str(name): str(value) for name, value in dict(held).items()}


def _text(held: object) -> str | None:
    """Return a text, or nothing."""
    return None if held is None else str(held)


def _period(held: list[str]) -> tuple[dt.date, dt.date]:
    """Return first and last day."""
    first, last = (dt.date.fromisoformat(day) for day in held)
    return first, last
