"""Beds held back for some patients, and patients who take more than one bed, for steady demand."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from bedplan.errors import ImpossibleFigure
from bedplan.models.sharing.exact_chain import StateGrid, checked_loads, checked_stays
from bedplan.models.value_objects.bed_curve import MOST_BEDS, bed_counts
from bedplan.models.value_objects.figures import listed, whole

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    Array = NDArray[np.float64]

_LARGE = 1e200


def beds_held_back(
    loads: tuple[float, float], beds: int, held_back: int, stay_days: tuple[float, float] = (1.0, 1.0)
) -> tuple[float, float]:
    """Which share of emergencies, and of all others, finds no bed if the last beds free are kept for emergencies?

    Emergencies (first) take any free bed, others (second) only while more than ``held_back`` are free. Exact for
    independent arrivals at a steady rate and exponential stays; with stays alike up to 20,000 beds, otherwise up to
    about 190.

    Raises:
        ImpossibleFigure: a figure outside its meaning, more beds held back than there are, a ward too large to solve.

    Source: balance of a Markov chain; trunk reservation, Roberts 1983, on the rule.
    Checked by: tests/models/test_reservation.py (a second, dense solution)
    """
    load, stay = checked_loads(loads), checked_stays(stay_days)
    count = int(bed_counts(beds)[0])
    if not (len(load) == len(stay) == 2):
        raise ImpossibleFigure(f"Two loads and two stays are needed, but {loads!r} and {stay_days!r} were given.")
    held_back = whole(
        f"{{}} beds held back of {count}", held_back, (0, count), f"give a whole number from 0 to {count}"
    )
    # the two kinds are told apart only where their stays differ
    other_beds = 0 if math.isclose(*stay) else count
    grid = StateGrid((count, other_beds), (slice(0, 2), count))
    first, other = grid.counts
    taken = first + other
    arrivals = [one / days for one, days in zip(load, stay, strict=True)]
    grid.add_move(taken < count, (1, 0), arrivals[0])
    grid.add_move(taken < count - held_back, (0, 1) if other_beds else (1, 0), arrivals[1])
    grid.add_move(first > 0, (-1, 0), first / stay[0])
    grid.add_move(other > 0, (0, -1), other / stay[1])
    time = grid.shares_of_time()
    return float(time[taken == count].sum()), float(time[taken >= count - held_back].sum())


def beds_each(
    loads: Sequence[float], beds_per_patient: Sequence[int], beds: int, held_back: Sequence[int] | None = None
) -> tuple[Array, Array]:
    """Which share of each kind of patient finds no room, if some take more than one bed (isolation in a shared bay)?

    ``loads`` are patients of each kind who would be there without a limit. Returns the shares ``(kinds,)`` and the
    share of time with 0, 1, … ``beds`` in use ``(beds + 1,)``. Exact for any spread of stay while nothing is held
    back. ``held_back``: beds that must stay free when a patient of that kind is taken; then it is an approximation,
    3 % too low in its published example.

    Raises:
        ImpossibleFigure: a figure outside its meaning, or lists of different lengths.

    Source: Kaufman 1981, IEEE Transactions on Communications 29(10); Roberts 1981; with beds held back Roberts 1983;
        examples after Moscholios & Logothetis 2019, Efficient Multirate Teletraffic Loss Models Beyond Erlang.
    Checked by: tests/models/test_reservation.py
    """
    load, count = checked_loads(loads), int(bed_counts(beds)[0])
    needs = listed(beds_per_patient, "Beds a patient need one figure a kind")
    kept = [0] * len(load) if held_back is None else listed(held_back, "Beds held back need one figure a kind")
    if not len(load) == len(needs) == len(kept):
        raise ImpossibleFigure("Loads, beds a patient and beds held back don't go together: give one for each kind.")
    needs = [whole("{} beds a patient", need, (1, MOST_BEDS), "give whole numbers from 1") for need in needs]
    kept = [whole("{} beds held back", spare, (0, MOST_BEDS), "give whole numbers, 0 or more") for spare in kept]
    weight = np.zeros(count + 1)
    weight[0] = 1.0
    for used in range(1, count + 1):
        for one, need, spare in zip(load, needs, kept, strict=True):
            if need <= used <= count - spare:
                weight[used] += one * need * weight[used - need] / used
        # only their ratios count: keep them where a float can hold them
        if weight[used] > _LARGE:
            weight[: used + 1] /= weight[used]
    time = weight / weight.sum()
    refused = [time[max(count - need - spare + 1, 0) :].sum() for need, spare in zip(needs, kept, strict=True)]
    return np.array(refused), time
