"""bedplan: how many staffed beds each ward needs, from its own records.

    records ──► demand ──► model ──► bed curve ──► decision ──► justification
    data        models     models    models        decision     export           pages show it and let you change it

The public names can be had from here; each is loaded when it is first asked for.
"""

from __future__ import annotations

import importlib
from typing import Any

_HOMES = {
    "bedplan.models": (
        "MODELS BedCurve BookedList Demand LengthOfStay average_beds erlang_b erlang_b_log erlang_c "
        "offered_load_by_hour simulate_ward"
    ),
    "bedplan.data": "backtest estimate_demand read_records",
    "bedplan.decision": (
        "OccupancyLimit OverfullLimit TurnAwayLimit WaitLimit Ward compare_wards decide pool_wards share_beds"
    ),
    "bedplan.export": "Justification as_html as_xlsx",
    "bedplan.errors": "BedplanError ImpossibleFigure TargetOutOfReach UnreadableRecords",
}
_HOME_OF = {name: home for home, names in _HOMES.items() for name in names.split()}


def __getattr__(name: str) -> Any:
    """Return a public name from the part it lives in."""
    if name not in _HOME_OF:
        raise AttributeError(f"bedplan has no public name {name!r}")
    return getattr(importlib.import_module(_HOME_OF[name]), name)


def __dir__() -> list[str]:
    """Return every public name."""
    return sorted(_HOME_OF)
