"""What a row of a file of stays really is: a stay on one ward, a whole hospital stay, or an episode under one consultant."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pyarrow as pa
import pyarrow.compute as pc

from bedplan.data.files.columns import FIRST_WARD, LAST_WARD, plain, words
from bedplan.wording import percent

if TYPE_CHECKING:
    from bedplan.data.files.texttable import TextTable

EPISODES = words(
    "epistart epiend epiorder epiorderno episodeorder episodestart episodeend episodestartdate episodeenddate "
    "episodestartdatetime episodeenddatetime episodestarttime episodeendtime consultantepisode fce fceno fcenumber "
    "finishedconsultantepisode"
)


def what_rows_are(text: TextTable) -> list[str]:
    """Say so where a row is not a stay on one ward, and what the file can't tell then.

    Checked by: tests/data/values/test_grain.py
    """
    return [*_hospital_stays(text), *_episodes(text)]


def _hospital_stays(text: TextTable) -> list[str]:
    """Say so where a row is a hospital stay with its first and last ward."""
    heading = text.headings["ward"]
    if plain(heading) not in (*FIRST_WARD, *LAST_WARD):
        return []
    told = f"A row is a whole hospital stay, counted on its “{heading}”: moves between wards are hidden"
    if "last_ward" not in text.columns:
        return [f"{told}, so the hospital's totals hold, but the beds of one ward may not."]
    first, last = (
        pc.utf8_lower(pc.utf8_trim_whitespace(text.columns[key].cast(pa.string()))) for key in ("ward", "last_ward")
    )
    moved = pc.mean(pc.cast(pc.not_equal(first, last), pa.float64())).as_py() or 0.0
    other = f"In {percent(moved)} of rows “{text.headings['last_ward']}” is another ward, where part of those days were"
    return [f"{told}. {other} spent: the hospital's totals hold, the beds of one ward may not."]


def _episodes(text: TextTable) -> list[str]:
    """Say so where a row is an episode under one consultant."""
    headings = {plain(heading): heading for heading in (*text.headings.values(), *text.unused, *text.dropped)}
    shows = next((heading for word, heading in headings.items() if word in EPISODES), None)
    if shows is None and any("consultant" in word for word in headings):
        shows = next((heading for word, heading in headings.items() if "episode" in word), None)
    if shows is None:
        return []
    told = f"“{shows}” shows that a row is an episode under one consultant, not a stay on one ward: moves between wards"
    return [
        f"{told} within it are hidden, so its days stand on the one ward it names. Ask for an extract of ward stays."
    ]
