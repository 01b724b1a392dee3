"""The rhythm of wards that share their beds: factors by which the shared beds wanted come out as the wards' own sum.

One demand has one stay and one rhythm. A mean of the wards' factors by patients follows their arrivals, not the beds
they want: few long stays with a winter would lose it among many short ones. So the factors are fitted to the beds
wanted, hour by hour: first the week's, then the year's, each linear in the factors (Eick, Massey & Whitt 1993).
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from scipy import optimize

from bedplan.models.rhythm.leaving import HOURS_A_WEEK, HOURS_A_YEAR, Leaving, beds_held, hours_held
from bedplan.models.rhythm.year import (
    booked_load_in_week,
    hour_of_day,
    leaving_of,
    mean_week,
    month_of_hour,
    offered_load_by_hour,
    rhythm_of_week,
    unbooked_by_hour,
    weekday_of_hour,
)

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from bedplan.models import Demand

    Array = NDArray[np.float64]

_RHYTHMS = (("weekday_factors", weekday_of_hour[:HOURS_A_WEEK]), ("hour_factors", hour_of_day[:HOURS_A_WEEK]))
_LEAVING = ("discharge_hours", "weekend_slip", "turnaround_hours")
_ROUNDS, _YEAR_ROUNDS, _CLOSE = 4, 2, 1e-9


def _differ(demands: Sequence[Demand], *names: str) -> bool:
    """Whether wards that anybody comes to unbooked differ in one of these figures."""
    some = [one for one in demands if one.arrivals_per_day > 0]
    return any(getattr(one, name) != getattr(some[0], name) for one in some[1:] for name in names)


def _by(groups: NDArray[np.int64], figures: Array) -> Array:
    """Average figures of each hour, ``(hours,)`` or ``(hours, n)``, over the hours of each group."""
    count = np.bincount(groups)
    is_in = groups[None, :] == np.arange(count.size)[:, None]
    return (is_in @ figures.reshape(groups.size, -1) / count[:, None]).reshape(count.size, *figures.shape[1:])


def _responses(arrivals: Array, groups: NDArray[np.int64], held: Array) -> Array:
    """Return the beds wanted in each group of hours, for the arrivals of each group alone: ``(groups, groups)``."""
    columns = [beds_held(np.where(groups == group, arrivals, 0.0), held) for group in range(groups.max() + 1)]
    return _by(groups, np.stack(columns, axis=1))


def _with_factors(demand: Demand, name: str, changes: Array) -> Demand:
    """Return a demand whose factors are multiplied by these, brought to a mean of 1."""
    factors = np.array(getattr(demand, name)) * changes
    return demand.with_changes(**{name: tuple(factors / factors.mean())}) if factors.sum() > 0 else demand


def _week_fitted(pooled: Demand, demands: Sequence[Demand]) -> Demand:
    """Fit weekday and hour factors to the beds the wards want in each hour of a week without seasons."""
    weeks = [mean_week(one) for one in demands]
    wanted = sum(week.unbooked_load + week.booked_load for week in weeks) - booked_load_in_week(pooled)
    held = hours_held(pooled.length_of_stay, leaving_of(pooled), HOURS_A_WEEK)
    for _ in range(_ROUNDS):
        for name, groups in _RHYTHMS:
            if _differ(demands, name, *_LEAVING):
                arrivals = pooled.arrivals_per_day / 24.0 * rhythm_of_week(pooled)
                changes, _ = optimize.nnls(_responses(arrivals, groups, held), _by(groups, wanted))
                pooled = _with_factors(pooled, name, changes)
    return pooled


def _by_month(demand: Demand) -> Array:
    return _by(month_of_hour, offered_load_by_hour(demand))


def _year_fitted(pooled: Demand, demands: Sequence[Demand]) -> Demand:
    """Fit month factors to the beds the wards want in each month; never fewer in the busiest than they do.

    How much a month's arrivals add to each month is taken from the stay alone; what hours and weekends of leaving
    change about it is made up for in a second round.
    """
    wanted = sum(_by_month(one) for one in demands)
    held = hours_held(pooled.length_of_stay, Leaving(), HOURS_A_YEAR)
    fitted, found = pooled, _by_month(pooled)
    for _ in range(_YEAR_ROUNDS):
        responses = _responses(unbooked_by_hour(fitted), month_of_hour, held)
        missing = wanted - found + responses.sum(axis=1)
        fitted = _with_factors(fitted, "month_factors", optimize.nnls(responses, np.maximum(missing, 0.0))[0])
        found = _by_month(fitted)
    month, mean = int(wanted.argmax()), wanted.mean()
    if wanted[month] <= found[month] * (1.0 + _CLOSE) or found[month] <= mean:
        return fitted
    wider = (wanted[month] - mean) / (found[month] - mean)
    factors = np.maximum(1.0 + wider * (np.array(fitted.month_factors) - 1.0), 0.0)
    return fitted.with_changes(month_factors=tuple(factors / factors.mean()))


def _stay_fitted(pooled: Demand, demands: Sequence[Demand]) -> Demand:
    """Lengthen or shorten the mixed stay where mixed hours of leaving would move the beds wanted on average."""
    wanted = sum(float(offered_load_by_hour(one).mean()) for one in demands)
    for _ in range(_ROUNDS):
        booked = float(booked_load_in_week(pooled).mean())
        found = float(offered_load_by_hour(pooled).mean()) - booked
        if wanted <= booked or abs(found - (wanted - booked)) <= 1e-6 * wanted:
            break
        stay = pooled.length_of_stay.scaled((wanted - booked) / found)
        pooled = pooled.with_changes(length_of_stay=stay)
    return pooled


def with_rhythm_of_all(pooled: Demand, demands: Sequence[Demand]) -> Demand:
    """Which factors make this demand want, hour by hour, the beds that these demands want together?

    ``pooled`` holds their arrivals, mixed stay, booked lists and first factors; where all wards have the same, those
    are kept.

    Source: least squares without negative arrivals (Lawson & Hanson 1974) on the beds wanted, Eick, Massey & Whitt
        1993, Management Science 39(2).
    Checked by: tests/decision/test_pooling.py
    """
    if pooled.arrivals_per_day == 0:
        return pooled
    if _differ(demands, *_LEAVING):
        pooled = _stay_fitted(pooled, demands)
    if _differ(demands, "weekday_factors", "hour_factors", *_LEAVING):
        pooled = _week_fitted(pooled, demands)
    return _year_fitted(pooled, demands) if _differ(demands, "month_factors") else pooled
