"""Which places in a file are wards with beds, and which are theatres, lounges, cots or homes?"""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.choices import HELD
from bedplan.data.columns import plain
from bedplan.data.dates import DAY_SECONDS

if TYPE_CHECKING:
    from collections.abc import Mapping

    import pandas as pd
    from numpy.typing import NDArray

    from bedplan.data.rows import Rows

BED_WARD, LEAVE = "bed ward", "leave"
# Kind of place -> how such places are called; the first kind that fits counts. Common practice, no source.
PLACE_NAMES = {
    "virtual": r"virtual|hospital at home|h@h|hith|remote monitoring",
    "leave": r"(home|weekend|ward) leave|on leave",
    "cot": r"well bab(y|ies)|healthy newborn|\bcots?\b|transitional nursery",
    "delivery": r"delivery (suite|unit|room)|labou?r (ward|suite|room)|birth(ing)? (centre|center|suite|unit)",
    "procedure place": (
        r"theatre|\boperating\b|\brecovery\b|x-?ray|radiolog|imaging|endoscop|cath(eter)? lab|discharge (lounge|area)"
        r"|departure lounge|transit lounge|out-?patient|plaster room"
    ),
    "waiting place": (
        r"emergency (department|room|dept)|accident (and|&) emergency|\ba ?& ?e\b|^ed$|^er$|awaiting (a )?bed"
        r"|waiting (room|area)|decision to admit"
    ),
}
REGULAR_CLASSES = ("3", "4", "regularday", "regularnight", "regulardayattender", "regularnightattender", "regular")
DELIVERY_CLASSES = ("5", "motherandbabyusingdeliveryfacilitiesonly", "deliveryonly", "deliveryfacilitiesonly")
COT_CLASSES = ("wellbaby", "healthynewborn", "newborn", "wellbabycot")
VIRTUAL_CLASSES = ("virtualward", "virtual", "hospitalathome")
REGULAR_VISITS = 12  # same-day stays of one patient on one ward, from which they are a regular attender
SAME_DAY_SECONDS = DAY_SECONDS // 2


def kind_of_place(ward: str) -> str:
    """What is this place, by its name?"""
    name = ward.casefold()
    return next((kind for kind, pattern in PLACE_NAMES.items() if re.search(pattern, name)), BED_WARD)


def kinds_of_places(wards: tuple[str, ...], chosen: Mapping[str, str]) -> dict[str, str]:
    """What is each of these places: what a person said, else what its name says?"""
    return {ward: chosen.get(ward, kind_of_place(ward)) for ward in wards}


def leave_note(rows: Rows, is_leave: NDArray[np.bool_], bed_on_leave: str | None) -> list[str]:
    """Ask whether beds are held during leave, where there is leave and nobody said."""
    if bed_on_leave is not None or not is_leave[rows.ward[rows.live]].any():
        return []
    said = "nobody said whether their bed is held or given away: it is counted as given away"
    return [f"Patients go on leave, and {said}. If it is held, more beds are in use than counted here."]


def set_places_aside(
    rows: Rows, kinds: Mapping[str, str], classes: pd.Categorical | None, bed_on_leave: str | None = None
) -> None:
    """Set aside stays in places without ward beds, and patients who are counted apart; ``kinds`` in order of ward codes."""
    for kind in PLACE_NAMES:
        codes = [place for place, other in enumerate(kinds.values()) if other == kind]
        if codes:
            rule = "leave, ward unknown" if kind == LEAVE and bed_on_leave == HELD else kind
            rows.mark(rows.live & np.isin(rows.ward, codes), rule)
    if classes is None:
        _set_regulars_aside(rows)
        return
    for key, names in (
        ("regular", REGULAR_CLASSES),
        ("delivery", DELIVERY_CLASSES),
        ("cot", COT_CLASSES),
        ("virtual", VIRTUAL_CLASSES),
    ):
        codes = [place for place, name in enumerate(classes.categories) if plain(name) in names]
        if codes:
            rows.mark(rows.live & np.isin(classes.codes, codes), key)


def _set_regulars_aside(rows: Rows) -> None:
    """Without a class column, patients with a dozen short stays on one ward are taken for regular attenders."""
    live = np.flatnonzero(rows.live & ~rows.is_open)
    short = live[rows.end[live] - rows.start[live] <= SAME_DAY_SECONDS]
    if short.size < REGULAR_VISITS:
        return
    pair = rows.patient[short] * np.int64(2**20) + rows.ward[short]
    _, place, visits = np.unique(pair, return_inverse=True, return_counts=True)
    rows.mark(short[visits[place] >= REGULAR_VISITS], "regular")
