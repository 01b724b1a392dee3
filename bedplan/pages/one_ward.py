"""One ward: the answer in a sentence, the curve behind it, and the inputs that move it."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import pandas as pd
import streamlit as st

from bedplan import charts, wording
from bedplan.decision import WaitLimit, check_by_simulation
from bedplan.errors import BedplanError
from bedplan.pages import controls, loaded, typed

if TYPE_CHECKING:
    from bedplan.export import WardCase
    from bedplan.plan import Baseline

SIMULATED = {
    "leaves": "Simulated patients who find no bed leave.",
    "waits": "Simulated patients who find no bed wait in line, first come, first served.",
    "stays anyway": "Simulated patients who find no bed are placed at once, as in the formula; where they wait in line "
    "instead, they keep beds busier and more find the ward full.",
}


def load_ward() -> None:
    """Put the chosen ward's own settings on screen, before its inputs are drawn."""
    controls.show_ward(st.session_state["ward"])


def reset() -> None:
    """Put every input of this ward back to what its records say."""
    st.session_state.update(controls.starting_values(st.session_state["ward"]))


def slider_label(key: str, name: str) -> str:
    """Say what a slider stands for now, in its own unit."""
    base = controls.baseline(name)
    title, value = controls.SLIDERS[key][0], st.session_state.get(key, controls.SLIDERS[key][3]) / 100
    stay = base.demand.length_of_stay
    now = {
        "demand": f"{base.demand.arrivals_per_day * (1 + value):.1f} patients a day",
        "stay": wording.days(stay.mean_days * (1 + value)),
        "spread": f"SD is {stay.variation * (1 + value):.2f} × the mean",
        "peak": _peak_text(base.demand.month_factors, value),
        "growth": _growth_text(base),
    }
    return f"{title}: {now[key]}"


def _growth_text(base: Baseline) -> str:
    if not base.admissions_growth_per_year and not base.growth_per_year:
        return "none known"
    return (
        f"recorded {wording.signed_percent(base.growth_per_year)} a year, "
        f"of admissions {wording.signed_percent(base.admissions_growth_per_year)}"
    )


def _peak_text(factors: tuple[float, ...], size: float) -> str:
    if max(factors) == min(factors):
        return "none known"
    top = max(range(12), key=lambda month: factors[month])
    return f"{wording.MONTHS_SHORT[top]} {wording.signed_percent(size * (factors[top] - 1))}"


def move(name: str) -> None:
    """Draw the sliders that change what the records say, and the way back."""
    for key, (_, low, high, first, step, form) in controls.SLIDERS.items():
        st.slider(slider_label(key, name), low, high, first, step, format=form, key=key, **controls.PERSIST)
    st.button("Back to what the records say", on_click=reset, width="stretch")


def limit() -> None:
    """Draw what the limit watches, its size, and when it holds."""
    _, low, high, first, step, form = controls.LIMIT
    if st.session_state["full"] == "waits":
        st.selectbox(
            "The limit is on",
            list(controls.MEASURES),
            format_func=lambda key: controls.MEASURES[key][0],
            key="measure",
            persist_state="session",
        )
    st.slider(
        f"Limit: {wording.one_in(controls.limit_share())}",
        low,
        high,
        first,
        step,
        format=form,
        key="limit",
        **controls.PERSIST,
    )
    st.segmented_control(
        "The limit holds",
        list(controls.WITHIN),
        default="every_month",
        format_func=controls.WITHIN.get,
        key="within",
        required=True,
        persist_state="session",
    )


def inputs() -> str:
    """Draw the inputs and return the ward's name."""
    names = controls.ward_names()
    name = st.selectbox(
        "Ward", names, names.index(controls.first_shown(names)), key="ward", on_change=load_ward, **controls.PERSIST
    )
    typed.offer_removal(name)
    starting = controls.starting_values(name)
    st.radio(
        "When this ward is full, its patients…",
        list(wording.WHEN_WARD_IS_FULL),
        index=list(wording.WHEN_WARD_IS_FULL).index(starting["full"]),
        format_func=wording.WHEN_WARD_IS_FULL.get,
        key="full",
        persist_state="session",
    )
    st.number_input("Staffed beds today", 0, 2000, starting["beds"], 1, key="beds", **controls.PERSIST)
    limit()
    if name in loaded.records().wards:
        wanted = st.toggle("Plan on what was asked for, not on what was admitted", key="hidden", **controls.PERSIST)
        controls.remember(name, hidden=wanted)
    move(name)
    return name


def notes(case: WardCase, values: dict[str, Any]) -> None:
    """Say what the figure leaves out and which way it errs."""
    if case.ward.when_full == "leaves" and values["spread"]:
        st.info(
            "Spread of stay hardly moves a ward that turns patients away: in steady state only the mean counts. "
            "It acts on winter lag, clustered arrivals and waiting."
        )
    if wording.GUESTS_OUT in case.ward.notes:
        st.warning(wording.GUESTS_OUT)
    with st.expander("What this figure rests on, and which way it may err"):
        for note in case.notes():
            st.markdown(f"- {wording.plain(note)}")


def answer(case: WardCase) -> None:
    """Draw the sentence, the picture, the table and the months."""
    st.header(wording.plain(case.sentence()), anchor=False)
    if not case.beds_are_known:
        st.info(f"{wording.BEDS_UNKNOWN} Type them on the left.")
    side_by_side = st.container(horizontal=True, gap="medium")
    with side_by_side.container(width=520):
        st.markdown(f"**{case.words[2]}, over the year**")
        data = charts.curve_data(case.curves, (case.model, case.over_year), case.marked(), case.limit())
        with st.container(key="curve"):
            st.vega_lite_chart(charts.live(charts.CURVE, data), theme=None, width="stretch", alt=case.sentence())
    with side_by_side.container(width=385):
        st.markdown(f"**{case.words[2]}**")
        st.table(controls.facts_table(case))
        st.caption("The thick line is the one that fits this ward; the thin ones are what other formulas would say.")
        waited = loaded.waits(case.ward.name, case.rule.hours) if isinstance(case.rule, WaitLimit) else None
        if waited is not None and waited.share_over is not None:
            figures = (waited.share_over, case.share_at(case.ward.beds), case.rule.hours, case.ward.beds)
            st.caption(wording.plain(wording.waits_checked(waited.name, *figures)))
    st.markdown(f"**{case.words[2]}, month by month**")
    months = charts.months_data(case.months(), case.limit())
    st.vega_lite_chart(
        charts.live(charts.MONTHS, months), theme=None, width="stretch", alt=f"{case.words[2]}, month by month"
    )


def simulation(case: WardCase) -> None:
    """Offer to play the ward through patient by patient, and show both figures."""
    with st.expander("Does a simulation agree?"):
        st.caption("Plays about a million patients through this ward, at today's beds and at those by the limit.")
        if not st.button("Run the simulation", key="simulate"):
            return
        counts = sorted({beds for mark, beds in case.marked().items() if beds and mark != "average formula"})
        with st.spinner("Playing the ward through…"):
            checks = [check_by_simulation(case.ward, case.curve, beds) for beds in counts]
        rows = [
            {
                "Staffed beds": str(check.beds),
                f"Formula ({wording.LINES[case.model]})": wording.percent(check.formula, 1),
                "Simulation": wording.percent(check.simulated, 1),
                "95 % range": f"{wording.percent(check.interval[0], 1)} to {wording.percent(check.interval[1], 1)}",
                **(
                    {}
                    if check.if_they_queue is None
                    else {"If they wait in line": wording.percent(check.if_they_queue, 1)}
                ),
            }
            for check in checks
        ]
        st.table(pd.DataFrame(rows).set_index("Staffed beds"))
        st.caption("Share of patients who find no free bed when they come. " + SIMULATED[case.curve.when_full])


controls.show_origin()
try:
    with st.sidebar:
        ward_name = inputs()
except BedplanError as error:
    st.error(wording.plain(str(error)))
    st.stop()
controls.take_in_hand(ward_name)
controls.remember(ward_name, **{key: st.session_state[key] for key in ("beds", "full", *controls.SLIDERS)})
try:
    ward_case = controls.case_of(ward_name)
    answer(ward_case)
    notes(ward_case, controls.settings_of(ward_name))
    simulation(ward_case)
except BedplanError as error:
    st.error(wording.plain(str(error)))
