"""Records: load a file, confirm how it was read, see what became of every row, or type totals instead."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pandas as pd
import streamlit as st

from bedplan import wording
from bedplan.errors import BedplanError, UnreadableRecords
from bedplan.models import LengthOfStay
from bedplan.pages import beside, controls, correcting, intake, loaded, saved, typed
from bedplan.plan import from_json, from_totals

if TYPE_CHECKING:
    from bedplan.data import IntakeReport, Records


def headline(whose: str, report: IntakeReport) -> str:
    """Say how many rows are used."""
    if not report.repaired and not report.set_aside:
        return f"{whose}: all {report.rows_in:,} rows are used."
    used = report.used + report.repaired
    return f"{whose}: {used:,} of {report.rows_in:,} rows used ({report.repaired:,} repaired), {report.set_aside:,} set aside."


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
        show_findings(report)
    if report.dropped_columns:
        dropped = ", ".join(wording.plain(name) for name in report.dropped_columns)
        st.markdown(f"Dropped because they may identify people: {dropped}.")
    asked = {link.sentence for link in loaded.links()}  # asked further down, with a button
    for note in report.notes:
        if note not in asked:
            st.markdown(f"- {wording.plain(note)}")
    show_repairs()
    show_checks()
    if len(here.set_aside):
        rows = here.set_aside
        st.download_button(
            "Take the rows set aside (CSV, without identifiers)",
            data=lambda: rows.to_csv(index=False).encode("utf-8-sig"),
            file_name="rows-set-aside.csv",
            mime="text/csv",
            on_click="ignore",
        )


def show_findings(report: IntakeReport) -> None:
    """Show every rule that was met, its rows and their bed-days."""
    found = [
        {
            "What was done, and why": one.sentence,
            "Outcome": one.outcome,
            "Rows": one.rows,
            "Bed-days": round(one.bed_days),
        }
        for one in report.findings
    ]
    st.dataframe(
        pd.DataFrame(found),
        column_config={name: st.column_config.NumberColumn(format="localized") for name in ("Rows", "Bed-days")},
        hide_index=True,
        width="stretch",
        height=35 * (len(found) + 1) + 3,  # whole, without a second scroll bar
    )


def show_checks() -> None:
    """Show whether bed-days, comings and goings, and counts of other files agree."""
    rows = [
        {"Does it add up?": one.what, "Figures": one.figures, "Verdict": one.verdict[0].upper() + one.verdict[1:]}
        for one in loaded.checks()
    ]
    st.table(pd.DataFrame(rows).map(wording.plain).set_index("Does it add up?"))


def show_repairs() -> None:
    """Show how far the repaired rows, and those not believed, carry each ward's answer."""
    rows = [
        {
            "Ward": wording.plain(one.ward),
            "Beds wanted on average": f"{one.beds_wanted:.1f}",
            "Without repaired rows": "too little is left"
            if one.without_repairs is None
            else f"{one.without_repairs:.1f}",
            "If forgotten and mistyped stays are true": f"{one.if_doubted_are_true:.1f}",
        }
        for one in loaded.repairs()
    ]
    if not rows:
        return
    with st.expander("What the repairs change"):
        st.table(pd.DataFrame(rows).set_index("Ward"))


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
        one, two, three = st.columns(3, vertical_alignment="bottom")
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
    typed.use_totals(ward)
    wanted = wording.beds_on_average(ward.demand.offered_load)
    st.success(f"{wording.plain(ward.name)} wants {wanted}. It is ready on the page One ward.")


def open_plan(given: intake.Given) -> list[str]:
    """Take up a saved plan: the file in hand is read as the plan read it, then its settings count.

    Raises:
        UnreadableRecords: no plan, or the file can't be read as the plan says.
    """
    plan = from_json(given.content)
    here = loaded.files()
    if not loaded.is_demo() and saved.is_of(plan, here.content) and plan.answers != here.answers:
        problems = intake.read_again(plan.answers.with_ready_dates(here.answers))
        if problems:
            raise UnreadableRecords(problems)
    saved.use_plan(plan)
    told = "The plan is open. Settings of wards wait for the records it was made with, if those are not loaded yet."
    again = beside.take_again()
    return [told, *again, *filter(None, [plan.answers.with_ready_dates(loaded.files().answers).ready_sentence])]


def keep_plan() -> None:
    """Offer to save every setting to a file, and to open one."""
    st.download_button(
        "Save this plan (settings only, no rows)",
        data=saved.plan_as_json(),
        file_name="bedplan-plan.json",
        mime="application/json",
        on_click="ignore",
    )
    if beside.offer("plan", "Open a saved plan", open_plan, type="json"):
        st.rerun()  # files in their boxes are read as it says


top = st.container()  # filled once it is known what is loaded
left_side, right_side = st.columns(2, gap="large")
with left_side:
    st.subheader("Load your records", anchor=False)
    intake.load_stays()
    intake.show_refused()
    beside.load_capacity()
    beside.load_more()
    if not loaded.is_demo():
        st.button("Forget these records, show the Larkmere demo", on_click=controls.use_files, args=(None,))
    st.subheader("Keep your settings", anchor=False)
    keep_plan()
with right_side:
    st.subheader("No file? Type totals", anchor=False)
    type_totals()
records = loaded.records()
first, last = records.window
whose = "The Larkmere demo" if loaded.is_demo() else wording.plain(records.name)
mark = records.fingerprint[: controls.FINGERPRINT_SHOWN]
window = f"{wording.date(first)} to {wording.date(last - pd.Timedelta(seconds=1))}"
with top:
    st.header(headline(whose, records.report), anchor=False)
    st.caption(f"{window} · {wording.wards_text(len(records.wards))} · fingerprint {mark}")
st.subheader(f"{whose}: what became of every row", anchor=False)
show_intake(records)
if not loaded.is_demo():
    intake.confirm_links()
    correcting.correct()
    if "refused" not in st.session_state:
        mine = loaded.files()
        given = intake.Given("stays", records.name, mine.content, mine.answers)
        intake.confirm_columns(given, intake.settle, is_fresh=intake.is_fresh("stays"))
