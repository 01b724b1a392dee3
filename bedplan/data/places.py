"""Which places in a file are wards with beds, and which are theatres, lounges, cots or homes?"""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.columns import plain
from bedplan.data.dates import DAY_SECONDS

if TYPE_CHECKING:
    from collections.abc import Mapping

    import pandas as pd

    from bedplan.data.rows import Rows

BED_WARD = "bed ward"
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


def set_places_aside(
    rows: Rows, wards: tuple[str, ...], classes: pd.Categorical | None, chosen: Mapping[str, str]
) -> dict[str, str]:
    """Set aside stays in places without ward beds, and patients who are counted apart; return each ward's kind."""
    kinds = {ward: chosen.get(ward, kind_of_place(ward)) for ward in wards}
    for kind in PLACE_NAMES:
        codes = [place for place, ward in enumerate(wards) if kinds[ward] == kind]
        if codes:
            rows.mark(rows.live & np.isin(rows.ward, codes), kind)
    if classes is None:
        _set_regulars_aside(rows)
        return kinds
    for key, names in (
        ("regular", REGULAR_CLASSES),
        ("delivery", DELIVERY_CLASSES),
        ("cot", COT_CLASSES),
        ("virtual", VIRTUAL_CLASSES),
    ):
        codes = [place for place, name in enumerate(classes.categories) if plain(name) in names]
        if codes:
            rows.mark(rows.live & np.isin(classes.codes, codes), key)
    return kinds


def _set_regulars_aside(rows: Rows) -> None:
    """Without a class column, patients with a dozen short stays on one ward are taken for regular attenders."""
    live = np.flatnonzero(rows.live & ~rows.is_open)
    short = live[rows.end[live] - rows.start[live] <= SAME_DAY_SECONDS]
    if short.size < REGULAR_VISITS:
        return
    pair = rows.patient[short] * np.int64(2**20) + rows.ward[short]
    _, place, visits = np.unique(pair, return_inverse=True, return_counts=True)
    rows.mark(short[visits[place] >= REGULAR_VISITS], "regular")
