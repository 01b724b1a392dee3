"""Wards known by typed totals or by a monthly return: taken up, and taken off again."""

from __future__ import annotations

from typing import TYPE_CHECKING

import streamlit as st

from bedplan.errors import BedplanError
from bedplan.pages import controls, loaded

if TYPE_CHECKING:
    from bedplan.plan import Baseline


def use_totals(ward: Baseline) -> None:
    """Plan this ward from typed totals, and show it next."""
    st.session_state["typed"] = st.session_state.get("typed", {}) | {ward.name: ward}
    st.session_state.setdefault("settings", {}).pop(ward.name, None)
    controls.show_ward(ward.name)
    controls.take_in_hand(ward.name)


def remove_totals(name: str) -> None:
    """Take a typed ward off every page; a ward of that name in the records is back."""
    typed = st.session_state.get("typed", {})
    st.session_state["typed"] = {other: base for other, base in typed.items() if other != name}
    st.session_state.get("settings", {}).pop(name, None)
    if st.session_state.get("ward") == name:
        try:
            controls.show_ward(controls.first_shown(controls.ward_names()))
        except BedplanError:
            controls.forget_inputs()


def remove_known() -> None:
    """Take off what a monthly return says of wards that turned out to be wards of the records under another name."""
    here = loaded.files()
    if here.monthly_return is None:
        return
    named = set(here.given["monthly_return"].wards)
    for name in named - set(here.monthly_return.unknown_wards) - set(here.records.wards):
        remove_totals(name)


def offer_removal(name: str) -> None:
    """Draw the button that removes a typed ward; nothing for a ward of the records."""
    if name in st.session_state.get("typed", {}):
        st.button("Remove this ward", key=f"remove_{name}", on_click=remove_totals, args=(name,), width="stretch")
