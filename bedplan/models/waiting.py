"""Patients who wait for a bed instead of leaving: how many, how long, and in which months."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bedplan.models.formulas.clusters import TOGETHER_NOTE, clustering_notes
from bedplan.models.formulas.uncertain_rate import few_rates
from bedplan.models.queue.spread import spread_of, wait_ratio
from bedplan.models.queue.through_year import Pace, raised_by_swing, settled_queue, share_who_wait, steady_wards
from bedplan.models.rhythm.year import (
    HOURS_A_WEEK,
    HOURS_A_YEAR,
    WEEKS,
    all_booked_in_week,
    beds_wanted,
    booked_load_in_week,
    month_of_hour,
    offered_load_by_hour,
    patients_wanted,
    unbooked_by_hour,
    unbooked_load_by_hour,
)
from bedplan.models.value_objects.bed_curve import BedCurve, Waits, bed_counts

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from numpy.typing import ArrayLike, NDArray

    from bedplan.models.queue.spread import Spread
    from bedplan.models.value_objects.demand import Demand

    Array = NDArray[np.float64]

_STEPS_HOURS = (24, 12, 6, 3, 2, 1)
# a longer step would level the peak at which patients wait, before discharges or as a list comes in
_STEP_WITH_DISCHARGES, _STEP_WITH_LISTS = 3, 1
_STEADY_RATES, _RATES = 31, 7
# a load this near its beds counts as reaching them: its queue would take lifetimes to settle
_TOO_NEAR = 1e-6
# range of beds wanted in a week ÷ √beds wanted from which the week's rhythm is worth a note
_SWINGS = 0.4
# deviation ÷ mean of stays; mean stay
_VERY_UNEVEN, _SHORT_DAYS = 1.5, 1.5
_SHORT_AND_BY_THE_CLOCK = (
    "Short stays and set hours of leaving: the share who wait may be up to a seventh too low, the share who wait for "
    "hours a quarter; with stays under a day a third, and the mean wait two thirds too short. Run the simulation."
)
_BOOKED = (
    "Booked lists: the share who wait may be up to half too low where many come at once, or where their stays are even or "
    "long; up to twice too high elsewhere, more where few wait. Run the simulation."
)
_UNEVEN = (
    "Stays differ widely: the share who wait may be up to an eighth too low, with seasons and weekdays a quarter, in the "
    "worst month a third. Plan with more, or run the simulation."
)


@dataclass(frozen=True, slots=True, eq=False)
class _Load:
    """Beds wanted in each step of a period that repeats, ``(steps,)``, and who comes when, ``(12, steps)`` by month.

    Booked patients apart: only the unbooked rate is uncertain. ``rise``: of the beds wanted within each step, as lists
    come in. ``mean_days`` a bed is held, turnaround included. The queue is carried over ``steps_at_once``.
    """

    wanted: Array
    booked_wanted: Array
    patients: Array
    booked_patients: Array
    rise: Array
    step_days: float
    mean_days: float
    steps_at_once: int

    @property
    def weeks(self) -> int:
        """How many weeks the period has."""
        return round(self.wanted.size * self.step_days / 7.0)

    def wanted_at(self, rate: float | Array) -> Array:
        """Return the beds wanted in each step at so many times the mean rate, ``(steps,)``."""
        return self.wanted * rate + self.booked_wanted

    def patients_at(self, rate: float) -> Array:
        """Return who comes in each step at so many times the mean rate, ``(12, steps)``."""
        return self.patients * rate + self.booked_patients


def _period_and_step(demand: Demand, by_hour: Array, mean_days: float) -> tuple[int, int, int]:
    """Return the hours after which demand repeats, the hours of a step, and how many are carried over at once.

    One step where all hours are alike.
    """
    if demand.is_steady and np.ptp(by_hour) <= 1e-9 * by_hour.mean():
        return HOURS_A_WEEK, HOURS_A_WEEK, 1
    has_seasons = max(demand.month_factors) - min(demand.month_factors) > 1e-12
    at_once = next((hours for hours in _STEPS_HOURS if hours <= 8.0 * mean_days), 1)
    finest = _STEP_WITH_LISTS if demand.booked else _STEP_WITH_DISCHARGES if demand.discharge_hours else at_once
    step = min(at_once, finest)
    if not has_seasons:
        return HOURS_A_WEEK, step, 1
    return HOURS_A_YEAR, step, at_once // step


def _load_of(demand: Demand) -> _Load:
    """Work out what is wanted in each step of the period."""
    by_hour = offered_load_by_hour(demand)
    mean_days = by_hour.mean() / demand.total_arrivals_per_day
    period, hours, at_once = _period_and_step(demand, by_hour, mean_days)
    steps = period // hours
    cell = month_of_hour * steps + np.arange(HOURS_A_YEAR) // hours % steps
    sheets = unbooked_load_by_hour(demand), np.tile(booked_load_in_week(demand), WEEKS)
    comers = unbooked_by_hour(demand), np.tile(all_booked_in_week(demand), WEEKS)
    at_end = booked_load_in_week(demand, at_end=True)
    rise = (
        np.tile(at_end - np.roll(at_end, 1), period // HOURS_A_WEEK) if hours == _STEP_WITH_LISTS else np.zeros(steps)
    )
    return _Load(
        *(sheet[:period].reshape(steps, hours).mean(axis=1) for sheet in sheets),
        *(np.bincount(cell, by_hour, 12 * steps).reshape(12, steps) for by_hour in comers),
        rise=rise,
        step_days=hours / 24.0,
        mean_days=mean_days,
        steps_at_once=at_once,
    )


@dataclass(frozen=True, slots=True, eq=False)
class _Queue:
    """Who waits at one rate of arrival, and how many days on average, ``(steps, k)``, at the k largest bed counts.

    With fewer beds the queue only grows. ``patients`` ``(12, steps)`` who come and ``in_use`` ``(n,)`` are times the
    chance of the rate.
    """

    patients: Array
    in_use: Array
    wait: Array
    days: Array

    def waiting_over(self, hours: float) -> Array:
        """Return how many of each month's patients wait longer, ``(12, n)``: waits are exponential about their mean."""
        shares = self.wait * np.exp(-hours / 24.0 / self.days) if hours > 0.0 else self.wait
        everyone = np.repeat(self.patients.sum(axis=1)[:, None], self.in_use.size, axis=1)
        everyone[:, self.in_use.size - shares.shape[1] :] = self.patients @ shares
        return everyone


def _steady_queues(spread: Spread, loads: Array, counts: NDArray[np.int64]) -> tuple[Array, Array]:
    """Read the delay formula, exact for exponential stays, at each load, ``(n, k)``; waits in mean stays.

    What it says of loads at or above the beds means nothing.
    """
    below = np.minimum(loads, 0.999999 * counts[:, None])
    stays = wait_ratio(spread, counts[:, None].astype(float), below) / (counts[:, None] - below)
    return share_who_wait(loads, counts, spread.peakedness), stays


def _queues(demand: Demand, load: _Load, counts: NDArray[np.int64]) -> Iterator[_Queue]:
    """Work out the queue at each rate of arrival, from the lowest on, one by one: so sheets fit fast memory."""
    is_steady, spread = load.wanted.size == 1, spread_of(demand)
    rates, chances = few_rates(demand.rate_variation, _STEADY_RATES if is_steady else _RATES)
    wards = steady = None
    for place, (rate, chance) in enumerate(zip(rates, chances, strict=True)):
        wanted, patients = load.wanted_at(rate), chance * load.patients_at(rate)
        enough = counts[wanted.mean() < counts * (1.0 - _TOO_NEAR)]
        wait = stays = np.zeros((wanted.size, 0))
        if is_steady and enough.size:
            steady = steady or _steady_queues(spread, load.wanted_at(rates), enough)
            wait, stays = (sheet[-enough.size :, place][None] for sheet in steady)
        elif enough.size:
            wards = wards or steady_wards(spread, enough)
            pace = Pace(load.step_days, load.mean_days, load.steps_at_once)
            wait, stays = settled_queue(wards.largest(enough.size), wanted, pace, load.rise)
            wait = raised_by_swing(wait, wanted, patients.sum(axis=0), load.weeks)
        yield _Queue(patients, chance * np.minimum(wanted.mean(), counts), wait, load.mean_days * stays)


def _mean_hours(queues: Sequence[_Queue]) -> Array:
    """Return how long everybody waits on average, where the queue settles; inf where it settles at no rate."""
    total, weight = np.zeros((2, queues[0].in_use.size))
    for queue in queues:
        settles, patients = slice(total.size - queue.wait.shape[1], None), queue.patients.sum(axis=0)
        total[settles] += patients @ (queue.wait * queue.days)
        weight[settles] += patients.sum()
    mean = np.divide(total, weight, out=np.full(total.size, np.inf), where=weight > 0)
    return 24.0 * np.minimum.accumulate(mean)


def _kinds_of_ward_notes(demand: Demand) -> list[str]:
    """Say which way and how far wards of some kinds were off in simulations, where 1 in 100 or more wait."""
    stay, comes = demand.length_of_stay, demand.arrivals_per_day > 0
    kinds = (
        (_SHORT_AND_BY_THE_CLOCK, demand.discharge_hours and comes and stay.mean_days < _SHORT_DAYS),
        (_BOOKED, demand.booked),
        (_UNEVEN, comes and stay.variation > _VERY_UNEVEN),
    )
    notes = [note for note, is_so in kinds if is_so]
    together = len(notes) + (demand.clustering > 1.0) + (demand.rate_variation > 0.0) > 1
    return [*notes, TOGETHER_NOTE] if together else notes


def _notes(demand: Demand, load: _Load, counts: NDArray[np.int64]) -> tuple[str, ...]:
    """Say where the queue only grows, what is carried on, and which way each approximation errs."""
    wanted, patients = load.wanted_at(1.0), load.patients_at(1.0)
    notes = []
    if counts[0] <= wanted.mean():
        notes.append(
            f"Up to {int(wanted.mean())} beds the queue only grows: over the year {wanted.mean():.1f} beds are wanted on "
            "average."
        )
    if wanted.size > 1:
        busiest = max(float(wanted[here].mean()) for here in patients > 0 if here.any())
        notes.append(
            f"Below {int(busiest) + 1} beds the busiest month wants more beds than there are, and those who still wait are "
            "carried into the next: there the share who wait may be up to an eighth too low and the mean wait up to a "
            "quarter too long."
        )
    weeks = wanted.reshape(load.weeks, -1)
    if np.median(np.ptp(weeks, axis=1) / np.sqrt(np.maximum(weeks.mean(axis=1), 1e-9))) > _SWINGS:
        notes.append(
            "With a rhythm of weekdays or hours the share who wait may be up to a tenth off: with very uneven stays a seventh "
            "too low, with very even ones a fifth too high. The mean wait may be up to a fifth too long (short stays: a "
            "half), the share who wait for hours up to a seventh too low."
        )
    notes.extend(_kinds_of_ward_notes(demand))
    notes.extend(clustering_notes(demand, waits=True))
    if demand.rate_variation > 0.0:
        notes.append(
            "The mean wait leaves out rates at which the queue only grows, so it is too short; the shares count everyone "
            "as waiting there."
        )
    return tuple(notes)


def waiting(demand: Demand, beds: ArrayLike) -> BedCurve:
    """For each bed count, which share of patients waits for a bed, and how long, if everyone waits?

    First come, first served, as long as it takes (see :func:`erlang_a` for patients who give up). A steady ward with
    exponential stays is exact; other stays keep the share who wait (right within a tenth) and change its length. With
    seasons, weekdays or booked lists the queue is carried through the year. The notes say which way each part errs.

    Where the load is at or above the beds everyone waits, without end. ``waits`` holds the lengths.

    Raises:
        ImpossibleFigure: bed counts that aren't whole, ascending and 0 or more.

    Source: Erlang 1917; Allen 1990 and the others named in ``queue/spread.py``; Wang, Tipper & Banerjee 1996.
    Checked by: tests/models/test_waiting.py, tests/models/test_every_model.py
    """
    counts = bed_counts(beds)
    if demand.total_arrivals_per_day == 0.0:
        return _nobody(demand, counts)
    load = _load_of(demand)
    queues = tuple(_queues(demand, load, counts))
    by_month = sum(queue.patients.sum(axis=1) for queue in queues)

    def share_over(hours: float) -> tuple[Array, Array]:
        """Return the share who wait longer than this over the year, ``(n,)``, and in each month, ``(12, n)``."""
        longer = sum(queue.waiting_over(hours) for queue in queues)
        # added up in one order, so that everyone is exactly 1
        shares = sum(longer) / sum(by_month), longer / np.where(by_month > 0, by_month, 1.0)[:, None]
        year, months = (np.clip(np.minimum.accumulate(one, axis=-1), 0.0, 1.0) for one in shares)
        return year, months

    in_use = sum(queue.in_use for queue in queues) * patients_wanted(demand) / beds_wanted(demand)
    year, months = share_over(0.0)
    return BedCurve(
        "waiting",
        "waits",
        demand,
        counts,
        year,
        np.minimum(in_use / np.maximum(counts, 1), 1.0),
        months,
        _notes(demand, load, counts),
        waits=Waits(_mean_hours(queues), lambda hours: share_over(hours)[0], lambda hours: share_over(hours)[1]),
    )


def _nobody(demand: Demand, counts: NDArray[np.int64]) -> BedCurve:
    """Answer for a ward nobody comes to: nobody waits."""
    none, months = np.zeros(counts.size), np.zeros((12, counts.size))
    waits = Waits(none, lambda _: np.zeros(counts.size), lambda _: np.zeros((12, counts.size)))
    return BedCurve("waiting", "waits", demand, counts, none.copy(), none.copy(), months, (), waits=waits)
