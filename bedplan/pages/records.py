"""Records: load a file, see what was done to it, or type totals instead."""

from __future__ import annotations

from io import BytesIO

import pandas as pd
import streamlit as st

from bedplan import wording
from bedplan.data import IntakeReport, read_capacity, read_records
from bedplan.errors import BedplanError, UnreadableRecords
from bedplan.models import LengthOfStay
from bedplan.pages import controls
from bedplan.plan import from_totals


def show_problems(error: BedplanError) -> None:
    """Show every problem of a file, one line each; what was loaded before stays."""
    problems = error.problems if isinstance(error, UnreadableRecords) else (str(error),)
    st.error("\n\n".join(wording.plain(problem) for problem in problems))
    st.caption("Nothing was changed: the records loaded before are still here.")


def load_stays() -> None:
    """Offer the ward-stay file and take it in."""
    given = st.file_uploader(
        "Ward stays (CSV): one row for each patient on each ward, with ward, start and end",
        key="stays_file",
        help="Headings such as Ward, Ward start, Ward end. A blank end means the patient is still in.",
    )
    if given is None or st.session_state.get("stays_taken") == given.file_id:
        return
    st.session_state["stays_taken"] = given.file_id
    try:
        with st.spinner("Reading the file…"):
            loaded = read_records(BytesIO(given.getvalue()), name=given.name)
    except BedplanError as error:
        show_problems(error)
        return
    controls.forget_figures()
    st.session_state["records"] = loaded
    st.session_state["capacity"] = None
    st.session_state["asked_records"] = loaded.fingerprint[: controls.FINGERPRINT_SHOWN]


def load_capacity() -> None:
    """Offer the capacity file and take it in."""
    given = st.file_uploader(
        "Staffed beds (CSV), if you have them: ward, from, to, funded beds, staffed beds, closed beds",
        key="capacity_file",
        help="Without it, type today's staffed beds on the page One ward.",
        disabled=controls.is_demo(),
    )
    if given is None or st.session_state.get("capacity_taken") == given.file_id:
        return
    st.session_state["capacity_taken"] = given.file_id
    try:
        st.session_state["capacity"] = read_capacity(BytesIO(given.getvalue()), name=given.name)
    except BedplanError as error:
        show_problems(error)
        return
    controls.forget_figures()


def back_to_demo() -> None:
    """Forget the planner's records and show the demo again."""
    controls.forget_figures()
    for key in ("records", "capacity"):
        st.session_state.pop(key, None)
    st.session_state["asked_records"] = controls.demo()[0].fingerprint[: controls.FINGERPRINT_SHOWN]


def show_intake(report: IntakeReport) -> None:
    """Show what became of every row."""
    for column, (label, rows) in zip(
        st.columns(4),
        (
            ("Rows in", report.rows_in),
            ("Used as they stand", report.used),
            ("Used after a repair", report.repaired),
            ("Set aside", report.set_aside),
        ),
        strict=True,
    ):
        column.metric(label, f"{rows:,}")
    if report.findings:
        rows = [
            {
                "What was done, and why": one.sentence,
                "Outcome": one.outcome,
                "Rows": one.rows,
                "Bed-days": round(one.bed_days),
            }
            for one in report.findings
        ]
        st.dataframe(pd.DataFrame(rows), hide_index=True, width="stretch")
    if report.dropped_columns:
        dropped = ", ".join(wording.plain(name) for name in report.dropped_columns)
        st.markdown(f"Dropped because they may identify people: {dropped}.")
    for note in report.notes:
        st.markdown(f"- {wording.plain(note)}")


def type_totals() -> None:
    """Offer typed totals for someone who has no file."""
    with st.form("totals", border=False):
        name = st.text_input("Ward", "My ward", max_chars=40)
        left, right = st.columns(2)
        admissions = left.number_input("Admissions a year", 0.0, 500_000.0, 1_500.0, 10.0, format="%.0f")
        beds = right.number_input("Staffed beds today", 0, 2000, 28, 1, key="typed_beds")
        known = st.radio(
            "What do you know of the stay?", ["its mean", "how early and how late patients leave"], horizontal=True
        )
        one, two, three = st.columns(3)
        mean = one.number_input("Mean stay, days", 0.1, 1000.0, 6.0, 0.1)
        early = two.number_input("1 in 20 leave before … days", 0.01, 1000.0, 1.0, 0.1)
        late = three.number_input("1 in 20 stay past … days", 0.02, 3000.0, 18.0, 0.5)
        if st.form_submit_button("Use these totals"):
            take_totals(name, admissions, int(beds), mean if known == "its mean" else (early, late))


def take_totals(name: str, admissions: float, beds: int, stay: float | tuple[float, float]) -> None:
    """Turn typed totals into a ward to plan."""
    try:
        length = (
            LengthOfStay.from_two_quantiles((0.05, stay[0]), (0.95, stay[1]))
            if isinstance(stay, tuple)
            else LengthOfStay(stay)
        )
        ward = from_totals(name.strip() or "My ward", admissions, length, beds)
    except BedplanError as error:
        st.error(wording.plain(str(error)))
        return
    st.session_state["typed"] = st.session_state.get("typed", {}) | {ward.name: ward}
    st.session_state.get("settings", {}).pop(ward.name, None)
    st.session_state["next_ward"] = ward.name
    st.success(
        f"{wording.plain(ward.name)} is ready on the page One ward: {wording.beds_on_average(ward.demand.offered_load)} wanted."
    )


left_side, right_side = st.columns(2, gap="large")
with left_side:
    st.subheader("Load your records", anchor=False)
    load_stays()
    load_capacity()
    st.caption("Files stay in this computer's memory. Largest upload 300 MB; larger files by path on the command line.")
    if not controls.is_demo():
        st.button("Forget these records, show the Larkmere demo", on_click=back_to_demo)
with right_side:
    st.subheader("No file? Type totals", anchor=False)
    type_totals()
here = controls.records()
start, end = here.window
st.subheader(
    f"{'The Larkmere demo' if controls.is_demo() else wording.plain(here.name)}: what became of every row", anchor=False
)
st.caption(
    f"{start:%d %B %Y} to {end:%d %B %Y} · {len(here.wards)} wards · fingerprint {here.fingerprint[: controls.FINGERPRINT_SHOWN]}"
)
show_intake(here.report)
