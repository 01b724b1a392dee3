"""Every kind of dirt that ward-stay files hold: what becomes of the row, and the reason that is given."""

from __future__ import annotations

import random
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pytest

from bedplan.data import IntakeChoices
from bedplan.data.cleaning import sequence
from bedplan.data.files.rules import RULES
from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Callable

    from bedplan.data import Records

    Read = Callable[..., Records]


def reasons(records: Records) -> dict[str, int]:
    """Return the rules met, by their short names, with their rows."""
    names = {rule.sentence: key for key, rule in RULES.items()}
    return {names[sentence]: rows for sentence, rows in records.report.reasons.items()}


def stay_times(records: Records) -> list[tuple[str, str, str]]:
    """Return (ward, start, end) of every kept stay, as text."""
    return [
        (row.ward, f"{row.start:%m-%d %H:%M}", "still in" if pd.isna(row.end) else f"{row.end:%m-%d %H:%M}")
        for row in records.stays.itertuples()
    ]


# A few ordinary stays, so that a file is not all dirt.
PLAIN = tuple(f"p{n},s{n},Heron,2024-01-{n + 1:02d} 10:00,2024-01-{n + 4:02d} 16:00" for n in range(1, 20))


def test_a_clean_row_is_used_as_it_stands(read: Read) -> None:
    """Nothing is done to clean rows."""
    report = read(*PLAIN).report

    assert (report.rows_in, report.used, report.repaired, report.set_aside) == (19, 19, 0, 0)
    assert dict(report.reasons) == {}


def test_a_patient_still_in_is_kept_as_unfinished(read: Read) -> None:
    """A blank end near the end of the file is a patient still in, not an error."""
    records = read(*PLAIN, "a,b,Heron,2024-01-22 09:00,")

    assert ("Heron", "01-22 09:00", "still in") in stay_times(records)
    assert reasons(records) == {}
    assert any("still in" in note for note in records.report.notes)


def test_a_forgotten_end_is_closed_where_the_next_stay_starts(read: Read) -> None:
    """A patient who went on to another ward has left the first one."""
    records = read(*PLAIN, "a,b,Heron,2024-01-02 09:00,", "a,b,Teal,2024-01-05 11:00,2024-01-07 12:00")

    assert reasons(records) == {"forgotten, closed": 1}
    assert ("Heron", "01-02 09:00", "01-05 11:00") in stay_times(records)


def test_an_open_stay_far_longer_than_any_other_is_set_aside(read: Read) -> None:
    """An end that is missing for a year on a ward of three-day stays was forgotten; its bed-days are told."""
    late = tuple(f"q{n},t{n},Heron,2025-01-{n + 1:02d} 10:00,2025-01-{n + 4:02d} 16:00" for n in range(1, 20))
    records = read(*PLAIN, *late, "a,b,Heron,2024-01-02 00:00,")

    assert reasons(records) == {"forgotten, aside": 1}
    # The file ends on 23 January 2025 at 16:00; it was seen until the midnight after, 388 days after the start.
    assert records.report.bed_days[RULES["forgotten, aside"].sentence] == pytest.approx(388)


def test_swapped_days_and_months_are_turned_round_when_the_file_shows_several(read: Read) -> None:
    """Three stays that end before they start, and make sense with day and month exchanged, show the swap."""
    swapped = (
        "a,a,Heron,2024-03-10 10:00,2024-12-03 12:00",  # not negative: 3 December
        "b,b,Heron,2024-04-02 10:00,2024-03-04 12:00",  # meant: 3 April
        "c,c,Heron,2024-05-06 10:00,2024-07-05 12:00",  # not negative
        "d,d,Heron,2024-09-06 10:00,2024-08-09 12:00",  # meant: 8 September
        "e,e,Heron,2024-10-09 10:00,2024-10-10 12:00",
        "f,f,Heron,2024-11-01 10:00,2024-02-11 12:00",  # meant: 2 November
    )
    others = tuple(f"o{n},o{n},Teal,2024-{n % 11 + 1:02d}-{n % 28 + 1:02d} 10:00,2024-12-01 12:00" for n in range(600))
    records = read(*PLAIN, *swapped, *others)

    assert reasons(records) == {"swapped": 3}
    assert ("Heron", "04-02 10:00", "04-03 12:00") in stay_times(records)
    assert ("Heron", "11-01 10:00", "11-02 12:00") in stay_times(records)


def test_a_single_negative_stay_is_not_guessed_at(read: Read) -> None:
    """One stay that ends before it starts is set aside, even where a swap would make sense."""
    records = read(*PLAIN, "b,b,Heron,2024-04-02 10:00,2024-03-04 12:00")

    assert reasons(records) == {"negative": 1}
    assert len(records.set_aside) == 1


def test_the_repeated_hour_of_autumn_makes_no_negative_stay(read: Read) -> None:
    """In at 01:50 and out at 01:10 in the night the clock goes back is twenty minutes, not less than nothing."""
    records = read(*PLAIN, "b,b,Heron,2024-10-27 01:50,2024-10-27 01:10", "b,b,Teal,2024-10-27 01:10,2024-10-29 01:10")

    assert "negative" not in reasons(records)
    assert records.report.set_aside == 0


def test_a_stay_without_length_is_set_aside_but_counted(read: Read) -> None:
    """Start and end in one minute is a move inside the system."""
    assert reasons(read(*PLAIN, "b,b,Heron,2024-01-05 10:00,2024-01-05 10:00")) == {"zero stay": 1}


def test_passing_through_is_counted_in_the_next_stay(read: Read) -> None:
    """Twenty minutes on the way to a ward belong to the stay there."""
    records = read(
        *PLAIN, "b,b,Theatre,2024-01-05 10:00,2024-01-05 10:20", "b,b,Teal,2024-01-05 10:20,2024-01-08 10:00"
    )

    assert reasons(records) == {"passed through": 1}
    assert ("Teal", "01-05 10:00", "01-08 10:00") in stay_times(records)


def test_passing_through_at_the_end_is_counted_in_the_stay_before(read: Read) -> None:
    """Twenty minutes in the lounge before going home belong to the ward's stay."""
    records = read(
        *PLAIN, "b,b,Teal,2024-01-05 10:20,2024-01-08 10:00", "b,b,Discharge Lounge,2024-01-08 10:00,2024-01-08 10:20"
    )

    assert reasons(records) == {"passed through": 1}
    assert ("Teal", "01-05 10:20", "01-08 10:20") in stay_times(records)


def test_a_short_stay_with_no_neighbour_is_set_aside(read: Read) -> None:
    """Ten minutes of a patient who was nowhere else is no stay."""
    assert reasons(read(*PLAIN, "b,b,Teal,2024-01-05 10:20,2024-01-05 10:30")) == {"too short": 1}


def test_a_stay_within_one_day_counts_by_the_hour(read: Read) -> None:
    """Six hours are six hours, not no days."""
    records = read(*PLAIN, "b,b,Heron,2024-01-05 10:00,2024-01-05 16:00")

    assert reasons(records) == {}
    assert any("start and end on one day" in note for note in records.report.notes)


def test_the_same_row_twice_counts_once(read: Read) -> None:
    """Of two equal rows one is kept."""
    records = read(*PLAIN, PLAIN[3])

    assert reasons(records) == {"duplicate": 1}
    assert len(records.stays) == 19


def test_a_stay_sent_again_with_another_end_counts_once(read: Read) -> None:
    """Of two versions the longer is kept, and a finished one beats an unfinished one."""
    records = read(
        *PLAIN,
        "b,b,Teal,2024-01-05 10:00,2024-01-08 10:00",
        "b,b,Teal,2024-01-05 10:00,2024-01-09 10:00",
        "c,c,Teal,2024-01-06 10:00,",
        "c,c,Teal,2024-01-06 10:00,2024-01-07 10:00",
    )

    assert reasons(records) == {"resubmitted": 2}
    assert ("Teal", "01-05 10:00", "01-09 10:00") in stay_times(records)
    assert ("Teal", "01-06 10:00", "01-07 10:00") in stay_times(records)


def test_overlapping_stays_are_cut_where_the_next_one_starts(read: Read) -> None:
    """A patient can't use two beds at once."""
    records = read(*PLAIN, "b,b,Heron,2024-01-05 10:00,2024-01-08 10:00", "b,b,Teal,2024-01-07 12:00,2024-01-09 12:00")

    assert reasons(records) == {"overlap": 1}
    assert ("Heron", "01-05 10:00", "01-07 12:00") in stay_times(records)
    assert any("longer than 12 hours" in note for note in records.report.notes)


@pytest.mark.parametrize(("until", "is_long"), [("16:00", False), ("21:59", False), ("22:01", True)])
def test_overlaps_of_more_than_twelve_hours_are_told(read: Read, until: str, is_long: bool) -> None:
    """Six hours or nearly twelve on two wards may be a late entry; more is told, for somebody to look at."""
    records = read(
        *PLAIN, f"b,b,Heron,2024-01-05 10:00,2024-01-07 {until}", "b,b,Teal,2024-01-07 10:00,2024-01-09 12:00"
    )

    assert reasons(records) == {"overlap": 1}
    assert any("1 overlaps" in note for note in records.report.notes) == is_long


def test_a_stay_is_parted_round_one_inside_it(read: Read) -> None:
    """Where one stay covers another whole, the patient is in one bed at a time and comes back."""
    records = read(*PLAIN, "b,b,Heron,2024-01-05 10:00,2024-01-09 10:00", "b,b,Teal,2024-01-06 12:00,2024-01-07 12:00")

    assert reasons(records) == {"parted": 1}
    assert ("Heron", "01-05 10:00", "01-06 12:00") in stay_times(records)
    assert ("Teal", "01-06 12:00", "01-07 12:00") in stay_times(records)
    assert ("Heron", "01-07 12:00", "01-09 10:00") in stay_times(records)


def test_a_gap_of_up_to_an_hour_is_bridged(read: Read) -> None:
    """Forty minutes between two wards belong to the ward left."""
    records = read(*PLAIN, "b,b,Heron,2024-01-05 10:00,2024-01-07 10:00", "b,b,Teal,2024-01-07 10:40,2024-01-09 12:00")

    assert reasons(records) == {"bridged": 1}
    assert ("Heron", "01-05 10:00", "01-07 10:40") in stay_times(records)


@pytest.mark.parametrize(("back", "admissions"), [("10:20", 1), ("10:59", 1), ("11:00", 1), ("11:01", 2)])
def test_back_on_the_same_ward_within_an_hour_is_one_admission(read: Read, back: str, admissions: int) -> None:
    """Two beds of one ward with a gap between them are one stay, no move from the ward to itself."""
    records = read(*PLAIN, "b,b,Teal,2024-01-05 10:00,2024-01-07 10:00", f"b,b,Teal,2024-01-07 {back},2024-01-09 12:00")

    assert len(records.of_ward("Teal")) == admissions
    assert reasons(records) == ({"joined": 1} if admissions == 1 else {})
    if admissions == 1:
        assert ("Teal", "01-05 10:00", "01-09 12:00") in stay_times(records)


def test_a_short_way_out_and_back_is_one_admission(read: Read) -> None:
    """Twenty minutes in theatre and back to the same ward: one stay, from the first start to the last end."""
    records = read(
        *PLAIN,
        "b,b,Teal,2024-01-05 10:00,2024-01-07 10:00",
        "b,b,Discharge Lounge,2024-01-07 10:00,2024-01-07 10:20",
        "b,b,Teal,2024-01-07 10:20,2024-01-09 12:00",
    )

    assert [stay for stay in stay_times(records) if stay[0] == "Teal"] == [("Teal", "01-05 10:00", "01-09 12:00")]


@pytest.mark.parametrize(("minutes", "bridged"), [(1, True), (55, True), (60, True), (61, False), (70, False)])
def test_gaps_are_bridged_up_to_an_hour_and_no_further(read: Read, minutes: int, bridged: bool) -> None:
    """An hour between two wards is a move, a minute more is a gap; so the sentence of the report says."""
    left = pd.Timestamp("2024-01-07 10:00")
    onward = left + pd.Timedelta(minutes=minutes)
    records = read(*PLAIN, f"b,b,Heron,2024-01-05 10:00,{left}", f"b,b,Teal,{onward},2024-01-09 12:00")

    assert reasons(records) == ({"bridged": 1} if bridged else {})
    assert ("Heron", "01-05 10:00", f"{onward if bridged else left:%m-%d %H:%M}") in stay_times(records)


def test_a_longer_gap_inside_a_hospital_stay_is_told(read: Read) -> None:
    """Three hours between two wards are theatre or a missing ward; nothing is filled in."""
    records = read(*PLAIN, "b,b,Heron,2024-01-05 10:00,2024-01-07 10:00", "b,b,Teal,2024-01-07 13:00,2024-01-09 12:00")

    assert reasons(records) == {}
    assert any("between Heron and Teal" in note for note in records.report.notes)


def test_moves_inside_one_ward_are_one_stay(read: Read) -> None:
    """A change of bed or consultant is no new arrival."""
    records = read(
        *PLAIN,
        "b,b,Teal,2024-01-05 10:00,2024-01-07 10:00",
        "b,b,Teal,2024-01-07 10:03,2024-01-09 12:00",
        "b,b,Teal,2024-01-09 12:00,2024-01-10 12:00",
    )

    assert reasons(records) == {"joined": 2}
    assert ("Teal", "01-05 10:00", "01-10 12:00") in stay_times(records)
    assert (records.stays["ward"] == "Teal").sum() == 1


def test_transfers_are_told_apart_from_arrivals_in_hospital(read: Read) -> None:
    """One patient on two wards is two ward arrivals and one hospital arrival."""
    notes = read(*PLAIN, "b,b,Heron,2024-01-05 10:00,2024-01-07 10:00", "b,b,Teal,2024-01-07 10:00,2024-01-09 12:00")

    assert any("21 arrivals on wards are 20 arrivals in hospital and 1 moves" in note for note in notes.report.notes)


def test_spreadsheet_day_numbers_are_dates(read: Read) -> None:
    """Day 44927 of a spreadsheet is 1 January 2023: 44,927 days after 30 December 1899."""
    records = read("b,b,Heron,44927.5,44929.25", "c,c,Heron,2023-01-05 10:00,2023-01-09 10:00")

    assert reasons(records) == {"serial date": 1}
    assert ("Heron", "01-01 12:00", "01-03 06:00") in stay_times(records)


def test_day_numbers_counted_from_1904_show_by_the_other_dates(read: Read) -> None:
    """Day 43465 is 1 January 2023 in the 1904 count, which is 1,462 days behind."""
    others = tuple(f"q{n},t{n},Heron,2023-01-{n + 1:02d} 10:00,2023-01-{n + 4:02d} 16:00" for n in range(1, 20))
    records = read("b,b,Heron,43470.5,43472.25", *others)

    assert ("Heron", "01-06 12:00", "01-08 06:00") in stay_times(records)


def test_names_differing_in_spaces_and_capitals_are_one_ward(read: Read) -> None:
    """Spaces at the end, capitals and no-break spaces make no other ward."""
    records = read(
        *PLAIN,
        "b,b,Teal,2024-01-05 10:00,2024-01-07 10:00",
        "c,c,Teal,2024-01-06 10:00,2024-01-07 10:00",
        "d,d,Teal ,2024-01-05 10:00,2024-01-07 10:00",
        "e,e,TEAL,2024-01-05 10:00,2024-01-07 10:00",
        "f,f,Teal\u00a0,2024-01-05 10:00,2024-01-07 10:00",
    )

    assert reasons(records) == {"ward spelling": 3}
    assert records.wards == ("Heron", "Teal")


def test_a_renamed_ward_takes_the_name_chosen(read: Read) -> None:
    """Only a person's word joins two names."""
    records = read(
        *PLAIN, "b,b,Ward 7,2024-01-05 10:00,2024-01-07 10:00", choices=IntakeChoices(ward_names={"ward 7": "Heron"})
    )

    assert reasons(records) == {"ward renamed": 1}
    assert records.wards == ("Heron",)


@pytest.mark.parametrize(
    ("place", "rule"),
    [
        ("Virtual Ward", "virtual"),
        ("Hospital at Home", "virtual"),
        ("Well baby cots", "cot"),
        ("Delivery Suite", "delivery"),
        ("Main Theatre 3", "procedure place"),
        ("X-ray", "procedure place"),
        ("Discharge Lounge", "procedure place"),
        ("Emergency Department", "waiting place"),
        ("A&E", "waiting place"),
        ("Home leave", "leave"),
    ],
)
def test_places_without_ward_beds_are_set_aside(read: Read, place: str, rule: str) -> None:
    """Only wards with beds get bed numbers."""
    records = read(*PLAIN, f"b,b,{place},2024-01-05 10:00,2024-01-07 10:00")

    assert reasons(records) == {rule: 1}
    assert records.wards == ("Heron",)


def test_a_person_can_say_that_a_place_is_a_ward(read: Read) -> None:
    """The list of names is a proposal, not a law."""
    records = read(
        *PLAIN,
        "b,b,Recovery,2024-01-05 10:00,2024-01-07 10:00",
        choices=IntakeChoices(places={"Recovery": "bed ward"}),
    )

    assert records.wards == ("Heron", "Recovery")


@pytest.mark.parametrize("name", ["Special care baby unit", "Edgware", "Teddington", "Recover Street Ward", "Cotswold"])
def test_real_wards_are_not_taken_for_something_else(read: Read, name: str) -> None:
    """Names that merely look like a theatre, an ED or a cot stay wards."""
    assert name in read(*PLAIN, f"b,b,{name},2024-01-05 10:00,2024-01-07 10:00").wards


@pytest.mark.parametrize(
    ("patient_class", "rule"),
    [("3", "regular"), ("Regular day attender", "regular"), ("5", "delivery"), ("well baby", "cot")],
)
def test_classes_counted_apart_are_set_aside(read: Read, patient_class: str, rule: str) -> None:
    """Regular attenders, deliveries and well babies are other flows."""
    rows = [f"{row},ordinary" for row in PLAIN]
    records = read(
        *rows,
        f"b,b,Heron,2024-01-05 10:00,2024-01-05 16:00,{patient_class}",
        headings="patient_key,spell_key,ward,start,end,class",
    )

    assert reasons(records) == {rule: 1}


def test_without_a_class_regular_attenders_show_by_their_visits(read: Read) -> None:
    """A dozen short visits of one patient to one ward are a course of treatment."""
    visits = [f"b,v{n},Heron,2024-01-{n:02d} 09:00,2024-01-{n:02d} 13:00" for n in range(1, 14)]

    assert reasons(read(*PLAIN, *visits)) == {"regular": 13}


@pytest.mark.parametrize("key", ["TEST001", "zzz-patient", "Dummy 4"])
def test_test_patients_are_set_aside(read: Read, key: str) -> None:
    """Patients who exist in the system only use no beds."""
    assert reasons(read(*PLAIN, f"{key},b,Heron,2024-01-05 10:00,2024-01-05 16:00")) == {"test patient": 1}


def test_an_age_no_person_reaches_is_set_aside(read: Read) -> None:
    """Age 999 stands for nobody; real ages are kept in ten-year bands only."""
    rows = [f"{row},47" for row in PLAIN]
    records = read(
        *rows,
        "b,b,Heron,2024-01-05 10:00,2024-01-06 16:00,999",
        headings="patient_key,spell_key,ward,start,end,age",
    )

    assert reasons(records) == {"test patient": 1}
    assert set(records.stays["age_band"]) == {"40-49"}


@pytest.mark.parametrize("end", ["2099-01-01 10:00", "1900-01-01 00:00"])
def test_dates_in_the_future_or_the_distant_past_are_set_aside(read: Read, end: str) -> None:
    """Such dates are defaults or slips."""
    assert reasons(read(*PLAIN, f"b,b,Heron,{end},{end}")) == {"unlikely date": 1}


@pytest.mark.parametrize(
    ("row", "rule"),
    [
        ("b,b,,2024-01-05 10:00,2024-01-06 10:00", "no ward"),
        ("b,b,Heron,,2024-01-06 10:00", "no start"),
        ("b,b,Heron,sometime,2024-01-06 10:00", "start unreadable"),
        ("b,b,Heron,2024-01-05 10:00,later", "end unreadable"),
        ("b,b,Heron,2024-02-30 10:00,2024-03-06 10:00", "start unreadable"),
        ("Total,,Total,,", "misfit"),
        ("Run on 3 February 2024", "misfit"),
        ("patient_key,spell_key,ward,start,end", "misfit"),
    ],
)
def test_rows_that_say_too_little_are_set_aside(read: Read, row: str, rule: str) -> None:
    """A missing ward or date, a total, a footer, headings repeated half-way: told apart and counted."""
    assert reasons(read(*PLAIN, row)) == {rule: 1}


def test_titles_above_the_headings_are_skipped_and_told(read: Read) -> None:
    """Reports have titles; the headings are found below them."""
    records = read(
        "patient_key,spell_key,ward,start,end",
        *PLAIN,
        headings="Ward stays\n\nLarkmere District Hospital\nJanuary 2024",
    )

    assert records.report.rows_in == 19
    assert any("4 lines above the headings" in note for note in records.report.notes)


def test_dates_without_times_are_counted_in_nights(read: Read) -> None:
    """A stay from the 1st to the 4th is three nights; a stay within a day is none, and is kept."""
    records = read("a,a,Heron,2024-01-01,2024-01-04", "b,b,Heron,2024-01-02,2024-01-02")

    assert not records.has_times
    assert len(records.stays) == 2
    assert records.report.bed_days_used == pytest.approx(3)


def test_a_time_shared_by_many_stays_is_called_a_default(read: Read) -> None:
    """Nobody arrives at 12:00 half of the time."""
    rows = [
        f"p{n},s{n},Heron,2024-01-{n % 28 + 1:02d} 12:00,2024-02-{n % 28 + 1:02d} {n % 24:02d}:00" for n in range(250)
    ]

    assert any("12:00" in note and "default" in note for note in read(*rows).report.notes)


@pytest.mark.parametrize(("in_twenty", "is_told"), [(0, False), (1, False), (2, True), (3, True)])
@pytest.mark.parametrize("which", ["start", "end"])
def test_one_minute_of_the_day_for_more_than_one_stay_in_twenty_is_a_default(
    read: Read, which: str, in_twenty: int, is_told: bool
) -> None:
    """A tenth of all stays at 00:01 are a default; one in twenty may be a busy minute (common practice, no source)."""
    rows = []
    for n in range(400):
        start = pd.Timestamp("2024-01-01 02:00") + pd.Timedelta(minutes=332 * n)  # even minutes only
        both = {"start": start, "end": start + pd.Timedelta(days=3, minutes=2 * n)}
        if n % 20 < in_twenty:
            both[which] = both[which].replace(hour=0, minute=1)
        rows.append(f"p{n},s{n},Heron,{both['start']},{both['end']}")

    assert any(f"{which} at 00:01" in note and "default" in note for note in read(*rows).report.notes) == is_told


def test_ambiguous_dates_stop_and_ask(read: Read) -> None:
    """Where every date could be read both ways, three rows are shown both ways and nothing is guessed."""
    rows = ("a,a,Heron,03/04/2024 10:00,05/04/2024 10:00", "b,b,Heron,01/02/2024 10:00,03/02/2024 10:00")
    with pytest.raises(UnreadableRecords, match="day first or month first") as problem:
        read(*rows)

    question = problem.value.question
    assert question.examples[0] == ("03/04/2024 10:00", "03 April 2024", "04 March 2024")
    assert stay_times(read(*rows, date_order="day first"))[-1] == ("Heron", "04-03 10:00", "04-05 10:00")
    assert stay_times(read(*rows, date_order="month first"))[-1] == ("Heron", "03-04 10:00", "05-04 10:00")


def test_one_day_above_twelve_settles_the_order(read: Read) -> None:
    """13/04 can only be day first, so 03/04 is read so too."""
    records = read("a,a,Heron,03/04/2024 10:00,05/04/2024 10:00", "b,b,Heron,13/04/2024 10:00,15/04/2024 10:00")

    assert stay_times(records)[0] == ("Heron", "04-03 10:00", "04-05 10:00")


def test_a_file_in_two_orders_asks_and_can_be_read_row_by_row(read: Read) -> None:
    """Where one month was exported month first, each row is read the way that fits the rows around it."""
    january = [f"a{n},a{n},Heron,{n:02d}/01/2024 10:00,{n + 2:02d}/01/2024 10:00" for n in range(1, 29)]
    february = [f"b{n},b{n},Heron,02/{n:02d}/2024 10:00,02/{n + 1:02d}/2024 12:00" for n in range(1, 29)]
    with pytest.raises(UnreadableRecords, match="day first or month first"):
        read(*january, *february)

    records = read(*january, *february, date_order="row by row")
    assert list(records.stays["start"].dt.month) == [1] * 28 + [2] * 28
    assert list(records.stays["start"].dt.day) == [*range(1, 29), *range(1, 29)]
    assert (records.stays["end"] - records.stays["start"]).max() <= pd.Timedelta(days=2)


@pytest.mark.parametrize(("loose", "is_read"), [(0, True), (5, False), (12, False)])
def test_only_a_file_sorted_by_time_is_read_row_by_row(read: Read, loose: int, is_read: bool) -> None:
    """Rows out of their place leave the rank correlation of row and time at 0.5 to 0.99: too loose to lean on, so refused."""
    every = pd.date_range("2024-01-13 10:00", periods=120)
    days = [day for _, day in sorted((n + loose * (n % 4), day) for n, day in enumerate(every))]
    days = [day for day in days if day.day > 12]  # each can be read one way only
    agreed = np.corrcoef(np.argsort(np.argsort(days)), np.arange(len(days)))[0, 1]
    forms = ("%d/%m/%Y %H:%M", "%m/%d/%Y %H:%M")
    both = [[f"{one:{forms[n % 2]}}" for one in (day, day + pd.Timedelta(hours=3))] for n, day in enumerate(days)]
    rows = [f"p{n},s{n},Heron,{start},{end}" for n, (start, end) in enumerate(both)]

    assert agreed > 0.99 if is_read else 0.5 < agreed < 0.99
    if is_read:
        assert list(read(*rows, date_order="row by row").stays["start"]) == days
    else:
        with pytest.raises(UnreadableRecords, match="not sorted by start"):
            read(*rows, date_order="row by row")


def test_offsets_are_told_and_can_be_brought_to_the_hospitals_clock(read: Read) -> None:
    """10:00 world time is 11:00 in London in summer."""
    rows = ("a,a,Heron,2024-07-01T10:00:00Z,2024-07-03T10:00:00Z",)

    assert stay_times(read(*rows)) == [("Heron", "07-01 10:00", "07-03 10:00")]
    london = read(*rows, choices=IntakeChoices(time_zone="Europe/London"))
    assert stay_times(london) == [("Heron", "07-01 11:00", "07-03 11:00")]
    assert any("offset" in note for note in london.report.notes)


def test_world_time_betrays_itself_between_summer_and_winter(read: Read) -> None:
    """Arrivals an hour earlier by the file's clock in summer than in winter show that the clock is world time."""
    rows = []
    for n in range(6_000):
        day = pd.Timestamp("2024-01-01") + pd.Timedelta(days=n % 360)
        local = 8 + (n // 360) % 3
        clock = local - 1 if 4 <= day.month <= 10 else local
        rows.append(
            f"p{n},s{n},Heron,{day:%Y-%m-%d} {clock:02d}:{n % 60:02d},{day + pd.Timedelta(days=2):%Y-%m-%d} 15:00"
        )

    assert any("world time" in note for note in read(*rows).report.notes)


def test_an_export_by_admission_date_is_told(read: Read) -> None:
    """Where nobody was in at the start, counts near the start are too low."""
    rows = [
        f"p{n},s{n},Heron,{day:%Y-%m-%d} 10:00,{day + pd.Timedelta(days=5):%Y-%m-%d} 12:00"
        for n, day in enumerate(pd.date_range("2024-01-01", periods=200))
    ]

    assert any("No stay starts before the first day" in note for note in read(*rows * 1).report.notes)


def test_an_export_by_discharge_date_is_told(read: Read) -> None:
    """Where nobody is still in at the end, the export left those patients out."""
    rows = [
        f"p{n}{k},s{n}{k},Heron,{day:%Y-%m-%d} 10:00,{day + pd.Timedelta(days=stay):%Y-%m-%d} 12:00"
        for n, day in enumerate(pd.date_range("2024-01-01", periods=200))
        for k, stay in enumerate((5, 10))
        if day + pd.Timedelta(days=stay) < pd.Timestamp("2024-07-10")
    ]

    assert any("by discharge date" in note for note in read(*rows).report.notes)


def test_small_files_are_told_so(read: Read) -> None:
    """Under 200 stays no season is read."""
    assert any("A small file" in note for note in read(*PLAIN).report.notes)


def test_without_a_patient_key_the_file_still_counts(read: Read) -> None:
    """What can't be checked without a key is said."""
    records = read("Heron,2024-01-01 10:00,2024-01-04 10:00", headings="ward,start,end")

    assert len(records.stays) == 1
    assert any("No patient key" in note for note in records.report.notes)


def test_hospital_dates_stand_in_for_ward_dates_and_say_so(read: Read) -> None:
    """A spell extract hides moves between wards."""
    records = read(
        "a,Heron,2024-01-01 10:00,2024-01-04 10:00", headings="patient_key,ward,admission_date,discharge_date"
    )

    assert any("moves between wards are hidden" in note for note in records.report.notes)


def test_date_and_time_in_two_columns_are_put_together(read: Read) -> None:
    """Date and clock time side by side make one moment; a missing clock is midnight."""
    records = read(
        "a,Heron,2024-01-01,10:30,2024-01-04,09:15",
        "b,Heron,2024-01-02,,2024-01-04,09:15",
        headings="patient_key,Ward,Start Date,Ward Start Time,End Date,Ward End Time",
    )

    assert stay_times(records) == [("Heron", "01-01 10:30", "01-04 09:15"), ("Heron", "01-02 00:00", "01-04 09:15")]


@pytest.mark.parametrize("seed", range(12))
def test_rules_that_skip_untroubled_patients_do_as_if_they_looked_at_all(
    read: Read, monkeypatch: pytest.MonkeyPatch, seed: int
) -> None:
    """Stays thrown together at random end up the same whether or not patients are skipped to whom no rule can apply."""
    chance = random.Random(seed)  # noqa: S311  not for secrets
    lengths = (0, 10, 20, 45, 60, 90, 600, 1_440, 4_000)
    rows = []
    for number in range(300):
        if number % 3 == 0 or chance.random() < 0.2:
            end = pd.Timestamp("2024-01-01") + pd.Timedelta(minutes=chance.choice(lengths) * chance.randrange(9))
        start = end  # most go from ward to ward without a gap, as a rule may not touch them
        end = start + pd.Timedelta(
            minutes=chance.choice(lengths[4:]) if chance.random() < 0.8 else chance.choice(lengths)
        )
        ward = chance.choice(("Heron", "Teal", "Theatre", "Home leave"))
        shape = "%Y-%m-%d %H:%M" if seed % 3 else "%Y-%m-%d"
        ends = f"{end:{shape}}" if chance.random() > 0.05 else ""
        rows.append(f"p{number // 3},s{number // 4},{ward},{start:{shape}},{ends}")
    choices = IntakeChoices(bed_on_leave="held" if seed % 2 else "given away")
    skipping = read(*rows, choices=choices)
    monkeypatch.setattr(sequence, "to_look_at", lambda way, _always: np.arange(way.row.size))
    thorough = read(*rows, choices=choices)

    assert stay_times(skipping) == stay_times(thorough)
    assert skipping.report == thorough.report


@pytest.mark.parametrize("end", ["9999-12-31 00:00", "31.12.9999", "2999-01-04 11:00"])
def test_an_end_that_is_yet_to_come_is_no_end(read: Read, end: str) -> None:
    """Systems write the year 9999, or the day expected, for a patient who is still in."""
    records = read(*PLAIN, f"a,b,Heron,2024-01-22 09:00,{end}", date_order="day first")

    assert reasons(records) == {"end to come": 1}
    assert ("Heron", "01-22 09:00", "still in") in stay_times(records)
    assert str(records.seen_until.date()) == "2024-01-24"


@pytest.mark.parametrize("shorter", [True, False])
def test_a_stay_sent_again_counts_as_it_was_sent_last(read: Read, shorter: bool) -> None:
    """With other rows between, the later row is the correction, longer or shorter."""
    ends = ["2024-01-09 10:00", "2024-01-07 10:00"]
    first, last = ends if shorter else ends[::-1]
    records = read(f"c,c,Teal,2024-01-05 10:00,{first}", *PLAIN, f"c,c,Teal,2024-01-05 10:00,{last}")

    assert reasons(records) == {"resubmitted": 1}
    assert ("Teal", "01-05 10:00", last[5:]) in stay_times(records)


def test_of_two_ends_side_by_side_the_longer_counts(read: Read) -> None:
    """Rows next to each other don't show which was sent last; a shorter one below is set aside for that reason."""
    records = read(*PLAIN, "c,c,Teal,2024-01-05 10:00,2024-01-09 10:00", "c,c,Teal,2024-01-05 10:00,2024-01-07 10:00")

    assert reasons(records) == {"two ends": 1}
    assert ("Teal", "01-05 10:00", "01-09 10:00") in stay_times(records)


def test_without_patient_keys_exact_copies_are_found(read: Read) -> None:
    """Alike in ward, start and end to the minute, and in all else: one counts. Another class is another stay."""
    rows = [f"{row.split(',', 2)[2]},a" for row in PLAIN]
    records = read(*rows, rows[3], rows[3], rows[5][:-1] + "b", headings="ward,start,end,specialty")

    assert reasons(records) == {"duplicate": 2}
    assert len(records.stays) == len(PLAIN) + 1


@pytest.mark.parametrize("bare", ["start", "end"])
def test_dates_beside_times_are_read_as_dates(read: Read, bare: str) -> None:
    """Where ends have no time, a stay that ends on its first day is no stay that ends before it starts."""
    rows = []
    for place in range(60):
        start = pd.Timestamp("2024-01-01 10:00") + pd.Timedelta(days=place)
        end = start + pd.Timedelta(hours=4 if place % 4 == 0 else 60)
        times = [f"{one:%Y-%m-%d}" if bare == name else f"{one}" for name, one in (("start", start), ("end", end))]
        rows.append(f"p{place},s{place},Heron,{','.join(times)}")
    records = read(*rows)

    assert reasons(records) == {}
    assert not records.has_times
    nights = (records.stays["end"] - records.stays["start"]).dt.days
    assert sorted(set(nights)) == [0, 2]
    assert any("only the dates are used" in note for note in records.report.notes)


def test_default_times_of_ends_are_noticed(read: Read) -> None:
    """Two in five stays that end at 23:59 didn't: the report says so."""
    rows = []
    for place in range(300):
        start = pd.Timestamp("2024-01-01 06:00") + pd.Timedelta(minutes=317 * place)
        end = start + pd.Timedelta(days=2, minutes=13 * place % 400)
        end = end.replace(hour=23, minute=59) if place % 5 < 2 else end
        rows.append(f"p{place},s{place},Heron,{start},{end}")

    assert any("40\N{NO-BREAK SPACE}% of stays end at 23:59" in note for note in read(*rows).report.notes)
