"""What reading gives back: counts that add up, no identities, codes that can't be turned back."""

from __future__ import annotations

import io
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pytest

from bedplan.data import IntakeChoices, read_records

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    from bedplan.data import Records

DIRTY = (
    "a,1,Heron,2024-01-01 10:00,2024-01-04 10:00",
    "a,1,Heron,2024-01-01 10:00,2024-01-04 10:00",
    "a,1,Teal,2024-01-03 20:00,2024-01-06 10:00",
    "b,2,Heron,2024-01-02 10:00,",
    "b,2,Teal,2024-01-05 10:00,2024-01-09 10:00",
    "c,3,heron ,2024-01-03 10:00,2024-01-07 10:00",
    "d,4,Heron,2024-01-09 10:00,2024-01-07 10:00",
    "e,5,,2024-01-03 10:00,2024-01-07 10:00",
    "f,6,Virtual ward,2024-01-03 10:00,2024-01-08 10:00",
    "g,7,Heron,2024-01-09 10:00,",
    "Page 1 of 1",
)


def test_every_row_is_used_repaired_or_set_aside(read: Callable[..., Records]) -> None:
    """Rows add up, reasons add up to the rows changed, and the table of rows set aside holds each of them."""
    records = read(*DIRTY)
    report = records.report

    assert report.rows_in == len(DIRTY) == report.used + report.repaired + report.set_aside
    assert sum(report.reasons.values()) == report.repaired + report.set_aside
    assert len(records.set_aside) == report.set_aside


def test_bed_days_balance(read: Callable[..., Records]) -> None:
    """Bed-days in, plus what repairs added, are bed-days used plus set aside; each figure worked out by hand."""
    report = read(*DIRTY).report

    # As recorded, unfinished stays to the midnight after the last event (10 January):
    # a 3 + 3 (twice), Teal 2 d 14 h; b 7 d 14 h open, Teal 4; c 4; d can't be read: the mean of
    # Heron's finished stays, a's 58 h, b's 3 and c's 4; e 4; f 5; g 14 h.
    unread = (58 / 24 + 3 + 4) / 3
    recorded = 3 + 3 + 62 / 24 + 182 / 24 + 4 + 4 + unread + 4 + 5 + 14 / 24
    # Set aside: the second a (3), d, e (4), f (5).
    aside = 3 + unread + 4 + 5
    # Used: a to 3 January 20:00 (2 d 10 h), Teal 62 h; b closed on 5 January (3), Teal 4; c 4; g 14 h.
    used = 58 / 24 + 62 / 24 + 3 + 4 + 4 + 14 / 24
    assert report.bed_days_in == pytest.approx(recorded)
    assert report.bed_days_set_aside == pytest.approx(aside)
    assert report.bed_days_used == pytest.approx(used)
    assert report.bed_days_in + report.bed_days_added == pytest.approx(used + aside)


def test_each_reason_has_its_bed_days_and_a_sentence(read: Callable[..., Records]) -> None:
    """Rows are printed with the bed-days they hold, because bed-days matter more."""
    report = read(*DIRTY).report

    assert set(report.bed_days) == set(report.reasons)
    assert len(report.sentences) == len(report.reasons)
    assert "11 rows" in report.summary


IDENTIFIED = b"""NHS Number,Surname,Date of Birth,Postcode,Email,Ward,Start,End,Discharge Destination
9434765919,Smith,1950-02-03,LS1 4AP,a@example.org,Heron,2024-01-01 10:00,2024-01-04 10:00,home
9434765870,Jones,1951-02-03,LS1 5AP,b@example.org,Heron,2024-01-02 10:00,2024-01-05 10:00,home
"""


def test_identity_columns_are_dropped_and_told() -> None:
    """Names, birth dates, postcodes, addresses and national numbers are never read into memory's table."""
    records = read_records(IDENTIFIED)

    assert records.report.dropped_columns == ("NHS Number", "Surname", "Date of Birth", "Postcode", "Email")
    everything = records.stays.to_csv() + records.set_aside.to_csv()
    assert not any(word in everything for word in ("Smith", "1950", "LS1", "example", "9434765919"))


def test_columns_that_turn_out_to_hold_identities_are_dropped() -> None:
    """A harmless heading does not save a column of postcodes, telephone numbers or birthdays."""
    rows = [f"p{n},Heron,2024-01-0{n + 1} 10:00,2024-01-0{n + 3} 10:00,LS{n} 4AP,19{n}0-02-03" for n in range(1, 7)]
    content = "\n".join(["patient_key,ward,start,end,destination,specialty", *rows]).encode()
    records = read_records(content)

    assert set(records.report.dropped_columns) == {"destination", "specialty"}
    assert not {"destination", "specialty"} & set(records.stays.columns)


def test_patient_keys_become_codes_that_differ_each_time() -> None:
    """The way from key to code is random and forgotten; one patient keeps one code within a file."""
    rows = [f"9434765{n:03d},Heron,2024-01-{n % 27 + 1:02d} 10:00,2024-02-02 10:00" for n in range(60)]
    content = "\n".join(["patient_key,ward,start,end", *rows, rows[0].replace("Heron,2024-01-01", "Teal,2024-03-01")])
    first, second = (read_records(content.encode()) for _ in range(2))

    assert "9434765" not in first.stays.to_csv()
    assert first.stays["patient_key"].nunique() == 60
    assert not np.array_equal(first.stays["patient_key"], second.stays["patient_key"])


def test_keys_that_look_like_national_numbers_are_mentioned() -> None:
    """943 476 5919 passes the check digit of an English patient number; the report says that such keys came."""
    content = b"patient_key,ward,start,end\n9434765919,Heron,2024-01-01 10:00,2024-01-04 10:00\n"

    assert any("real persons" in note for note in read_records(content).report.notes)


def test_exact_ages_become_bands() -> None:
    """Only ten-year bands are kept."""
    content = b"patient_key,ward,start,end,age\na,Heron,2024-01-01 10:00,2024-01-04 10:00,83\n"

    assert read_records(content).stays["age_band"].tolist() == ["80-89"]


@pytest.mark.parametrize("name", ["=cmd()", "+1", "-2", "@SUM(A1)", "\t=1"])
def test_ward_names_are_never_formulas(name: str) -> None:
    """A ward whose name a spreadsheet would run is made plain text."""
    content = f'patient_key,ward,start,end\na,"{name}",2024-01-01 10:00,2024-01-04 10:00\n'

    assert all(ward.startswith("'") for ward in read_records(content.encode()).wards)


def test_a_path_bytes_and_an_upload_read_alike(tmp_path: Path) -> None:
    """Wherever the bytes come from, stays and fingerprint are the same."""
    content = IDENTIFIED
    path = tmp_path / "stays.csv"
    path.write_bytes(content)
    upload = io.BytesIO(content)
    upload.name = "stays.csv"
    with path.open("rb") as opened:
        every = [read_records(one) for one in (path, str(path), content, upload, opened)]

    assert len({one.fingerprint for one in every}) == 1
    assert every[0].name == every[3].name == "stays.csv"
    assert all(one.stays["start"].equals(every[0].stays["start"]) for one in every)
    assert len(every[0].short_fingerprint) == 12


def test_unusual_headings_can_be_named(read: Callable[..., Records]) -> None:
    """The user's own word about a heading comes first."""
    records = read(
        "a,Heron,2024-01-01 10:00,2024-01-04 10:00",
        headings="Patient,Station,Zugang,Abgang",
        columns={"ward": "Station", "start": "Zugang", "end": "Abgang"},
    )

    assert records.wards == ("Heron",)


def test_excluded_periods_are_not_counted(read: Callable[..., Records]) -> None:
    """A period the planner leaves out is left out of the days that rates are counted over."""
    choices = IntakeChoices(excluded=((pd.Timestamp("2024-01-02").date(), pd.Timestamp("2024-01-03").date()),))
    records = read("a,1,Heron,2024-01-01 10:00,2024-01-06 10:00", choices=choices)

    assert records.days == 6
    assert records.counted_days.tolist() == [True, False, False, True, True, True]


def test_the_demo_reads_clean(larkmere: Records, demo_data: Path) -> None:
    """The clean edition of the demo needs no repair, and its window is the three financial years it was made for."""
    report = larkmere.report

    assert report.used == report.rows_in == (demo_data / "stays.csv").read_bytes().count(b"\n") - 1
    assert larkmere.window == (pd.Timestamp("2022-04-01"), pd.Timestamp("2025-04-01"))
    assert larkmere.days == 1_096
    assert len(larkmere.wards) == 8


def test_the_answer_without_the_repaired_rows_can_be_had(read: Callable[..., Records]) -> None:
    """Leaving out what was repaired shows how far the repairs carry the answer; the report stays as it is."""
    records = read(*DIRTY)
    bare = records.without_repairs()

    # Repaired: the first a (cut), the first b (closed), c (spelling); left: Teal of a, Teal of b, g.
    assert records.stays["repaired"].sum() == 3
    assert len(bare.stays) == len(records.stays) - 3
    assert bare.report == records.report


def test_how_far_it_is_can_be_followed() -> None:
    """Whoever asks is told shares from 0 to 1 that never fall, each with a few words, and gets the same stays."""
    told = []
    records = read_records(IDENTIFIED, progress=lambda share, doing: told.append((share, doing)))
    shares = [share for share, _ in told]

    assert shares[0] == 0.0
    assert shares[-1] == 1.0
    assert shares == sorted(shares)
    assert len(told) >= 4
    assert all(doing.strip() for _, doing in told)
    assert records.stays["start"].equals(read_records(IDENTIFIED).stays["start"])


@pytest.mark.parametrize("calls", range(4))
def test_reading_can_be_called_off(calls: int) -> None:
    """What the follower raises ends the reading there and comes out as it is; reading again gives the whole file."""
    left = iter(range(calls))

    def give_up(_share: float, _doing: str) -> None:
        next(left)

    upload = io.BytesIO(IDENTIFIED)
    with pytest.raises(StopIteration):
        read_records(upload, progress=give_up)
    assert len(read_records(upload).stays) == 2
