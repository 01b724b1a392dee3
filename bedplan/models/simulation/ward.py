"""A ward played through patient by patient, many times side by side: what the formulas can't hold, and their check."""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace
from itertools import pairwise
from typing import TYPE_CHECKING, Literal

import numpy as np
from scipy import special

from bedplan.errors import ImpossibleFigure
from bedplan.models.simulation.beds import all_empty, pass_through, place_at_once, settle_leaving
from bedplan.models.simulation.counts import Counts, counts_of, is_patient_in, joined, patient_days_of
from bedplan.models.simulation.events import Part, draw_comers
from bedplan.models.simulation.run import WardRun, extent_of
from bedplan.models.value_objects.bed_curve import MOST_BEDS
from bedplan.models.value_objects.demand import Demand
from bedplan.models.value_objects.figures import ABOVE_ZERO, number, whole

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models.simulation.run import Extent

    Array = NDArray[np.float64]

WhenWardIsFull = Literal["leaves", "waits", "stays anyway"]
_CELLS_AT_ONCE = 2_000_000
_DEFAULT_RUN = WardRun()


@dataclass(frozen=True, slots=True, eq=False)
class SimulatedWard:
    """What a simulated ward saw in the counted days, booked patients included.

    ``arrivals``: patients counted. ``turn_away_probability``: share who found no free bed when they came (booked ones
    decided ahead: when a bed was looked for). ``occupancy``: mean patients in beds ÷ beds, the mean of the year's where
    they change by day; above 1 only where patients stay anyway. ``by_month`` ``(12,)``,
    January first: the same share by month of coming. ``gave_up``: share who waited and then left.
    ``booked_turn_away_probability``: the share among booked patients, 0 without any. ``mean_wait_hours``: over all
    patients, those who gave up included. The last four fields are what all these are counted from.
    """

    demand: Demand
    beds: int
    seed: int
    when_full: WhenWardIsFull
    run: WardRun
    arrivals: int
    turn_away_probability: float
    occupancy: float
    by_month: Array
    gave_up: float
    booked_turn_away_probability: float
    mean_wait_hours: float
    came: Array = field(repr=False)
    found_full: Array = field(repr=False)
    came_by_month: Array = field(repr=False)
    waited_hours: Array = field(repr=False)

    @property
    def interval(self) -> tuple[float, float]:
        """Between which shares does the true one lie, with 95 % confidence?"""
        return self.interval_at(0.95)

    def interval_at(self, confidence: float) -> tuple[float, float]:
        """Between which shares does the true one lie, with this confidence?

        From the spread between replications (a ratio of two sums, Student's t). Where nobody, or everybody, found
        the ward full that spread says nothing: then the open end is what so many independent patients could hide.

        Source: Law 2015, Simulation Modeling and Analysis, chapter 9 (replications); Cochran 1977, Sampling
        Techniques, section 6.3 (ratio).
        Checked by: tests/models/test_simulation.py
        """
        limits, allowed = (ABOVE_ZERO, 1.0 - 1e-15), "it lies between 0 and 1"
        confidence = number("A confidence of {}", confidence, limits, allowed)
        share, runs = self.turn_away_probability, self.came.size
        if share in (0.0, 1.0):
            hidden = -math.expm1(math.log((1.0 - confidence) / 2.0) / max(self.arrivals, 1))
            return (0.0, hidden) if share == 0.0 else (1.0 - hidden, 1.0)
        spread = float(np.sum((self.found_full - share * self.came) ** 2)) * runs / (runs - 1.0)
        reach = float(special.stdtrit(runs - 1, (1.0 + confidence) / 2.0)) * math.sqrt(spread) / self.arrivals
        return max(share - reach, 0.0), min(share + reach, 1.0)

    def share_waiting_over(self, hours: float) -> float:
        """Which share of all patients waited longer than this many hours, for a bed or until they gave up?"""
        hours = number("A wait of {} hours", hours, (0.0, 1e9), "it is 0 or more")
        return float(np.count_nonzero(self.waited_hours > hours)) / max(self.arrivals, 1)


@dataclass(frozen=True, slots=True)
class _Plan:
    """What is simulated: ``beds`` are all there are on the day on which most are open."""

    demand: Demand
    beds: int
    run: WardRun
    when_full: WhenWardIsFull

    @property
    def waits(self) -> bool:
        """Whether patients wait for a bed that may come free."""
        return self.when_full == "waits" and self.beds > 0


def _block(plan: _Plan, extent: Extent, seed: int, first: int, count: int) -> Counts:
    """Play some replications through, side by side: the warm-up, then the counted days."""
    demand, run = plan.demand, plan.run
    rate = np.ones(count)
    if demand.rate_variation > 1e-6:
        order = demand.rate_variation**-2
        chance = np.random.default_rng(np.random.SeedSequence(seed, spawn_key=(first, 2)))
        rate = chance.standard_gamma(order, count) / order
    at_once = plan.when_full == "stays anyway"
    empties, held, warm_days = all_empty(count, plan.beds), np.zeros((0, count)), 0.0
    ends = (extent.warm_up_days, extent.end_day)
    for part_number, (start_day, end_day) in enumerate(((0.0, ends[0]), ends)):
        seeds = np.random.SeedSequence(seed, spawn_key=(first, part_number))
        part = Part(start_day, end_day, extent.warm_up_days, count, seeds)
        comers = draw_comers(demand, run, part, rate, waits=plan.when_full == "waits")
        comers = comers if plan.waits else settle_leaving(comers, demand)
        if at_once:
            passage, held = place_at_once(held, comers, demand, plan.beds)
        else:
            passage = pass_through(empties, comers, demand)
        if part_number == 0:
            warm_days = patient_days_of(comers, passage, extent, is_patient_in(comers, end_day))
    counts = counts_of(comers, passage, extent, by_month=not demand.is_steady or run.has_changing_beds)
    return replace(counts, patient_days=counts.patient_days + warm_days)


def _plan(demand: Demand, beds: int, run: WardRun, seed: int, when_full: str) -> _Plan:
    """Refuse what isn't possible, and say how many beds there are on the day on which most are open."""
    if not isinstance(demand, Demand):
        raise ImpossibleFigure(f"A demand of {demand!r} is not possible: give Demand(arrivals_per_day, …).")
    if not isinstance(run, WardRun):
        raise ImpossibleFigure(f"A run of {run!r} is not possible: give WardRun(…).")
    whole("The seed {}", seed, (0, 2**63), "give a whole number, 0 or more")
    if when_full not in ("leaves", "waits", "stays anyway"):
        raise ImpossibleFigure(
            f"{when_full!r} is not something a simulated patient does: use 'leaves', 'waits' or 'stays anyway'."
        )
    count = whole("{} beds", beds, (0, MOST_BEDS), f"bed counts are whole numbers from 0 to {MOST_BEDS:,}")
    if not run.extra_by_day:
        return _Plan(demand, count, run, when_full)
    extra = tuple(max(one, -count) for one in run.extra_by_day)
    return _Plan(demand, count + max(extra), replace(run, extra_by_day=extra), when_full)


def simulate_ward(
    demand: Demand,
    beds: int,
    *,
    seed: int,
    when_full: WhenWardIsFull = "leaves",
    run: WardRun = _DEFAULT_RUN,
) -> SimulatedWard:
    """What would this ward see, played through patient by patient?

    Any stay and rhythm, patients who come together, booked lists, drift of the rate (one rate a replication), hours
    of leaving, turnaround, closures, beds by day; who finds no free bed leaves, or waits, first come, first served, or
    ``"stays anyway"``: is placed at once, beyond the beds, so that only the share who find the ward full hangs on the
    beds. Patients of a bed that shuts stay in it until they leave. The same seed
    gives the same run; it gives the same patients whatever the beds, so that the difference between two bed counts
    isn't chance: where patients leave, every one let in with fewer beds is let in with more; where everyone waits as
    long as it takes and no discharge slips past a weekend, nobody waits longer with more. Exact but for chance
    (``interval``) and for what is left of the empty start.

    Raises:
        ImpossibleFigure: a bed count that isn't whole and 0 or more, a seed that isn't, another answer than the three,
            a closure that begins after the run.

    Source: Kiefer & Wolfowitz 1955, Transactions of the American Mathematical Society 78; thinned and grouped
        arrivals by their cumulative rate: Çinlar 1975, Introduction to Stochastic Processes.
    Checked by: tests/models/test_simulation.py (exact formulas, SimPy).
    """
    plan = _plan(demand, beds, run, seed, when_full)
    extent = extent_of(plan.run, demand, plan.beds, waits=when_full == "waits")
    rows = max(demand.total_arrivals_per_day * extent.days, 1.0)
    blocks = math.ceil(extent.replications / min(max(_CELLS_AT_ONCE / rows, 10), 500))
    ends = np.linspace(0, extent.replications, blocks + 1).astype(int)
    seed = int(seed)
    counted = [_block(plan, extent, seed, int(first), int(last - first)) for first, last in pairwise(ends)]
    return _result(plan, int(beds), extent, seed, joined(counted))


def _result(plan: _Plan, beds: int, extent: Extent, seed: int, counts: Counts) -> SimulatedWard:
    """Turn counts into shares. A month that wasn't counted apart gets the share of all."""
    extra = plan.run.extra_by_day
    open_beds = beds + sum(extra) / len(extra) if extra else float(beds)
    arrivals = float(counts.came.sum())
    share = float(counts.found_full.sum()) / max(arrivals, 1.0)
    months = counts.came_by_month
    by_month = np.where(months > 0, counts.full_by_month / np.maximum(months, 1.0), share)
    bed_days = open_beds * extent.days * extent.replications
    return SimulatedWard(
        demand=plan.demand,
        beds=beds,
        seed=seed,
        when_full=plan.when_full,
        run=plan.run,
        arrivals=int(arrivals),
        turn_away_probability=share,
        occupancy=counts.patient_days / bed_days if bed_days > 0 else 0.0,
        by_month=by_month,
        gave_up=counts.gave_up / max(arrivals, 1.0),
        booked_turn_away_probability=counts.booked_full / max(counts.booked, 1.0),
        mean_wait_hours=24.0 * float(counts.waited_days.sum()) / max(arrivals, 1.0),
        came=counts.came,
        found_full=counts.found_full,
        came_by_month=months,
        waited_hours=24.0 * counts.waited_days,
    )
