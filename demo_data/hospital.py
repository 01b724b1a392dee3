"""Larkmere District Hospital as data: its wards, its rhythm of the year, its beds by date.

Larkmere is invented: no such hospital, no such patients. The wards are named after birds.
Kestrel was called "Ward 7" until the end of September 2022; the files written here call it
Kestrel throughout, and only the dirty edition (dirty.py) shows the old name.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import date, timedelta
from types import MappingProxyType

from demo_data.draws import running_shares

RUN_IN_FROM = date(2021, 10, 1)
WINDOW_FROM = date(2022, 4, 1)
WINDOW_TO = date(2025, 4, 1)  # the first day after the window
NO_GROWTH_DATE = WINDOW_FROM

# Months April to March, as the hospital's year runs.
MEDICAL_MONTHS = (0.99, 0.95, 0.93, 0.92, 0.92, 0.95, 1.00, 1.04, 1.09, 1.13, 1.08, 1.03)
CHEST_MONTHS = (0.97, 0.90, 0.84, 0.80, 0.80, 0.88, 1.00, 1.10, 1.24, 1.30, 1.18, 1.06)
LEVEL_MONTHS = (1.0,) * 12
EMERGENCY_WEEKDAYS = (1.10, 1.03, 1.02, 1.01, 1.03, 0.91, 0.90)  # Monday first

# fmt: off
ARRIVAL_HOURS = running_shares((
    2.2, 1.8, 1.5, 1.3, 1.2, 1.3, 1.6, 2.2, 3.2, 4.3, 5.2, 5.8,
    6.0, 6.0, 5.9, 5.8, 5.8, 5.8, 5.7, 5.4, 5.0, 4.4, 3.6, 2.9,
))
DISCHARGE_HOURS = running_shares((
    0, 0, 0, 0, 0, 0, 0, 0.5, 1, 2.5, 5, 7.5,
    8.5, 9.5, 12, 13.5, 12.5, 10, 7, 4.5, 2.5, 1.5, 0.7, 0.3,
))
# fmt: on
SATURDAY_SLIP, SUNDAY_SLIP = 0.35, 0.45  # chance that a weekend discharge waits for Monday
SLOT_FILLS = 0.95
WINTER_STAY_FACTOR = 1.06  # December to February, Kestrel and Plover
WINTER_MONTHS = (12, 1, 2)
TAIL_SHARE = 0.12  # of Plover's patients: fit to go long before they can

HERON_TO_KESTREL, HERON_TO_PLOVER, HERON_TO_TEAL = 0.205, 0.118, 0.072
MERLIN_TO_CURLEW, MERLIN_TO_KESTREL = 0.35, 0.23
HOURS_BEFORE_TEAL_OUTLIES, HOURS_BEFORE_OTHERS_OUTLIE = 12, 24

AGE_BANDS = ("18-29", "30-39", "40-49", "50-59", "60-69", "70-79", "80-89", "90+")
DESTINATIONS = ("home", "care home", "other hospital", "died")


@dataclass(frozen=True)
class StayLengths:
    """How long patients of a ward stay: lognormal, by mean (days) and variation."""

    mean_days: float
    variation: float
    least_days: float
    longer_in_winter: bool = False
    tail: "StayLengths | None" = None  # TAIL_SHARE of patients stay like this instead


@dataclass(frozen=True)
class Ward:
    """One ward: its beds, who wants it from outside, and how long they stay."""

    name: str
    specialty: str
    funded_beds: int
    arrivals_per_day: float
    stay: StayLengths
    growth_per_year: float = 0.0
    months: tuple[float, ...] = LEVEL_MONTHS
    weekday_lists: tuple[int, ...] = ()  # booked slots, Monday first
    leaves_when_stay_ends: bool = False  # at any hour; no discharge round, no weekend
    turns_away: bool = False  # when full, patients go to another hospital
    recorded_share: float = 0.0  # of those turned away
    ages: tuple[float, ...] = (4, 5, 7, 12, 17, 24, 23, 8)
    leave_to: tuple[float, ...] = (86, 5, 3, 6)


@dataclass(frozen=True)
class BedChange:
    """Beds added or closed on one ward, from the first day to the last, both included."""

    ward: str
    first_day: date
    last_day: date
    extra_beds: int = 0
    closed_beds: int = 0
    reason: str = ""


WARDS = (
    Ward(
        "Heron",
        "acute medicine",
        30,
        14.3,
        StayLengths(1.45, 0.85, 0.15),
        growth_per_year=0.025,
        months=MEDICAL_MONTHS,
        leaves_when_stay_ends=True,
        leave_to=(94, 3, 1, 2),
    ),
    Ward(
        "Kestrel",
        "respiratory medicine",
        28,
        0.35,
        StayLengths(6.3, 1.0, 0.3, longer_in_winter=True),
        months=CHEST_MONTHS,
    ),
    Ward(
        "Plover",
        "care of older people",
        30,
        0.20,
        StayLengths(7.8, 0.75, 0.0, longer_in_winter=True, tail=StayLengths(37.0, 0.60, 0.0)),
        growth_per_year=0.03,
        months=MEDICAL_MONTHS,
        ages=(0, 0, 0, 0, 3, 27, 49, 21),
        leave_to=(70, 18, 2, 10),
    ),
    Ward(
        "Teal",
        "stroke and neurology",
        12,
        0.60,
        StayLengths(9.0, 1.1, 0.5),
        growth_per_year=0.025,
        ages=(2, 3, 6, 12, 19, 27, 24, 7),
        leave_to=(72, 10, 8, 10),
    ),
    Ward(
        "Curlew",
        "emergency surgery",
        20,
        3.35,
        StayLengths(3.6, 1.0, 0.3),
        growth_per_year=0.01,
        turns_away=True,
        recorded_share=0.60,
        ages=(13, 12, 13, 15, 17, 17, 11, 2),
        leave_to=(93, 3, 2, 2),
    ),
    Ward(
        "Dunlin",
        "urology and gynaecology",
        12,
        2.55,
        StayLengths(3.2, 0.95, 0.3),
        turns_away=True,
        recorded_share=0.60,
        ages=(12, 13, 14, 15, 17, 18, 10, 1),
        leave_to=(97, 1, 1, 1),
    ),
    Ward(
        "Sandpiper",
        "bone and joint surgery",
        16,
        0.0,
        StayLengths(3.5, 0.5, 0.6),
        weekday_lists=(8, 7, 5, 1, 1, 0, 0),
        ages=(2, 3, 6, 15, 27, 32, 14, 1),
        leave_to=(97, 2, 1, 0),
    ),
    Ward(
        "Merlin",
        "critical care",
        8,
        1.22,
        StayLengths(4.0, 1.35, 0.15),
        growth_per_year=0.01,
        leaves_when_stay_ends=True,
        turns_away=True,
        recorded_share=1.0,
        ages=(8, 8, 11, 17, 22, 23, 10, 1),
        leave_to=(45, 0, 15, 40),
    ),
)


def _winter_bay(first_year: int) -> BedChange:
    """Return Kestrel's winter bay: four agency-staffed beds that nobody funds."""
    return BedChange(
        "Kestrel",
        date(first_year, 12, 16),
        date(first_year + 1, 3, 9),
        extra_beds=4,
        reason="winter bay: agency staffed and not funded",
    )


def _closure(ward: str, beds: int, first_day: date, days: int) -> BedChange:
    """Return beds closed for a number of days."""
    last_day = first_day + timedelta(days=days - 1)
    return BedChange(ward, first_day, last_day, closed_beds=beds, reason="outbreak: closed to new patients")


BED_CHANGES = (
    *(_winter_bay(year) for year in (2021, 2022, 2023, 2024)),
    _closure("Plover", 6, date(2023, 1, 9), 8),
    _closure("Kestrel", 6, date(2024, 1, 22), 7),
    _closure("Plover", 12, date(2024, 2, 5), 9),
    _closure("Curlew", 5, date(2024, 12, 9), 6),
)


@dataclass(frozen=True)
class Hospital:
    """The wards in a fixed order and what happened to their beds."""

    wards: tuple[Ward, ...] = WARDS
    bed_changes: tuple[BedChange, ...] = BED_CHANGES
    by_name: Mapping[str, Ward] = field(init=False)

    def __post_init__(self) -> None:
        """Index the wards by name."""
        object.__setattr__(
            self,
            "by_name",
            MappingProxyType({ward.name: ward for ward in self.wards}),
        )

    def changes_on(self, ward: str, day: date) -> tuple[BedChange, ...]:
        """Return what differs from the funded beds of a ward on a day."""
        return tuple(
            change for change in self.bed_changes if change.ward == ward and change.first_day <= day <= change.last_day
        )

    def open_beds(self, ward: str, day: date) -> int:
        """How many beds of this ward could take a patient on this day?"""
        return self.by_name[ward].funded_beds + sum(
            change.extra_beds - change.closed_beds for change in self.changes_on(ward, day)
        )


LARKMERE = Hospital()


def month_factor(months: tuple[float, ...], month: int) -> float:
    """Return the factor of a calendar month (1 January) from an April-to-March row."""
    return months[(month - 4) % 12]
