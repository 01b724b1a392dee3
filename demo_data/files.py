"""What the hospital's own systems hold: stays, census, capacity, refusals, requests, returns."""

import csv
from bisect import bisect_right
from collections.abc import Iterable, Iterator
from datetime import date, timedelta
from functools import cache
from itertools import groupby
from operator import itemgetter
from pathlib import Path

from demo_data.beds import Stay, Want
from demo_data.draws import pick, running_shares
from demo_data.flow import Flow
from demo_data.hospital import AGE_BANDS, DESTINATIONS, WINDOW_FROM, WINDOW_TO, Hospital
from demo_data.patients import MINUTES_A_DAY, day_of, in_tail, minute_at, patient_key, stay_end

WINDOW_START, WINDOW_END = minute_at(WINDOW_FROM), minute_at(WINDOW_TO)
DAYS = tuple(WINDOW_FROM + timedelta(days=number) for number in range((WINDOW_TO - WINDOW_FROM).days))
CENSUS_TIMES = ("00:00", "11:00")
READY_BEFORE_END = 0.6  # of the stay, for Plover's patients who are fit to go long before they can

Row = tuple[object, ...]

STAY_COLUMNS = (
    "patient_key",
    "spell_key",
    "ward",
    "start",
    "end",
    "class",
    "method",
    "home_specialty",
    "age_band",
    "ready_date",
    "destination",
)
CENSUS_COLUMNS = ("date", "time", "ward", "beds_available", "beds_occupied")
CAPACITY_COLUMNS = ("ward", "from", "to", "funded_beds", "staffed_beds", "closed_beds", "reason")
REFUSAL_COLUMNS = ("time", "ward", "reason", "outcome")
REQUEST_COLUMNS = ("ward", "requested_at", "placed_at", "wait_hours")
CANCELLATION_COLUMNS = ("planned_date", "ward", "reason")
RETURN_COLUMNS = ("month", "ward", "available_bed_days", "occupied_bed_days", "discharges")


def write_table(path: Path, columns: tuple[str, ...], rows: Iterable[Row]) -> None:
    """Write one table: UTF-8, commas, one line feed a row."""
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(columns)
        writer.writerows(rows)


@cache
def _date_text(day_number: int) -> str:
    """Return the date of a day of the run, written YYYY-MM-DD."""
    return day_of(day_number * MINUTES_A_DAY).isoformat()


def time_text(minute: int | None) -> str:
    """Return a minute of the run, written YYYY-MM-DD HH:MM; nothing for none."""
    if minute is None:
        return ""
    day_number, clock = divmod(minute, MINUTES_A_DAY)
    return f"{_date_text(day_number)} {clock // 60:02d}:{clock % 60:02d}"


@cache
def _ends(shares: tuple[float, ...]) -> tuple[float, ...]:
    """Return running shares, worked out once a ward."""
    return running_shares(shares)


def stays_in_window(flow: Flow) -> list[Stay]:
    """Which stays overlap the three years? Those begun earlier and those unfinished are among them."""
    stays = [stay for stay in flow.stays if stay.end is None or stay.end > WINDOW_START]
    return sorted(stays, key=lambda stay: (stay.start, stay.want.patient.number))


def _ready_date(stay: Stay, hospital: Hospital) -> str:
    """Return since when the patient was fit to go, where that is known."""
    ward = hospital.by_name[stay.want.ward]
    if not in_tail(ward, stay.want.chances):
        return ""
    end = stay_end(ward, stay.want.chances, stay.start)
    ready = end - int(READY_BEFORE_END * (end - stay.start) + 0.5)
    return time_text(ready) if ready < WINDOW_END else ""


def _destination(stay: Stay, hospital: Hospital, moved: bool) -> str:
    """Return where the patient went from here; nothing while they are still here."""
    if stay.end is None:
        return ""
    if moved:
        return "another ward"
    shares = _ends(hospital.by_name[stay.want.ward].leave_to)
    return DESTINATIONS[pick(stay.want.patient.destination, shares)]


def stay_rows(flow: Flow) -> Iterator[Row]:
    """Return one row for every stay of a patient on a ward."""
    last = {stay.want.patient.number: stay for stay in flow.stays}
    wards = flow.hospital.by_name
    for stay in stays_in_window(flow):
        patient, key = stay.want.patient, stay.want.patient.number
        ages = _ends(wards[patient.ward].ages)
        waits_for_teal = stay.want.onward is not None
        yield (
            patient_key(key),
            f"S{key:06d}",
            stay.ward,
            time_text(stay.start),
            time_text(stay.end),
            "ordinary",
            "booked" if wards[patient.ward].weekday_lists else "emergency",
            wards["Teal" if waits_for_teal else stay.want.ward].specialty,
            AGE_BANDS[pick(patient.age, ages)],
            _ready_date(stay, flow.hospital),
            _destination(stay, flow.hospital, moved=last[key] is not stay),
        )


def census_rows(flow: Flow) -> Iterator[Row]:
    """Return the beds open and occupied on every ward at midnight and at 11:00."""
    starts, ends = {}, {}
    for ward in flow.hospital.by_name:
        stays = [stay for stay in flow.stays if stay.ward == ward]
        starts[ward] = sorted(stay.start for stay in stays)
        ends[ward] = sorted(stay.end for stay in stays if stay.end is not None)
    for day in DAYS:
        for clock in CENSUS_TIMES:
            minute = minute_at(day) + int(clock[:2]) * 60
            for ward in flow.hospital.by_name:
                occupied = bisect_right(starts[ward], minute) - bisect_right(ends[ward], minute)
                yield day.isoformat(), clock, ward, flow.hospital.open_beds(ward, day), occupied


def _beds_and_reason(hospital: Hospital, ward: str, day: date) -> tuple[int, int, int, str]:
    """Return a ward's funded, staffed and closed beds on a day, and why they differ."""
    changes = hospital.changes_on(ward, day)
    funded = hospital.by_name[ward].funded_beds
    staffed = funded + sum(change.extra_beds for change in changes)
    closed = sum(change.closed_beds for change in changes)
    return funded, staffed, closed, "; ".join(change.reason for change in changes)


def capacity_rows(hospital: Hospital) -> Iterator[Row]:
    """Return every ward's beds by dates, first and last day included. Open beds are staffed less closed."""
    for ward in hospital.by_name:
        by_day = ((day, _beds_and_reason(hospital, ward, day)) for day in DAYS)
        for beds, same in groupby(by_day, key=itemgetter(1)):
            days = [day for day, _ in same]
            yield ward, days[0].isoformat(), days[-1].isoformat(), *beds


def in_window(want: Want) -> bool:
    """Did the patient want this ward within the three years?"""
    return want.wanted_at >= WINDOW_START


def is_recorded(want: Want, hospital: Hospital) -> bool:
    """Was this patient turned away, and did someone write it down?"""
    return want.outcome == "lost" and want.patient.recorded < hospital.by_name[want.ward].recorded_share


def refusal_rows(flow: Flow) -> Iterator[Row]:
    """Return the refusals that someone wrote down."""
    for want in flow.wants:
        if in_window(want) and is_recorded(want, flow.hospital):
            yield time_text(want.wanted_at), want.ward, "no bed", "another hospital"


def request_rows(flow: Flow) -> Iterator[Row]:
    """Return every request for a bed on Heron, and the wait for it."""
    for want in flow.wants:
        if want.ward == "Heron" and in_window(want):
            waited = "" if want.placed_at is None else f"{(want.placed_at - want.wanted_at) / 60:.2f}"
            yield want.ward, time_text(want.wanted_at), time_text(want.placed_at), waited


def cancellation_rows(flow: Flow) -> Iterator[Row]:
    """Return the booked cases that were cancelled on the day."""
    for want in flow.wants:
        if want.outcome == "cancelled" and in_window(want):
            yield day_of(want.wanted_at).isoformat(), want.ward, "no bed"


def return_rows(flow: Flow) -> Iterator[Row]:
    """Return bed-days by month, counted at midnight, and the stays that ended (to home or another ward)."""
    left: dict[tuple[str, str], int] = {}
    for stay in stays_in_window(flow):
        if stay.end is not None:
            key = (time_text(stay.end)[:7], stay.ward)
            left[key] = left.get(key, 0) + 1
    beds: dict[tuple[str, str], list[int]] = {}
    for day, clock, ward, available, occupied in census_rows(flow):
        if clock == "00:00":
            total = beds.setdefault((day[:7], ward), [0, 0])
            total[0] += available
            total[1] += occupied
    for key, (available, occupied) in beds.items():
        yield *key, available, occupied, left.get(key, 0)


def write_records(flow: Flow, folder: Path) -> None:
    """Write the files that the hospital's own systems would give out.

    Checked by: tests/demo_data/test_demo.py
    """
    write_table(folder / "stays.csv", STAY_COLUMNS, stay_rows(flow))
    write_table(folder / "census.csv", CENSUS_COLUMNS, census_rows(flow))
    write_table(folder / "capacity.csv", CAPACITY_COLUMNS, capacity_rows(flow.hospital))
    write_table(folder / "refusals.csv", REFUSAL_COLUMNS, refusal_rows(flow))
    write_table(folder / "bed_requests.csv", REQUEST_COLUMNS, request_rows(flow))
    write_table(folder / "cancellations.csv", CANCELLATION_COLUMNS, cancellation_rows(flow))
    write_table(folder / "monthly_return.csv", RETURN_COLUMNS, return_rows(flow))
