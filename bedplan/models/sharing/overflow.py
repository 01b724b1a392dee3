"""Overflow from full wards into other beds, at steady demand: two wards exactly, a bay that several share nearly so.

Patients who overflow come in bursts (only while their own ward is full), so they fill the next beds worse than their
mean says. A bay feels a ward only through the times at which it is full. So four states stand in for all the counts
of its patients: the gaps between patients sent on keep their mean, and their transform and its slope at 1, 3 and 9
per mean stay. (Kuczura's interrupted Poisson process, two states that keep three moments, says up to a tenth too little
where refusals are rare.)

Chains are held in symmetric form, each rate times √(share of time in the state left ÷ in the state entered). They are
made smaller by projection on the vectors that the bay's balance is made of, which keeps that form.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import linalg, special

from bedplan.errors import ImpossibleFigure
from bedplan.models.sharing.exact_chain import StateGrid, checked_loads, checked_stays
from bedplan.models.value_objects.bed_curve import bed_counts

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from numpy.typing import NDArray

    Array = NDArray[np.float64]

_PACES_PER_STAY = (1.0, 3.0, 9.0)
# more states than three wards have are made fewer before another ward joins
_MOST_STATES = 64


@dataclass(frozen=True, slots=True, eq=False)
class _Senders:
    """Wards as a bay feels them: rates between their states, of sending patients on, and √(share of time) in each.

    ``flow`` and ``sends`` ``(s, s)`` a mean stay, symmetric; ``root`` ``(s,)`` of length 1.
    """

    flow: Array
    sends: Array
    root: Array

    def beside(self, other: _Senders) -> _Senders:
        """Return both as one, each by itself in its own states."""
        mine, others = np.eye(self.root.size), np.eye(other.root.size)
        return _Senders(
            np.kron(self.flow, others) + np.kron(mine, other.flow),
            np.kron(self.sends, others) + np.kron(mine, other.sends),
            np.kron(self.root, other.root),
        )

    def in_few_states(self) -> _Senders:
        """Return seven states that a bay feels as nearly the same."""
        vectors = [self.root]
        for pace in _PACES_PER_STAY * 2:
            vector = np.linalg.solve(pace * np.eye(self.root.size) - self.flow, self.sends @ vectors[-1])
            vectors.append(vector / np.linalg.norm(vector))
        basis, _ = np.linalg.qr(np.stack(vectors, axis=1))
        return _Senders(basis.T @ self.flow @ basis, basis.T @ self.sends @ basis, basis.T @ self.root)


_NOBODY = _Senders(np.zeros((1, 1)), np.zeros((1, 1)), np.ones(1))


def _sender(load: float, beds: int) -> _Senders:
    """Return one ward in four states, or fewer where it has fewer than three beds."""
    patients = np.arange(beds + 1.0)
    logs = patients * math.log(load) - special.gammaln(patients + 1.0)
    root = np.exp((logs - logs.max()) / 2.0)
    leaving = np.where(patients < beds, load, 0.0) + patients
    more = np.append(np.sqrt(load * patients[1:]), 0.0)
    vectors = [root / np.linalg.norm(root)]
    for pace in _PACES_PER_STAY:
        bands = np.stack([-np.roll(more, 1), leaving + pace, -more])
        vectors.append(linalg.solve_banded((1, 1), bands, patients == beds))
    basis, _ = np.linalg.qr(np.stack(vectors, axis=1))
    moved = basis[1:].T @ (more[:-1, None] * basis[:-1])
    flow = moved + moved.T - basis.T @ (leaving[:, None] * basis)
    return _Senders(flow, load * np.outer(basis[-1], basis[-1]), basis.T @ vectors[0])


def _together(wards: Iterable[_Senders]) -> _Senders:
    """Return wards as one, in no more states than the bay's chain can hold."""
    group = _NOBODY
    for ward in wards:
        if group.root.size * ward.root.size > _MOST_STATES:
            group = group.in_few_states()
        group = group.beside(ward)
    return group


def _states_while_full(senders: _Senders, beds: int) -> Array:
    """Return the share of time in each state of the wards while all the bay's beds are taken, ``(s,)``.

    What goes up from n beds taken comes down from n + 1, so the states at n are those at n + 1 times ``back``; added
    over n they are the wards' own, whatever the bay does.
    """
    one = np.eye(senders.root.size)
    back, up_to = np.zeros_like(one), one
    for taken in range(beds):
        back = (taken + 1.0) * np.linalg.inv(senders.sends - senders.flow + taken * one - back @ senders.sends)
        up_to = one + back @ up_to
    return np.linalg.solve(up_to.T, senders.root)


def shared_overflow(loads: Sequence[float], beds: Sequence[int], shared_beds: int) -> Array:
    """Which share of each ward's patients finds no bed, if full wards send their overflow to the same shared beds?

    ``loads`` and ``beds`` are each ward's own; returns ``(wards,)``. For independent arrivals at a steady rate and
    exponential stays, all alike. Against exact chains, down to 1 patient in 10,000: up to three wards are at most 1 in
    1,000 of the figure too low, more wards within 1 in 300 either way. Where one mean stay is twice another, patients
    with short stays are up to 1 in 20 worse off than this says, with long ones 1 in 18 better, all together 1 in 80
    worse; where it is five times, 1 in 10, 1 in 7 and 1 in 25. The spread of stay hardly matters: 2 % too low in trials
    with even stays, 4 % too high with very uneven ones.

    Raises:
        ImpossibleFigure: a figure outside its meaning, or not one bed count a load.

    Source: after Kuczura 1973, Bell System Technical Journal 52:437-448 (few states that stand in for a ward that
        overflows); de Villemagne & Skelton 1987, International Journal of Control 46:2141-2169 (projection that keeps
        a transform and its slopes); for hospital beds Litvak et al. 2008, European Journal of Operational Research 185.
    Checked by: tests/models/test_overflow.py (exact chains)
    """
    loads = checked_loads(loads)
    if len(loads) != len(beds):
        raise ImpossibleFigure(
            f"{len(loads)} loads and {len(beds)} bed counts don't go together: give one for each ward."
        )
    counts, bay = [int(bed_counts(count)[0]) for count in beds], int(bed_counts(shared_beds)[0])
    senders = [_sender(load, count) if load > 0 else _NOBODY for load, count in zip(loads, counts, strict=True)]
    shares = np.zeros(len(loads))
    for ward, load in enumerate(loads):
        if load > 0:
            # the ward asked about joins last, so that its own states are never merged
            group = _together([*senders[:ward], *senders[ward + 1 :], senders[ward]])
            full, sends = _states_while_full(group, bay), senders[ward].sends
            refused = full @ np.kron(np.eye(full.size // len(sends)), sends) @ group.root
            shares[ward] = min(max(refused / load, 0.0), 1.0)
    return shares


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
