"""Compare wards: a row a ward, the ward whose next bed spares most patients first."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pandas as pd
import streamlit as st

from bedplan import wording
from bedplan.decision import patients_per_year, spared_by_next_bed
from bedplan.errors import BedplanError
from bedplan.pages import controls

if TYPE_CHECKING:
    from bedplan.export import WardCase


def row(case: WardCase) -> dict[str, object]:
    """Return one ward's facts."""
    today = case.curve.at(case.ward.beds)
    return {
        "Ward": case.ward.name,
        "Staffed beds today": case.ward.beds,
        "Average formula": case.ward.average_formula_beds,
        "By the limit": None if case.decision is None else case.decision.beds,
        "Next bed spares, a year": spared_by_next_bed(case.curve, case.ward.beds),
        "Find it full, a year": patients_per_year(case.curve, case.ward.beds),
        "Share": 100 * today.turn_away_probability,
        "Worst month": wording.in_month(today.worst_month, float(today.by_month.max())),
        "Occupancy": 100 * today.occupancy,
        "Share at each bed count": controls.small_curve(case),
        "When full, patients": "go elsewhere" if case.ward.when_full == "leaves" else "wait",
    }


def total(frame: pd.DataFrame) -> str:
    """Say the hospital total in a sentence."""
    found = wording.patients_per_year(float(frame["Find it full, a year"].sum()))
    needed = frame["By the limit"]
    by_limit = f"{int(needed.sum())}" if needed.notna().all() else "not reachable for every ward"
    return (
        f"All {len(frame)} wards: {int(frame['Staffed beds today'].sum())} staffed beds today, "
        f"{int(frame['Average formula'].sum())} by the average formula, {by_limit} by the limit. "
        f"Patients who find their ward full: {found} a year."
    )


COLUMNS = {
    "Find it full, a year": st.column_config.NumberColumn(format="%.0f", help="Patients a year who find no free bed."),
    "Share": st.column_config.NumberColumn(format="%.1f %%"),
    "Occupancy": st.column_config.NumberColumn(format="%.0f %%"),
    "Next bed spares, a year": st.column_config.NumberColumn(format="%.0f"),
    "Share at each bed count": st.column_config.LineChartColumn(
        y_min=0, y_max=0.4, width="medium", help="From 10 beds fewer than today to 10 more; top of the box is 40 %."
    ),
}

controls.show_origin()
cases = []
for name in controls.ward_names():
    try:
        cases.append(controls.case_of(name))
    except BedplanError as error:
        st.warning(f"{wording.plain(name)}: {wording.plain(str(error))}")
if cases:
    table = pd.DataFrame([row(case) for case in cases]).sort_values("Next bed spares, a year", ascending=False)
    first = table.iloc[0]
    spared = wording.patients_per_year(float(first["Next bed spares, a year"]))
    st.header(
        f"The next bed spares most on {wording.plain(str(first['Ward']))}: {spared} patients a year.", anchor=False
    )
    controls.warn_of_beds(cases)
    within = controls.WITHIN[st.session_state.get("within", "every_month")]
    watched = controls.MEASURES[st.session_state.get("measure", "full")][0]
    st.caption(
        f"Limit: {wording.one_in(controls.limit_share())}, {within}; where patients wait it is on {watched}. "
        "Set it on the page One ward."
    )
    st.dataframe(table, column_config=COLUMNS, hide_index=True, width="stretch", height=35 * (len(table) + 1) + 3)
    st.markdown(f"**{total(table)}**")
    st.caption(
        "Not a league table: it says nothing about how well a ward works. A critical-care bed costs several times a "
        "ward bed. Wards that wait and wards that turn away are read on different models."
    )
