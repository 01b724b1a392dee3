"""What really happened at Larkmere, which no hospital knows of itself: every want, every refusal.

truth_patients.csv has a row for every ward that a patient wanted within the three years:

- `came_from` is outside, booked, or the ward that the patient was on;
- `second_choice` is yes where the patient only wanted this ward because an earlier one was
  full (Kestrel full: the patient goes to Heron, and on from there like anybody else);
- `found_full` is yes where there was no bed when it was asked for;
- `outcome` is placed, outlier (on another ward, `outlier_on`), lost (to another hospital),
  cancelled (booked), sent to Heron (for good), or waiting (still, at the end);
- `recorded` is yes where a refusal (lost) is in refusals.csv.

truth_daily_load.csv has, for every date and ward, four averages over the 24 hours of the
number of this ward's patients, that is of those who want *this* ward, wherever they are:

- `on_own_ward`: lying on it;
- `as_outliers`: lying on another ward instead, until they leave the hospital;
- `waiting_elsewhere`: not placed yet: in a bed of Heron or Merlin whose stay is over, in
  the emergency department's queue for Heron, or (stroke patients sent to Heron because
  Teal was full) on Heron during their stay there;
- `beds_wanted`, the true load: each want of first choice, those turned away and cancelled
  included, counted from the minute the ward was wanted (booked cases from the hour of 13:00) for as
  long as the patient would have stayed had a bed been free at that minute. Nobody waits,
  nobody lies elsewhere, nobody is lost: it is the load that beds on this ward would have
  to carry if there had always been one.

The beds that a ward's patients really used are `on_own_ward` + `as_outliers`. Waiting is not
part of it, because a wait ends as soon as there is a bed.
"""

from collections.abc import Iterator
from pathlib import Path

from demo_data.beds import Want
from demo_data.files import DAYS, WINDOW_END, WINDOW_START, Row, in_window, is_recorded, time_text, write_table
from demo_data.flow import Flow, booked_start
from demo_data.hospital import Hospital
from demo_data.patients import MINUTES_A_DAY, patient_key, stay_end

WANT_COLUMNS = (
    "patient_key",
    "wanted_ward",
    "wanted_at",
    "came_from",
    "second_choice",
    "found_full",
    "outcome",
    "placed_at",
    "outlier_on",
    "recorded",
)
LOAD_COLUMNS = ("date", "ward", "on_own_ward", "as_outliers", "waiting_elsewhere", "beds_wanted")
COUNTED = LOAD_COLUMNS[2:]
GIVES_UP_AT_ONCE = ("lost", "cancelled", "sent to Heron")


def _yes(answer: bool) -> str:
    """Return yes, or nothing."""
    return "yes" if answer else ""


def want_rows(flow: Flow) -> Iterator[Row]:
    """Return every ward that a patient wanted, and what came of it."""
    for want in flow.wants:
        if in_window(want):
            yield (
                patient_key(want.patient.number),
                want.ward,
                time_text(want.wanted_at),
                want.came_from,
                _yes(want.after_refusal),
                _yes(want.found_full),
                want.outcome,
                time_text(want.placed_at),
                want.placed_on if want.outcome == "outlier" else "",
                _yes(is_recorded(want, flow.hospital)),
            )


class DailyMinutes:
    """Patient-minutes by what is counted, ward and day, within the three years."""

    def __init__(self, wards: tuple[str, ...]) -> None:
        self.minutes = {(counted, ward): [0] * len(DAYS) for counted in COUNTED for ward in wards}

    def add(self, counted: str, ward: str, start: int, end: int) -> None:
        """Add one patient from one minute to another."""
        start, end = max(start, WINDOW_START) - WINDOW_START, min(end, WINDOW_END) - WINDOW_START
        by_day = self.minutes[counted, ward]
        while start < end:
            day = start // MINUTES_A_DAY
            stop = min(end, (day + 1) * MINUTES_A_DAY)
            by_day[day] += stop - start
            start = stop


def _wanted_period(want: Want, hospital: Hospital) -> tuple[int, int]:
    """Return from when to when a bed on the ward wanted would have been used, had there been one."""
    start = booked_start(want) if want.came_from == "booked" else want.wanted_at
    return start, stay_end(hospital.by_name[want.ward], want.chances, start)


def daily_minutes(flow: Flow) -> DailyMinutes:
    """How long was each ward's patients' use, wait and want of a bed, day by day?

    Checked by: tests/demo_data/test_rules.py
    """
    load = DailyMinutes(tuple(flow.hospital.by_name))
    for stay in flow.stays:
        counted = "on_own_ward" if stay.ward == stay.want.ward else "as_outliers"
        load.add(counted, stay.want.ward, stay.start, WINDOW_END if stay.end is None else stay.end)
    for want in flow.wants:
        if want.came_from != "booked" and want.outcome not in GIVES_UP_AT_ONCE:
            placed_at = WINDOW_END if want.placed_at is None else want.placed_at
            load.add("waiting_elsewhere", want.ward, want.wanted_at, placed_at)
        if not want.after_refusal:
            load.add("beds_wanted", want.ward, *_wanted_period(want, flow.hospital))
    return load


def load_rows(flow: Flow) -> Iterator[Row]:
    """Return the four averages for every date and ward."""
    minutes = daily_minutes(flow).minutes
    for number, day in enumerate(DAYS):
        for ward in flow.hospital.by_name:
            averages = (minutes[counted, ward][number] / MINUTES_A_DAY for counted in COUNTED)
            yield day.isoformat(), ward, *(f"{average:.3f}" for average in averages)


def write_truth(flow: Flow, folder: Path) -> None:
    """Write what really happened.

    Checked by: tests/demo_data/test_rules.py
    """
    write_table(folder / "truth_patients.csv", WANT_COLUMNS, want_rows(flow))
    write_table(folder / "truth_daily_load.csv", LOAD_COLUMNS, load_rows(flow))
