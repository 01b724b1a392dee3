"""Seasons, weekdays and hours, and patients who find the ward full go elsewhere."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bedplan.models.chains.rhythm_correction import rhythm_correction, season_correction
from bedplan.models.formulas.clusters import TOGETHER_NOTE, clustering_notes, loss_table, swing_when_full
from bedplan.models.formulas.uncertain_rate import possible_rates
from bedplan.models.rhythm.found_full import (
    GROUPS,
    FoundFull,
    group_of_hour,
    month_of_group,
    shares_full,
    weekday_of_group,
)
from bedplan.models.rhythm.load_grid import load_grid
from bedplan.models.rhythm.year import (
    WEEKS,
    all_booked_in_week,
    beds_wanted,
    booked_load_in_week,
    leaving_of,
    mean_week,
    patients_wanted,
    unbooked_by_hour,
    unbooked_load_by_hour,
)
from bedplan.models.value_objects.bed_curve import BedCurve, bed_counts

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    from bedplan.models.value_objects.demand import Demand

    Array = NDArray[np.float64]

_WIDEST_LEVELS = 5.0
_METHOD = (
    "With seasons, hour by hour: in trials with usual weeks at most 2 % of the figure too low and 7 % too high where 1 in "
    "50 or more are turned away, a tenth too low where fewer are. Where patients come on a few weekdays only, up to a "
    "fifth too high."
)
_LARGE_LOAD = 1_500.0
_LARGE = "Above 1,500 beds wanted few wards were checked: up to a tenth too low or too high."
_MONTH_OFF = "A single month may be up to 6 % of its figure too low"
_EVEN_MONTH_OFF = ", with stays as long and even as here up to a quarter: plan with more."
_EVEN = (
    "Even stays and a weekly rhythm: the figure may be up to a quarter too low; where stays of one, two or three days end "
    "together, up to a fifth too high. Plan with more, or run the simulation."
)
_SHARP = (
    "Patients leave within a few hours of the day: the figure may be up to a half too low where under 1 in 50 are turned "
    "away, up to twice too high where more are, many times on wards of hundreds of beds. Run the simulation."
)
_SHORT_BOOKED = "Booked stays shorter than the others: the figure may be up to a half too low. Plan with more, or run the simulation."
_BOOKED = (
    "Booked patients: where their stays are even, long, or nearly all there are, the figure may be up to half too high, "
    "several times where under 1 in 50 are turned away."
)
_GROUPS_AND_BOOKED = (
    "Patients who come together beside a booked list: the figure may be up to a half too low. Plan with more, or run the "
    "simulation."
)
_SHORTER, _RATHER_EVEN, _LONG_DAYS = 0.75, 0.7, 14.0
_MOST_IN_AN_HOUR, _SHORT_DAYS, _SWING_OF_WEEK = 0.25, 0.25, 0.1


def _level_of_groups(demand: Demand) -> Array:
    """Return how much more unbooked demand than in the year's mean week each month × weekday has, ``(84,)``."""
    usual = np.tile(mean_week(demand).unbooked_load, WEEKS)
    level = np.divide(unbooked_load_by_hour(demand), usual, out=np.ones_like(usual), where=usual > 1e-9)
    return np.bincount(group_of_hour, weights=level) / np.bincount(group_of_hour)


def _turned_away(demand: Demand, counts: NDArray[np.int64]) -> tuple[FoundFull, FoundFull]:
    """Return unbooked and booked patients turned away: the first cut at every rate, times what the rhythm adds."""
    unbooked, booked = unbooked_by_hour(demand), np.tile(all_booked_in_week(demand), WEEKS)
    unbooked_load, booked_load = unbooked_load_by_hour(demand), np.tile(booked_load_in_week(demand), WEEKS)
    load = unbooked_load + booked_load
    drifting = unbooked_load.sum() / max(load.sum(), 1e-300)
    rates, weights = possible_rates(demand.rate_variation, float(unbooked_load.mean()))
    keep = weights * rates > 1e-12
    rates, weights = rates[keep], weights[keep]
    swing = 1.0 + (swing_when_full(demand) - 1.0) * drifting
    grids = [load_grid(load, patients, group_of_hour, GROUPS) for patients in (unbooked, booked)]
    loads = np.outer(1.0 + (rates - 1.0) * drifting, grids[0].loads)
    first_cut = loss_table(loads.ravel(), counts, swing).reshape(counts.size, *loads.shape)
    levels = np.outer(rates, _level_of_groups(demand))
    likely = weights > 1e-6 * weights.max()
    highest = float(levels[likely].max())
    week = rhythm_correction(demand, max(float(levels[likely].min()), highest / _WIDEST_LEVELS), highest)
    season = season_correction(demand)
    factors = [np.ones((rates.size, GROUPS, 1))] * 2
    for correction, level, part in (
        (week, levels, weekday_of_group),
        (season, np.tile(rates[:, None], GROUPS), month_of_group),
    ):
        if correction is not None:
            factors = [old * new for old, new in zip(factors, correction.factors(level, counts, part), strict=True)]
    found = []
    for grid, factor, weight in zip(grids, factors, (weights * rates, weights), strict=True):
        patients = grid.weights.sum(axis=1)
        at_rates = np.einsum("gp,nrp->rgn", grid.weights, first_cut, optimize=True) * factor
        turned_away = np.clip(np.einsum("r,rgn->gn", weight, at_rates), 0.0, patients[:, None])
        turned_away[:, counts == 0] = patients[:, None]
        # More beds never turn more away: raise what interpolation left too low, never lower anything.
        found.append(FoundFull(patients, np.maximum.accumulate(turned_away[:, ::-1], axis=1)[:, ::-1]))
    return found[0], found[1]


def _kinds_of_ward_notes(demand: Demand) -> list[str]:
    """Say which way and how far wards of some kinds were off in simulations, where 1 in 100 or so are turned away."""
    notes, stay = [], demand.length_of_stay
    comes = demand.arrivals_per_day > 0
    even = comes and stay.variation < _RATHER_EVEN
    if even and np.ptp(demand.weekday_factors) > _SWING_OF_WEEK:
        notes.append(_EVEN)
    if demand.discharge_hours and (
        max(demand.discharge_hours) > _MOST_IN_AN_HOUR or (comes and stay.mean_days < _SHORT_DAYS)
    ):
        notes.append(_SHARP)
    if demand.booked:
        means = [one.length_of_stay.mean_days for one in demand.booked if one.arrivals_per_day > 0]
        longest = max([*means, stay.mean_days if comes else 0.0])
        notes.append(_SHORT_BOOKED if any(mean < _SHORTER * longest for mean in means) else _BOOKED)
        if demand.clustering > 1.0:
            notes.append(_GROUPS_AND_BOOKED)
    return [*notes, TOGETHER_NOTE] if len(notes) > 1 else notes


def _notes(demand: Demand) -> tuple[str, ...]:
    """Say how the figures were found, and which way they may be off."""
    notes = [] if demand.is_steady and not leaving_of(demand).has_rhythm else [_METHOD]
    if np.ptp(demand.month_factors) > 1e-9:
        stay = demand.length_of_stay
        long_and_even = stay.mean_days > _LONG_DAYS and stay.variation < _RATHER_EVEN
        notes.append(_MONTH_OFF + (_EVEN_MONTH_OFF if long_and_even else "."))
    if beds_wanted(demand) > _LARGE_LOAD:
        notes.append(_LARGE)
    notes.extend(clustering_notes(demand))
    notes.extend(_kinds_of_ward_notes(demand))
    if demand.rate_variation > 0:
        notes.append("Averaged over the rates that demand may turn out to have; booked lists stay as they are.")
    return tuple(notes)


def seasonal_loss(demand: Demand, beds: ArrayLike) -> BedCurve:
    """For each bed count, which share is turned away, in each month, on each weekday and over the year?

    Every hour has its own rate. The first cut is the loss formula at the load of each hour (modified offered load);
    what it misses, because a ward remembers whom it let in, is added from the chain of a week that repeats. Patients
    who come together swing the census as their clustering and the spread of their stay say; an uncertain rate is
    averaged over patients. A steady demand gives exactly Erlang's formula.

    Source: Massey & Whitt 1994, Annals of Applied Probability 4(4); Jagerman 1975; Jongbloed & Koole 2001.
    Checked by: tests/models/test_seasonal.py
    """
    counts = bed_counts(beds)
    unbooked, booked = _turned_away(demand, counts)
    shares = shares_full(unbooked, booked if demand.booked else None)
    occupancy = patients_wanted(demand) * (1.0 - shares["turn_away_probability"]) / np.maximum(counts, 1)
    return BedCurve(
        model="seasonal_loss",
        when_full="leaves",
        demand=demand,
        beds=counts,
        occupancy=np.where(counts > 0, np.minimum(occupancy, 1.0), 0.0),
        notes=_notes(demand),
        **shares,
    )
