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
    read_ready_dates,
    read_refusals,
)
from bedplan.errors import BedplanError, UnreadableRecords
from bedplan.pages import averages, controls, intake, loaded, said

if TYPE_CHECKING:
    from collections.abc import Callable

    from bedplan.data import DateQuestion
    from bedplan.pages.intake import Given
    from bedplan.plan import FileAnswers

    Take = Callable[[Given], list[str]]  # a file -> what to tell
    Ask = Callable[[FileAnswers, bool], FileAnswers]  # what was said, and whether the input starts anew -> what is said


MONTHS_A_ROW = {None: "what the file shows", 1: "1 month"}


@dataclass(frozen=True)
class Told:
    """What came of one more file as it was last read, or tried, and the question whose answer would help, if any."""

    mark: str
    answers: FileAnswers
    sentences: tuple[str, ...]
    refused: bool = False
    question: DateQuestion | None = None
    by_columns: bool = False  # naming its columns would help, though all that it needs are there


def offer(kind: str, label: str, take: Take, *, ask: Ask | None = None, **options: Any) -> bool:
    """Offer one more file, take it in once, and tell what came of it for as long as it is in its box.

    ``ask`` asks one more thing about it; where an answer changes, the file is taken again. Return whether it is new.
    """
    put = st.file_uploader(label, key=f"{kind}_file", **options)
    if put is None or options.get("disabled"):
        return False
    content = put.getvalue()
    is_new = st.session_state.get(f"{kind}_taken") != put.file_id
    if is_new:
        take_more(take, intake.Given(kind, put.name, content, said.of(said.mark_of(content))))
        st.session_state[f"{kind}_taken"] = put.file_id
    told: Told = st.session_state[f"{kind}_told"]
    answers = replace(told.answers, no_bed_reasons=said.of(told.mark).no_bed_reasons)
    given = intake.Given(kind, put.name, content, answers)
    tell(given, told)

    def retry(answers: FileAnswers) -> None:
        """Take the file again with these answers."""
        take_more(take, replace(given, answers=answers))
        st.rerun()

    ask_more(given, told, ask, retry)
    return is_new


def tell(given: Given, told: Told) -> None:
    """Tell what came of a file."""
    if not told.refused:
        for sentence in told.sentences:
            st.caption(wording.plain(sentence))
        return
    for sentence in intake.why_refused(given, told.sentences, told.question):
        st.error(wording.plain(sentence))
    if any(named.endswith(told.mark) for _, named in loaded.files().marks):
        st.caption("What was read from this file before is still in use, unchanged.")


def ask_more(given: Given, told: Told, ask: Ask | None, retry: Callable[[FileAnswers], None]) -> None:
    """Ask what is open about a file, and let the planner correct how it was read."""
    is_fresh = intake.is_fresh(given.kind)
    if told.question is not None:
        intake.ask_date_order(given.kind, told.question, lambda order: retry(replace(told.answers, date_order=order)))
    if ask is not None:
        answers = ask(told.answers, is_fresh)
        if answers != told.answers:
            retry(answers)
    if given.kind in intake.FILE_KINDS:
        is_unsure = told.refused and (told.by_columns or intake.is_about_columns(given, told.question))
        # other columns may hold other reasons: those are asked about again
        intake.confirm_columns(
            given, lambda answers: retry(replace(answers, no_bed_reasons=None)), is_fresh=is_fresh, is_unsure=is_unsure
        )


def take_more(take: Take, given: Given) -> None:
    """Take in a file beside the stays, and keep what came of it; what was said of it is kept once it can be read."""
    mark = said.mark_of(given.content)
    try:
        told = Told(mark, given.answers, tuple(take(given)))
        said.keep(mark, given.answers)
    except BedplanError as error:
        question, by_columns = getattr(error, "question", None), getattr(error, "by_columns", False)
        told = Told(mark, given.answers, (str(error),), refused=True, question=question, by_columns=by_columns)
    st.session_state[f"{given.kind}_told"] = told
    intake.start_anew(given.kind)


def take_again() -> list[str]:
    """Let files in their boxes be read again where a plan that was opened says otherwise; name those no longer there."""
    gone = []
    for kind, what in loaded.MARKED.items():
        told: Told | None = st.session_state.get(f"{kind}_told")
        if told is None or told.answers == replace(said.of(told.mark), no_bed_reasons=told.answers.no_bed_reasons):
            continue
        named = dict(loaded.files().marks).get(what, "")
        st.session_state.pop(f"{kind}_taken", None)
        if st.session_state.get(f"{kind}_file") is None and named.endswith(told.mark):
            name = named.rpartition(",")[0]
            gone.append(f"{name} was read another way than this plan says: give it again.")
    return gone


def load_capacity() -> None:
    """Offer the capacity file and take it in."""

    def take(given: Given) -> list[str]:
        """Take today's staffed beds from it."""
        found = read_capacity(given.content, name=given.name, **given.answers.to_read())
        controls.use_capacity(found, given.content)
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
    }
    with st.expander("More files"):
        for kind, (label, reader) in kinds.items():
            offer(kind, label, functools.partial(take_beside, reader), disabled=loaded.is_demo())
            ask_reasons(kind)
        offer("census", "Census: date, time, ward, patients", take_census)
        averages.plan_by_census()
        offer("ready", "Ready to leave: stay or patient key, date", take_ready, disabled=loaded.is_demo())
        label = (
            "Monthly return, where there is nothing better: month, ward, available and occupied bed-days, discharges"
        )
        offer("monthly_return", label, averages.take_return, ask=ask_months)
    for sentence in loaded.without_stays():
        st.caption(wording.plain(sentence))


def take_beside(reader: Callable[..., Any], given: Given) -> list[str]:
    """Add a list or a census beside the records."""
    found = reader(given.content, name=given.name, **given.answers.to_read())
    loaded.use_file(given.content, given.kind, found)
    if given.answers.no_bed_reasons is not None:
        loaded.use_reasons(given.kind, given.answers.no_bed_reasons)
    return [*found.report.sentences, *found.report.notes, *found.cannot]


def take_census(given: Given) -> list[str]:
    """Add a census beside the planner's records; without any, its wards can be planned by it alone."""
    if not loaded.is_demo():
        return take_beside(read_census, given)
    found = read_census(given.content, name=given.name, **given.answers.to_read())
    st.session_state["census_alone"] = found
    return [*found.report.sentences, *found.report.notes, *found.cannot]


def take_ready(given: Given) -> list[str]:
    """Read the ward stays again, with the dates on which patients were ready to leave."""
    found = read_ready_dates(given.content, name=given.name, **given.answers.to_read())
    here = loaded.files().marked("ready", given.name, given.content)
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


def ask_months(answers: FileAnswers, is_fresh: bool) -> FileAnswers:
    """Ask how many months a row of the return holds; None = as the file shows."""
    if is_fresh:
        st.session_state["months_a_row"] = answers.months_a_row
    chosen = st.selectbox(
        "A row of this return holds",
        [None, *range(1, 13)],
        format_func=lambda months: MONTHS_A_ROW.get(months, f"{months} months"),
        key="months_a_row",
    )
    return replace(answers, months_a_row=chosen)
