"""What the files show of one ward's own patients, and what a method of finding demand answers."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.ahead.arrivals import arrivals_of, is_booked
from bedplan.data.demand.open_time import OpenTime, WardMinutes, ward_minutes, watch_open_time
from bedplan.data.demand.walls import BedUse, Wall
from bedplan.data.files.dates import DAY_SECONDS
from bedplan.data.wards.occupancy import open_beds, present
from bedplan.data.wards.patients import OwnPatients, beds_used, counted_days, started
from bedplan.data.wards.stays import stay_curve

if TYPE_CHECKING:
    import pandas as pd
    from numpy.typing import NDArray

    from bedplan.data.ahead.rhythm import Swing
    from bedplan.data.beside.capacity import Capacity

PARTED = 0.3  # so much less than it is may the swing of groups look, where a full ward parts them; no source
NINETY = 1.6449  # standard errors either side that hold 90 of 100 chances

Range = tuple[float, float]


@dataclass(frozen=True, slots=True)
class DemandMethod:
    """One method of finding demand: what it says, with 90 % intervals, or in ``reason`` why it can't be used here."""

    name: str
    used: bool
    reason: str
    patients_per_day: float | None = None
    interval: Range | None = None
    beds: float | None = None
    beds_interval: Range | None = None


@dataclass(frozen=True)
class Evidence:
    """What the files show of one ward's own patients, averaged over the ``days`` that count.

    ``direct_per_day`` came from outside the hospital, ``moved_in_per_day`` from another of its wards,
    ``elsewhere_per_day`` lay on other wards only; ``beds_here`` and ``beds_elsewhere`` they used on average.
    ``fewer_beds``: so many of the stated beds, on each day of the window, are taken not to be there; None = all are.
    """

    own: OwnPatients
    on_ward: pd.DataFrame
    capacity: Capacity | None
    days: int
    direct_per_day: float
    moved_in_per_day: float
    elsewhere_per_day: float
    beds_here: float
    beds_elsewhere: float
    booked_share: float
    fewer_beds: NDArray[np.int64] | None = None

    @property
    def had_a_bed_per_day(self) -> float:
        """How many of its patients a day were given a bed, here or on another ward?"""
        return self.direct_per_day + self.moved_in_per_day + self.elsewhere_per_day

    @property
    def own_beds(self) -> float:
        """How many beds did its patients use on average, here and on other wards?"""
        return self.beds_here + self.beds_elsewhere

    @property
    def mean_stay_days(self) -> float:
        """How many days of a bed did each of its patients use on average?"""
        return self.own_beds / self.had_a_bed_per_day if self.had_a_bed_per_day > 0 else 0.0

    @cached_property
    def swing(self) -> float:
        """How far do the ward's monthly admissions swing, variance ÷ mean? At least 1, what chance alone gives."""
        return max(self._arrivals.dispersion, 1.0)

    @cached_property
    def _arrivals(self) -> Swing:
        """Return how admissions of its own patients swing."""
        return arrivals_of(self.own.records, self.own.here["start"]).swing

    @property
    def together(self) -> int:
        """How many of its patients come at a time? 1 where chance alone brings some together."""
        return max(round(self._arrivals.clear_clustering + PARTED), 1)

    @cached_property
    def variation(self) -> float:
        """How spread out are its patients' stays? SD ÷ mean."""
        return stay_curve(self.own.records, self.own.own, self.own.ward).variation

    @cached_property
    def minutes(self) -> WardMinutes | None:
        """When was the ward full? None without beds by date, or without times of day."""
        if self.capacity is None or not self.own.records.has_times:
            return None
        return ward_minutes(self.own.records, self.on_ward, self.own.ward, self.capacity, self._fewer)

    @cached_property
    def beds(self) -> NDArray[np.int64] | None:
        """How many beds were open on each day that counts? None without beds by date."""
        if self.capacity is None:
            return None
        return np.maximum(self._stated - self._fewer, 0)[self.own.records.counted_days]

    @cached_property
    def _stated(self) -> NDArray[np.int64]:
        """Return the stated open beds of each day of the window."""
        return open_beds(self.own.records, self.own.ward, self.capacity, 1)

    @property
    def _fewer(self) -> NDArray[np.int64] | int:
        """Return how many of them are taken not to be there."""
        return 0 if self.fewer_beds is None else self.fewer_beds

    @cached_property
    def walls(self) -> tuple[Wall, ...]:
        """When were some of the stated beds hardly ever used, though the ward was often as full as it got?"""
        if self.capacity is None or self.fewer_beds is not None or self.mean_stay_days <= 0:
            return ()
        records = self.own.records
        if self.minutes is not None:
            free = self.minutes.free
        else:
            free = np.maximum(self._stated - present(records, self.on_ward, DAY_SECONDS), 0)[:, None]
        month = (records.calendar.year * 12 + records.calendar.month).to_numpy()
        return BedUse(free, self._stated, records.counted_days, month, self.mean_stay_days).walls()

    @property
    def never_used(self) -> NDArray[np.int64] | None:
        """How many of the stated beds were hardly ever used on each day of the window? None where all were."""
        if not self.walls:
            return None
        fewer = np.zeros(self._stated.size, dtype=np.int64)
        for wall in self.walls:
            fewer[wall.first : wall.end] = wall.fewer
        return fewer

    @cached_property
    def direct(self) -> OpenTime | None:
        """What do the ward's free hours tell of patients from outside?"""
        return self.minutes and watch_open_time(self.minutes, self.own.here[~self.own.moved_in])

    @property
    def share_full(self) -> float:
        """Which share of the time was the ward full? Of midnights, where no times of day are known."""
        if self.direct is not None:
            return self.direct.share_full
        records = self.own.records
        return float((present(records, self.on_ward, DAY_SECONDS)[records.counted_days] >= self.beds).mean())

    @cached_property
    def with_room(self) -> OpenTime | None:
        """What tell the hours with room for all who come at a time? Where only one has a bed, the others are not seen."""
        if self.minutes is None or self.together == 1:
            return self.direct
        return replace(self, fewer_beds=self._fewer + np.full(self._stated.size, self.together - 1)).direct

    @cached_property
    def rush(self) -> float | None:
        """How many times as fast as usual does anybody take a bed that the full ward frees?"""
        return self.minutes and watch_open_time(self.minutes, self.on_ward).rush

    @cached_property
    def all_full_share(self) -> float | None:
        """Which share of the time had neither the ward nor any ward its patients lay on a free bed? None if not known."""
        hosts = [str(name) for name, stays in self.own.elsewhere["ward"].value_counts().items() if stays]
        if self.minutes is None or not set(hosts) <= set(self.capacity.wards):
            return None
        records, full = self.own.records, self.minutes.is_full[::60] & (self.minutes.cell[::60] >= 0)
        for host in hosts:
            full &= present(records, records.of_ward(host), 3_600) >= open_beds(records, host, self.capacity, 24)
        return float(full.sum()) / (self.days * 24)

    def by_chance(self, per_day: float) -> float:
        """Return the variance by chance of a number of patients a day, counted over the file's days."""
        return self.swing * per_day / self.days

    def found(self, name: str, reason: str, not_given: float = 0.0, variance: float = 0.0) -> DemandMethod:
        """Return a method that finds so many more patients a day than were given a bed.

        ``variance`` of the patients a day; where it is less than that of chance alone, chance alone stands in.
        """
        per_day, stay = self.had_a_bed_per_day + not_given, self.mean_stay_days
        variance = max(variance, self.by_chance(per_day))
        beds_error = stay * math.sqrt(variance + self.by_chance(per_day) * self.variation**2)
        return DemandMethod(
            name=name,
            used=True,
            reason=reason,
            patients_per_day=per_day,
            interval=_interval(per_day, math.sqrt(variance)),
            beds=per_day * stay,
            beds_interval=_interval(per_day * stay, beds_error),
        )


def _interval(figure: float, error: float) -> Range:
    """Return the 90 % interval, never below 0."""
    spread = math.exp(NINETY * error / figure) if figure > 0 else 1.0
    return figure / spread, figure * spread


def gather(own: OwnPatients, capacity: Capacity | None) -> Evidence:
    """What do the files show of this ward's own patients?"""
    records, here = own.records, own.here
    days = counted_days(records)
    return Evidence(
        own=own,
        on_ward=records.of_ward(own.ward),
        capacity=capacity if capacity is not None and own.ward in capacity.wards else None,
        days=days,
        direct_per_day=started(records, here["start"][~own.moved_in]) / days,
        moved_in_per_day=started(records, here["start"][own.moved_in]) / days,
        elsewhere_per_day=started(records, own.brought_home["start"]) / days,
        beds_here=beds_used(records, here),
        beds_elsewhere=beds_used(records, own.elsewhere),
        booked_share=float(is_booked(here).mean()) if len(here) else 0.0,
    )
