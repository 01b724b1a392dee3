"""What is loaded in this browser tab, and what was worked out from it: the planner's own files, or the demo's.

Patient rows live in the memory of one browser tab only. What is worked out is kept beside them, once for the demo, which is
nobody's, and for each tab apart otherwise.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

import streamlit as st

from bedplan import wording
from bedplan.data import (
    Capacity,
    Census,
    EventLog,
    Records,
    adds_up,
    backtest,
    describe_ward,
    estimate_demand,
    forecast_arrivals,
    hidden_demand,
    past_years,
    read_cancellations,
    read_capacity,
    read_census,
    read_records,
    read_refusals,
    stay_families,
    waits_for_a_bed,
    what_repairs_change,
)
from bedplan.data.beside.linking import likely_links
from bedplan.errors import UnreadableRecords
from bedplan.pages import said
from bedplan.plan import Answers, Baseline, from_estimate

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from bedplan.data import (
        Backtest,
        BedWaits,
        Check,
        Forecast,
        HiddenDemand,
        MonthlyReturn,
        PastYear,
        RepairEffect,
        StayFamilies,
        WardDescription,
        WardLink,
    )

DEMO = Path(__file__).resolve().parents[2] / "demo_data"
OTHER_FILES: Mapping[str, str] = {
    "capacity": "Staffed beds",
    "refusals": "Patients not given a bed",
    "cancellations": "Cancelled booked patients",
    "census": "Census",
    "bed_requests": "Bed requests",
    "monthly_return": "Monthly return",
}
DEMO_FILES = ("capacity", "refusals", "cancellations", "census")
MARKED = {**OTHER_FILES, "ready": "Ready dates"}
# What the wards of the invented demo hospital do when full, and the share of their refusals that is written down;
# for other records the planner answers.
DEMO_LEAVES = frozenset({"Merlin", "Curlew", "Dunlin", "Sandpiper"})
DEMO_RECORDED_SHARES: Mapping[str, float] = {"Curlew": 0.6, "Dunlin": 0.6}


@dataclass(frozen=True)
class Files:
    """Every file the planner plans with; ``marks`` = (what, name and SHA-256) of those beside the records.

    ``content`` is the records' file, to read it again; ``answers`` is how it was read. ``given``: the other files with their
    wards as they name them; beside it they stand with the names that the records have.
    """

    records: Records
    capacity: Capacity | None = None
    refusals: EventLog | None = None
    cancellations: EventLog | None = None
    census: Census | None = None
    bed_requests: EventLog | None = None
    monthly_return: MonthlyReturn | None = None
    marks: tuple[tuple[str, str], ...] = ()
    content: bytes = b""
    answers: Answers = field(default_factory=Answers)
    given: Mapping[str, Any] = field(default_factory=dict)

    def linked(self) -> Files:
        """Return these files with the wards of the others named as the records name them."""
        return replace(self, **{kind: one.linked_to(self.records) for kind, one in self.given.items()})

    def marked(self, kind: str, name: str, content: bytes) -> Files:
        """Return these files with one more named for the document.

        Raises:
            UnreadableRecords: the same file is in use already, for something else: it would count twice.
        """
        what, value = _mark(kind, name, content)
        mark = value[-64:]
        for other, known in {"Ward stays": self.records.fingerprint, **dict(self.marks)}.items():
            if known.endswith(mark) and other != what:
                raise UnreadableRecords([f"{name} is in use already, as “{other}”: choose another file here."])
        return replace(self, marks=tuple({**dict(self.marks), what: value}.items()))


@st.cache_resource(max_entries=1, show_spinner="Opening the Larkmere demo…")
def _demo() -> tuple[Files, dict[tuple[str, ...], Any]]:
    files = Files(
        records=read_records(DEMO / "stays.csv"),
        capacity=read_capacity(DEMO / "capacity.csv"),
        refusals=read_refusals(DEMO / "refusals.csv"),
        cancellations=read_cancellations(DEMO / "cancellations.csv"),
        census=read_census(DEMO / "census.csv"),
        marks=tuple(_mark(kind, f"{kind}.csv", (DEMO / f"{kind}.csv").read_bytes()) for kind in DEMO_FILES),
    )
    return files, {}


def is_demo() -> bool:
    """Whether the figures on screen are the invented hospital's."""
    return st.session_state.get("files") is None


def files() -> Files:
    """Return the files of this browser tab, or the demo's."""
    return _demo()[0] if is_demo() else st.session_state["files"]


def records() -> Records:
    """Return the records of this browser tab, or the demo's."""
    return files().records


def use(given: Files | None) -> None:
    """Plan with these files from now on; None = the demo's, and what was said of the others is forgotten."""
    if given is None:
        said.forget()
    st.session_state["files"] = given
    st.session_state["worked_out"] = {}


def use_file(content: bytes, kind: str, found: Capacity | EventLog | Census | MonthlyReturn) -> None:
    """Add a file beside the planner's records.

    Raises:
        UnreadableRecords: the same file is in use already, for something else.
    """
    here = files().marked(kind, found.name, content)
    use(replace(here, given={**here.given, kind: found}).linked())


def use_reasons(kind: str, reasons: tuple[str, ...]) -> None:
    """Take the planner's word for which reasons in a list mean that no bed was free."""
    here, mark = files(), fingerprint_of(kind)
    said.keep(mark, replace(said.of(mark), no_bed_reasons=reasons))
    log = replace(here.given[kind], no_bed_reasons=reasons)
    use(replace(here, given={**here.given, kind: log}).linked())


def fingerprint_of(kind: str) -> str:
    """Return the fingerprint of a file beside the records."""
    return dict(files().marks)[OTHER_FILES[kind]][-64:]


def without_stays() -> tuple[str, ...]:
    """Say which wards of the other files have no stays in the records, so that nothing is left out silently."""
    here = files()
    kinds = [kind for kind in here.given if kind != "monthly_return"]  # its wards are planned by its averages
    planned = st.session_state.get("typed", {})  # by a census and a mean stay, so that its rows are used
    unused = [
        (
            here.given[kind].name,
            [one for one in getattr(here, kind).unknown_wards if kind != "census" or one not in planned],
        )
        for kind in kinds
    ]
    return tuple(wording.not_used(name, wards) for name, wards in unused if wards)


def links() -> tuple[WardLink, ...]:
    """Return which names, in the records and in the files beside them, may be one ward."""
    here = files()
    unknown = dict.fromkeys(ward for kind in here.given for ward in getattr(here, kind).unknown_wards)
    return (*here.records.links, *likely_links(unknown, here.records))


def _mark(kind: str, name: str, content: bytes) -> tuple[str, str]:
    """Return (what, name and fingerprint) of a file for the document."""
    return MARKED[kind], f"{name}, SHA-256 {said.mark_of(content)}"


def recorded_share(name: str) -> float:
    """Return the share of a ward's refusals that is written down, as the planner said."""
    return st.session_state.setdefault("recorded_shares", {}).get(name, share_at_start(name))


def share_at_start(name: str) -> float:
    """Return that share before anybody said."""
    return DEMO_RECORDED_SHARES.get(name, 1.0) if is_demo() else 1.0


def use_recorded_share(name: str, share: float) -> None:
    """Take the planner's word for the share of refusals that is written down."""
    st.session_state.setdefault("recorded_shares", {})[name] = share


def _once(key: tuple[str, ...], work_out: Callable[[], Any]) -> Any:
    """Return what was worked out before under this key, or work it out now."""
    kept = _demo()[1] if is_demo() else st.session_state.setdefault("worked_out", {})
    if key not in kept:
        kept[key] = work_out()
    return kept[key]


def repairs() -> tuple[RepairEffect, ...]:
    """Return how far the repaired rows carry each ward's answer."""
    return _once(("repairs",), lambda: what_repairs_change(records()))


def checks() -> tuple[Check, ...]:
    """Return whether the figures of the files agree."""
    here = files()
    return _once(("adds up",), lambda: adds_up(here.records, here.census, here.monthly_return))


def description(name: str) -> WardDescription:
    """Return what a ward was like."""
    here = files()
    return _once(("description", name), lambda: describe_ward(here.records, name, here.capacity))


def hidden(name: str) -> HiddenDemand:
    """Return the demand a ward's records do not show."""
    here, share = files(), recorded_share(name)
    lists = tuple(one for one in (here.refusals, here.cancellations) if one is not None)
    if here.bed_requests is not None and not lists:
        lists = (here.bed_requests,)  # most of them had a bed: the page says why they can't be used
    return _once(
        ("hidden", name, f"{share:.2f}"),
        lambda: hidden_demand(here.records, name, capacity=here.capacity, refusals=lists, share_recorded=share),
    )


def forecast(name: str) -> Forecast:
    """Return a ward's next ten years, should it go on as before."""
    return _once(("forecast", name), lambda: forecast_arrivals(files().records, name, horizon_days=10 * 365))


def past(name: str) -> tuple[PastYear, ...]:
    """Return what each year of a ward's records held."""
    return _once(("past", name), lambda: past_years(files().records, name))


def stays(name: str) -> StayFamilies:
    """Return which family of curves a ward's stays follow."""
    return _once(("stays", name), lambda: stay_families(files().records, name))


def waits(name: str, limit_hours: float) -> BedWaits | None:
    """Return how long patients waited for a ward's beds, None where no list of bed requests tells."""
    log = files().bed_requests
    if log is None or name not in log.wards or "wait_hours" not in log.table:
        return None
    return waits_for_a_bed(log, name, limit_hours)


def checked(name: str) -> Backtest:
    """Return the check of a ward's earlier records on its last year."""
    here = files()
    return _once(("checked", name), lambda: backtest(here.records, name, capacity=here.capacity))


def baseline(name: str, *, with_hidden: bool) -> Baseline:
    """Return where a ward's sliders start: what its records show, hidden demand added where the planner asked."""
    here = files()
    found = hidden(name) if with_hidden else None
    key = ("baseline", name, f"{recorded_share(name):.2f}" if with_hidden else "recorded")

    def work_out() -> Baseline:
        """Estimate the demand, and put the sliders where it says."""
        estimate = estimate_demand(here.records, name, capacity=here.capacity, hidden=found)
        return from_estimate(estimate, _beds_today(here.capacity, name), found)

    return _once(key, work_out)


def _beds_today(capacity: Capacity | None, name: str) -> int | None:
    """Return today's staffed beds from the capacity file, or None where they must be typed."""
    return capacity.beds_today(name) if capacity is not None and name in capacity.wards else None
