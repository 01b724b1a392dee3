"""What the rhythm of the week adds to the first cut of the loss with seasons.

The first cut takes Erlang's formula at each hour's own load. A ward remembers, though: who was let in yesterday holds
a bed today. The periodic chain knows that. It is worked out at a few levels of demand and a few bed counts for each;
the ratio of its answer to the first cut is a smooth curve of the spare beds, and is read between them.

Symbols: L mean beds wanted in a week at one level of demand; c beds; u = (c − L)/√L spare beds in units of chance.
"""

from __future__ import annotations

from functools import lru_cache
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from bedplan.models.chains.periodic import Group, Rhythm, fullness, lowest_count
from bedplan.models.formulas.erlang import erlang_b_table
from bedplan.models.rhythm.leaving import HOURS_A_WEEK, HOURS_A_YEAR, Leaving, beds_held, hours_held
from bedplan.models.rhythm.year import MONTH_DAYS, mean_week, month_of_hour, unbooked_by_hour

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models.rhythm.year import Week
    from bedplan.models.value_objects.demand import Demand

    Array = NDArray[np.float64]

_LARGE_LOAD = 150.0
_STATES_IN_ALL = 2_600
_FEWEST_COUNTS, _MOST_COUNTS, _COUNTS_OF_SEASON = 10, 40, 16
_FINE = 257
# Hours at which steps through the year start: daily after each month's change of rate, then ever longer.
_DAYS_INTO_MONTH = np.array([0, 1, 2, 4, 7, 11, 16, 22])
_SEASON_STARTS = (24 * (np.cumsum([0, *MONTH_DAYS[:-1]])[:, None] + _DAYS_INTO_MONTH)).ravel()
_MOSTLY_BOOKED = 0.8
_TOO_FEW_TO_COMPARE = 1e-8


class Correction(NamedTuple):
    """Natural logarithms of chain ÷ first cut, at evenly spaced points ``spare[level]`` of u for each level of demand.

    ``levels`` of unbooked demand, 1 = the year's mean; ``loads`` (unbooked at level 1, booked); ``unbooked`` and
    ``booked`` for each level ``(weekdays or months, points)``.
    """

    levels: Array
    loads: tuple[float, float]
    spare: list[Array]
    unbooked: list[Array]
    booked: list[Array]

    def factors(self, levels: Array, counts: NDArray[np.int64], part: NDArray[np.int64]) -> tuple[Array, Array]:
        """By which factors does the first cut grow at these levels, ``(k, groups)``?

        ``part`` ``(groups,)``: the weekday or month of each group. Returns ``(k, groups, n)`` for unbooked and for
        booked patients.
        """
        inside = np.clip(levels, self.levels[0], self.levels[-1]) if self.levels.size > 1 else levels
        by_level = _between(np.log(self.levels), np.log(inside))
        load = np.maximum(inside * self.loads[0] + self.loads[1], 1e-9)[..., None]
        spare = (counts - load) / np.sqrt(load)
        # Below the fewest beds worked out, down to no beds, where both are 1.
        first = load + max(grid[0] for grid in self.spare) * np.sqrt(load)
        taper = np.clip(counts / np.maximum(first, 1.0), 0.0, 1.0)
        kinds = (self.unbooked, self.booked)[: 2 if self.loads[1] else 1]
        totals = [np.zeros(spare.shape) for _ in kinds]
        for level, grid in enumerate(self.spare):
            place = (spare - grid[0]) * ((grid.size - 1) / max(grid[-1] - grid[0], 1e-12))
            np.clip(place, 0.0, max(grid.size - 1 - 1e-9, 0.0), out=place)
            cell = place.astype(np.int64)
            place -= cell
            cell += (part * grid.size)[:, None]
            for logs, total in zip(kinds, totals, strict=True):
                flat = logs[level].ravel()
                low = flat.take(cell)
                rise = flat.take(cell + 1, mode="clip") - low
                np.add(total, by_level[:, :, level, None] * (low + place * rise), out=total)
        found = [np.exp(total * taper) for total in totals]
        return found[0], found[-1]


def _between(nodes: Array, at: Array) -> Array:
    """Return the weights of a polynomial through ``nodes`` ``(m,)`` at points of any shape: ``(..., m)`` (Lagrange)."""
    weights = np.ones((*at.shape, nodes.size))
    for j, node in enumerate(nodes):
        for other in np.delete(nodes, j):
            weights[..., j] *= (at - other) / (node - other)
    return weights


def _joined(nodes: Array, at: Array) -> Array:
    """Return the weights of a smooth curve through all nodes at points between them: ``(points, nodes)``.

    Each stretch is a cubic through the four nodes nearest to it, so that a kink disturbs its neighbours only.
    """
    if nodes.size < 4:
        return _between(nodes, at)
    first = np.clip(np.searchsorted(nodes, at, side="right") - 2, 0, nodes.size - 4)
    column = first[:, None] + np.arange(4)
    four, shares = nodes[column], np.ones(column.shape)
    for j in range(4):
        for other in range(4):
            if other != j:
                shares[:, j] *= (at - four[:, other]) / (four[:, j] - four[:, other])
    weights = np.zeros((at.size, nodes.size))
    np.put_along_axis(weights, column, shares, axis=1)
    return weights


def _spread(low: float, high: float, count: int) -> Array:
    """Return points from low to high, closer at both ends (Chebyshev)."""
    return (low + high) / 2.0 - (high - low) / 2.0 * np.cos(np.pi * np.arange(count) / max(count - 1, 1))


def _levels(low: float, high: float) -> Array:
    """Return the levels of demand to work out: more of them the wider they lie apart."""
    if high / low < 1.001:
        return np.array([(low + high) / 2.0])
    return np.exp(_spread(np.log(low), np.log(high), 2 if high / low < 1.05 else 3))


def _counts(loads: Array, levels: int, most_counts: int) -> NDArray[np.int64]:
    """Return the bed counts to work out at one level, up to where hardly anybody is turned away; ``loads`` ``(168,)``."""
    most = int(np.ceil(loads.max() + 3.8 * np.sqrt(loads.max()) + 3.0))
    fewest = max(1, int(0.6 * loads.mean())) if loads.max() > _LARGE_LOAD else 1
    middle = np.array([(fewest + most) // 2])
    states = middle - lowest_count(np.full(1, loads.min()), middle) + 1
    count = int(np.clip(_STATES_IN_ALL / states[0] / levels, _FEWEST_COUNTS, most_counts))
    if most - fewest < count:
        return np.arange(fewest, most + 1)
    return np.unique(np.round(_spread(fewest, most, count)).astype(np.int64))


def _groups(demand: Demand) -> tuple[Group, ...]:
    """Return every booked group of the week."""
    return tuple(
        Group(24 * day + one.hour, patients, one.attends)
        for one in demand.booked
        for day, patients in enumerate(one.per_weekday)
        if patients
    )


def _log_ratio(chain: Array, first_cut: Array, patients: Array, part: NDArray[np.int64]) -> Array:
    """Return ln(chain ÷ first cut) by weekday or month, from ``(steps, n)`` shares and ``(steps,)`` patients.

    Where too few are turned away to compare, the ratio of the next fewer beds is held.
    """
    of_part = (part == np.arange(part.max() + 1)[:, None]) * patients
    chain, first_cut = of_part @ chain, of_part @ first_cut
    least = _TOO_FEW_TO_COMPARE * np.maximum(of_part.sum(axis=1, keepdims=True), 1e-300)
    enough = first_cut > least
    logs = np.log(np.where(enough, np.maximum(chain, 1e-3 * least), 1.0) / np.where(enough, first_cut, 1.0))
    for place in range(1, logs.shape[1]):
        logs[:, place] = np.where(enough[:, place], logs[:, place], logs[:, place - 1])
    return logs


def _compared(
    rhythm: Rhythm, patients: tuple[Array, Array], loads: Array, part: NDArray[np.int64]
) -> list[list[Array]]:
    """Compare chain and first cut: the points of spare beds, and the logarithms for unbooked and booked patients.

    A smooth curve joins the bed counts worked out; straight lines where every count is, or where nearly everyone is
    booked, which can put a kink at a count.
    """
    kinks = patients[1].sum() > _MOSTLY_BOOKED * (patients[0].sum() + patients[1].sum())
    levels = loads.shape[1]
    most_counts = _MOST_COUNTS if part.size == HOURS_A_WEEK else _COUNTS_OF_SEASON
    beds = [_counts(loads[:, level], levels, most_counts) for level in range(levels)]
    chain = fullness(rhythm, beds)
    found: list[list[Array]] = [[], [], []]
    for level, counts in enumerate(beds):
        first_cut = erlang_b_table(loads[:, level], counts).T
        load = loads[:, level].mean()
        fine = np.arange(counts[0], counts[-1] + 1.0)
        if kinks or counts.size == fine.size:
            weights = np.stack([np.interp(fine, counts, one) for one in np.eye(counts.size)], axis=1)
        else:
            fine = np.linspace(counts[0], counts[-1], _FINE)
            weights = _joined(counts.astype(float), fine)
        found[0].append((fine - load) / np.sqrt(load))
        for kind, full in enumerate((chain.unbooked[level], chain.booked[level])):
            found[1 + kind].append(_log_ratio(full, first_cut, patients[kind], part) @ weights.T)
    return found


def _has_rhythm(week: Week) -> bool:
    """Whether anything changes from hour to hour of the mean week."""
    load = week.unbooked_load
    return bool(week.booked.any()) or any(np.ptp(hours) > 1e-9 * hours.mean() for hours in (week.unbooked, load))


@lru_cache(maxsize=128)
def rhythm_correction(demand: Demand, lowest: float, highest: float) -> Correction | None:
    """What does the rhythm of the week add, for levels of unbooked demand from ``lowest`` to ``highest``?

    By weekday. None where the week has no rhythm: the first cut is then right.

    Checked by: tests/models/test_seasonal.py
    """
    week = mean_week(demand)
    mean_loads = float(week.unbooked_load.mean()), float(week.booked_load.mean())
    if not _has_rhythm(week):
        return None
    levels = _levels(lowest, highest) if mean_loads[0] > 0 else np.ones(1)
    loads = week.unbooked_load[:, None] * levels + week.booked_load[:, None]
    at_end = week.unbooked_load_at_end[:, None] * levels + week.booked_load_at_end[:, None]
    rhythm = Rhythm(week.unbooked[:, None] * levels, at_end, _groups(demand))
    weekday = np.repeat(np.arange(7), 24)
    return Correction(levels, mean_loads, *_compared(rhythm, (week.unbooked, week.booked), loads, weekday))


@lru_cache(maxsize=128)
def season_correction(demand: Demand) -> Correction | None:
    """What does the memory of the ward add from month to month, the rhythm of the week apart?

    By month, for the level of the year. None without seasons.

    Checked by: tests/models/test_seasonal.py
    """
    week = mean_week(demand)
    mean_loads = float(week.unbooked_load.mean()), float(week.booked_load.mean())
    if np.ptp(demand.month_factors) < 1e-9 or not mean_loads[0] > 0:
        return None
    smooth = demand.with_changes(weekday_factors=(1.0,) * 7, hour_factors=(1.0,) * 24)
    arrivals = unbooked_by_hour(smooth)
    leaving = Leaving(turnaround_hours=demand.turnaround_hours)
    loads = [
        beds_held(arrivals, hours_held(demand.length_of_stay, leaving, HOURS_A_YEAR, at_end=at_end))
        for at_end in (False, True)
    ]
    scale = mean_loads[0] / loads[0].mean()
    starts, ends = _SEASON_STARTS, np.append(_SEASON_STARTS[1:], HOURS_A_YEAR)
    average = np.add.reduceat(loads[0], starts) / (ends - starts) * scale + mean_loads[1]
    at_end = loads[1][ends - 1] * scale + mean_loads[1]
    unbooked = np.add.reduceat(arrivals, starts)
    booked = float(week.booked.mean()) * (ends - starts)
    rhythm = Rhythm((unbooked + booked)[:, None], at_end[:, None])
    spare, logs, _ = _compared(rhythm, (unbooked, booked), average[:, None], month_of_hour[starts])
    return Correction(np.ones(1), mean_loads, spare, logs, logs)
