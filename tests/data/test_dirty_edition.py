"""The demo as such files really arrive, against the truth file that counts every fault put into it."""

from __future__ import annotations

import re
import sys
from collections import Counter
from typing import TYPE_CHECKING

import pandas as pd
import pytest

from bedplan.data import IntakeChoices, read_census, read_records
from bedplan.data.files.rules import RULES

if TYPE_CHECKING:
    from pathlib import Path

    from bedplan.data import Records

CHOICES = IntakeChoices(ward_names={"Ward 7": "Kestrel"}, time_zone="Europe/London")
# Our rule -> the faults of the truth file that it must have found, all of them and nothing else.
FAULTS = {
    "negative": ("ends before it starts: no swap mends it",),
    "duplicate": ("exact duplicate",),
    "resubmitted": ("sent again later with another end",),
    "forgotten, aside": ("no end: forgotten, long ago and no later stay",),
    "virtual": ("virtual ward",),
    "cot": ("well-baby cot",),
    "regular": ("regular day attender",),
    "test patient": ("test patient: by the key", "test patient: by an impossible age"),
    "ward spelling": ("ward name with a trailing space", "ward name with a non-breaking space"),
    "ward renamed": ("ward under its old name, Ward 7",),
    "serial date": ("dates as a spreadsheet's day numbers",),
    "swapped": ("ends before it starts: day and month of the end swapped",),
    "forgotten, closed": ("no end: forgotten, the patient's next stay follows",),
    "passed through": ("under 30 minutes: discharge lounge", "under 30 minutes: theatre"),
    "overlap": ("overlaps the patient's next stay",),
}
# Faults after which a stay rightly has no end.
# Times written in another way than the file's: the words of the report before their rows -> the fault of the truth file.
WRITTEN = {
    "were read month first in": "month first: patients first seen in November 2023",
    "carried an offset from world time in": "in UTC: patients first seen in July 2023",
}
STILL_IN = ("no end: still in", "no end: left in the last four days, not entered yet")
KEYS = ["patient_key", "spell_key"]


@pytest.fixture(scope="module")
def edition(root: Path, tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, dict]:
    """Return the folder of the dirty edition and its truth."""
    sys.path.insert(0, str(root))
    try:
        from demo_data.dirty import write_dirty  # noqa: PLC0415  a script folder, found only now
    finally:
        sys.path.remove(str(root))
    folder = tmp_path_factory.mktemp("dirty")
    return folder, write_dirty(folder)


@pytest.fixture(scope="module")
def records(edition: tuple[Path, dict]) -> Records:
    """Return the dirty stays, read with the two answers they ask for."""
    return read_records(edition[0] / "dirty_stays.csv", choices=CHOICES)


def found_in(records: Records) -> tuple[dict[str, int], dict[str, str], int, int, int]:
    """Return what was found: rows by reason, rows by how times are written, rows in, stays left, and those still in."""
    report = records.report
    told = re.findall(f"({'|'.join(WRITTEN)}) ([0-9,]+) rows", " ".join(report.notes))
    return dict(report.reasons), dict(told), report.rows_in, len(records.stays), int(records.stays["end"].isna().sum())


def true_of(truth: dict) -> tuple[dict[str, int], dict[str, str], int, int, int]:
    """Return the same as the truth file has it."""
    counts, lines = truth["rows by fault"], truth["lines that are no rows"]
    wanted = {RULES[rule].sentence: sum(counts[fault] for fault in faults) for rule, faults in FAULTS.items()}
    no_rows = lines["total"] + lines["page footer"]
    wanted[RULES["misfit"].sentence] = no_rows
    still_in = sum(counts[fault] for fault in STILL_IN)
    written = {words: f"{counts[fault]:,}" for words, fault in WRITTEN.items()}
    every = {fault for faults in FAULTS.values() for fault in faults} | {*WRITTEN.values(), *STILL_IN}
    assert every == set(counts), "a fault of the truth file is looked for nowhere"
    return wanted, written, truth["rows"] + no_rows, truth["ward stays left after mending"], still_in


def test_every_fault_is_found_and_nothing_else(records: Records, edition: tuple[Path, dict]) -> None:
    """The report's counts are the truth file's, reason by reason; the stays left are the clean file's but for the rest."""
    assert found_in(records) == true_of(edition[1])


def test_mended_stays_are_the_clean_ones(records: Records, larkmere: Records) -> None:
    """Stay by stay, only those differ that no reader can put right or that passed through somewhere first."""
    every = [
        Counter(
            zip(
                one.stays["ward"].astype(str), one.stays["start"], one.stays["end"].fillna(pd.Timestamp(0)), strict=True
            )
        )
        for one in (larkmere, records)
    ]
    missing = every[0] - every[1]

    # 25 beyond mending, 20 whose end nobody entered yet, 220 longer by their minutes in theatre or the lounge;
    # forgotten ends closed where the next stay starts come out right, as do overlaps.
    assert missing.total() <= 25 + 20 + 220
    assert (every[1] - every[0]).total() <= 20 + 220


@pytest.mark.parametrize("name", ["dirty_stays_semicolon.csv", "dirty_stays_utf16.txt", "dirty_stays.xlsx"])
def test_every_copy_reads_alike(records: Records, edition: tuple[Path, dict], name: str) -> None:
    """Semicolons with decimal commas, UTF-16 with tabs, and Excel: the truth's counts exactly, and the same rows in and out."""
    copy = read_records(edition[0] / name, choices=CHOICES)

    assert found_in(copy) == true_of(edition[1])
    # Keys are drawn anew for each reading; all else is alike, cell by cell.
    pd.testing.assert_frame_equal(copy.stays.drop(columns=KEYS), records.stays.drop(columns=KEYS))
    # A footer is a row of a sheet, but in a text file a line without the cells of a row: counted there, not listed.
    aside = [one.set_aside[one.set_aside["reason"] != RULES["misfit"].sentence] for one in (copy, records)]
    pd.testing.assert_frame_equal(*(rows.reset_index(drop=True) for rows in aside))
    assert copy.report.bed_days == records.report.bed_days
    assert (copy.window, copy.seen_until, copy.wards) == (records.window, records.seen_until, records.wards)


def test_the_old_name_is_proposed_not_applied(edition: tuple[Path, dict]) -> None:
    """Without a person's word, Ward 7 and Kestrel stay two wards, and the link is proposed for 1 October 2022."""
    records = read_records(edition[0] / "dirty_stays.csv", choices=IntakeChoices(time_zone="Europe/London"))
    (link,) = records.links

    assert (link.old, link.new, link.kind) == (("Ward 7",), ("Kestrel",), "renamed")
    assert abs(link.since - pd.Timestamp("2022-10-01")) <= pd.Timedelta(days=2)
    assert {"Ward 7", "Kestrel"} <= set(records.wards)


def test_the_dirty_census(edition: tuple[Path, dict]) -> None:
    """Cells such as 28 (+4) are split, and the two days of zeros are missing, not empty."""
    census = read_census(edition[0] / "dirty_census.csv")
    truth = edition[1]["census"]

    assert census.report.repaired == truth["cells such as 28 (+4)"]
    for day in truth["days of zeros that are missing"]:
        assert pd.Timestamp(day) not in census.occupied("Heron").index
    assert census.report.set_aside == len(truth["days of zeros that are missing"]) * 8 * 2
