"""Ward names of the files beside the ward stays, brought to the names that the stays have."""

from __future__ import annotations

import re
from collections import Counter
from functools import lru_cache
from typing import TYPE_CHECKING

from bedplan.data.cleaning.wardlinks import WardLink, bare_name
from bedplan.data.values.codes import chosen_names, one_spelling

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from bedplan.data.cleaning.records import Records


TOTAL = re.compile(
    r"(grand |sub[- ]?)?total[se]?\b|(sum|summe|somme|suma|totaal|totalt|gesamt|insgesamt)$|all wards\b|run on\b|page \d",
    re.IGNORECASE,
)


@lru_cache(maxsize=4_096)
def is_no_ward(ward: str, heading: str = "ward") -> bool:
    """Does this cell of a ward column name no ward: blank, a total, a footer or the heading once more?"""
    return not ward or TOTAL.match(ward) is not None or ward.casefold() == heading.casefold()


def spelled_alike(names: Sequence[str]) -> list[str]:
    """Return the ward of each row ("" = none): spellings that differ in spaces and capitals only become the commonest."""
    rows = Counter(names)
    spelled = dict(zip(rows, one_spelling(list(rows), list(rows.values())), strict=True))
    return [spelled[name] for name in names]


def names_in_stays(wards: Iterable[str], records: Records) -> dict[str, str]:
    """What do the ward stays call each of these wards: by the planner's word, else whatever the capitals? Name → name."""
    names = list(wards)
    known = {ward.casefold(): ward for ward in records.wards}
    wanted = chosen_names(names, records.ward_names)
    return {name: known.get(new.casefold(), new) for name, new in zip(names, wanted, strict=True)}


def without_stays(wards: Iterable[str], records: Records) -> tuple[str, ...]:
    """Which of these wards have no stay that counts?"""
    return tuple(ward for ward in wards if ward not in records.wards)


def likely_links(wards: Iterable[str], records: Records) -> tuple[WardLink, ...]:
    """Which names without stays may be a ward of the stays written another way, for a person to confirm?

    ``wards``: the ``.unknown_wards`` of a file. What is confirmed belongs into ``IntakeChoices.ward_names``, old → new.

    Checked by: tests/data/beside/test_linking.py
    """
    bare = {bare_name(ward): ward for ward in reversed(records.wards)}
    pairs = [(ward, bare.get(bare_name(ward))) for ward in wards if bare_name(ward)]
    return tuple(WardLink((ward,), (known,), "spelling", None) for ward, known in pairs if known is not None)
