"""The page's address: taken up once as a browser tab opens, and kept on every page, so that a reload changes nothing.

On the page One ward its inputs keep themselves there (``bind``), all but three whose labels are too long; elsewhere they are
not drawn, so they are written here. An address holds the ward in hand, its settings and the limit; other wards' settings
are kept by a plan file.
"""

from __future__ import annotations

import contextlib
from typing import TYPE_CHECKING

import streamlit as st
from streamlit.errors import StreamlitAPIException
from streamlit.runtime.scriptrunner import get_script_run_ctx

from bedplan import wording
from bedplan.pages import controls, loaded

if TYPE_CHECKING:
    from collections.abc import Mapping

# input -> its codes in an address, and the labels that earlier addresses held instead
CODES: Mapping[str, Mapping[str, str]] = {
    "full": wording.WHEN_WARD_IS_FULL,
    "within": controls.WITHIN,
    "measure": {code: label for code, (label, _) in controls.MEASURES.items()},
}
UNBOUND = ("records", *CODES, "written", "justified")
BOUND = ("ward", "beds", "limit", "hidden", *controls.SLIDERS)


def take_up() -> None:
    """Take up what the address says, once; what can't be is left aside."""
    if st.session_state.get("address_taken"):
        _keep_what_is_set()
        return
    st.session_state["address_taken"] = True
    asked = st.query_params.to_dict()
    here = loaded.records().fingerprint[: controls.FINGERPRINT_SHOWN]
    st.session_state["asked_records"] = asked.get("records", here)
    codes = {key: _code(key, asked[key]) for key in CODES if key in asked}
    st.session_state.update({key: code for key, code in codes.items() if code is not None})
    names = controls.ward_names()
    name = asked.get("ward", controls.in_hand(names))
    if name not in names:
        st.session_state["asked_ward"] = name
        return
    _take_lists(name, names, asked)
    _take_inputs(name, asked)


def _keep_what_is_set() -> None:
    """Leave every input as it is where the Back button leads to an address that holds none of them.

    The server makes such an address as a page is left. Back on it, inputs would start anew; in a run that it did not ask
    for they keep what they hold, and put it into the address.
    """
    run = get_script_run_ctx()
    if run is not None and run.is_history_navigation and "records" not in st.query_params:
        st.rerun()


def _take_lists(name: str, names: list[str], asked: Mapping[str, str]) -> None:
    """Take up the share of refusals written down, and the wards in the justification."""
    written = _whole(asked.get("written"), 10, 100)
    if written is not None:
        loaded.use_recorded_share(name, written / 100)
    justified = [one for one in st.query_params.get_all("justified") if one in names]
    if justified:
        st.session_state.update({"justified": justified, "justified_for": name})


def _take_inputs(name: str, asked: Mapping[str, str]) -> None:
    """Take up the inputs, before the page One ward draws them with what they mean in their labels."""
    bounds = {key: slider[1:3] for key, slider in controls.SLIDERS.items()} | {"beds": (0, 2000)}
    found = {key: _whole(asked.get(key), *span) for key, span in bounds.items()}
    values = {key: value for key, value in found.items() if value is not None}
    if asked.get("hidden") == "true":
        values["hidden"] = True
    if "full" in st.session_state:
        values["full"] = st.session_state["full"]
    limit = _whole(asked.get("limit"), *controls.LIMIT[1:3])
    if limit is not None:
        st.session_state["limit"] = limit
    st.session_state.setdefault("settings", {})[name] = values
    st.session_state.update(values | {"ward": name})
    controls.take_in_hand(name)


def keep(*, on_one_ward: bool) -> None:
    """Put what is set into the address, where it is not there already."""
    wanted = _unbound() if on_one_ward else _unbound() | _bound()
    ours = UNBOUND if on_one_ward else (*UNBOUND, *BOUND)
    there = {key: st.query_params.get_all(key) for key in ours if key in st.query_params}
    for key in there.keys() - wanted.keys():
        del st.query_params[key]
    changed = {key: values for key, values in wanted.items() if there.get(key) != values}
    # An input of the page just left may hold its place for one run more; what it holds is as it started.
    with contextlib.suppress(StreamlitAPIException):
        if changed:
            st.query_params.update(changed)


def _unbound() -> dict[str, list[str]]:
    """Return what no input keeps in the address by itself; what stands as it starts is left out."""
    name = controls.in_hand(controls.ward_names())
    full, within, measure = (controls.chosen(name).get("full"), *map(st.session_state.get, ("within", "measure")))
    share = st.session_state.get("recorded_shares", {}).get(name)
    justified = st.session_state.get("justified", [])
    kept = {
        "records": loaded.records().fingerprint[: controls.FINGERPRINT_SHOWN],
        "full": None if full == controls.full_at_start(name) else full,
        "within": None if within == "every_month" else within,
        "measure": None if measure == "full" else measure,
        "written": None if share in (None, loaded.share_at_start(name)) else f"{100 * share:.0f}",
    }
    values = {key: [value] for key, value in kept.items() if value is not None}
    return values | ({"justified": justified} if justified not in ([], [name]) else {})


def _bound() -> dict[str, list[str]]:
    """Return what the inputs of the page One ward would keep in the address: all that is not as it starts."""
    names = controls.ward_names()
    name = controls.in_hand(names)
    chosen = controls.chosen(name)
    starts = {key: slider[3] for key, slider in controls.SLIDERS.items()} | {"limit": controls.LIMIT[3]}
    if "beds" in chosen:
        starts["beds"] = controls.beds_at_start(name)
    now = dict(chosen) | ({"limit": st.session_state["limit"]} if "limit" in st.session_state else {})
    values = {key: [str(now[key])] for key, start in starts.items() if now.get(key, start) != start}
    ward = {} if name == controls.first_shown(names) else {"ward": [name]}
    return values | ward | ({"hidden": ["true"]} if chosen.get("hidden") else {})


def _code(key: str, asked: str) -> str | None:
    """Return the code that an address means: the code itself, or the label it held earlier."""
    return next((code for code, label in CODES[key].items() if asked in (code, label)), None)


def _whole(asked: str | None, low: int, high: int) -> int | None:
    """Return a whole number within its bounds, or nothing."""
    try:
        value = int(asked or "")
    except ValueError:
        return None
    return value if low <= value <= high else None
