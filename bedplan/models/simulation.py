"""A ward played through patient by patient, many times side by side: what the formulas can't hold, and their check."""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace
from itertools import pairwise
from typing import TYPE_CHECKING, Literal

import numpy as np
from scipy import special

from bedplan.errors import ImpossibleFigure
from bedplan.models.bed_curve import bed_counts
from bedplan.models.simulation_beds import all_empty, pass_through, settle_leaving
from bedplan.models.simulation_counts import Counts, counts_of, is_patient_in, joined, patient_days_of
from bedplan.models.simulation_events import Part, draw_comers
from bedplan.models.simulation_run import WardRun, extent_of

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models.demand import Demand
    from bedplan.models.simulation_run import Extent

    Array = NDArray[np.float64]

_CELLS_AT_ONCE = 2_000_000
_DEFAULT_RUN = WardRun()


@dataclass(frozen=True, slots=True, eq=False)
class SimulatedWard:
    """What a simulated ward saw in the counted days, booked patients included.

    ``arrivals``: patients counted. ``turn_away_probability``: share who found no free bed when they came (booked ones
    decided ahead: when a bed was looked for). ``occupancy``: mean patients in beds ÷ beds. ``by_month`` ``(12,)``,
    January first: the same share by month of coming. ``gave_up``: share who waited and then left.
    ``booked_turn_away_probability``: the share among booked patients, 0 without any. ``mean_wait_hours``: over all
    patients, those who gave up included. The last five fields are what all these are counted from.
    """

    demand: Demand
    beds: int
    seed: int
    when_full: Literal["leaves", "waits"]
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
    waited_month: NDArray[np.int64] = field(repr=False)

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
        share, runs = self.turn_away_probability, self.came.size
        if share in (0.0, 1.0):
            hidden = -math.expm1(math.log((1.0 - confidence) / 2.0) / max(self.arrivals, 1))
            return (0.0, hidden) if share == 0.0 else (1.0 - hidden, 1.0)
        spread = float(np.sum((self.found_full - share * self.came) ** 2)) * runs / (runs - 1.0)
        reach = float(special.stdtrit(runs - 1, (1.0 + confidence) / 2.0)) * math.sqrt(spread) / self.arrivals
        return max(share - reach, 0.0), min(share + reach, 1.0)

    def share_waiting_over(self, hours: float) -> float:
        """Which share of all patients waited longer than this many hours, for a bed or until they gave up?"""
        return float(np.count_nonzero(self.waited_hours > hours)) / max(self.arrivals, 1)

    def share_waiting_over_by_month(self, hours: float) -> Array:
        """Which share of those who came in each month waited longer than this many hours? ``(12,)``, January first."""
        longer = np.bincount(self.waited_month[self.waited_hours > hours], minlength=12)
        by_month = longer / np.maximum(self.came_by_month, 1.0)
        return np.where(self.came_by_month > 0, by_month, self.share_waiting_over(hours))


def _block(ward: tuple[Demand, int, WardRun, bool], extent: Extent, seed: int, first: int, count: int) -> Counts:
    """Play some replications through, side by side: the warm-up, then the counted days."""
    demand, beds, run, waits = ward
    rate = np.ones(count)
    if demand.rate_variation > 1e-6:
        order = demand.rate_variation**-2
        chance = np.random.default_rng(np.random.SeedSequence(seed, spawn_key=(first, 2)))
        rate = chance.standard_gamma(order, count) / order
    empties, warm_days = all_empty(count, beds), 0.0
    ends = (extent.warm_up_days, extent.end_day)
    for number, (start_day, end_day) in enumerate(((0.0, ends[0]), ends)):
        seeds = np.random.SeedSequence(seed, spawn_key=(first, number))
        part = Part(start_day, end_day, extent.warm_up_days, count, seeds)
        comers = draw_comers(demand, run, part, rate, waits=waits)
        comers = comers if waits and beds > 0 else settle_leaving(comers, demand)
        passage = pass_through(empties, comers, demand)
        if number == 0:
            warm_days = patient_days_of(comers, passage, extent, is_patient_in(comers, end_day))
    counts = counts_of(comers, passage, extent, by_month=not demand.is_steady or bool(run.closures))
    return replace(counts, patient_days=counts.patient_days + warm_days)


def _checked(seed: int, when_full: str) -> None:
    """Refuse a seed or an answer to "what do patients do?" that isn't one."""
    if isinstance(seed, bool) or not isinstance(seed, int | np.integer) or seed < 0:
        raise ImpossibleFigure(f"The seed {seed!r} is not possible: give a whole number, 0 or more.")
    if when_full not in ("leaves", "waits"):
        raise ImpossibleFigure(f"{when_full!r} is not something a simulated patient does: use 'leaves' or 'waits'.")


def simulate_ward(
    demand: Demand,
    beds: int,
    *,
    seed: int,
    when_full: Literal["leaves", "waits"] = "leaves",
    run: WardRun = _DEFAULT_RUN,
) -> SimulatedWard:
    """What would this ward see, played through patient by patient?

    Any stay and rhythm, patients who come together, booked lists, drift of the rate (one rate a replication), hours
    of leaving, turnaround, closures; who finds no free bed leaves, or waits, first come, first served. The same seed
    gives the same run; it gives the same patients whatever the beds, so that the difference between two bed counts
    isn't chance: where patients leave, every one let in with fewer beds is let in with more; where everyone waits as
    long as it takes and no discharge slips past a weekend, nobody waits longer with more. Exact but for chance (``interval``) and for what is left of the empty start.

    Raises:
        ImpossibleFigure: a bed count that isn't whole and 0 or more, a seed that isn't, another answer than the two.

    Source: Kiefer & Wolfowitz 1955, Transactions of the American Mathematical Society 78; thinned and grouped
        arrivals by their cumulative rate: Çinlar 1975, Introduction to Stochastic Processes.
    Checked by: tests/models/test_simulation.py (exact formulas, SimPy).
    """
    _checked(seed, when_full)
    count = int(bed_counts(beds)[0])
    waits = when_full == "waits"
    extent = extent_of(run, demand, count, waits=waits)
    rows = max(demand.total_arrivals_per_day * extent.days, 1.0)
    blocks = math.ceil(extent.replications / min(max(_CELLS_AT_ONCE / rows, 10), 500))
    ends = np.linspace(0, extent.replications, blocks + 1).astype(int)
    ward = (demand, count, run, waits)
    counted = [_block(ward, extent, seed, int(first), int(last - first)) for first, last in pairwise(ends)]
    return _result(ward, extent, seed, joined(counted))


def _result(ward: tuple[Demand, int, WardRun, bool], extent: Extent, seed: int, counts: Counts) -> SimulatedWard:
    """Turn counts into shares. A month that wasn't counted apart gets the share of all."""
    demand, beds, run, waits = ward
    arrivals = float(counts.came.sum())
    share = float(counts.found_full.sum()) / max(arrivals, 1.0)
    months = counts.came_by_month
    by_month = np.where(months > 0, counts.full_by_month / np.maximum(months, 1.0), share)
    bed_days = max(beds, 1) * extent.days * extent.replications
    return SimulatedWard(
        demand=demand,
        beds=beds,
        seed=int(seed),
        when_full="waits" if waits else "leaves",
        run=run,
        arrivals=int(arrivals),
        turn_away_probability=share,
        occupancy=counts.patient_days / bed_days,
        by_month=by_month,
        gave_up=counts.gave_up / max(arrivals, 1.0),
        booked_turn_away_probability=counts.booked_full / max(counts.booked, 1.0),
        mean_wait_hours=24.0 * float(counts.waited_days.sum()) / max(arrivals, 1.0),
        came=counts.came,
        found_full=counts.found_full,
        came_by_month=months,
        waited_hours=24.0 * counts.waited_days,
        waited_month=counts.waited_month,
    )
