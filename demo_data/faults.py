"""The faults of the dirty edition: each on patients of its own, so that every one can be counted.

A row is a dictionary of the columns of stays.csv, all text. No row gets two faults.
"""

from collections.abc import Callable, Iterator
from datetime import datetime, timedelta
from itertools import islice

Row = dict[str, str]
Patient = list[Row]  # the rows of one patient, in order

TIME_FORM = "%Y-%m-%d %H:%M"
TIMES = ("start", "end", "ready_date")
RENAMED_ON = datetime(2022, 10, 1)  # noqa: DTZ001 - the hospital's own clock, as in the files
MONTH_FIRST_MONTH, UTC_MONTH = "2023-11", "2023-07"  # patients first seen in these months
LAST_DAYS_FROM, LONG_AGO = "2025-03-28", "2023-07-01"
SPREADSHEET_DAY_0 = datetime(1899, 12, 30)  # noqa: DTZ001 - the spreadsheet's own clock
SHORT_STAY_WARDS = ("Heron", "Dunlin", "Sandpiper")  # nobody stays a year and a half there


def time_of(text: str) -> datetime:
    """Return a time of the files."""
    return datetime.fromisoformat(text)


def text_of(time: datetime) -> str:
    """Return a time as the files write it."""
    return time.strftime(TIME_FORM)


def later(text: str, minutes: float) -> str:
    """Return a time of the files, so many minutes later."""
    return text_of(time_of(text) + timedelta(minutes=int(minutes)))


def lasting_minutes(row: Row) -> float:
    """How long is a finished stay?"""
    return (time_of(row["end"]) - time_of(row["start"])).total_seconds() / 60


def swap_day_and_month(text: str) -> str:
    """Return a time with its day and month the wrong way round, or nothing if there is no such date."""
    year, month, day = text[:10].split("-")
    return f"{year}-{day}-{month}{text[10:]}" if int(day) <= 12 else ""


class Faults:
    """The rows of the clean file, and the faults put into them so far.

    `late` rows are those sent after the others; `counts` is the truth: fault -> rows.
    """

    def __init__(self, rows: list[Row], chance: Iterator[float]) -> None:
        self.rows = rows
        self.late: list[Row] = []
        self.counts: dict[str, int] = {}
        self.chance = chance
        by_patient: dict[str, Patient] = {}
        for row in rows:
            by_patient.setdefault(row["patient_key"], []).append(row)
        self.untouched = sorted(by_patient.values(), key=lambda _: next(chance))

    def between(self, least: float, most: float) -> float:
        """Return an amount drawn evenly between two."""
        return least + (most - least) * next(self.chance)

    def take(self, number: int | None, fits: Callable[[Patient], bool]) -> list[Patient]:
        """Return patients without a fault so far who fit (None: all), and don't use them again."""
        chosen = list(islice((patient for patient in self.untouched if fits(patient)), number))
        if number is not None and len(chosen) < number:
            raise ValueError(f"Only {len(chosen)} patients fit a fault that needs {number}.")
        used = {id(patient) for patient in chosen}
        self.untouched = [patient for patient in self.untouched if id(patient) not in used]
        return chosen

    def count(self, fault: str, rows: int) -> None:
        """Note how many rows carry a fault."""
        self.counts[fault] = rows


def is_single(patient: Patient) -> bool:
    """Has this patient one stay only, and has it ended?"""
    return len(patient) == 1 and patient[0]["end"] != ""


def is_moved(patient: Patient) -> bool:
    """Has this patient a stay, then another that lasted over a day?"""
    return len(patient) == 2 and patient[1]["end"] != "" and lasting_minutes(patient[1]) > 1440


# Whole groups first: still in, renamed, and two months in another clock or order.


def set_groups_apart(faults: Faults) -> None:
    """Put apart the patients still in; give Kestrel its old name; write two months otherwise."""
    still_in = faults.take(None, lambda patient: patient[-1]["end"] == "")
    faults.count("no end: still in", len(still_in))
    renamed = faults.take(None, lambda patient: any(map(was_ward_7, patient)))
    old_name = [row for patient in renamed for row in patient if was_ward_7(row)]
    for row in old_name:
        row["ward"] = "Ward 7"
    faults.count("ward under its old name, Ward 7", len(old_name))
    _rewrite_times(faults, MONTH_FIRST_MONTH, "month first: patients first seen in November 2023", month_first)
    _rewrite_times(faults, UTC_MONTH, "in UTC: patients first seen in July 2023", in_utc)


def was_ward_7(row: Row) -> bool:
    """Was Kestrel still called Ward 7 when this stay began?"""
    return row["ward"] == "Kestrel" and time_of(row["start"]) < RENAMED_ON


def month_first(text: str) -> str:
    """Return a time with the month first."""
    return time_of(text).strftime("%m/%d/%Y %H:%M")


def in_utc(text: str) -> str:
    """Return a summer time in UTC, an hour behind the hospital's clock."""
    return (time_of(text) - timedelta(hours=1)).strftime("%Y-%m-%dT%H:%MZ")


def _rewrite_times(faults: Faults, month: str, fault: str, rewrite: Callable[[str], str]) -> None:
    """Write all times of a month's new patients in another way."""
    rows = [row for patient in faults.take(None, lambda patient: patient[0]["start"][:7] == month) for row in patient]
    for row in rows:
        row.update({column: rewrite(row[column]) for column in TIMES if row[column]})
    faults.count(fault, len(rows))


# Then the faults of single rows.


def lose_ends(faults: Faults) -> None:
    """Leave ends out: of patients just gone, of patients who moved on, and of patients long gone."""
    just_gone = faults.take(20, lambda patient: is_single(patient) and patient[0]["end"] > LAST_DAYS_FROM)
    moved = faults.take(25, is_moved)
    gone = faults.take(
        15,
        lambda patient: is_single(patient) and patient[0]["ward"] in SHORT_STAY_WARDS and patient[0]["end"] < LONG_AGO,
    )
    for patient in (*just_gone, *moved, *gone):
        patient[0]["end"] = ""
    faults.count("no end: left in the last four days, not entered yet", 20)
    faults.count("no end: forgotten, the patient's next stay follows", 25)
    faults.count("no end: forgotten, long ago and no later stay", 15)


def _ends_early_when_swapped(patient: Patient) -> bool:
    """Does this stay end before it starts once its end has day and month swapped, and can only the end be swapped?"""
    if not is_single(patient) or swap_day_and_month(patient[0]["start"]):
        return False
    return "" != swap_day_and_month(patient[0]["end"]) < patient[0]["start"]


def _cannot_be_swapped(patient: Patient) -> bool:
    """Do both days of this stay stand after the 12th, also three days earlier?"""
    return is_single(patient) and all(int(patient[0][column][8:10]) > 15 for column in ("start", "end"))


def turn_stays_round(faults: Faults) -> None:
    """Let stays end before they start: some by day and month swapped, some beyond mending."""
    for patient in faults.take(15, _ends_early_when_swapped):
        patient[0]["end"] = swap_day_and_month(patient[0]["end"])
    for patient in faults.take(10, _cannot_be_swapped):
        patient[0]["end"] = later(patient[0]["start"], -faults.between(60, 3 * 1440))
    faults.count("ends before it starts: day and month of the end swapped", 15)
    faults.count("ends before it starts: no swap mends it", 10)


def send_again(faults: Faults) -> None:
    """Send rows twice: unchanged, and with an end put right later."""
    for patient in faults.take(180, is_single):
        faults.late.append(dict(patient[0]))
    for patient in faults.take(40, lambda patient: is_single(patient) and lasting_minutes(patient[0]) > 600):
        faults.late.append(dict(patient[0]))
        patient[0]["end"] = later(patient[0]["start"], faults.between(0.3, 0.9) * lasting_minutes(patient[0]))
    faults.count("exact duplicate", 180)
    faults.count("sent again later with another end", 40)


def overlap(faults: Faults) -> None:
    """Let a patient leave one ward up to six hours after arriving on the next."""
    for patient in faults.take(30, is_moved):
        patient[0]["end"] = later(patient[0]["end"], faults.between(10, 360))
    faults.count("overlaps the patient's next stay", 30)


def pass_through(faults: Faults) -> None:
    """Add minutes in the discharge lounge after a stay, or in theatre before one."""
    for patient in faults.take(150, lambda patient: is_single(patient) and patient[0]["end"] < LAST_DAYS_FROM):
        end = patient[0]["end"]
        lounge = patient[0] | {"ward": "Discharge lounge", "start": end, "end": later(end, faults.between(5, 30))}
        faults.rows.append(lounge | {"ready_date": ""})
    for patient in faults.take(70, lambda patient: is_single(patient) and patient[0]["ward"] == "Sandpiper"):
        start = patient[0]["start"]
        theatre = {"ward": "Theatre", "start": later(start, -faults.between(5, 30)), "end": start}
        faults.rows.append(patient[0] | theatre | {"destination": "another ward"})
    faults.count("under 30 minutes: discharge lounge", 150)
    faults.count("under 30 minutes: theatre", 70)


def spreadsheet_day(text: str) -> str:
    """Return a time as a spreadsheet's day number."""
    return f"{(time_of(text) - SPREADSHEET_DAY_0) / timedelta(days=1):.6f}"


def spoil_cells(faults: Faults) -> None:
    """Write dates as day numbers, and Teal's name with spaces that cannot be seen."""
    for patient in faults.take(12, lambda patient: is_single(patient) and not patient[0]["ready_date"]):
        patient[0].update({column: spreadsheet_day(patient[0][column]) for column in ("start", "end")})
    for fault, number, space in (("trailing", 60, " "), ("non-breaking", 40, "\u00a0")):
        for patient in faults.take(number, lambda patient: patient[-1]["ward"] == "Teal"):
            patient[-1]["ward"] += space
        faults.count(f"ward name with a {fault} space", number)
    faults.count("dates as a spreadsheet's day numbers", 12)
