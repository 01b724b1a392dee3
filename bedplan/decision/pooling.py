"""Wards that share all their beds: the one ward they become, and who gains and who loses by it."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import reduce
from typing import TYPE_CHECKING

import numpy as np

from bedplan.decision.changing_beds import BedChanges, arrivals_by_month
from bedplan.decision.comparing import DAYS_PER_YEAR, Refused, patients_per_year
from bedplan.decision.pooled_rhythm import with_rhythm_of_all
from bedplan.decision.sharing import named_once
from bedplan.decision.ward import Ward
from bedplan.errors import ImpossibleFigure
from bedplan.models import Demand, LengthOfStay
from bedplan.models.formulas.clusters import peakedness
from bedplan.models.value_objects.figures import all_of_kind

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Sequence

    from bedplan.models import BedCurve

POOLING_NOTE = (
    "Sharing all beds: year, week and day follow the beds the wards want together, every month and the busiest hour within "
    "1 in 100, single hours up to 7 in 100 off where a day of short stays meets a week of long ones. Swings from day to day "
    "count as independent; slower drift as hitting all wards at once, which errs towards more beds."
)


def pool_wards(wards: Iterable[Ward]) -> Ward:
    """Which one ward do these become when they share all their beds?

    Arrivals, beds, booked lists, closures and extra beds are added; stays are a mix by patients. Month, weekday and hour
    factors are fitted to the beds the wards want together, so that a winter of few long stays isn't lost among many
    short ones; the busiest month never wants fewer. Hours of leaving are a mean by patients, and where they differ the
    mixed stay is scaled so that the beds wanted on average stay what they were. Clustering keeps the variance of the
    beds wanted, for variances of independent streams add up. Rate variation is the mean by load, as if all wards' demand
    were off the same way together; independent drift, √Σ(load·variation)² ÷ Σ load, would be smaller, so this errs
    towards more beds.

    Raises:
        ImpossibleFigure: no ward, two of one name, or wards that differ in what patients do when full or in weekdays
            open.

    Source: Smith & Whitt 1981, Bell System Technical Journal 60:39-55, on when sharing helps.
    Checked by: tests/decision/test_pooling.py
    """
    wards = named_once(all_of_kind(wards, Ward, "Wards that share their beds are a list of Ward"))
    if len(wards) == 1:
        return wards[0]
    _alike("what their patients do when they are full", [ward.when_full for ward in wards])
    _alike("the weekdays on which they are open", [ward.bed_changes.open_weekdays for ward in wards])
    names = [ward.name for ward in wards]
    return Ward(
        name=f"{', '.join(names[:-1])} and {names[-1]}",
        beds=sum(ward.beds for ward in wards),
        demand=_pooled_demand([ward.demand for ward in wards]),
        when_full=wards[0].when_full,
        admissions_per_year=_pooled_admissions(wards),
        notes=(*dict.fromkeys(note for ward in wards for note in ward.notes), POOLING_NOTE),
        bed_changes=_pooled_changes([ward.bed_changes for ward in wards]),
    )


def _alike(what: str, answers: Sequence[object]) -> None:
    if len(set(answers)) > 1:
        raise ImpossibleFigure(f"These wards differ in {what}, so they can't be read as one: set them alike first.")


def _pooled_admissions(wards: Sequence[Ward]) -> float | None:
    """Add recorded admissions, arrivals standing in where a ward has none recorded."""
    if all(ward.admissions_per_year is None for ward in wards):
        return None
    return math.fsum(
        ward.demand.total_arrivals_per_day * DAYS_PER_YEAR
        if ward.admissions_per_year is None
        else ward.admissions_per_year
        for ward in wards
    )


def _pooled_changes(changes: Sequence[BedChanges]) -> BedChanges:
    return BedChanges(
        closures=tuple(closure for one in changes for closure in one.closures),
        extra_by_month=tuple(map(sum, zip(*(one.extra_by_month for one in changes), strict=True))),
        extra_by_weekday=tuple(map(sum, zip(*(one.extra_by_weekday for one in changes), strict=True))),
        open_weekdays=changes[0].open_weekdays,
        unassignable=math.fsum(one.unassignable for one in changes),
    )


def _pooled_demand(demands: Sequence[Demand]) -> Demand:
    arrivals = np.array([one.arrivals_per_day for one in demands])
    everyone = np.array([one.total_arrivals_per_day for one in demands])
    loads = np.array([one.arrivals_per_day * one.length_of_stay.mean_days for one in demands])

    def mean(figure: Callable[[Demand], object], weights: np.ndarray) -> np.ndarray:
        """Return the mean of one figure over the wards, by weight."""
        return np.average([figure(one) for one in demands], axis=0, weights=weights if weights.sum() > 0 else None)

    pooled = Demand(
        arrivals_per_day=float(arrivals.sum()),
        length_of_stay=_mixed_stay(demands),
        month_factors=tuple(mean(lambda one: one.month_factors, arrivals)),
        weekday_factors=tuple(mean(lambda one: one.weekday_factors, arrivals)),
        hour_factors=tuple(mean(lambda one: one.hour_factors, arrivals)),
        rate_variation=float(mean(lambda one: one.rate_variation, loads)),
        booked=tuple(booked for one in demands for booked in one.booked),
        # where some leave by the clock and some when their stay ends, the latter are spread over the day
        discharge_hours=tuple(mean(lambda one: one.discharge_hours or (1 / 24,) * 24, everyone))
        if any(one.discharge_hours for one in demands)
        else (),
        weekend_slip=tuple(mean(lambda one: one.weekend_slip, everyone)),
        turnaround_hours=float(mean(lambda one: one.turnaround_hours, everyone)),
    )
    return with_rhythm_of_all(pooled.with_changes(clustering=_pooled_clustering(demands, pooled)), demands)


def _pooled_clustering(demands: Sequence[Demand], pooled: Demand) -> float:
    """Return the clustering with which the beds wanted swing as they do apart: their variances add up.

    The beds wanted have variance ÷ mean 1 + (clustering − 1)·ω, ω = ∫S²/∫S of the stay: people who come together and
    stay alike count more.
    """
    if all(one.clustering == 1.0 for one in demands) or pooled.arrivals_per_day == 0:
        return pooled.clustering
    alone = sum(_unbooked_beds(one) * (peakedness(one) - 1.0) for one in demands)
    clustered = pooled.with_changes(clustering=2.0)
    return float(np.clip(1.0 + alone / (_unbooked_beds(pooled) * (peakedness(clustered) - 1.0)), 0.01, 100.0))


def _unbooked_beds(demand: Demand) -> float:
    """Return the beds unbooked patients want on average, turnaround included."""
    return demand.arrivals_per_day * (demand.length_of_stay.mean_days + demand.turnaround_hours / 24.0)


def _mixed_stay(demands: Sequence[Demand]) -> LengthOfStay:
    """Mix the stays of unbooked patients, by patients: two at a time, the first with all before it."""

    def mix(so_far: tuple[float, LengthOfStay], one: Demand) -> tuple[float, LengthOfStay]:
        """Return the arrivals so far with one more ward, and their mixed stay."""
        arrivals, stay = so_far
        both = arrivals + one.arrivals_per_day
        if one.arrivals_per_day == 0 or one.length_of_stay == stay:
            return both, stay
        if arrivals == 0:
            return both, one.length_of_stay
        return both, LengthOfStay.two_streams(one.arrivals_per_day / both, stay, one.length_of_stay)

    return reduce(mix, demands, (0.0, demands[0].length_of_stay))[1]


@dataclass(frozen=True, slots=True, eq=False)
class PoolingEffect:
    """The shared ward, its curve, and what becomes of the patients of each ward that shares, and of all together.

    ``beds_for_same_access``: the fewest shared beds that turn no more patients away than the wards do apart.
    """

    pooled: Ward
    curve: BedCurve
    wards: tuple[Ward, ...]
    by_ward: tuple[Refused, ...]
    beds_for_same_access: int

    @property
    def patients(self) -> Refused:
        """All wards' patients together."""
        return Refused.together(self.by_ward)


def pooling_effect(wards: Iterable[Ward], model: str | None = None) -> PoolingEffect:
    """What does sharing all beds do for each ward's patients?

    In a shared ward everyone who comes in the same month meets the same chance of finding no bed, so a ward that was
    generously bedded loses. Where stays are alike the wards together never lose; where they differ even the total can
    get worse, because few long stays then fill the beds of many short ones. Each ward is read on ``model``, by default
    its own. Weekday and hour differences between the wards' patients are averaged out.

    Source: Smith & Whitt 1981, Bell System Technical Journal 60:39-55.
    Checked by: tests/decision/test_pooling.py
    """
    wards = all_of_kind(wards, Ward, "Wards that share their beds are a list of Ward")
    pooled = pool_wards(wards)
    curve = pooled.curve(model)
    by_month = curve.at(pooled.beds).by_month
    by_ward = tuple(
        Refused(
            ward.demand.total_arrivals_per_day * DAYS_PER_YEAR,
            ward.curve(model).at(ward.beds).turn_away_probability,
            float(arrivals_by_month(ward.demand) @ by_month),
        )
        for ward in wards
    )
    before = math.fsum(one.before for one in by_ward)
    enough = [int(beds) for beds in curve.beds if patients_per_year(curve, int(beds)) <= before * (1 + 1e-9)]
    return PoolingEffect(pooled, curve, wards, by_ward, min(enough, default=int(curve.beds[-1])))
