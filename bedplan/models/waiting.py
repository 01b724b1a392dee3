"""Patients who wait for a bed instead of leaving: how many, how long, and in which months."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

from bedplan.models.bed_curve import BedCurve, Waits, bed_counts
from bedplan.models.clusters import clustering_notes
from bedplan.models.waiting_notes import kinds_of_ward_notes
from bedplan.models.waiting_spread import spread_of, wait_ratio
from bedplan.models.waiting_year import Pace, raised_by_swing, settled_queue, share_who_wait
from bedplan.models.year import (
    HOURS_A_WEEK,
    HOURS_A_YEAR,
    arrivals_by_hour,
    booked_load_in_week,
    month_of_hour,
    offered_load_by_hour,
    patients_by_hour,
    unbooked_by_hour,
    unbooked_load_by_hour,
)

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    from bedplan.models.demand import Demand

    Array = NDArray[np.float64]

_STEPS_HOURS = (24, 12, 6, 3, 2, 1)
# a longer step would level the peak at which patients wait, before discharges or as a list comes in
_STEP_WITH_DISCHARGES, _STEP_WITH_LISTS = 3, 1
_STEADY_RATES, _RATES = 31, 7
_NO_DRIFT = 1e-4
# standard deviations: rates beyond are one in a thousand million
_FARTHEST = 6.0
# a load this near its beds counts as reaching them: its queue would take lifetimes to settle
_TOO_NEAR = 1e-6
# range of beds wanted in a week ÷ √beds wanted from which the week's rhythm is worth a note
_SWINGS = 0.4


@dataclass(frozen=True, slots=True, eq=False)
class _Load:
    """Beds wanted in each step of a period that repeats, a column a rate of arrival, and who comes when.

    ``wanted`` ``(steps, rates)``; ``patients`` ``(12, steps, rates)`` by month of coming, each rate by its ``chance``;
    ``mean_days`` a bed is held, turnaround included, and ``patient_share`` of it that a patient is in it. The queue is
    carried over ``steps_at_once``.
    """

    wanted: Array
    patients: Array
    chance: Array
    step_days: float
    mean_days: float
    patient_share: float
    steps_at_once: int


@dataclass(frozen=True, slots=True, eq=False)
class _Queue:
    """Who waits, ``(steps, rates, n)``, and how long on average those who do; ``in_use`` ``(rates, n)``."""

    wait: Array
    wait_days: Array
    in_use: Array


def _rates(variation: float, many: int) -> tuple[Array, Array]:
    """Return some rates of arrival, with mean 1 and this deviation ÷ mean, and the chance of each (Gauss's rule)."""
    if variation < _NO_DRIFT:
        return np.ones(1), np.ones(1)
    nodes, weights = np.polynomial.hermite_e.hermegauss(many)
    nodes, weights = nodes[np.abs(nodes) < _FARTHEST], weights[np.abs(nodes) < _FARTHEST]
    chance = weights / weights.sum()
    rates = special.gammaincinv(variation**-2, special.ndtr(nodes)) * variation**2
    return rates / (rates @ chance), chance


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
    by_hour, present = offered_load_by_hour(demand), patients_by_hour(demand)
    mean_days = by_hour.mean() / demand.total_arrivals_per_day
    period, hours, at_once = _period_and_step(demand, by_hour, mean_days)
    steps = period // hours
    rates, chance = _rates(demand.rate_variation, _STEADY_RATES if steps == 1 else _RATES)
    booked_wanted = np.tile(booked_load_in_week(demand), period // HOURS_A_WEEK)
    wanted = [
        sheet[:period].reshape(steps, hours).mean(axis=1) for sheet in (unbooked_load_by_hour(demand), booked_wanted)
    ]
    cell = month_of_hour * steps + np.arange(HOURS_A_YEAR) // hours % steps
    unbooked, everyone = unbooked_by_hour(demand), arrivals_by_hour(demand)
    patients = [
        np.bincount(cell, by_hour, 12 * steps).reshape(12, steps) for by_hour in (unbooked, everyone - unbooked)
    ]
    return _Load(
        wanted=wanted[0][:, None] * rates + wanted[1][:, None],
        patients=(patients[0][:, :, None] * rates + patients[1][:, :, None]) * chance,
        chance=chance,
        step_days=hours / 24.0,
        mean_days=mean_days,
        patient_share=present.mean() / by_hour.mean(),
        steps_at_once=at_once,
    )


def _weeks(load: _Load) -> int:
    """Return how many weeks the period has."""
    return round(load.wanted.shape[0] * load.step_days / 7.0)


def _steady_queue(demand: Demand, load: _Load, counts: NDArray[np.int64]) -> tuple[Array, Array]:
    """Read the delay formula at each rate: exact shares for exponential stays, one step for the whole year."""
    spread, loads = spread_of(demand), load.wanted[0]
    below = np.minimum(loads, 0.999999 * counts[:, None])
    delayed = share_who_wait(loads, counts, spread.peakedness)
    days = load.mean_days * wait_ratio(spread, counts[:, None].astype(float), below) / (counts[:, None] - below)
    return delayed.T[None], days.T[None]


def _queue(demand: Demand, load: _Load, counts: NDArray[np.int64]) -> _Queue:
    """Work out the queue at counts above 0, some of which may be too few for ever."""
    settles = load.wanted.mean(axis=0)[:, None] < counts * (1.0 - _TOO_NEAR)
    rates, columns = np.nonzero(settles)
    shape = (load.wanted.shape[0], *settles.shape)
    wait, days = np.ones(shape), np.full(shape, np.inf)
    in_use = np.minimum(load.wanted.mean(axis=0)[:, None], counts)
    if load.wanted.shape[0] == 1:
        steady = _steady_queue(demand, load, counts)
        wait, days = np.where(settles, steady[0], 1.0), np.where(settles, steady[1], np.inf)
    elif rates.size:
        pace = Pace(load.step_days, load.mean_days, load.steps_at_once)
        year = settled_queue(spread_of(demand), counts, load.wanted[:, rates], columns, pace)
        wait[:, settles], days[:, settles] = year
        wait = raised_by_swing(wait, load.wanted, load.patients.sum(axis=0), _weeks(load))
    return _Queue(wait, days, in_use)


@dataclass(frozen=True, slots=True, eq=False)
class _Reading:
    """Averages over patients, by month and over the year, of a queue at ``(n,)`` bed counts."""

    queue: _Queue
    weights: Array
    by_month_weights: Array

    @classmethod
    def of(cls, queue: _Queue, load: _Load) -> _Reading:
        """Weigh every step and rate by its patients."""
        by_month = load.patients.reshape(12, -1)
        total = by_month.sum(axis=1, keepdims=True)
        return cls(queue, by_month.sum(axis=0) / total.sum(), by_month / np.where(total > 0, total, 1.0))

    def _over(self, hours: float) -> Array:
        """Return who waits longer, ``(steps × rates, n)``: waits are exponential about their mean."""
        shares = self.queue.wait
        if hours > 0.0:
            shares = shares * np.exp(-hours / 24.0 / self.queue.wait_days)
        return shares.reshape(self.weights.size, -1)

    def share_over(self, hours: float) -> Array:
        """Which share waits longer than this, over the year?"""
        return np.clip(np.minimum.accumulate(self.weights @ self._over(hours)), 0.0, 1.0)

    def share_over_by_month(self, hours: float) -> Array:
        """Which share of those who come in each month waits longer than this?"""
        return np.clip(np.minimum.accumulate(self.by_month_weights @ self._over(hours), axis=1), 0.0, 1.0)

    def mean_hours(self) -> Array:
        """How long does everybody wait on average, where the queue settles? inf where it settles at no rate."""
        days = (self.queue.wait * self.queue.wait_days).reshape(self.weights.size, -1)
        settles = np.isfinite(days)
        weight = self.weights @ settles
        total = self.weights @ np.where(settles, days, 0.0)
        return 24.0 * np.divide(total, weight, out=np.full(weight.size, np.inf), where=weight > 0)


def _with_no_beds(values: Array, counts: NDArray[np.int64], everyone: float) -> Array:
    """Put the column of 0 beds in front, where it was asked for."""
    if counts[0] > 0:
        return values
    return np.concatenate([np.full((*values.shape[:-1], 1), everyone), values], axis=-1)


def _notes(demand: Demand, load: _Load, counts: NDArray[np.int64]) -> tuple[str, ...]:
    """Say where the queue only grows, what is carried on, and which way each approximation errs."""
    wanted = load.wanted @ load.chance
    notes = []
    if counts[0] <= wanted.mean():
        notes.append(
            f"Up to {int(wanted.mean())} beds the queue only grows: over the year {wanted.mean():.1f} beds are wanted on average."
        )
    if load.wanted.shape[0] > 1:
        steps = load.patients.sum(axis=2) > 0
        busiest = max(float(wanted[here].mean()) for here in steps if here.any())
        notes.append(
            f"Patients who still wait at the end of a busy week are carried into the next. Below {int(busiest) + 1} beds "
            "the busiest month wants more beds than there are: there the share who wait may be up to an eighth too low "
            "and the mean wait up to a quarter too long."
        )
    weeks = wanted.reshape(_weeks(load), -1)
    if np.median(np.ptp(weeks, axis=1) / np.sqrt(np.maximum(weeks.mean(axis=1), 1e-9))) > _SWINGS:
        notes.append(
            "With a rhythm of weekdays or hours the share who wait may be up to a tenth of it off, with very uneven stays up "
            "to a seventh too low, with very even ones up to a fifth too high. The mean wait may be up to a fifth too long, "
            "with short stays up to a half; the share who wait for hours up to a seventh too low where few beds are free."
        )
    notes.extend(kinds_of_ward_notes(demand))
    notes.extend(clustering_notes(demand, waits=True))
    if demand.rate_variation > 0.0:
        notes.append(
            "The mean wait leaves out rates at which the queue only grows, so it is too short; the shares count everyone as waiting there."
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

    Source: Erlang 1917; Allen 1990 and the others named in waiting_spread; Wang, Tipper & Banerjee 1996.
    Checked by: tests/models/test_waiting.py, tests/models/test_every_model.py
    """
    counts = bed_counts(beds)
    if demand.total_arrivals_per_day == 0.0:
        return _nobody(demand, counts)
    load, open_counts = _load_of(demand), counts[counts > 0]
    if open_counts.size == 0:
        open_counts = np.array([1])
    reading = _Reading.of(_queue(demand, load, open_counts), load)
    in_use = (load.chance @ reading.queue.in_use) * load.patient_share
    answers = counts.size

    def filled(values: Array, everyone: float) -> Array:
        """Return figures for every bed count, no beds included."""
        return _with_no_beds(values, counts, everyone)[..., :answers]

    return BedCurve(
        "waiting",
        "waits",
        demand,
        counts,
        filled(reading.share_over(0.0), 1.0),
        filled(np.minimum(in_use / open_counts, 1.0), 0.0),
        filled(reading.share_over_by_month(0.0), 1.0),
        _notes(demand, load, counts),
        waits=Waits(
            filled(np.minimum.accumulate(reading.mean_hours()), np.inf),
            lambda hours: filled(reading.share_over(hours), 1.0),
            lambda hours: filled(reading.share_over_by_month(hours), 1.0),
        ),
    )


def _nobody(demand: Demand, counts: NDArray[np.int64]) -> BedCurve:
    """Answer for a ward nobody comes to: nobody waits."""
    none, months = np.zeros(counts.size), np.zeros((12, counts.size))
    waits = Waits(none, lambda _: np.zeros(counts.size), lambda _: np.zeros((12, counts.size)))
    return BedCurve("waiting", "waits", demand, counts, none.copy(), none.copy(), months, (), waits=waits)
