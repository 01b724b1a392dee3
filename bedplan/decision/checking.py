"""Does the formula agree with a simulation here? The same ward played through patient by patient."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from bedplan.errors import ImpossibleFigure
from bedplan.models import simulate_ward

if TYPE_CHECKING:
    from bedplan.decision.ward import Ward
    from bedplan.models import BedCurve

SEED = 20220401


@dataclass(frozen=True, slots=True)
class SimulationCheck:
    """One bed count: the formula's share who find no free bed, the simulation's with its 95 % range, and the patients.

    ``low`` says by how much, as a share of the simulated figure, the formula lies below the whole range (0 inside or
    above it): the direction in which too few beds would come out.
    """

    beds: int
    formula: float
    simulated: float
    interval: tuple[float, float]
    arrivals: int
    seed: int

    @property
    def low(self) -> float:
        """How far the formula is below the simulation's range, as a share of the simulated figure."""
        return max(0.0, self.interval[0] - self.formula) / self.simulated if self.simulated > 0 else 0.0


def check_by_simulation(ward: Ward, curve: BedCurve, beds: int, *, seed: int = SEED) -> SimulationCheck:
    """What does a simulation of this ward say at this bed count, beside the curve's own figure?

    The ward's demand as it stands: rhythm, stays, clusters, booked lists; leaving or waiting as the curve's model has
    it. Closures and winter bays are left out, so a ward that has them is refused. On a curve of a model where
    everyone finds a bed at once, the simulated patients wait in line instead: they then find the ward full more often.

    Raises:
        ImpossibleFigure: the ward's beds change through the year, or the curve leaves chance out.

    Checked by: tests/decision/test_checking.py
    """
    if curve.when_full == "no chance":
        raise ImpossibleFigure(
            "The average formula leaves chance out, so there is nothing for a simulation to agree with."
        )
    if ward.bed_changes != type(ward.bed_changes)():
        raise ImpossibleFigure(
            "This check needs a ward with the same beds all year: leave closures and winter bays out."
        )
    formula = curve.at(beds).turn_away_probability
    when_full = "leaves" if curve.when_full == "leaves" else "waits"
    run = simulate_ward(ward.demand, beds, seed=seed, when_full=when_full)
    return SimulationCheck(beds, formula, run.turn_away_probability, run.interval, run.arrivals, seed)
