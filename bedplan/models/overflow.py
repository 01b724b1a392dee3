"""Overflow from full wards into other beds, at steady demand: two wards exactly, several by the equivalent random method.

Patients who overflow come in bursts (only while their own ward is full), so they fill the next beds worse than their
mean says. The method stands one imagined ward in for all the overflowing ones, with the same mean and variance.

Symbols: a offered load, c beds, B Erlang's share; m mean and v variance of the beds that overflowing patients would
use if there were no limit; z = v/m their peakedness (1 = independent).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

from bedplan.errors import ImpossibleFigure
from bedplan.models.bed_curve import bed_counts
from bedplan.models.erlang import erlang_b
from bedplan.models.exact_chain import StateGrid, checked_loads, checked_stays

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

_MOST_STEPS = 60


@dataclass(frozen=True, slots=True)
class OverflowLoad:
    """Beds that a stream of patients would use if there were no limit: their mean and their variance."""

    mean: float
    variance: float

    @property
    def peakedness(self) -> float:
        """Variance ÷ mean: 1 for patients who come independently, above 1 for bursts; 1 when nobody comes."""
        return self.variance / self.mean if self.mean > 0 else 1.0


def overflow_load(offered_load: float, beds: int) -> OverflowLoad:
    """How many beds do the patients want whom a full ward sends on, and how much does that number swing?

    Exact for independent arrivals at a steady rate and exponential stays that would be the same elsewhere.

    Source: Riordan's formula in Wilkinson 1956, Bell System Technical Journal 35:421-514.
    Checked by: tests/models/test_overflow.py
    """
    mean = float(offered_load * erlang_b(offered_load, beds))
    return OverflowLoad(mean, mean * (1.0 - mean + offered_load / (beds + 1.0 - offered_load + mean)))


def together(streams: Iterable[OverflowLoad]) -> OverflowLoad:
    """What do independent streams add up to? Means and variances both add."""
    streams = tuple(streams)
    return OverflowLoad(math.fsum(one.mean for one in streams), math.fsum(one.variance for one in streams))


def equivalent_ward(stream: OverflowLoad) -> tuple[float, float]:
    """Which one ward, of what load and how many beds, would send on a stream of this mean and variance?

    Rapp's formula is the start, then Newton's method to 11 digits: only the load is searched, the beds follow from it
    by Riordan's formula. A peakedness of 1 is a ward of no beds.

    Raises:
        ImpossibleFigure: a peakedness below 1, which no overflow has.

    Source: Wilkinson 1956; Rapp 1964, Ericsson Technics 20, for the start.
    Checked by: tests/models/test_overflow.py
    """
    mean, peakedness = stream.mean, stream.peakedness
    if peakedness < 1.0 - 1e-9:
        raise ImpossibleFigure(f"A peakedness of {peakedness:.3g} is not an overflow: bursts have 1 or more.")
    if peakedness <= 1.0 + 1e-9:
        return mean, 0.0

    def beds_at(load: float) -> float:
        """Return the beds at which this load leaves so peaked an overflow."""
        return max(load * (mean + peakedness) / (mean + peakedness - 1.0) - mean - 1.0, 0.0)

    def surplus(load: float) -> float:
        """Return by how much the overflow of this load is above the wanted mean."""
        return load * float(erlang_b(load, beds_at(load))) - mean

    load = stream.variance + 3.0 * peakedness * (peakedness - 1.0)
    for _ in range(_MOST_STEPS):
        step = 1e-6 * load
        change = surplus(load) * 2.0 * step / (surplus(load + step) - surplus(load - step))
        load = max(load - change, 0.5 * load)
        if abs(change) < 1e-11 * load:
            break
    return load, beds_at(load)


def shared_overflow(loads: Sequence[float], beds: Sequence[int], shared_beds: int) -> float:
    """Which share of all patients finds no bed, if full wards send their overflow to the same shared beds?

    ``loads`` and ``beds`` are each ward's own; arrivals independent at a steady rate, stays alike. Where 1 in 50 or
    more find no bed it lies between 3 % too low and 6 % too high, mostly within 3 %. Where it is rarer it is too low:
    by up to a tenth at 1 in 100, a third at 1 in 300 and more beyond, most where one large ward and a small one share.

    Raises:
        ImpossibleFigure: a figure outside its meaning, or not one bed count a load.

    Source: equivalent random method, Wilkinson 1956; for hospital beds Litvak et al. 2008, European Journal of
        Operational Research 185.
    Checked by: tests/models/test_overflow.py (an exact chain)
    """
    loads = checked_loads(loads)
    if len(loads) != len(beds):
        raise ImpossibleFigure(
            f"{len(loads)} loads and {len(beds)} bed counts don't go together: give one for each ward."
        )
    streams = [overflow_load(load, int(bed_counts(count)[0])) for load, count in zip(loads, beds, strict=True)]
    load, imagined = equivalent_ward(together(streams))
    lost = load * float(erlang_b(load, imagined + int(bed_counts(shared_beds)[0])))
    everyone = math.fsum(loads)
    return lost / everyone if everyone > 0 else 0.0


@dataclass(frozen=True, slots=True)
class OverflowShares:
    """A home ward that sends its overflow to a host ward, as shares of each ward's own patients.

    ``sent``: of the home's patients, those who find it full; ``lost``: those who find the host full too;
    ``host_lost``: of the host's own patients, those who find it full. ``outliers``: home patients in the host's beds.
    """

    sent: float
    lost: float
    host_lost: float
    outliers: float


def overflow_pair(
    loads: tuple[float, float], beds: tuple[int, int], stay_days: tuple[float, float] = (1.0, 1.0)
) -> OverflowShares:
    """What happens to both wards' patients if a full home ward (first) sends its overflow to a host ward (second)?

    Exact for independent arrivals at a steady rate and exponential stays; outliers keep their own ward's stay. With
    stays alike two wards of up to 140 beds, otherwise two of up to 30, can be solved.

    Raises:
        ImpossibleFigure: a figure outside its meaning, or wards too large to solve.

    Source: balance of a Markov chain.
    Checked by: tests/models/test_overflow.py (a second, dense solution)
    """
    load, stay = checked_loads(loads), checked_stays(stay_days)
    home_beds, host_beds = (int(bed_counts(count)[0]) for count in beds)
    # the host's own patients are told apart from outliers only where their stays differ
    own_beds = 0 if math.isclose(*stay) else host_beds
    grid = StateGrid((home_beds, host_beds, own_beds), (slice(1, 3), host_beds))
    at_home, sent, own = grid.counts
    home_full, host_full = at_home == home_beds, sent + own == host_beds
    arrivals = [one / days for one, days in zip(load, stay, strict=True)]
    grid.add_move(~home_full, (1, 0, 0), arrivals[0])
    grid.add_move(home_full & ~host_full, (0, 1, 0), arrivals[0])
    grid.add_move(~host_full, (0, 0, 1) if own_beds else (0, 1, 0), arrivals[1])
    grid.add_move(at_home > 0, (-1, 0, 0), at_home / stay[0])
    grid.add_move(sent > 0, (0, -1, 0), sent / stay[0])
    grid.add_move(own > 0, (0, 0, -1), own / stay[1])
    time = grid.shares_of_time()
    full, both = float(time[home_full].sum()), float(time[home_full & host_full].sum())
    return OverflowShares(full, both, float(time[host_full].sum()), load[0] * (full - both))
