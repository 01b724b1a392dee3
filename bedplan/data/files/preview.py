"""What the headings of a file were taken for, with three rows, so that a person can confirm or correct it."""

from __future__ import annotations

import re
from dataclasses import dataclass, field, replace
from types import MappingProxyType
from typing import TYPE_CHECKING

from bedplan.data.files.headings import HEADINGS_OF, NEEDED, lacking, mistaken_for
from bedplan.data.files.reading import read_table
from bedplan.data.files.source import FileLike, SourceFile, open_source
from bedplan.data.files.top import plain_headings, sample, tops_of, unknown_sample
from bedplan.data.files.wide import one_row_of_headings, read_wide
from bedplan.errors import ImpossibleFigure, UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Mapping

WARDS_NAMED = 12
MATCHED = ("ward", "start", "end", "patient_key", "spell_key", "class", "method", "specialty", "ready", "destination")
APART = (
    "start_date",
    "start_time",
    "end_date",
    "end_time",
)  # asked for after the ward where a column holds times of day
CLOCK = re.compile(r"\d{1,2}[:.]\d{2}([:.]\d{2})?( ?[ap]\.?m\.?)?|([01]\d|2[0-3])[0-5]\d", re.IGNORECASE | re.ASCII)


@dataclass(frozen=True, slots=True)
class ColumnPreview:
    """``headings``: every heading but those of identity columns. ``matched``: our name → heading as written.

    ``samples``: our name → the first three values under its heading. ``asked``: our names to ask a person about.
    ``others``: every heading that stands for nothing yet → its first three values, where they can't name a person.
    ``lacking``: columns without which it can't be read, one of each row. ``mistaken``: a sentence, where it is clearly a file
    of another kind. ``hint``: what else to know before columns are chosen.
    """

    headings: tuple[str, ...]
    matched: Mapping[str, str]
    samples: Mapping[str, tuple[str, ...]]
    asked: tuple[str, ...] = MATCHED
    others: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    lacking: tuple[tuple[str, ...], ...] = ()
    mistaken: str = ""
    hint: str = ""


def preview_columns(
    source: FileLike,
    *,
    name: str | None = None,
    columns: Mapping[str, str] | None = None,
    kind: str = "ward stays",
) -> ColumnPreview:
    """Which heading was taken for what, and what do three rows hold? ``columns`` as in :func:`read_records`.

    Looks at the first lines only. A file without one known heading still lists its headings, so that columns can be
    chosen; one where what was chosen can't be is shown as without it. ``kind``: ``"ward stays"``, ``"staffed beds"``,
    ``"refusals"``, ``"bed requests"``, ``"cancellations"``, ``"census"``, ``"monthly return"`` or ``"ready dates"``.

    Raises:
        UnreadableRecords: the file is no table at all.
        ImpossibleFigure: a kind of file nobody knows.

    Checked by: tests/data/files/test_preview.py
    """
    if kind not in HEADINGS_OF:
        raise ImpossibleFigure(f"The kind of file {kind!r} is not known: it is one of {', '.join(HEADINGS_OF)}.")
    file = open_source(source, name)
    seen = [_looked_at(top, kind, columns) for top in tops_of(file)]
    return max(seen, key=lambda one: (len(one.matched), bool(one.headings)), default=ColumnPreview((), {}, {}))


def _looked_at(top: SourceFile, kind: str, columns: Mapping[str, str] | None) -> ColumnPreview:
    """Look at one table."""
    asked = MATCHED if kind == "ward stays" else tuple(HEADINGS_OF[kind])
    try:
        table = read_table(top, HEADINGS_OF[kind], columns)
    except UnreadableRecords:
        if columns:  # that can't be: show how it is read without them
            return _looked_at(top, kind, None)
        headings = plain_headings(top)
        seen = ColumnPreview(headings, MappingProxyType({}), MappingProxyType({}), asked, _others(top, headings))
    else:
        samples = {key: sample(key, table.strings(key)) for key in table.headings}
        headings, others = (*table.headings.values(), *table.unused), _others(top, table.unused)
        seen = ColumnPreview(headings, MappingProxyType(dict(table.headings)), samples, asked, others)
    if kind == "ward stays" and _may_be_apart(seen):
        seen = replace(seen, asked=(*MATCHED[:1], *APART, *MATCHED[1:]))
    judged = _judged(seen, top.name, kind, is_said=bool(columns))
    return _as_census(judged, top, columns) if kind == "census" and judged.lacking and not judged.mistaken else judged


def _may_be_apart(seen: ColumnPreview) -> bool:
    """May the file have days and times of day in columns of their own? One is matched so, or holds clocks alone."""
    shown = [*seen.samples.values(), *seen.others.values()]
    clocks = any(any(cells) and all(CLOCK.fullmatch(cell) for cell in cells if cell) for cells in shown)
    return clocks or any(key in seen.matched for key in APART)


def _others(top: SourceFile, headings: tuple[str, ...]) -> dict[str, tuple[str, ...]]:
    """Return what may be shown of columns that stand for nothing yet."""
    if not headings:
        return {}
    try:
        table = read_table(top, {}, {heading: heading for heading in dict.fromkeys(headings)})
    except UnreadableRecords:
        return {}
    return {heading: unknown_sample(table.strings(heading)) for heading in table.headings}


def _judged(seen: ColumnPreview, name: str, kind: str, *, is_said: bool) -> ColumnPreview:
    """Say which columns are lacking, and whether the headings are those of another kind of file; not once a person chose."""
    other = None if is_said else mistaken_for(kind, seen.headings)
    told = (
        f"{name} looks like {NEEDED[other][0]}, not like {NEEDED[kind][0]}: choose another file here." if other else ""
    )
    return replace(seen, lacking=lacking(kind, seen.matched), mistaken=told)


def _as_census(seen: ColumnPreview, source: SourceFile, columns: Mapping[str, str] | None) -> ColumnPreview:
    """Look whether a table has a column for each ward: it has only its dates to be asked about, where all hold counts."""
    try:
        wide = read_wide(source, HEADINGS_OF["census"], columns)
    except UnreadableRecords:
        wide = None
    if wide is None:
        return replace(seen, hint="A table with a column for each ward needs its date only.")
    counts: dict[str, bool] = {}
    for ward, cell in zip(wide.strings("ward"), wide.strings("occupied"), strict=True):
        counts[ward] = counts.get(ward, False) or any(sign.isdigit() for sign in cell)
    named = ", ".join(list(counts)[:WARDS_NAMED]) + (
        f" and {len(counts) - WARDS_NAMED} more" if len(counts) > WARDS_NAMED else ""
    )
    told = f"Read as a table with a column for each ward: {named}."
    if not all(counts.values()):
        told = f"{told} If it has a row for each ward, name the columns of wards and patients."
        return replace(seen, lacking=(), hint=told)
    once = wide.rows // len(counts)  # each date stands once for each ward
    samples = {key: sample(key, wide.strings(key)[:once]) for key in wide.headings}
    headings = seen.headings if one_row_of_headings(source) is None else tuple(wide.headings.values())
    return ColumnPreview(headings, wide.headings, samples, ("date", "time"), hint=told)
