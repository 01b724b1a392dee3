"""What pages share: the records in this browser tab, each ward's settings, and the inputs of the page One ward.

Nothing here computes a figure: it turns what is on screen into the value objects below, and keeps it between pages.
"""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Any

import pandas as pd
import streamlit as st

from bedplan import wording
from bedplan.decision import OverfullLimit, TurnAwayLimit, WaitLimit
from bedplan.errors import BedplanError, UnreadableRecords
from bedplan.export import WardCase, case_for
from bedplan.pages import loaded
from bedplan.plan import Baseline, Changes, planned_ward

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from bedplan.data import Capacity
    from bedplan.decision import Rule
    from bedplan.pages.loaded import Files

# key -> (label, lowest, highest, start, step, format); whole numbers keep the page's address short
SLIDERS: Mapping[str, tuple[str, int, int, int, int, str]] = {
    "demand": ("Demand", -50, 100, 0, 1, "%+d %%"),
    "stay": ("Mean stay", -50, 100, 0, 1, "%+d %%"),
    "spread": ("Spread of stay", -75, 150, 0, 5, "%+d %%"),
    "peak": ("Season", 0, 250, 100, 5, "%d %% of recorded"),
    "growth": ("Growth of bed-days to next year", -10, 20, 0, 1, "%+d %%"),
}
LIMIT = ("Limit", 1, 20, 5, 1, "%d %%")
# what a limit watches on a ward whose patients wait: key -> (label, the rule it makes)
MEASURES: Mapping[str, tuple[str, Callable[[float, Any], Rule]]] = {
    "full": ("patients who find the ward full", TurnAwayLimit),
    "wait4": ("patients who wait over 4 hours", lambda share, within: WaitLimit(4, share, within)),
    "wait12": ("patients who wait over 12 hours", lambda share, within: WaitLimit(12, share, within)),
    "over": ("hours with more patients than beds", OverfullLimit),
}
WITHIN = {"every_month": "in every month", "year": "over the year"}
FINGERPRINT_SHOWN = 12
FIRST_SHOWN = "Kestrel"  # of the demo; other records start with their first ward
PERSIST: Mapping[str, str] = {"bind": "query-params", "persist_state": "session"}


def _forget_figures() -> None:
    """Forget the inputs of earlier records' wards; settings of typed wards stay."""
    forget_inputs()
    typed = st.session_state.get("typed", {})
    st.session_state["settings"] = {
        name: values for name, values in st.session_state.get("settings", {}).items() if name in typed
    }
    st.session_state.pop("recorded_shares", None)


def use_files(given: Files | None) -> None:
    """Plan with these files from now on, as their records say; None = the demo's."""
    _forget_figures()
    loaded.use(given)
    planned = st.session_state.get("planned")
    if given is not None and planned is not None and planned.records == given.records.fingerprint:
        take_settings(planned.settings)
        st.session_state.pop("planned")
    st.session_state["asked_records"] = loaded.records().fingerprint[:FINGERPRINT_SHOWN]
    st.session_state.pop("asked_ward", None)


def use_files_again(given: Files) -> None:
    """Plan with the same file read another way: what was set stays, what stood as it started starts anew."""
    settings = st.session_state.get("settings", {})
    listed = () if given.capacity is None else given.capacity.wards
    as_started = [
        name for name, values in settings.items() if name not in listed and values.get("beds") == beds_at_start(name)
    ]
    for name in as_started:
        settings[name] = {key: value for key, value in settings[name].items() if key != "beds"}
    loaded.use(given)
    shown = st.session_state.get("ward")
    if shown not in ward_names():
        forget_inputs()
    elif shown in as_started:
        st.session_state.pop("beds", None)


def beds_at_start(name: str) -> int | None:
    """Return the beds a ward starts with, or None where its records don't say."""
    try:
        return baseline(name).beds
    except BedplanError:
        return None


def forget_inputs() -> None:
    """Let the page One ward start anew, on its first ward."""
    for key in (*SLIDERS, "beds", "full", "hidden", "ward"):
        st.session_state.pop(key, None)


def use_capacity(beds: Capacity, content: bytes) -> None:
    """Take today's staffed beds from this file from now on; every other input stays."""
    loaded.use_file(content, "capacity", beds)
    settings, listed = st.session_state.get("settings", {}), loaded.files().capacity.wards
    for name in [name for name in settings if name in listed]:
        settings[name] = settings[name] | {"beds": baseline(name).beds}
    st.session_state.pop("beds", None)


def show_ward(name: str) -> None:
    """Put a ward and its own settings on the page One ward."""
    st.session_state.pop("asked_ward", None)
    st.session_state.update(settings_of(name) | {"ward": name})


def take_settings(saved: Mapping[str, Mapping[str, Any]]) -> None:
    """Take up saved inputs of wards, and the shares of refusals that were written down.

    Raises:
        UnreadableRecords: an input that is not the number or the answer it should be.
    """
    known = {name: inputs_from(values) for name, values in saved.items()}
    st.session_state["settings"] = st.session_state.get("settings", {}) | known
    for name, values in saved.items():
        share = values.get("written")
        if isinstance(share, int | float) and 0.1 <= share <= 1.0:
            loaded.use_recorded_share(name, float(share))


def inputs_from(values: Mapping[str, Any]) -> dict[str, Any]:
    """Return one ward's saved inputs, each inside its bounds.

    Raises:
        UnreadableRecords: an input that is not the number or the answer it should be.
    """
    try:
        sliders = {
            key: min(max(int(values.get(key, start)), low), high)
            for key, (_, low, high, start, _, _) in SLIDERS.items()
        }
        beds = {"beds": min(max(int(values["beds"]), 0), 2000)} if "beds" in values else {}
    except (OverflowError, TypeError, ValueError) as problem:
        raise UnreadableRecords(["The plan file holds a setting that is not a number: save it again."]) from problem
    full = {"full": "leaves" if values["full"] == "leaves" else "waits"} if "full" in values else {}
    return sliders | beds | full | {"hidden": values.get("hidden") is True}


def ward_names() -> list[str]:
    """Return every ward there is a baseline for: those typed as totals first, then those in the records."""
    typed = st.session_state.get("typed", {})
    return [*typed, *(name for name in loaded.records().wards if name not in typed)]


def choose_ward() -> str:
    """Draw the choice of a ward in the sidebar, for pages about the records; the same ward as on the page One ward."""
    names, hand = list(loaded.records().wards), st.session_state.get("in_hand")
    shown = in_hand(names)
    with st.sidebar:
        name = st.selectbox("Ward", names, names.index(shown), key="ward_looked_at")
    if name != shown:
        show_ward(name)
    if name == shown and hand not in names and hand in st.session_state.get("typed", {}):
        st.info(
            f"{wording.plain(hand)} is known by totals only, with no records to look at: this is {wording.plain(name)}."
        )
    else:
        take_in_hand(name)
    return name


def baseline(name: str) -> Baseline:
    """Return where the sliders of a ward start, hidden demand added where the planner asked for it."""
    typed = st.session_state.get("typed", {})
    if name in typed:
        return typed[name]
    return loaded.baseline(name, with_hidden=bool(chosen(name).get("hidden", False)))


def full_at_start(name: str) -> str:
    """Return what patients of a full ward do before anybody said."""
    return "leaves" if loaded.is_demo() and name in loaded.DEMO_LEAVES else "waits"


def starting_values(name: str) -> dict[str, Any]:
    """Return what every input of a ward shows before anything was changed."""
    values: dict[str, Any] = {key: slider[3] for key, slider in SLIDERS.items()}
    return values | {"beds": baseline(name).beds, "full": full_at_start(name), "hidden": False}


def chosen(name: str) -> dict[str, Any]:
    """Return those of a ward's inputs that were kept so far."""
    return st.session_state.setdefault("settings", {}).get(name, {})


def settings_of(name: str) -> dict[str, Any]:
    """Return a ward's inputs as last left, or as they start."""
    return starting_values(name) | chosen(name)


def remember(name: str, **values: Any) -> None:
    """Keep some of a ward's inputs for when the planner comes back to it."""
    st.session_state.setdefault("settings", {})[name] = settings_of(name) | values


def case_of(name: str) -> WardCase:
    """Return one ward's case under its own settings and the limit of this browser tab."""
    values, base = settings_of(name), baseline(name)
    changes = Changes(
        demand=values["demand"] / 100,
        stay=values["stay"] / 100,
        spread=values["spread"] / 100,
        peak=values["peak"] / 100,
        growth=values["growth"] / 100,
    )
    said = "what was asked for, hidden demand included" if values["hidden"] else "recorded admissions"
    settings = (*changes.rows(), ("Planned on", said))
    ward = planned_ward(_as_typed(base, int(values["beds"])), int(values["beds"]), values["full"], changes)
    return case_for(ward, rule_for(ward.when_full), base.facts, settings)


def _as_typed(base: Baseline, beds: int) -> Baseline:
    """Return a baseline without the word that today's beds are not known, once the planner typed them."""
    if wording.BEDS_UNKNOWN not in base.notes:
        return base
    is_typed = base.name in st.session_state.get("typed", {})
    recorded = base.beds if is_typed else loaded.baseline(base.name, with_hidden=False).beds
    if beds in (base.beds, recorded):
        return base
    return replace(base, notes=tuple(note for note in base.notes if note != wording.BEDS_UNKNOWN))


def limit_share() -> float:
    """Return the limit of this browser tab, as a share."""
    return st.session_state.get("limit", LIMIT[3]) / 100


def rule_for(when_full: str) -> Rule:
    """Return the limit of this browser tab for wards whose patients leave, or wait, when they are full."""
    within = st.session_state.get("within", "every_month")
    measure = st.session_state.get("measure", "full") if when_full == "waits" else "full"
    return MEASURES[measure][1](limit_share(), within)


def facts_table(case: WardCase) -> pd.DataFrame:
    """Return a ward's three bed counts side by side, a fact a row."""
    return pd.DataFrame(case.table()).set_index("").T


def show_origin() -> None:
    """Say whose figures these are, and whether the address asks for records that are not loaded."""
    here = loaded.records().fingerprint[:FINGERPRINT_SHOWN]
    asked, ward = st.session_state.get("asked_records", here), st.session_state.get("asked_ward")
    if asked != here:
        st.warning(
            f"This address was made with records {wording.plain(asked)}, which are not loaded: the figures below come from "
            f"{wording.plain(loaded.records().name)} ({here}). Load those records on the page Records."
        )
    elif ward is not None and ward not in ward_names():
        st.warning(
            f"This address was made for {wording.plain(ward)}, which is not here: the figures below are of another ward. Type "
            "its totals, or open its plan, on the page Records."
        )
    elif loaded.is_demo():
        st.caption("The invented Larkmere hospital. Load your own records on the page Records.")


def warn_of_beds(cases: list[WardCase]) -> None:
    """Say which of these wards' beds today are not known, and where to type them."""
    names = [case.ward.name for case in cases if not case.beds_are_known]
    if names:
        shown = names if len(names) <= 5 else [*names[:4], f"{len(names) - 4} more wards"]
        st.warning(f"{wording.plain(', '.join(shown))}: {wording.BEDS_UNKNOWN} Type them on the page One ward.")


def take_in_hand(name: str) -> None:
    """Keep which ward the planner is looking at, for the other pages."""
    st.session_state["in_hand"] = name


def in_hand(names: list[str]) -> str:
    """Return the ward the planner looked at last, or the one to start with."""
    shown = st.session_state.get("in_hand")
    return shown if shown in names else first_shown(names)


def first_shown(names: list[str]) -> str:
    """Return the ward that is shown before anyone was chosen."""
    return FIRST_SHOWN if FIRST_SHOWN in names else names[0]
