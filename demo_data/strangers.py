"""Rows of the dirty edition that are no ward patients: virtual wards, cots, day attenders, tests."""

from datetime import datetime, timedelta

from demo_data.faults import Faults, Row, text_of
from demo_data.hospital import WINDOW_FROM

DAYS_SPREAD = 1060  # days after the start in which they begin, so that all end within the window
SITTINGS_OF_ONE = 30  # day attenders come again and again
ADDED_KEYS_FROM = 900_000


def _row(number: int, ward: str, start: datetime, minutes: float, **cells: str) -> Row:
    """Return one row of a patient whom the clean files do not have."""
    row = {
        "patient_key": f"L{ADDED_KEYS_FROM + number}",
        "spell_key": f"S{ADDED_KEYS_FROM + number}",
        "ward": ward,
        "start": text_of(start),
        "end": text_of(start + timedelta(minutes=int(minutes))),
        "class": "ordinary",
        "method": "emergency",
        "home_specialty": "",
        "age_band": "60-69",
        "ready_date": "",
        "destination": "home",
    }
    return row | cells


def _some_time(faults: Faults) -> datetime:
    """Return a minute of the three years, a few weeks before their end at the latest."""
    first = datetime.combine(WINDOW_FROM, datetime.min.time())
    return first + timedelta(minutes=int(faults.between(1440, DAYS_SPREAD * 1440)))


def add_virtual_ward(faults: Faults) -> None:
    """Add patients who are looked after at home: no bed of the hospital."""
    for number in range(400):
        days = faults.between(3, 20)
        faults.rows.append(_row(number, "Virtual ward", _some_time(faults), days * 1440))
    faults.count("virtual ward", 400)


def add_cots(faults: Faults) -> None:
    """Add well babies in cots, which are not counted as beds."""
    cells = {"method": "maternity", "home_specialty": "well babies", "age_band": "0"}
    for number in range(400, 1300):
        days = faults.between(0.5, 3)
        faults.rows.append(_row(number, "Well-baby cots", _some_time(faults), days * 1440, **cells))
    faults.count("well-baby cot", 900)


def add_day_attenders(faults: Faults) -> None:
    """Add patients who come for a morning every few weeks."""
    cells = {"class": "regular day", "method": "booked", "home_specialty": "renal medicine"}
    morning = datetime.combine(WINDOW_FROM, datetime.min.time()) + timedelta(hours=8)
    for number in range(1500):
        sitting, patient = divmod(number, 1500 // SITTINGS_OF_ONE)
        start = morning + timedelta(days=35 * sitting + patient % 5, minutes=int(faults.between(0, 60)))
        row = _row(1300 + patient, "Day unit", start, faults.between(200, 280), **cells)
        faults.rows.append(row | {"spell_key": f"S{ADDED_KEYS_FROM + 10_000 + number}"})
    faults.count("regular day attender", 1500)


def add_test_patients(faults: Faults) -> None:
    """Add the patients with whom someone tried the system out: four by their key, two by an impossible age."""
    for number in range(6):
        odd = {"patient_key": f"TEST{number + 1:02d}"} if number < 4 else {"age_band": "130-139"}
        faults.rows.append(_row(2000 + number, "Heron", _some_time(faults), faults.between(60, 600), **odd))
    faults.count("test patient: by the key", 4)
    faults.count("test patient: by an impossible age", 2)
