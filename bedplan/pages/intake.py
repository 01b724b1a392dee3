"""Taking files in: the uploads of the page Records, and the questions a file can raise."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pandas as pd
import streamlit as st

from bedplan import wording
from bedplan.data import (
    IntakeChoices,
    preview_columns,
    read_cancellations,
    read_capacity,
    read_census,
    read_monthly_return,
    read_records,
    read_refusals,
)
from bedplan.data.preview import MATCHED
from bedplan.errors import BedplanError, UnreadableRecords
from bedplan.pages import controls, loaded
from bedplan.plan import from_return

if TYPE_CHECKING:
    from bedplan.data import DateQuestion, Records

NO_ANSWERS = {"columns": {}, "date_order": None, "ward_names": {}}
NONE = "(none)"


def take_file() -> None:
    """Read the file in hand with the answers given so far; on failure keep what was loaded before."""
    name, content = st.session_state["file"]
    answers = st.session_state.setdefault("answers", dict(NO_ANSWERS))
    try:
        with st.spinner(f"Reading {wording.plain(name)}…"):
            found = read_records(
                content,
                name=name,
                columns=answers["columns"],
                date_order=answers["date_order"],
                choices=IntakeChoices(ward_names=answers["ward_names"]),
            )
    except BedplanError as error:
        problems = error.problems if isinstance(error, UnreadableRecords) else (str(error),)
        st.session_state["problem"] = (problems, getattr(error, "question", None))
        return
    st.session_state.pop("problem", None)
    controls.use_records(found)


def load_stays() -> None:
    """Offer the ward-stay file and take it in."""
    given = st.file_uploader(
        "Ward stays (CSV, Excel or Parquet): one row for each patient on each ward, with ward, start and end",
        key="stays_file",
        help="Headings such as Ward, Ward start, Ward end. A blank end means the patient is still in.",
    )
    if given is None or st.session_state.get("stays_taken") == given.file_id:
        return
    st.session_state["stays_taken"] = given.file_id
    st.session_state["file"] = (given.name, given.getvalue())
    st.session_state["answers"] = controls.planned_answers(given.getvalue()) or {**NO_ANSWERS}
    take_file()


def load_capacity() -> None:
    """Offer the capacity file and take it in."""
    given = st.file_uploader(
        "Staffed beds (CSV or Excel), if you have them: ward, from, to, staffed beds, closed beds",
        key="capacity_file",
        help="Without it, type today's staffed beds on the page One ward.",
        disabled=loaded.is_demo(),
    )
    if given is None or st.session_state.get("capacity_taken") == given.file_id:
        return
    st.session_state["capacity_taken"] = given.file_id
    try:
        controls.use_capacity(read_capacity(given.getvalue(), name=given.name), given.getvalue())
    except BedplanError as error:
        st.error(wording.plain(str(error)))


def load_more() -> None:
    """Offer the files that show what full wards could not take, and the official count."""
    kinds = {
        "refusals": ("Patients not given a bed: time, ward, reason", read_refusals),
        "cancellations": ("Cancelled booked patients: planned date, ward, reason", read_cancellations),
        "census": ("Census: date, time, ward, patients", read_census),
    }
    with st.expander("More files"):
        for kind, (label, read) in kinds.items():
            given = st.file_uploader(label, key=f"{kind}_file", disabled=loaded.is_demo())
            if given is None or st.session_state.get(f"{kind}_taken") == given.file_id:
                continue
            st.session_state[f"{kind}_taken"] = given.file_id
            try:
                found = read(given.getvalue(), name=given.name)
            except BedplanError as error:
                st.error(wording.plain(str(error)))
                continue
            loaded.use_file(given.getvalue(), **{kind: found})
            for sentence in found.cannot:
                st.caption(wording.plain(sentence))
        load_return()


def load_return() -> None:
    """Offer a monthly return: its wards can be planned from averages."""
    label = "Monthly return, where there is nothing better: month, ward, available and occupied bed-days, discharges"
    given = st.file_uploader(label, key="return_file")
    if given is None or st.session_state.get("return_taken") == given.file_id:
        return
    st.session_state["return_taken"] = given.file_id
    try:
        returned = read_monthly_return(given.getvalue(), name=given.name)
        wards = [from_return(returned, name) for name in returned.wards]
    except BedplanError as error:
        st.error(wording.plain(str(error)))
        return
    for ward in wards:
        controls.use_totals(ward)
    st.success(f"{len(wards)} wards are ready on the page One ward, from averages only.")


def show_problem() -> None:
    """Show why the file in hand could not be read, and ask what would help."""
    if "problem" not in st.session_state:
        return
    problems, question = st.session_state["problem"]
    st.error("\n\n".join(wording.plain(problem) for problem in problems))
    st.caption("The records loaded before are still here, unchanged.")
    if question is not None:
        ask_date_order(question)
    confirm_columns()


def ask_date_order(question: DateQuestion) -> None:
    """Ask whether 03/04 is in April or in March, with both readings of three rows."""
    heading = ["As written", "Read day first", "Read month first"]
    st.table(pd.DataFrame(list(question.examples), columns=heading).set_index(heading[0]))
    with st.form("date_order", border=False):
        counts = question.ends_before_start
        answer = st.radio(
            "How are dates written in this file?",
            question.answers,
            index=None,
            format_func=lambda one: (
                one + (f" ({counts[one]:,} stays would end before they start)" if one in counts else "")
            ),
        )
        if st.form_submit_button("Read it this way") and answer is not None:
            st.session_state["answers"] = {**st.session_state["answers"], "date_order": answer}
            take_file()
            st.rerun()


def confirm_columns() -> None:
    """Show which heading was taken for what, with three rows, and let the planner correct it."""
    if "file" not in st.session_state:
        return
    name, content = st.session_state["file"]
    answers = st.session_state["answers"]
    try:
        seen = preview_columns(content, name=name, columns=answers["columns"])
    except BedplanError:
        return
    with (
        st.expander("How the columns were read", expanded="problem" in st.session_state),
        st.form("columns", border=False),
    ):
        chosen = {}
        for key in MATCHED:
            options = [NONE, *seen.headings]
            now = seen.matched.get(key, NONE)
            left, right = st.columns([1, 2])
            chosen[key] = left.selectbox(
                key.replace("_", " ").capitalize(), options, options.index(now), key=f"column_{key}"
            )
            right.caption(wording.plain(" · ".join(seen.samples.get(key, ())) or "–"))
        if st.form_submit_button("Read it again with these columns"):
            columns = {key: heading for key, heading in chosen.items() if heading != NONE}
            st.session_state["answers"] = {**answers, "columns": columns}
            take_file()
            st.rerun()


def confirm_links(here: Records) -> None:
    """Offer to count names that may be one ward together."""
    for place, link in enumerate(here.links):
        left, right = st.columns([4, 1])
        left.markdown(wording.plain(link.sentence))
        if len(link.new) == 1 and right.button("Count together", key=f"link_{place}"):
            names = st.session_state["answers"]["ward_names"] | dict.fromkeys(link.old, link.new[0])
            st.session_state["answers"] = {**st.session_state["answers"], "ward_names": names}
            take_file()
            st.rerun()
