"""How the loaded file was taken, to be corrected by the planner: places, days, the clock, and beds during leave."""

from __future__ import annotations

import datetime as dt
from dataclasses import replace
from typing import TYPE_CHECKING

import pandas as pd
import streamlit as st

from bedplan import wording
from bedplan.data import IntakeChoices
from bedplan.data.cleaning.places import BED_WARD, LEAVE
from bedplan.data.values.choices import GIVEN_AWAY, HELD
from bedplan.errors import BedplanError, ImpossibleFigure
from bedplan.pages import intake, loaded

if TYPE_CHECKING:
    from collections.abc import Mapping

    from bedplan.data import Records

    Period = tuple[dt.date, dt.date]

PLACE, KIND = "Place in the file", "Taken for"
FIRST, LAST, WHY = "First day", "Last day", "Why"
EARLIEST, LATEST = dt.date(1990, 1, 1), dt.date(2099, 12, 31)
ONE_DAY = dt.timedelta(days=1)


def correct() -> None:
    """Show how the file was taken, and read it again as the planner corrects it."""
    here, answers = loaded.records(), loaded.files().answers
    with st.expander("Correct how the file was taken"):
        with st.form("corrections", border=False):
            places = ask_places(here)
            window = ask_window(here)
            excluded = ask_periods(answers.choices)
            zone = st.text_input(
                "The hospital's time zone, where times carry an offset",
                answers.choices.time_zone or "",
                max_chars=40,
                placeholder="Europe/London",
                key=f"time_zone_{intake.times_read()}",
            )
            leave = ask_leave(here, answers.choices)
            sent = st.form_submit_button("Read it again with these corrections")
        back = st.button("Forget these corrections", disabled=answers.choices == _names_only(answers.choices))
        if back:
            intake.settle(replace(answers, choices=_names_only(answers.choices)))
        if not sent:
            return
        try:
            left_out, because = _periods(excluded)
            chosen = replace(
                _names_only(answers.choices),
                places=_corrected(places, here.places, answers.choices.places),
                window=answers.choices.window if window == _found(here) else _whole_period(window, _found(here)),
                excluded=left_out,
                excluded_because=because,
                time_zone=zone.strip() or None,
                bed_on_leave=leave,
            )
        except BedplanError as error:
            st.error(wording.plain(str(error)))
            return
        intake.settle(replace(answers, choices=chosen))


def _names_only(choices: IntakeChoices) -> IntakeChoices:
    """Return the answers without what is corrected here."""
    return IntakeChoices(ward_names=choices.ward_names, ready_dates=choices.ready_dates)


def ask_places(here: Records) -> pd.DataFrame:
    """Show what every place was taken for, those without ward beds first."""
    ordered = sorted(here.places, key=lambda place: (here.places[place] == BED_WARD, place))
    rows = {PLACE: ordered, KIND: [wording.PLACES[here.places[place]] for place in ordered]}
    return st.data_editor(
        pd.DataFrame(rows),
        column_config={KIND: st.column_config.SelectboxColumn(options=list(wording.PLACES.values()), required=True)},
        disabled=[PLACE],
        hide_index=True,
        height=35 * (min(len(ordered), 12) + 1) + 3,
        key=f"places_{intake.times_read()}",
    )


def _corrected(places: pd.DataFrame, found: Mapping[str, str], said: Mapping[str, str]) -> dict[str, str]:
    """Return the places that are not what was found, and those the planner spoke of before."""
    kinds = {label: kind for kind, label in wording.PLACES.items()}
    chosen = {str(place): kinds[str(label)] for place, label in zip(places[PLACE], places[KIND], strict=True)}
    return {place: kind for place, kind in chosen.items() if place in said or kind != found[place]}


def _found(here: Records) -> Period:
    """Return the first and the last day for which the file is taken as complete."""
    return here.window[0].date(), (here.window[1] - ONE_DAY).date()


def ask_window(here: Records) -> tuple[dt.date | None, dt.date | None]:
    """Ask for the days for which the file is complete."""
    columns, labels = st.columns(2), ("First complete day", "Last complete day")
    return tuple(
        column.date_input(
            label,
            day,
            EARLIEST,
            LATEST,
            format="YYYY-MM-DD",
            key=f"{label.split()[0].lower()}_complete_{intake.times_read()}",
        )
        for column, label, day in zip(columns, labels, _found(here), strict=True)
    )


def _whole_period(days: tuple[dt.date | None, dt.date | None], found: Period) -> Period:
    """Return both days; one left empty stays as found."""
    return days[0] or found[0], days[1] or found[1]


def ask_periods(choices: IntakeChoices) -> pd.DataFrame:
    """Ask for periods to leave out of rates and rhythms."""
    st.caption("Periods to leave out, such as a pandemic or a major incident. They are named in the document.")
    rows = [(*period, why) for period, why in choices.left_out()]
    config = {name: st.column_config.DateColumn(min_value=EARLIEST, max_value=LATEST) for name in (FIRST, LAST)}
    return st.data_editor(
        pd.DataFrame(rows, columns=[FIRST, LAST, WHY], dtype=object),
        column_config={**config, WHY: st.column_config.TextColumn(max_chars=60)},
        num_rows="dynamic",
        hide_index=True,
        key=f"left_out_{intake.times_read()}",
    )


def _periods(rows: pd.DataFrame) -> tuple[tuple[Period, ...], tuple[str, ...]]:
    """Return the periods that were filled in, and why each is left out.

    Raises:
        ImpossibleFigure: one day of a period is missing.
    """
    filled = rows.dropna(how="all")
    if filled[[FIRST, LAST]].isna().any(axis=None):
        raise ImpossibleFigure("A period to leave out needs a first and a last day: give both.")
    days = ([pd.Timestamp(day).date() for day in filled[name]] for name in (FIRST, LAST))
    return tuple(zip(*days, strict=True)), tuple(" ".join(str(why).split()) for why in filled[WHY].fillna(""))


def ask_leave(here: Records, choices: IntakeChoices) -> str | None:
    """Ask what becomes of a bed while its patient is on leave, where the file knows leave."""
    if LEAVE not in here.places.values():
        return choices.bed_on_leave
    answers = (HELD, GIVEN_AWAY)
    return st.radio(
        "While a patient is on leave, the bed is",
        answers,
        index=None if choices.bed_on_leave is None else answers.index(choices.bed_on_leave),
        horizontal=True,
        key=f"on_leave_{intake.times_read()}",
    )
