"""What a ward is asked for: patients a day, how long they stay, and the rhythm they come in."""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace

from bedplan.errors import ImpossibleFigure
from bedplan.models.value_objects.figures import all_of_kind, listed, number, quoted, whole
from bedplan.models.value_objects.stay import LengthOfStay

LARGEST_LOAD_BEDS = 20_000.0
MOST_BOOKED_A_DAY = 20_000
MOST_FACTOR_DRIFT = 0.05


def _factors(name: str, values: object, count: int) -> tuple[float, ...]:
    """Return factors with mean exactly 1, or say what is wrong with them."""
    given = listed(values, f"{name} need {count} numbers")
    if len(given) != count:
        raise ImpossibleFigure(f"{name} need {count} numbers, but {len(given)} were given.")
    said = f"A factor of {{}} among the {name[0].lower()}{name[1:]}"
    numbers = [number(said, value, (0.0, 1e6), "each factor is a number of 0 or more") for value in given]
    mean = math.fsum(numbers) / count
    if abs(mean - 1.0) > MOST_FACTOR_DRIFT:
        raise ImpossibleFigure(f"{name} average {mean:.3f}: they must average 1, give or take 5 %.")
    return tuple(one / mean for one in numbers)


def _checked_stay(stay: object) -> LengthOfStay:
    """Return the length of stay, or say what was given instead."""
    if not isinstance(stay, LengthOfStay):
        raise ImpossibleFigure(f"A length of stay of {quoted(stay)} is not possible: give LengthOfStay(mean_days, …).")
    return stay


@dataclass(frozen=True, slots=True)
class BookedList:
    """Booked patients of one list: how many a weekday (Monday first), when they come, and the chance that each comes.

    Raises:
        ImpossibleFigure: not seven counts, a count below 0 or not whole, an hour outside 0–23, a chance outside 0–1.
    """

    per_weekday: tuple[int, ...]
    length_of_stay: LengthOfStay
    hour: int = 9
    attends: float = 1.0

    def __post_init__(self) -> None:
        """Check every figure once, here."""
        counts = listed(self.per_weekday, "A booked list needs 7 weekday counts, Monday first")
        if len(counts) != 7:
            raise ImpossibleFigure(f"A booked list needs 7 weekday counts, Monday first, but {len(counts)} were given.")
        said, allowed = "{} booked patients on a day", "give whole numbers, 0 or more"
        counts = tuple(whole(said, count, (0, MOST_BOOKED_A_DAY), allowed) for count in counts)
        _checked_stay(self.length_of_stay)
        hour = whole("Hour {}", self.hour, (0, 23), "give a whole hour from 0 to 23")
        attends = number("A chance of attending of {}", self.attends, (0.0, 1.0), "it lies between 0 and 1")
        for name, value in (("per_weekday", counts), ("hour", hour), ("attends", attends)):
            object.__setattr__(self, name, value)

    @property
    def arrivals_per_day(self) -> float:
        """Booked patients who come, a day, over the whole week."""
        return sum(self.per_weekday) * self.attends / 7.0

    @property
    def offered_load(self) -> float:
        """Beds that those who come use on average."""
        return self.arrivals_per_day * self.length_of_stay.mean_days


# field -> (how it is called, lowest and highest, what is allowed)
_FIGURES = {
    "arrivals_per_day": ("An arrival rate", (0.0, 1e6), "it is 0 or more patients a day"),
    "clustering": ("A clustering", (0.01, 100.0), "variance ÷ mean of daily arrivals lies between 0.01 and 100"),
    "rate_variation": ("A rate variation", (0.0, 2.0), "SD ÷ mean of the rate lies between 0 and 2"),
    "turnaround_hours": ("A turnaround", (0.0, 240.0), "it lies between 0 and 240 hours"),
}


@dataclass(frozen=True, slots=True)
class Demand:
    """Who wants this ward's beds: arrivals (not admissions), their stay, and their rhythm.

    ``arrivals_per_day`` excludes booked patients and may be 0. ``month_factors`` (12,) January first,
    ``weekday_factors`` (7,) Monday first, ``hour_factors`` (24,); factors up to 5 % off mean 1 are rescaled so that
    the year's mean is exactly ``arrivals_per_day``. ``clustering``: variance ÷ mean of daily arrivals around the
    rhythm after a 28-day moving level is taken out; 1 = independent. ``rate_variation``: SD ÷ mean of everything
    slower than a stay.

    Neutral by default: ``discharge_hours`` (24 shares; empty = a stay ends when it ends), ``weekend_slip`` (chance
    that a discharge due on Saturday, on Sunday, moves to Monday), ``turnaround_hours`` (a bed is held for stay +
    turnaround; occupancy counts patients only).

    Raises:
        ImpossibleFigure: a figure outside its meaning, or a load above 20,000 beds.
    """

    arrivals_per_day: float
    length_of_stay: LengthOfStay
    month_factors: tuple[float, ...] = (1.0,) * 12
    weekday_factors: tuple[float, ...] = (1.0,) * 7
    hour_factors: tuple[float, ...] = (1.0,) * 24
    clustering: float = 1.0
    rate_variation: float = 0.0
    booked: tuple[BookedList, ...] = ()
    discharge_hours: tuple[float, ...] = ()
    weekend_slip: tuple[float, float] = (0.0, 0.0)
    turnaround_hours: float = 0.0
    _offered_load: float = field(init=False, repr=False, compare=False, default=0.0)

    def __post_init__(self) -> None:
        """Check every figure once, here, so that models can trust them."""
        put = object.__setattr__
        for name, (said, limits, allowed) in _FIGURES.items():
            put(self, name, number(f"{said} of {{}}", getattr(self, name), limits, allowed))
        _checked_stay(self.length_of_stay)
        put(self, "month_factors", _factors("Month factors", self.month_factors, 12))
        put(self, "weekday_factors", _factors("Weekday factors", self.weekday_factors, 7))
        put(self, "hour_factors", _factors("Hour factors", self.hour_factors, 24))
        put(self, "booked", all_of_kind(self.booked, BookedList, "Booked patients are a tuple of BookedList"))
        put(self, "weekend_slip", self._slip(self.weekend_slip))
        put(self, "discharge_hours", self._shares(self.discharge_hours))
        load = self.arrivals_per_day * self.length_of_stay.mean_days
        load += math.fsum(one.offered_load for one in self.booked)
        if load > LARGEST_LOAD_BEDS:
            raise ImpossibleFigure(
                f"{load:,.0f} beds wanted on average is more than this program plans for ({LARGEST_LOAD_BEDS:,.0f}); "
                "check the arrivals a day and the mean stay in days."
            )
        put(self, "_offered_load", load)

    @staticmethod
    def _slip(chances: object) -> tuple[float, ...]:
        """Return the chances for Saturday and Sunday, or say what is wrong."""
        both = listed(chances, "A weekend slip needs two chances, for Saturday and for Sunday")
        if len(both) != 2:
            raise ImpossibleFigure(
                f"A weekend slip needs two chances, for Saturday and for Sunday, but {len(both)} were given."
            )
        return tuple(
            number("A weekend slip of {}", chance, (0.0, 1.0), "a chance lies between 0 and 1") for chance in both
        )

    @staticmethod
    def _shares(values: object) -> tuple[float, ...]:
        """Return 24 shares that add up to 1, or none, or say what is wrong."""
        wanted = "Discharge hours need 24 shares of 0 or more, one for each hour from midnight, not all 0"
        given = listed(values, wanted)
        if not given:
            return ()
        if len(given) != 24:
            raise ImpossibleFigure(f"{wanted}, but {len(given)} were given.")
        numbers = [number("A discharge share of {}", one, (0.0, 1e9), "it is 0 or more") for one in given]
        total = math.fsum(numbers)
        if total <= 0:
            raise ImpossibleFigure(f"{wanted}, but all 24 given are 0.")
        return tuple(one / total for one in numbers)

    @property
    def offered_load(self) -> float:
        """Beds wanted on average: arrivals × mean stay, booked patients who come included."""
        return self._offered_load

    @property
    def total_arrivals_per_day(self) -> float:
        """Everyone who comes, a day: unbooked arrivals and booked patients who attend."""
        return self.arrivals_per_day + math.fsum(one.arrivals_per_day for one in self.booked)

    @property
    def is_steady(self) -> bool:
        """Whether arrivals keep one rate all year: no season, no weekly or daily rhythm, no booked list."""
        return not self.booked and all(
            max(factors) - min(factors) < 1e-12
            for factors in (self.month_factors, self.weekday_factors, self.hour_factors)
        )

    def with_changes(self, **changes: object) -> Demand:
        """Return a copy with some figures changed, checked again."""
        return replace(self, **changes)
