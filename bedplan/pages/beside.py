"""Files beside the ward stays, taken in on the page Records: staffed beds, lists, a census, a monthly return."""

from __future__ import annotations

import functools
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import streamlit as st

from bedplan import wording
from bedplan.data import (
    read_bed_requests,
    read_cancellations,
    read_capacity,
    read_census,
    read_monthly_return,
    read_ready_dates,
    read_refusals,
)
from bedplan.errors import BedplanError, UnreadableRecords
from bedplan.pages import controls, intake, loaded, typed
from bedplan.plan import from_return

if TYPE_CHECKING:
    from collections.abc import Callable

    from bedplan.data import DateQuestion

    Take = Callable[[bytes, str, str | None], list[str]]  # content, name and order of dates -> what to tell


MONTHS_A_ROW = {None: "what the file shows", 1: "1 month"}


@dataclass(frozen=True)
class Told:
    """What came of one more file, and the question whose answer would help, if any."""

    sentences: tuple[str, ...]
    refused: bool = False
    question: DateQuestion | None = None
    date_order: str | None = None


def offer(kind: str, label: str, take: Take, *, ask: Callable[[str], Any] | None = None, **options: Any) -> None:
    """Offer one more file, take it in once, and tell what came of it for as long as it is in its box.

    ``ask`` asks something about the file of this id; where the answer changes, the file is taken again.
    """
    given = st.file_uploader(label, key=f"{kind}_file", **options)
    if given is None or options.get("disabled"):
        return
    asked = (given.file_id, ask(given.file_id) if ask else None)
    taken = st.session_state.get(f"{kind}_taken", (None, None))
    if taken != asked:
        order = st.session_state[f"{kind}_told"].date_order if taken[0] == given.file_id else None
        take_more(kind, take, given.getvalue(), given.name, order)
        st.session_state[f"{kind}_taken"] = asked
    told: Told = st.session_state[f"{kind}_told"]
    for sentence in told.sentences:
        (st.error if told.refused else st.caption)(wording.plain(sentence))
    if told.question is not None:

        def retry(date_order: str) -> None:
            """Take the file with its dates read this way."""
            take_more(kind, take, given.getvalue(), given.name, date_order)
            st.rerun()

        intake.ask_date_order(kind, told.question, retry)


def take_more(kind: str, take: Take, content: bytes, name: str, date_order: str | None = None) -> None:
    """Take in a file beside the stays, and keep what came of it."""
    try:
        told = Told(tuple(take(content, name, date_order)), date_order=date_order)
    except BedplanError as error:
        told = Told((str(error),), refused=True, question=getattr(error, "question", None), date_order=date_order)
    st.session_state[f"{kind}_told"] = told


def load_capacity() -> None:
    """Offer the capacity file and take it in."""

    def take(content: bytes, name: str, date_order: str | None) -> list[str]:
        """Take today's staffed beds from it."""
        found = read_capacity(content, name=name, date_order=date_order)
        controls.use_capacity(found, content)
        return [*found.report.sentences, *found.notes]

    offer(
        "capacity",
        "Staffed beds (CSV or Excel), if you have them: ward, from, to, staffed beds, closed beds",
        take,
        help="Without it, type today's staffed beds on the page One ward.",
        disabled=loaded.is_demo(),
    )


def load_more() -> None:
    """Offer the files that show what full wards could not take, and the official count."""
    kinds = {
        "refusals": ("Patients not given a bed: time, ward, reason", read_refusals),
        "bed_requests": ("Bed requests, all of them: time, ward, time the bed was given", read_bed_requests),
        "cancellations": ("Cancelled booked patients: planned date, ward, reason", read_cancellations),
        "census": ("Census: date, time, ward, patients", read_census),
    }
    with st.expander("More files"):
        for kind, (label, reader) in kinds.items():
            offer(kind, label, functools.partial(take_beside, kind, reader), disabled=loaded.is_demo())
            ask_reasons(kind)
        offer("ready", "Ready to leave: stay or patient key, date", take_ready, disabled=loaded.is_demo())
        label = (
            "Monthly return, where there is nothing better: month, ward, available and occupied bed-days, discharges"
        )
        offer("monthly_return", label, take_return, ask=ask_months)
    for sentence in loaded.without_stays():
        st.caption(wording.plain(sentence))


def take_beside(kind: str, reader: Callable[..., Any], content: bytes, name: str, date_order: str | None) -> list[str]:
    """Add a list or a census beside the records."""
    found = reader(content, name=name, date_order=date_order)
    loaded.use_file(content, kind, found)
    return [*found.report.sentences, *found.report.notes, *found.cannot]


def take_ready(content: bytes, name: str, date_order: str | None) -> list[str]:
    """Read the ward stays again, with the dates on which patients were ready to leave."""
    found = read_ready_dates(content, name=name, date_order=date_order)
    here = loaded.files().marked("ready", name, content)
    choices = replace(here.answers.choices, ready_dates=found)
    problems = intake.read_again(replace(here.answers, choices=choices))
    if problems:
        raise UnreadableRecords(problems)
    loaded.use(replace(loaded.files(), marks=here.marks))
    return [*found.report.sentences]


def ask_reasons(kind: str) -> None:
    """Ask which reasons in a list mean that no bed was free, where that can't be told."""
    log = loaded.files().given.get(kind)
    unclear = getattr(log, "unclear_reasons", None)
    if not unclear:
        return
    with st.form(f"{kind}_reasons", border=False):
        chosen = st.multiselect(
            "Which of these reasons mean that no bed was free?",
            list(unclear),
            format_func=lambda reason: f"{reason or 'no reason given'} ({unclear[reason]:,})",
            key=f"{kind}_no_bed",
        )
        if st.form_submit_button("Count these"):
            loaded.use_reasons(kind, tuple(chosen))
            st.rerun()


def ask_months(file_id: str) -> int | None:
    """Ask how many months a row of the return holds; None = as the file shows."""
    chosen = st.selectbox(
        "A row of this return holds",
        [None, *range(1, 13)],
        format_func=lambda months: MONTHS_A_ROW.get(months, f"{months} months"),
        key=f"months_{file_id}",
    )
    st.session_state["months_a_row"] = chosen
    return chosen


def take_return(content: bytes, name: str, date_order: str | None) -> list[str]:
    """Make a ward to plan of each ward in a monthly return that the planner's records don't hold."""
    returned = read_monthly_return(
        content, name=name, date_order=date_order, months_a_row=st.session_state["months_a_row"]
    )
    if not loaded.is_demo():
        loaded.use_file(content, "monthly_return", returned)
        returned = loaded.files().monthly_return
    made, told = [], [*returned.report.sentences, *returned.report.notes]
    known = () if loaded.is_demo() else set(returned.wards) - set(returned.unknown_wards)
    for ward in sorted(set(returned.wards) - set(known)):
        try:
            made.append(from_return(returned, ward))
        except BedplanError as error:
            told.append(f"{ward}: {error}")
    for ward in made:
        if st.session_state.get("typed", {}).get(ward.name) != ward:  # one taken already keeps its settings
            typed.use_totals(ward)
    if known:
        told.append("Wards that have ward stays were left as they are: stays say more than a return.")
    ready = "1 ward is" if len(made) == 1 else f"{len(made)} wards are"
    return [f"{ready} ready on the page One ward, from averages only.", *told]
