"""Justification: the case for the bed count, to read here and to take away."""

from __future__ import annotations

import datetime as dt
import re
import textwrap
from dataclasses import replace
from typing import TYPE_CHECKING

import streamlit as st

from bedplan import wording
from bedplan.errors import BedplanError
from bedplan.export import Justification, Source, as_html, as_xlsx, with_check
from bedplan.pages import controls, loaded, said

if TYPE_CHECKING:
    from bedplan.export import WardCase


def source(wards: list[str]) -> Source:
    """Return where the figures of these wards come from, in counts only."""
    typed = st.session_state.get("typed", {})
    origins = list(dict.fromkeys(typed[name].origin for name in wards if name in typed))
    if wards and all(name in typed for name in wards):
        return Source("; ".join(origins))
    return Source.from_records(
        loaded.records(),
        (*loaded.files().marks, *_how_read(wards), *(("Also from", one) for one in origins)),
        loaded.checks(),
    )


def _how_read(wards: list[str]) -> list[tuple[str, str]]:
    """Return how the file was read, where the planner had to say, and the shares of refusals written down."""
    written = [(name, loaded.recorded_share(name)) for name in wards if controls.settings_of(name).get("hidden")]
    return [
        *loaded.files().answers.rows(),
        *said.rows(loaded.files().marks),
        *((f"Written down of those not given a bed, {name}", wording.percent(share, 0)) for name, share in written),
    ]


def in_groups(value: str) -> str:
    """Break long fingerprints into groups that fit a line."""
    return re.sub(r"\b[0-9a-f]{64}\b", lambda found: " ".join(textwrap.wrap(found[0], 16)), value)


def checked(case: WardCase) -> WardCase:
    """Return a case with the check on its last year; a ward known by totals only has no records to check it on."""
    name = case.ward.name
    if name in st.session_state.get("typed", {}):
        return replace(case, checked=wording.NO_DAYS_TO_CHECK)
    return with_check(case, lambda: loaded.checked(name))


def show_decisions(paper: Justification) -> None:
    """Show what is asked for, largest where it is for one ward, and what came of the check on last year."""
    decisions = [tuple(map(wording.plain, decision)) for decision in paper.decisions()]
    if len(decisions) == 1:
        (asked, came), *_ = decisions
        st.header(asked, anchor=False)
        st.markdown(came)
        return
    st.header(wording.plain(paper.title), anchor=False)
    with st.container(border=True):
        for asked, came in decisions:
            st.markdown(f"**{asked}**")
            st.markdown(came)


controls.show_origin()
names = controls.ward_names()
chosen = controls.in_hand(names)
if st.session_state.get("justified_for") != chosen or not set(st.session_state.get("justified", [])) <= set(names):
    st.session_state["justified_for"], st.session_state["justified"] = chosen, [chosen]
wards = st.multiselect("Wards in this justification", names, key="justified", persist_state="session")
try:
    cases = [checked(controls.case_of(name)) for name in wards]
    paper = Justification(
        tuple(cases),
        source(wards),
        dt.datetime.now().astimezone().date(),
    )
    show_decisions(paper)
    controls.warn_of_beds(cases)
    mark = paper.fingerprint()
    take = st.container(horizontal=True)
    take.download_button(
        "Take the document (HTML)",
        data=lambda: as_html(paper),
        file_name=f"bed-count-justification-{mark}.html",
        mime="text/html",
        on_click="ignore",
        key="take_html",
    )
    take.download_button(
        "Take the workbook (Excel)",
        data=lambda: as_xlsx(paper),
        file_name=f"bed-count-justification-{mark}.xlsx",
        mime="application/vnd.openxmlformats-officedocument.spreadsheetml.sheet",
        on_click="ignore",
        key="take_xlsx",
    )
    for case in paper.cases:
        st.subheader(wording.plain(case.ward.name), anchor=False)
        st.markdown(wording.plain(case.sentence()))
        st.table(controls.facts_table(case))
        for note in case.notes():
            st.markdown(f"- {wording.plain(note)}")
    st.subheader("To get the same figures again", anchor=False)
    st.table(
        {wording.plain(what): wording.plain(in_groups(value)) for what, value in paper.reproducibility()},
        border="horizontal",
    )
    st.subheader("Cautions", anchor=False)
    for line in wording.CAUTIONS:
        st.markdown(f"- {line}")
except BedplanError as error:
    st.error(wording.plain(str(error)))
