"""Hidden demand: the steps from what a ward recorded to what was asked of it, and how sure that is."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pandas as pd
import streamlit as st

from bedplan import charts, wording
from bedplan.errors import BedplanError
from bedplan.pages import controls, loaded

if TYPE_CHECKING:
    from bedplan.data import HiddenDemand


def headline(found: HiddenDemand) -> str:
    """Say in a sentence what is wanted and what is in use."""
    used = found.steps[0].beds
    return (
        f"{found.ward}'s patients want {wording.beds_on_average(found.beds_wanted)}; "
        f"{used:,.1f} are in use on {found.ward}."
    )


def methods(found: HiddenDemand) -> pd.DataFrame:
    """Return a row a method: its answer with the range, or why it can't tell."""
    said = [wording.plain(method.reason) for method in found.methods]
    rows = [
        {
            "Method": method.name[0].upper() + method.name[1:],
            "Patients a day": f"{method.patients_per_day:.2f}" if method.used else "can't tell",
            "Range": "{:.2f} to {:.2f}".format(*method.interval) if method.used else "",
            "Why": "As above." if place and said[place] == said[place - 1] else said[place],
        }
        for place, method in enumerate(found.methods)
    ]
    return pd.DataFrame(rows).set_index("Method")


def show(name: str) -> None:
    """Show one ward's steps and methods, and the switch that plans on them."""
    found = loaded.hidden(name)
    st.header(wording.plain(headline(found)), anchor=False)
    steps = charts.steps_data([(step.label, step.beds) for step in found.steps], found.beds_spread)
    st.vega_lite_chart(charts.live(charts.STEPS, steps), theme=None, width="stretch", alt=headline(found))
    low, high = found.spread
    st.markdown(
        f"**{found.demand_per_day:.2f} patients a day wanted this ward; {found.admitted_per_day:.2f} were admitted.** "
        f"Read from {found.method}; across all methods {low:.2f} to {high:.2f} a day."
    )
    st.table(methods(found))
    for note in found.notes:
        st.markdown(f"- {wording.plain(note)}")
    chosen = st.toggle(
        f"Plan {wording.plain(name)} on what was asked for",
        bool(controls.settings_of(name)["hidden"]),
        key=f"plan_hidden_{name}",
    )
    if chosen and found.takes_away:
        st.warning(wording.GUESTS_OUT)
    controls.remember(name, hidden=chosen)
    st.session_state["hidden"] = (
        chosen if st.session_state.get("ward") == name else st.session_state.get("hidden", False)
    )


def ask_share(name: str) -> None:
    """Ask which share of those who could not be given a bed is written down in the lists of them."""
    share = st.slider(
        "Patients not given a bed: share written down",
        10,
        100,
        round(100 * loaded.recorded_share(name)),
        5,
        format="%d %%",
        key=f"recorded_{name}",
        help="How many of a hundred patients who could not be given a bed here are written down in the file?",
    )
    loaded.use_recorded_share(name, share / 100)


controls.show_origin()
ward_name = controls.choose_ward()
if loaded.files().refusals is not None or loaded.files().cancellations is not None:
    with st.sidebar:
        ask_share(ward_name)
try:
    show(ward_name)
except BedplanError as error:
    st.error(wording.plain(str(error)))
