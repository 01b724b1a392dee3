"""What a ward that turns patients away needs time for: beds that close with patients in them, and beds that open empty.

Read at each open count as if the ward had always had it, a ward whose beds change is too full too late and too empty
too late. Here the patients in it are followed instead, as a chain over their number with exponential stays: day by day
where the dates are known, in the long run where beds come and go at random. A patient is let in while fewer are in
than beds are open; whoever is in stays until the stay ends.

Source: Jagerman 1975, Bell System Technical Journal 54 (loss with a rate that changes); Palm 1943 (closures in force).
Checked by: tests/models/test_settling.py
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, NamedTuple

import numpy as np
from scipy import linalg, special

from bedplan.models.chains.periodic import Rhythm, leaving_rates
from bedplan.models.chains.side_by_side import Wards, at_end, in_step, through_step
from bedplan.models.rhythm.year import YEAR_DAYS, arrivals_by_hour, offered_load_by_hour

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models.value_objects.demand import Demand

    Array = NDArray[np.float64]
    Counts = NDArray[np.int64]

_MOST_YEARS, _SETTLED = 8, 1e-4
_QUICK, _QUICK_STEPS = 1.0, 3
_NEXT_TO_NEVER = 1e-6


class Days(NamedTuple):
    """What comes on each day of the year, and at which rate a day each patient leaves: ``(364,)`` each."""

    coming: Array
    leaving: Array
    load_at_end: Array


def days_of(demand: Demand) -> Days:
    """How many patients come on each day of the year, and at which rate does each bed in use come free?

    Checked by: tests/models/test_settling.py
    """
    coming = arrivals_by_hour(demand).reshape(YEAR_DAYS, 24).sum(axis=1)
    load_at_end = offered_load_by_hour(demand).reshape(YEAR_DAYS, 24)[:, -1]
    leaving = leaving_rates(Rhythm(coming[:, None], load_at_end[:, None]))[:, 0]
    return Days(coming, leaving, load_at_end)


def _through_part(wards: Wards, state: Array, rates: tuple[float, float], open_beds: Counts) -> tuple[Array, Array]:
    """Carry the wards through a part of a day: the state after it, and the share of it each was full."""
    is_full = wards.patients >= open_beds[wards.ward]
    come = np.where(is_full, 0.0, rates[0])
    come[wards.last] = 0.0
    solved = through_step(state, come, wards.patients * rates[1])
    return wards.scaled(at_end(solved)), wards.total(np.where(is_full, in_step(solved), 0.0))


def share_full_by_day(days: Days, open_beds: Counts) -> Array:
    """Which share of each day is each ward full, if its beds open and close by the day? ``(364, n)``.

    ``open_beds`` ``(364, n)``, each ward's beds on each day of a year that repeats for ever.

    Checked by: tests/models/test_settling.py
    """
    most = open_beds.max(axis=0)
    wards = Wards(np.zeros_like(most), most)
    state = wards.truncated_poisson(np.full(most.size, days.load_at_end[-1]))
    steps = np.where(days.leaving > _QUICK, _QUICK_STEPS, 1)
    full = np.zeros(open_beds.shape)
    for _ in range(_MOST_YEARS):
        start = state
        for day in range(YEAR_DAYS):
            total = np.zeros(most.size)
            for _ in range(steps[day]):
                rates = days.coming[day] / steps[day], days.leaving[day] / steps[day]
                state, found = _through_part(wards, state, rates, open_beds[day])
                total += found
            full[day] = np.clip(total / steps[day], 0.0, 1.0)
        if np.abs(state - start).sum() < _SETTLED * most.size:
            break
    return full


class AtRandom(NamedTuple):
    """Beds that go out of use at random: so many at a time, so many closures in force on average, for so long each."""

    beds: int
    mean_in_force: float
    days: float


def shares_in_force(mean: float) -> Array:
    """With which chance are 0, 1, 2 … closures in force? What is left of the tail is put on the last.

    Closures that begin independently of each other and last any time: Poisson (Palm 1943; endless servers).

    Checked by: tests/models/test_settling.py
    """
    count = np.arange(math.ceil(mean + 10.0 * math.sqrt(mean)) + 2 if mean else 2)
    shares = np.exp(special.xlogy(count, mean) - mean - special.gammaln(count + 1.0))
    most = int(np.flatnonzero(np.cumsum(shares) > 1.0 - _NEXT_TO_NEVER)[0]) + 1
    shares = shares[: most + 1]
    shares[-1] += max(0.0, 1.0 - shares.sum())
    return shares


def share_full_at_random(load: float, stay_days: float, beds: int, closures: AtRandom) -> float:
    """Which share of patients finds no open bed in the long run, if beds go out of use at random?

    The chain of patients and closures in force; stays and closures exponential.

    Checked by: tests/models/test_settling.py
    """
    kinds = shares_in_force(closures.mean_in_force).size
    patients, in_force = np.divmod(np.arange((beds + 1) * kinds), kinds)
    is_full = patients >= beds - closures.beds * in_force
    up = np.where(is_full, 0.0, load / stay_days)
    more = np.where(in_force < kinds - 1, closures.mean_in_force / closures.days, 0.0)
    moves = {kinds: up, 1: more, -kinds: patients / stay_days, -1: in_force / closures.days}
    band = np.zeros((2 * kinds + 1, up.size))
    for ahead, rate in moves.items():
        # the flow out of state s into s + ahead: row s + ahead, column s
        band[kinds + ahead] += rate
    band[kinds] -= sum(moves.values())
    likely = int(min(load, beds)) * kinds
    right = np.zeros(up.size)
    _fix(band, likely, kinds)
    right[likely] = 1.0
    shares = np.maximum(linalg.solve_banded((kinds, kinds), band, right), 0.0)
    return float(shares[is_full].sum() / shares.sum())


def _fix(band: Array, row: int, width: int) -> None:
    """Replace one balance equation, which follows from the others, by "this share is 1"."""
    columns = np.arange(max(0, row - width), min(band.shape[1], row + width + 1))
    band[width + row - columns, columns] = 0.0
    band[width, row] = 1.0


def share_full_as_if_settled(load: float, beds: int, closures: AtRandom) -> float:
    """As :func:`share_full_at_random`, if the ward settled at once at each count of open beds: Erlang's loss, mixed.

    Checked by: tests/models/test_settling.py
    """
    shares = shares_in_force(closures.mean_in_force)
    open_beds = np.maximum(beds - closures.beds * np.arange(shares.size), 0)
    logs = open_beds * math.log(max(load, 1e-300)) - load - special.gammaln(open_beds + 1.0)
    return float(shares @ np.exp(logs - special.xlogy(1.0, special.gammaincc(open_beds + 1.0, load))))
