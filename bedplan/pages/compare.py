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


def small_curve(case: WardCase) -> list[float]:
    """Return the curve from 10 beds below today's to 10 above, for a small picture on a common scale."""
    beds = case.curve.beds
    shown = (beds >= case.ward.beds - 10) & (beds <= case.ward.beds + 10)
    return [float(share) for share in case.curve.turn_away_probability[shown]]


def spared(case: WardCase) -> float:
    """Return how many patients a year the next bed spares."""
    return spared_by_next_bed(case.curve, case.ward.beds)


def row(case: WardCase) -> dict[str, object]:
    """Return one ward's facts."""
    today = case.curve.at(case.ward.beds)
    return {
        "Ward": case.ward.name,
        "Staffed beds today": case.ward.beds,
        "Average formula": case.ward.average_formula_beds,
        "By the limit": None if case.decision is None else case.decision.beds,
        "Next bed spares, a year": round(spared(case)),
        "Find it full, a year": round(patients_per_year(case.curve, case.ward.beds)),
        "Share": 100 * today.turn_away_probability,
        "Worst month": wording.in_month(today.worst_month, float(today.by_month.max())),
        "Occupancy": 100 * today.occupancy,
        "Share at each bed count": small_curve(case),
        "When full, patients": "go elsewhere" if case.ward.when_full == "leaves" else "wait",
    }


def total(frame: pd.DataFrame) -> str:
    """Say the hospital total in a sentence."""
    found = wording.patients_per_year(float(frame["Find it full, a year"].sum()))
    needed = frame["By the limit"]
    by_limit = f"{int(needed.sum()):,}" if needed.notna().all() else "not reachable for every ward"
    return (
        f"{f'All {len(frame)} wards' if len(frame) > 1 else 'One ward'}: {int(frame['Staffed beds today'].sum()):,} staffed beds today, "
        f"{int(frame['Average formula'].sum()):,} by the average formula, {by_limit} by the limit. "
        f"Patients who find their ward full: {found} a year."
    )


WIDEST_NAME = 320  # pixels
# headings short enough for a projector's width; the ward stays in sight where the table is wider than the screen
COLUMNS = {
    "Staffed beds today": st.column_config.NumberColumn("Staffed today", help="Staffed beds today."),
    "Next bed spares, a year": st.column_config.NumberColumn(
        "Next bed spares", format="localized", help="Patients a year who no longer find the ward full."
    ),
    "Find it full, a year": st.column_config.NumberColumn(
        "Find it full", format="localized", help="Patients a year who find no free bed."
    ),
    "Share": st.column_config.NumberColumn(format="%.1f %%", help="Of patients who come, those who find no free bed."),
    "Occupancy": st.column_config.NumberColumn(format="%.0f %%"),
    "Share at each bed count": st.column_config.LineChartColumn(
        "By bed count",
        y_min=0,
        y_max=0.4,
        width="small",
        help="The share from 10 beds fewer than today to 10 more; top of the box is 40 %.",
    ),
    "When full, patients": st.column_config.TextColumn("When full"),
}

controls.show_origin()
cases = []
with st.spinner("Working out every ward…"):
    for name in controls.ward_names():
        try:
            cases.append(controls.case_of(name))
        except BedplanError as error:
            st.warning(f"{wording.plain(name)}: {wording.plain(str(error))}")
if cases:
    cases.sort(key=spared, reverse=True)
    most = wording.patients_per_year(spared(cases[0]))
    st.header(f"The next bed spares most on {wording.plain(cases[0].ward.name)}: {most} patients a year.", anchor=False)
    table = pd.DataFrame([row(case) for case in cases])
    st.markdown(f"**{total(table)}**")
    controls.warn_of_beds(cases)
    within = controls.WITHIN[st.session_state.get("within", "every_month")]
    watched = controls.MEASURES[st.session_state.get("measure", "full")][0]
    st.caption(
        f"Limit: {wording.one_in(controls.limit_share())}, {within}; where patients wait it is on {watched}. "
        "Set it on the page One ward."
    )
    ward = st.column_config.TextColumn(pinned=True, width=min(24 + 8 * max(map(len, table["Ward"])), WIDEST_NAME))
    columns = {"Ward": ward, **COLUMNS}
    st.dataframe(table, column_config=columns, hide_index=True, width="stretch", height=35 * (len(table) + 1) + 3)
    st.caption(
        "Not a league table: it says nothing about how well a ward works. A critical-care bed costs several times a "
        "ward bed. Wards that wait and wards that turn away are read on different models."
    )
