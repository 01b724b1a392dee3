"""Records: load a file, confirm how it was read, see what became of every row, or type totals instead."""

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
    read_records,
    read_refusals,
)
from bedplan.data.preview import MATCHED
from bedplan.errors import BedplanError, UnreadableRecords
from bedplan.models import LengthOfStay
from bedplan.pages import controls, loaded
from bedplan.plan import from_json, from_totals

if TYPE_CHECKING:
    from bedplan.data import DateQuestion, Records

NO_ANSWERS = {"columns": {}, "date_order": None, "ward_names": {}}
NONE = "(none)"


def take_file() -> None:
    """Read the file in hand with the answers given so far; on failure keep what was loaded before."""
    name, content = st.session_state["file"]
    answers = st.session_state.setdefault("answers", dict(NO_ANSWERS))
    try:
        with st.spinner(f"Reading {name}…"):
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
    st.session_state["answers"] = st.session_state.pop("planned_answers", None) or {**NO_ANSWERS}
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
        controls.use_capacity(read_capacity(given.getvalue(), name=given.name))
    except BedplanError as error:
        st.error(wording.plain(str(error)))


def load_more() -> None:
    """Offer the files that show what full wards could not take, and the official count."""
    kinds = {
        "refusals": ("Refusals: time, ward, reason", read_refusals),
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
                loaded.use_file(**{kind: read(given.getvalue(), name=given.name)})
            except BedplanError as error:
                st.error(wording.plain(str(error)))


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


def show_intake(here: Records) -> None:
    """Show what became of every row."""
    report = here.report
    counts = {
        "Rows in": report.rows_in,
        "Used as they stand": report.used,
        "Used after a repair": report.repaired,
        "Set aside": report.set_aside,
    }
    for column, (label, rows) in zip(st.columns(4), counts.items(), strict=True):
        column.metric(label, f"{rows:,}")
    if report.findings:
        found = [
            {
                "What was done, and why": one.sentence,
                "Outcome": one.outcome,
                "Rows": one.rows,
                "Bed-days": round(one.bed_days),
            }
            for one in report.findings
        ]
        st.dataframe(pd.DataFrame(found), hide_index=True, width="stretch")
    if report.dropped_columns:
        dropped = ", ".join(wording.plain(name) for name in report.dropped_columns)
        st.markdown(f"Dropped because they may identify people: {dropped}.")
    for note in report.notes:
        st.markdown(f"- {wording.plain(note)}")
    if len(here.set_aside):
        rows = here.set_aside
        st.download_button(
            "Take the rows set aside (CSV, without identifiers)",
            data=lambda: rows.to_csv(index=False).encode("utf-8-sig"),
            file_name="rows-set-aside.csv",
            mime="text/csv",
            on_click="ignore",
        )


def type_totals() -> None:
    """Offer typed totals for someone who has no file."""
    with st.form("totals", border=False):
        name = st.text_input("Ward", "My ward", max_chars=40)
        left, right = st.columns(2)
        admissions = left.number_input("Admissions a year", 0.0, 500_000.0, 1_500.0, 10.0, format="%.0f")
        beds = right.number_input("Staffed beds today", 0, 2000, 28, 1, key="typed_beds")
        knows_mean = "its mean"
        known = st.radio(
            "What do you know of the stay?", [knows_mean, "how early and how late patients leave"], horizontal=True
        )
        one, two, three = st.columns(3)
        mean = one.number_input("Mean stay, days", 0.1, 1000.0, 6.0, 0.1)
        early = two.number_input("1 in 20 leave before … days", 0.01, 1000.0, 1.0, 0.1)
        late = three.number_input("1 in 20 stay past … days", 0.02, 3000.0, 18.0, 0.5)
        if st.form_submit_button("Use these totals"):
            take_totals(name, admissions, int(beds), mean if known == knows_mean else (early, late))


def take_totals(name: str, admissions: float, beds: int, stay: float | tuple[float, float]) -> None:
    """Turn typed totals into a ward to plan."""
    try:
        if isinstance(stay, tuple):
            length = LengthOfStay.from_two_quantiles((0.05, stay[0]), (0.95, stay[1]))
        else:
            length = LengthOfStay(stay)
        ward = from_totals(name.strip() or "My ward", admissions, length, beds)
    except BedplanError as error:
        st.error(wording.plain(str(error)))
        return
    controls.use_totals(ward)
    wanted = wording.beds_on_average(ward.demand.offered_load)
    st.success(f"{wording.plain(ward.name)} wants {wanted}. It is ready on the page One ward.")


def keep_plan() -> None:
    """Offer to save every setting to a file, and to open one."""
    st.download_button(
        "Save this plan (settings only, no rows)",
        data=controls.plan_as_json(),
        file_name="bedplan-plan.json",
        mime="application/json",
        on_click="ignore",
    )
    given = st.file_uploader("Open a saved plan", key="plan_file", type="json")
    if given is None or st.session_state.get("plan_taken") == given.file_id:
        return
    st.session_state["plan_taken"] = given.file_id
    try:
        controls.use_plan(from_json(given.getvalue()))
    except BedplanError as error:
        st.error(wording.plain(str(error)))
        return
    st.success("The plan is open. Load the records it was made with, if they are not loaded yet.")


left_side, right_side = st.columns(2, gap="large")
with left_side:
    st.subheader("Load your records", anchor=False)
    load_stays()
    show_problem()
    load_capacity()
    load_more()
    st.caption("Files stay in this computer's memory. Largest upload 300 MB; larger files by path on the command line.")
    if not loaded.is_demo():
        st.button("Forget these records, show the Larkmere demo", on_click=controls.use_records, args=(None,))
    st.subheader("Keep your settings", anchor=False)
    keep_plan()
with right_side:
    st.subheader("No file? Type totals", anchor=False)
    type_totals()
records = loaded.records()
first, last = records.window
whose = "The Larkmere demo" if loaded.is_demo() else wording.plain(records.name)
st.subheader(f"{whose}: what became of every row", anchor=False)
mark = records.fingerprint[: controls.FINGERPRINT_SHOWN]
st.caption(f"{first:%d %B %Y} to {last:%d %B %Y} · {len(records.wards)} wards · fingerprint {mark}")
show_intake(records)
if not loaded.is_demo():
    confirm_links(records)
    if "problem" not in st.session_state:
        confirm_columns()
