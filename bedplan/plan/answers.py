"""How files are to be read, where a person had to say: kept in a plan, read again from it."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any

from bedplan.data import IntakeChoices
from bedplan.data.values.choices import check_date_order
from bedplan.errors import ImpossibleFigure

if TYPE_CHECKING:
    from collections.abc import Mapping

NO_COLUMN = ""  # a person's word that a file has no column for this


@dataclass(frozen=True, slots=True)
class Answers:
    """What a person said about ward stays: ``columns`` = our name → heading, ``date_order``, and the other ``choices``.

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


@dataclass(frozen=True, slots=True)
class FileAnswers:
    """What a person said about a file beside the ward stays: ``columns`` = our name → heading, and ``date_order``.

    ``months_a_row``: how many months a row of a return holds. ``no_bed_reasons``: which reasons in a list mean that no bed
    was free. None = nobody said.

    Raises:
        ImpossibleFigure: an order of dates nobody knows, or months a row that are not 1 to 12.

    Checked by: tests/test_plan.py
    """

    columns: Mapping[str, str] = field(default_factory=dict)
    date_order: str | None = None
    months_a_row: int | None = None
    no_bed_reasons: tuple[str, ...] | None = None

    def __post_init__(self) -> None:
        """Check every answer once, here."""
        check_date_order(self.date_order)
        if self.months_a_row is not None and not 1 <= self.months_a_row <= 12:
            raise ImpossibleFigure(f"{self.months_a_row} months a row is not possible: a row holds 1 to 12 months.")

    def to_read(self) -> dict[str, Any]:
        """Return the answers that every reader of such a file takes."""
        return {"columns": self.columns, "date_order": self.date_order}

    def rows(self, what: str) -> tuple[tuple[str, str], ...]:
        """Return (what, value) for every answer given, for the document; ``what``: the file."""
        reasons = None if self.no_bed_reasons is None else "; ".join(self.no_bed_reasons) or "none"
        told = {
            "columns": _pairs(self.columns),
            "dates": self.date_order,
            "months a row": self.months_a_row and str(self.months_a_row),
            "reasons taken for lack of a bed": reasons,
        }
        return tuple((f"{what}: {how}", value) for how, value in told.items() if value)

    def as_saved(self) -> dict[str, Any]:
        """Return the answers as they stand in a plan file: those that were given."""
        held = {
            "columns": dict(self.columns) or None,
            "date_order": self.date_order,
            "months_a_row": self.months_a_row,
            "no_bed_reasons": None if self.no_bed_reasons is None else list(self.no_bed_reasons),
        }
        return {what: value for what, value in held.items() if value is not None}


def _pairs(names: Mapping[str, str]) -> str:
    """Say what stands for what."""
    return "; ".join(f"{one} = {'no column' if other == NO_COLUMN else other}" for one, other in names.items())


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


def saved_file_answers(held: Mapping[str, Any]) -> FileAnswers:
    """Return what a plan file holds about a file beside the stays; what it leaves out was not said.

    Raises:
        AttributeError, TypeError, ValueError: not as such a file holds it.
        ImpossibleFigure: an answer nobody knows.

    Checked by: tests/test_plan.py
    """
    months, reasons = held.get("months_a_row"), held.get("no_bed_reasons")
    if not isinstance(months, int | None) or not isinstance(reasons, list | None):
        raise TypeError("neither months nor reasons")
    return FileAnswers(
        _texts(held.get("columns", {})),
        _text(held.get("date_order")),
        months,
        None if reasons is None else tuple(str(reason) for reason in reasons),
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
