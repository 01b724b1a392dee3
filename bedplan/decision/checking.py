"""Does the formula agree with a simulation here? The same ward played through patient by patient."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bedplan.errors import ImpossibleFigure
from bedplan.models import Closure, WardRun, simulate_ward

if TYPE_CHECKING:
    from bedplan.decision.ward import Ward
    from bedplan.models import BedCurve

SEED = 20220401


@dataclass(frozen=True, slots=True)
class SimulationCheck:
    """One bed count: the formula's share who find no free bed, the simulation's with its 95 % range, and the patients.

    ``low`` says by how much, as a share of the simulated figure, the formula lies below the whole range (0 inside or
    above it): the direction in which too few beds would come out. ``if_they_queue``: where the formula places everyone
    at once, the share who would find the ward full if they waited in line instead; otherwise None.
    """

    beds: int
    formula: float
    simulated: float
    interval: tuple[float, float]
    arrivals: int
    seed: int
    if_they_queue: float | None = None

    @property
    def low(self) -> float:
        """How far the formula is below the simulation's range, as a share of the simulated figure."""
        return max(0.0, self.interval[0] - self.formula) / self.simulated if self.simulated > 0 else 0.0


def check_by_simulation(ward: Ward, curve: BedCurve, beds: int, *, seed: int = SEED) -> SimulationCheck:
    """What does a simulation of this ward say at this bed count, beside the curve's own figure?

    The ward's demand as it stands: rhythm, stays, clusters, booked lists; closures, winter bays and missing beds as
    well. Patients of a full ward do what the curve's model has them do: leave, wait, or are placed at once; then a
    second run says how many more find the ward full if they wait in line.

    Raises:
        ImpossibleFigure: the curve leaves chance out, or is of another demand than the ward's.

    Checked by: tests/decision/test_checking.py
    """
    if curve.when_full == "no chance":
        raise ImpossibleFigure(
            "The average formula leaves chance out, so there is nothing for a simulation to agree with."
        )
    if curve.demand != ward.demand:
        raise ImpossibleFigure(
            f"The curve is of another demand than that of {ward.name}, so it can't be checked by it."
        )
    formula, run = curve.at(beds).turn_away_probability, _run_of(ward, beds)
    simulated = simulate_ward(ward.demand, beds, seed=seed, when_full=curve.when_full, run=run)
    queue = None
    if curve.when_full == "stays anyway":
        queue = simulate_ward(ward.demand, beds, seed=seed, when_full="waits", run=run).turn_away_probability
    share = simulated.turn_away_probability
    return SimulationCheck(beds, formula, share, simulated.interval, simulated.arrivals, seed, queue)


def _run_of(ward: Ward, beds: int) -> WardRun:
    """Return how to simulate this ward: which beds are open on each day, and which go out of use at random."""
    changes = ward.bed_changes
    if changes.is_neutral:
        return WardRun()
    extra = np.where(changes.is_open_by_day, changes.extra_by_day, -int(beds))
    kinds = changes.at_random(max(ward.demand.length_of_stay.mean_days, 1e-3))
    closures = tuple(Closure.expected(one.beds, one.mean_in_force * 365.0 / one.days, one.days) for one in kinds)
    return WardRun(closures=closures, extra_by_day=tuple(extra) if extra.any() else ())
