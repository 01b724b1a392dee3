"""The plan of this browser tab as a file, and a plan file taken up again."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import streamlit as st

from bedplan.pages import controls, loaded, said
from bedplan.plan import SavedPlan, as_json, as_totals, from_saved_totals

if TYPE_CHECKING:
    from collections.abc import Mapping

    from bedplan.plan import Answers, FileAnswers


def plan_as_json() -> str:
    """Return the plan of this browser tab as a file's text."""
    typed = {name: as_totals(base) for name, base in st.session_state.get("typed", {}).items()}
    written = st.session_state.get("recorded_shares", {})
    shares = {name: {"written": share} for name, share in written.items() if share != loaded.share_at_start(name)}
    inputs = st.session_state.get("settings", {})
    settings = {name: inputs.get(name, {}) | shares.get(name, {}) for name in (*inputs, *shares)}
    limit = {key: st.session_state[key] for key in ("limit", "within", "measure") if key in st.session_state}
    return as_json(
        SavedPlan(loaded.records().fingerprint, settings, typed, loaded.files().answers, limit, said.everything())
    )


def answers_for(content: bytes) -> Answers | None:
    """Return how a saved plan read exactly this file, where one is waiting for it."""
    planned = st.session_state.get("planned")
    return planned.answers if planned is not None and is_of(planned, content) else None


def is_of(plan: SavedPlan, content: bytes) -> bool:
    """Whether a plan was made with exactly this file."""
    return plan.records == said.mark_of(content)


def use_plan(plan: SavedPlan) -> None:
    """Take up the settings of a saved plan; they wait for the records it was made with.

    Raises:
        ImpossibleFigure: typed totals outside their meaning.
        UnreadableRecords: an input that is not the number or the answer it should be.
    """
    typed = {name: from_saved_totals(name, row) for name, row in plan.typed.items()}
    for values in plan.settings.values():
        controls.inputs_from(values)
    st.session_state["typed"] = st.session_state.get("typed", {}) | typed
    st.session_state.update(_limit(plan.limit))
    _take_said(plan.files)
    if plan.records == loaded.records().fingerprint:
        controls.take_settings(plan.settings)
        shown = st.session_state.get("ward")
        if shown in plan.settings:
            controls.show_ward(shown)
    else:
        st.session_state["planned"] = plan


def _take_said(planned: Mapping[str, FileAnswers]) -> None:
    """Take up what a plan says of files beside the stays; it waits for exactly the files that it was said of."""
    for mark, answers in planned.items():
        said.keep(mark, answers)
    for kind in loaded.files().given:
        reasons = said.of(loaded.fingerprint_of(kind)).no_bed_reasons
        if reasons is not None:
            loaded.use_reasons(kind, reasons)


def _limit(saved: Mapping[str, Any]) -> dict[str, Any]:
    """Return the saved limit's inputs that can be what they say; the others stay as they are."""
    share, within, measure = saved.get("limit"), saved.get("within"), saved.get("measure")
    low, high = controls.LIMIT[1:3]
    kept: dict[str, Any] = {"limit": share} if isinstance(share, int) and low <= share <= high else {}
    kept |= {"within": within} if within in controls.WITHIN else {}
    return kept | ({"measure": measure} if measure in controls.MEASURES else {})
