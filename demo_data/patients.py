"""Who comes to Larkmere, when, and what they bring: everything that beds cannot change.

Every patient's chances are drawn here, before a single bed is looked at, so two plans of the
hospital run on the same seed meet the very same patients.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from datetime import date, timedelta
from itertools import islice

from demo_data.draws import exponential, lognormal_quantile, minute_of_day, natural_log, poisson_quantile, uniforms
from demo_data.hospital import (
    ARRIVAL_HOURS,
    DISCHARGE_HOURS,
    EMERGENCY_WEEKDAYS,
    NO_GROWTH_DATE,
    RUN_IN_FROM,
    SATURDAY_SLIP,
    SLOT_FILLS,
    SUNDAY_SLIP,
    TAIL_SHARE,
    WINDOW_TO,
    WINTER_MONTHS,
    WINTER_STAY_FACTOR,
    Hospital,
    StayLengths,
    Ward,
    month_factor,
)

MINUTES_A_DAY = 1440
SHORTEST_ROUND = 60  # nobody goes home in the first hour on a ward with a discharge round
WARDS_IN_ONE_SPELL = 3  # at most: chest patient sent to Heron, then on to another ward


@dataclass(frozen=True, slots=True)
class StayChances:
    """The chances that settle one stay: its length, its discharge, its weekend, its move."""

    length: float
    tail: float
    discharge_hour: float
    weekend: float
    move_minute: float


@dataclass(frozen=True, slots=True)
class Patient:
    """One patient: when and what they ask for, and the chances of all their stays.

    `asks_at` is in minutes after 1 October 2021 00:00, the start of the run-in.
    """

    number: int
    ward: str
    asks_at: int
    age: float
    destination: float
    route: float
    recorded: float
    stays: tuple[StayChances, ...]


def patient_key(number: int) -> str:
    """Return the pseudonym of a patient: a running number, nothing that a real hospital issues."""
    return f"L{number:06d}"


def day_of(minute: int) -> date:
    """Return the date of a minute after the start of the run-in."""
    return RUN_IN_FROM + timedelta(days=minute // MINUTES_A_DAY)


def minute_at(day: date) -> int:
    """Return midnight at the start of a day, in minutes after the start of the run-in."""
    return (day - RUN_IN_FROM).days * MINUTES_A_DAY


def arrivals_on(ward: Ward, day: date) -> float:
    """How many emergency patients want this ward on this day, on average?

    Checked by: tests/demo_data/test_rules.py
    """
    years = (day - NO_GROWTH_DATE).days / 365.25
    growth = exponential(years * natural_log(1.0 + ward.growth_per_year))
    rhythm = month_factor(ward.months, day.month) * EMERGENCY_WEEKDAYS[day.weekday()]
    return ward.arrivals_per_day * growth * rhythm


def _length_days(stay: StayLengths, chances: StayChances, month: int) -> float:
    """Return how long one stay is meant to last."""
    kind = stay.tail if stay.tail is not None and chances.tail < TAIL_SHARE else stay
    factor = WINTER_STAY_FACTOR if stay.longer_in_winter and month in WINTER_MONTHS else 1.0
    return max(stay.least_days, factor * lognormal_quantile(chances.length, kind.mean_days, kind.variation))


def in_tail(ward: Ward, chances: StayChances) -> bool:
    """Is this one of the patients who are fit to go long before they can?"""
    return ward.stay.tail is not None and chances.tail < TAIL_SHARE


def _slip(end: int, weekend: float) -> int:
    """Return the end of a stay, moved from the weekend to Monday when nobody discharges."""
    weekday = day_of(end).weekday()
    if weekday == 5 and weekend < SATURDAY_SLIP:
        return end + 2 * MINUTES_A_DAY
    if weekday == 6 and weekend < SUNDAY_SLIP:
        return end + MINUTES_A_DAY
    return end


def stay_end(ward: Ward, chances: StayChances, start: int) -> int:
    """When is a patient of this ward due to leave, who starts at this minute?

    Heron's and Merlin's leave when their stay is over. The others leave on the day their
    stay is over, at an hour of the discharge round; a day later if that is within the first
    hour; and some of those due at a weekend on Monday.
    """
    due = start + int(_length_days(ward.stay, chances, day_of(start).month) * MINUTES_A_DAY + 0.5)
    if ward.leaves_when_stay_ends:
        return due
    end = due - due % MINUTES_A_DAY + minute_of_day(chances.discharge_hour, DISCHARGE_HOURS)
    if end < start + SHORTEST_ROUND:
        end += MINUTES_A_DAY
    return _slip(end, chances.weekend)


def _patient(number: int, ward: Ward, day: date, chance: Iterator[float]) -> Patient:
    """Draw one patient."""
    clock = minute_of_day(next(chance), ARRIVAL_HOURS)
    if ward.weekday_lists:
        clock = 7 * 60  # booked patients are asked after at 07:00, whatever was drawn
    return Patient(
        number,
        ward.name,
        minute_at(day) + clock,
        *islice(chance, 4),
        tuple(StayChances(*islice(chance, 5)) for _ in range(WARDS_IN_ONE_SPELL)),
    )


def _number_on(ward: Ward, day: date, chance: Iterator[float]) -> int:
    """Draw how many ask for a ward on a day, booked or not."""
    if ward.weekday_lists:
        slots = ward.weekday_lists[day.weekday()]
        return sum(next(chance) < SLOT_FILLS for _ in range(slots))
    return poisson_quantile(next(chance), arrivals_on(ward, day))


def draw_patients(seed: int, hospital: Hospital) -> list[Patient]:
    """Who comes, from the start of the run-in to the end of the three years?

    In the order in which they ask for a bed.

    Checked by: tests/demo_data/test_rules.py
    """
    chance, patients = uniforms(seed), []
    for day_number in range((WINDOW_TO - RUN_IN_FROM).days):
        day = RUN_IN_FROM + timedelta(days=day_number)
        for ward in hospital.wards:
            for _ in range(_number_on(ward, day, chance)):
                patients.append(_patient(len(patients), ward, day, chance))
    return sorted(patients, key=lambda patient: patient.asks_at)
