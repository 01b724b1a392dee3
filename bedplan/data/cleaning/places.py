"""Which places in a file are wards with beds, and which are theatres, lounges, cots or homes?"""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.files.blocks import in_blocks
from bedplan.data.files.columns import plain
from bedplan.data.files.dates import DAY_SECONDS, MISSING, UNREADABLE
from bedplan.data.files.rules import CODES
from bedplan.data.values.choices import HELD
from bedplan.wording import PLACES, few

if TYPE_CHECKING:
    from collections.abc import Mapping

    import pandas as pd
    from numpy.typing import NDArray

    from bedplan.data.values.rows import Rows

BED_WARD, LEAVE = "bed ward", "leave"
PASSED_THROUGH = ("procedure place", "waiting place")
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
# Words that wards have in their names: with one of them, only short stays make a theatre or a waiting place of it.
WARD_WORDS = re.compile(r"\b(ward|unit|stroke|acute|rehab\w*|enhanced|intensive|high|hdu|icu|bay|centre|center)\b")
RECOVERY = re.compile(r"recovery")
RECOVERY_ROOM = re.compile(
    r"((main|operating|theatres?|surgical|post-?op\w*|day surgery) )*recovery( room| area)?( \w{1,2})?|.*theatre.*"
)
SHORT_SECONDS = 6 * 3_600  # the median stay of places patients only pass through
FEWEST_SHORT = 20
MOSTLY, NEARLY_ALL = 0.5, 0.8  # of a place's stays
NEIGHBOUR_SECONDS = 3_600
REGULAR_CLASSES = ("3", "4", "regularday", "regularnight", "regulardayattender", "regularnightattender", "regular")
DELIVERY_CLASSES = ("5", "motherandbabyusingdeliveryfacilitiesonly", "deliveryonly", "deliveryfacilitiesonly")
COT_CLASSES = ("wellbaby", "healthynewborn", "newborn", "wellbabycot")
VIRTUAL_CLASSES = ("virtualward", "virtual", "hospitalathome")
REGULAR_VISITS = 12  # same-day stays of one patient on one ward, from which they are a regular attender
SAME_DAY_SECONDS = DAY_SECONDS // 2


def kind_of_place(ward: str) -> str:
    """What is this place, by its name alone?"""
    kind = _named_kind(ward)
    return BED_WARD if kind in PASSED_THROUGH and _is_doubtful(ward) else kind


def _named_kind(ward: str) -> str:
    """Return the first kind of place that the name reminds of."""
    name = ward.casefold()
    return next((kind for kind, pattern in PLACE_NAMES.items() if re.search(pattern, name)), BED_WARD)


def _is_doubtful(ward: str) -> bool:
    """May a place that is called so be a ward?"""
    name = ward.casefold()
    return bool(WARD_WORDS.search(name) or (RECOVERY.search(name) and not RECOVERY_ROOM.fullmatch(name)))


def kinds_of_places(
    rows: Rows, order: NDArray[np.int64], wards: tuple[str, ...], chosen: Mapping[str, str], *, has_times: bool
) -> dict[str, str]:
    """What is each of these places: what a person said, else what its name and its stays say? ``order``: by patient.

    A name that a ward could have makes a theatre or a waiting place only where most stays are shorter than 6 hours; any
    name does where, besides, nearly all patients come from another ward and go on to one within the hour. Where
    most stays in a place with the name of a theatre last more than a day, it is a ward.

    Checked by: tests/data/cleaning/test_places.py
    """
    kinds = {ward: chosen.get(ward, kind_of_place(ward)) for ward in wards}
    if not has_times:
        return kinds
    stays, short, long = _by_length(rows, len(wards))
    mostly = short > MOSTLY * stays
    for code, ward in enumerate(wards):
        if ward in chosen:
            continue
        if kinds[ward] in PASSED_THROUGH and stays[code] >= FEWEST_SHORT and long[code] > MOSTLY * stays[code]:
            kinds[ward] = BED_WARD
        elif kinds[ward] == BED_WARD and mostly[code] and _named_kind(ward) in PASSED_THROUGH:
            kinds[ward] = _named_kind(ward)
        elif kinds[ward] == BED_WARD and mostly[code] and stays[code] >= FEWEST_SHORT:
            kinds[ward] = "procedure place" if _on_the_way(rows, order, code) else BED_WARD
    return kinds


def _by_length(rows: Rows, wards: int) -> NDArray[np.int64]:
    """Return how many finished stays each ward has, how many shorter than 6 hours, how many longer than a day."""

    def count(block: slice) -> NDArray[np.int64]:
        """Count one block."""
        ward, start, end = rows.ward[block], rows.start[block], rows.end[block]
        known = (end >= start) & (start > UNREADABLE) & ~rows.aside[block] & (ward >= 0)
        stay = np.where(known, end, 0) - np.where(known, start, 0)
        length = (stay >= SHORT_SECONDS).astype(np.int64) + (stay > DAY_SECONDS)  # 0 short, 1 between, 2 long
        return np.bincount(3 * np.where(known, ward, wards) + length, minlength=3 * wards + 3)

    counts = np.sum([np.zeros(3 * wards + 3, dtype=np.int64), *in_blocks(rows.start.size, count)], axis=0)
    short, between, long = counts.reshape(-1, 3)[:wards].T
    return np.array([short + between + long, short, long])


def _on_the_way(rows: Rows, order: NDArray[np.int64], code: int) -> bool:
    """Do nearly all stays here have another stay of the patient just before and just after?"""
    here = np.flatnonzero(rows.ward[order] == code)
    inner = here[(here > 0) & (here < order.size - 1)]
    last, stay, following = order[inner - 1], order[inner], order[inner + 1]
    same = (rows.patient[last] == rows.patient[stay]) & (rows.patient[stay] == rows.patient[following])
    near = (rows.end[last] != MISSING) & (np.abs(rows.start[stay] - rows.end[last]) <= NEIGHBOUR_SECONDS)
    near &= np.abs(rows.start[following] - rows.end[stay]) <= NEIGHBOUR_SECONDS
    return int((same & near).sum()) >= NEARLY_ALL * here.size


def place_notes(rows: Rows, kinds: Mapping[str, str]) -> list[str]:
    """Which places were taken out, with how many rows and bed-days? A sentence each."""
    told = []
    for code, (ward, kind) in enumerate(kinds.items()):
        if kind in (BED_WARD, LEAVE):
            continue
        gone = np.flatnonzero((rows.ward[: rows.file_rows] == code) & (rows.reason[: rows.file_rows] == CODES[kind]))
        if gone.size:
            start, end = rows.first_start[gone], rows.first_end[gone]
            days = float((end - start)[end > start].sum()) / DAY_SECONDS
            told.append(
                f"“{ward}” is taken for: {PLACES[kind]}. {few(gone.size).capitalize()} rows with {days:,.1f} bed-days are "
                "set aside for it; say so if it is a ward with beds."
            )
    return told


def leave_note(rows: Rows, is_leave: NDArray[np.bool_], bed_on_leave: str | None) -> list[str]:
    """Ask whether beds are held during leave, where there is leave and nobody said."""
    if bed_on_leave is not None or not is_leave.any() or not is_leave[rows.ward[rows.live]].any():
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
