"""Wards planned by averages, where there are no ward stays: from a monthly return, or from a census and a mean stay."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import streamlit as st

from bedplan import wording
from bedplan.data import read_monthly_return
from bedplan.errors import BedplanError
from bedplan.pages import loaded, said, typed
from bedplan.plan import as_totals, from_census, from_return

if TYPE_CHECKING:
    from bedplan.data import Census
    from bedplan.pages.intake import Given
    from bedplan.plan import Baseline


def take_return(given: Given) -> list[str]:
    """Make a ward to plan of each ward in a monthly return that the planner's records don't hold."""
    answers = given.answers
    returned = read_monthly_return(
        given.content, name=given.name, months_a_row=answers.months_a_row, **answers.to_read()
    )
    if not loaded.is_demo():
        loaded.use_file(given.content, "monthly_return", returned)
        returned = loaded.files().monthly_return
    made, told = [], [*returned.report.sentences, *returned.report.notes]
    how_read = tuple((what, value, given.name) for what, value in answers.rows("Monthly return"))
    known = () if loaded.is_demo() else set(returned.wards) - set(returned.unknown_wards)
    for ward in sorted(set(returned.wards) - set(known)):
        try:
            base = from_return(returned, ward)
            made.append(replace(base, facts=(*base.facts, *how_read)))
        except BedplanError as error:
            told.append(f"{ward}: {error}")
    use_made(said.mark_of(given.content), made)
    if known:
        told.append("Wards that have ward stays were left as they are: stays say more than a return.")
    return [ready_text(len(made)), *told]


def use_made(mark: str, made: list[Baseline]) -> None:
    """Plan these wards of a return; those that the same file made when it was read another way are taken off."""
    before, wards = st.session_state.get("made_of_return", ("", ()))
    here = st.session_state.get("typed", {})
    for ward in wards if before == mark else ():
        if here.get(ward.name) == ward and ward.name not in {one.name for one in made}:
            typed.remove_totals(ward.name)
    for ward in made:
        known = here.get(ward.name)
        if known is None or as_totals(known) != as_totals(ward):
            typed.use_totals(ward)
        else:  # one that was here already, or in a plan, keeps its settings
            st.session_state["typed"] |= {ward.name: ward}
    st.session_state["made_of_return"] = (mark, tuple(made))


def plan_by_census() -> None:
    """Ask how long patients stay on wards that have a census but no ward stays, and plan those wards by it."""
    if st.session_state.get("census_file") is None or st.session_state["census_told"].refused:
        return
    census = st.session_state.get("census_alone") if loaded.is_demo() else loaded.files().census
    wards = () if census is None else census.wards if loaded.is_demo() else census.unknown_wards
    if not wards:
        return
    with st.form("census_wards", border=False):
        st.caption(
            "A census can't tell how long patients stay. Type the mean stay, in days, of each ward to plan by it."
        )
        stays = {ward: st.number_input(ward, 0.1, 400.0, None, 0.1, key=f"census_stay_{ward}") for ward in wards}
        if st.form_submit_button("Plan these wards"):
            use_census_wards(census, {ward: stay for ward, stay in stays.items() if stay is not None})


def use_census_wards(census: Census, mean_stay_days: dict[str, float]) -> None:
    """Plan these wards by a census and a mean stay; say what can't be planned."""
    made = 0
    for ward, days in mean_stay_days.items():
        try:
            typed.use_totals(from_census(census, ward, days))
            made += 1
        except BedplanError as error:
            st.error(wording.plain(f"{ward}: {error}"))
    if made:
        st.caption(ready_text(made))


def ready_text(wards: int) -> str:
    """Say how many wards of averages are ready to plan."""
    return f"{'1 ward is' if wards == 1 else f'{wards} wards are'} ready on the page One ward, from averages only."
