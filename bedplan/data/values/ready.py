"""When patients were ready to leave, by a file of its own: joined to the ward stays by patient or stay."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from bedplan.data.files.dates import DAY_SECONDS, MISSING, UNREADABLE
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from bedplan.data.files.report import IntakeReport
    from bedplan.data.files.texttable import TextTable
    from bedplan.data.values.rows import Rows

    Seconds = NDArray[np.int64]

KEYS = ("spell_key", "patient_key")


@dataclass(frozen=True)
class ReadyDates:
    """Since when patients were ready to leave. Holds keys as written, to be joined: let go of it once stays are read.

    Checked by: tests/data/values/test_ready.py
    """

    name: str
    report: IntakeReport
    keys: Mapping[str, pa.ChunkedArray] = field(repr=False)
    ready: Seconds = field(repr=False)

    def joined(self, text: TextTable, rows: Rows, *, knows_spells: bool) -> tuple[Seconds, list[str]]:
        """Return the latest date on which each stay's patient became ready within that hospital stay, and what to say.

        By stay where both files name it, else by patient: then within the hospital stay, else the ward stay.

        Raises:
            UnreadableRecords: the files have no key in common.
        """
        key = next((key for key in KEYS if key in self.keys and key in text.columns), None)
        if key is None:
            told = f"{self.name} can't be joined to the ward stays: both need a column of the same stay or patient key"
            raise UnreadableRecords([f"{told}, such as spell_key."])
        mine, theirs = (pc.utf8_trim_whitespace(one.cast(pa.string())) for one in (self.keys[key], text.columns[key]))
        known = pc.unique(mine)
        code, whose = (_places(one, known) for one in (mine, theirs))
        found = _latest_before(code, self.ready, whose, rows.end)
        found[found < _first_day(rows, knows_spells=knows_spells)] = MISSING
        joined, used = int((found > MISSING).sum()), np.unique(whose[found > MISSING]).size
        notes = [
            f"{self.name}: {joined:,} ward stays have a ready date from it; {used:,} of its {len(known):,} keys were found."
        ]
        if (self.ready % DAY_SECONDS == 0).all():
            notes.append(
                f"{self.name} has no times of day: patients count as ready from midnight, up to a day too early."
            )
        return found, notes


def _places(keys: pa.ChunkedArray, known: pa.Array) -> NDArray[np.int64]:
    """Return the place of each key among the known ones, −1 where it is not there."""
    found = pc.index_in(keys, value_set=known, skip_nulls=True)
    return pc.fill_null(pc.cast(found, pa.int64()), -1).to_numpy()


def _latest_before(code: NDArray[np.int64], ready: Seconds, whose: NDArray[np.int64], end: Seconds) -> Seconds:
    """Return, for each stay, the latest date of the same key up to its end; MISSING where there is none."""
    span = int(ready.max() - ready.min()) + 2
    order = np.lexsort((ready, code))
    line = code[order] * span + ready[order] - ready.min() + 1
    until = np.where(end > UNREADABLE, np.minimum(end, ready.max()), ready.max()) - ready.min() + 1
    place = np.searchsorted(line, whose * span + np.maximum(until, 0), side="right") - 1
    fits = (whose >= 0) & (place >= 0)
    fits &= code[order][np.maximum(place, 0)] == whose
    return np.where(fits, ready[order][np.maximum(place, 0)], MISSING)


def _first_day(rows: Rows, *, knows_spells: bool) -> Seconds:
    """Return the day on which each row's hospital stay begins, or its ward stay where hospital stays are not known."""
    begin = np.where(rows.start > UNREADABLE, rows.start, np.iinfo(np.int64).max // 2)
    if knows_spells:
        first = np.full(int(rows.spell.max()) + 1, np.iinfo(np.int64).max // 2)
        np.minimum.at(first, rows.spell, begin)
        begin = first[rows.spell]
    return begin - begin % DAY_SECONDS
