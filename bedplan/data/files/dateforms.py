"""Rarer forms of dates and times, brought to the usual ones: other signs between date and clock, seconds since 1970."""

from __future__ import annotations

import pyarrow as pa
import pyarrow.compute as pc

EPOCH, EPOCH_DIGITS = r"^1\d{9}(?:\d{3})?$", 10  # seconds or milliseconds since 1970, from 2001 to 2033
WORLD_TIME = r"(?:Z|[+-]00:?00)\s*$"
# What else stands around date and clock -> how it is read then.
REWRITTEN = (
    (r"^'\s*", ""),  # a spreadsheet's sign for text
    (r"^(\d{1,2}[:.]\d{2}(?:[:.]\d{2})?(?:\s*[AaPp]\.?[Mm]\.?)?)[ ,]+(\d{1,4}[-/.]\d{1,2}[-/.]\d{2,4})$", r"\2 \1"),
    ("(\\d)(?:\\s*,\\s*|\\s+[-\u2013|]\\s+|_)(\\d{1,2}[:.h]\\d{2})", r"\1 \2"),
    (r"^(\d{1,2}-?[^\s\d.,/-]{3,}-?\d{2,4}):(\d)", r"\1 \2"),
    (r"^(\d{4})[-/ ]([^\s\d.,/-]{3,})[-/ ](\d{1,2})(\D.*)?$", r"\3 \2 \1\4"),  # 2023-Mar-04
    (r"(\d)t(\d{2}:\d{2})", r"\1T\2"),
    (r"(\d)z$", r"\1Z"),
    (r"\s+(?:kl\.?|à|às|alle|a las|om)\s+(\d)", r" \1"),
    (r"\s*\(?\b(?:GMT|UTC)\)?$", "Z"),
    (r"\s*\bGMT([+-]\d{4})(?: \(.*\))?$", r"\1"),
    (r"\s+(?:CES?T|BST|WES?T|EES?T|MES?Z)$", ""),  # the hospital's own clock
    (r"^[^\s\d.,]{2,10}\.?,? +([^\s\d.,]{3,} +\d)", r"\1"),
)
# What stands for the end of a stay that goes on.
STILL_IN = (
    *("still inpatient", "still admitted", "still in hospital", "still an inpatient", "inpatient", "in hospital"),
    *("current inpatient", "not discharged", "not yet discharged", "ongoing", "in progress", "present", "<null>"),
    *("noch stationär", "noch da", "noch in behandlung", "laufend", "offen", "nicht entlassen", "en cours", "présent"),
    *("hospitalisé", "non sorti", "ingresado", "en curso", "sin alta", "in corso", "ricoverato", "non dimesso"),
    *("opgenomen", "nog opgenomen", "lopend", "inneliggande", "pågående", "indlagt", "innlagt", "internado", "w toku"),
)


def from_world_time(part: pa.Array, time_zone: str | None) -> pa.Array | None:
    """What does the clock of ``time_zone`` show at times that all carry an offset? Without a zone, theirs where it is none.

    All at once; None where they have to be looked at one by one.

    Checked by: tests/data/files/test_reading.py
    """
    try:
        stamps = pc.cast(part, pa.timestamp("s", time_zone or "UTC"))
    except pa.ArrowInvalid:
        return None
    is_kept = time_zone or pc.all(pc.match_substring_regex(part, WORLD_TIME)).as_py()
    return pc.local_timestamp(stamps) if is_kept else None


def in_usual_form(text: pa.Array) -> pa.Array:
    """How would these times be written the usual way? What is in no known form stays as it is.

    Clocks of world time get a Z; seconds since 1970 are world time.

    Checked by: tests/data/files/test_dates.py
    """
    tidy = text
    for pattern, wanted in REWRITTEN:
        tidy = pc.replace_substring_regex(tidy, pattern, wanted)
    epoch = pc.fill_null(pc.match_substring_regex(tidy, EPOCH), False)
    since = pc.utf8_slice_codeunits(pc.if_else(epoch, tidy, "0"), 0, EPOCH_DIGITS)
    stamps = pc.strftime(pc.cast(pc.cast(since, pa.int64()), pa.timestamp("s")), "%Y-%m-%dT%H:%M:%S")
    return pc.if_else(epoch, pc.binary_join_element_wise(stamps, "Z", ""), tidy)
