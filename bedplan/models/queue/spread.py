"""What the spread of stay and patients who come together do to a wait, beside Erlang's delay formula.

Erlang's formulas are exact for exponential stays. Others change the mean wait by a ratio R. Allen & Cunneen's
(Ca² + Cs²)/2 is R for a ward that is nearly always full: it lets the whole spread of stay act. A queue on many beds
forgets sooner than long stays end, so only the spread that shows within the queue's own time acts; with few patients
waiting R is that of the first bed to empty among all. R here joins the three. Within 10 % of simulation for
variations of 0.3 to 2, lognormal and gamma, 4 to 80 beds, from half to one in thirty waiting; Allen & Cunneen's alone
is 20 % too low at a variation of 0.3 and twice too high at a lognormal variation of 2.

Symbols: a offered load, c beds, m mean time a bed is held, S its survival, E(u) = ∫ S from u on, Cs² its squared
variation, Ca² variance ÷ mean of arrivals, I(u) variance ÷ mean of the stays that end on one bed within u.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.models.value_objects.demand import BookedList, Demand

    Array = NDArray[np.float64]

_STEPS, _LONGEST = 64, 64
_TIMES = np.arange(_STEPS * _LONGEST + 1) / _STEPS
_NEAR_ONE = 0.05
# nobody's census is quite without chance: Hayward's formula divides by its swing
_SMOOTHEST = 0.1
# every step for three mean stays, then ever fewer
_LIGHT = np.unique(np.concatenate([np.arange(3 * _STEPS), np.geomspace(3 * _STEPS, _STEPS * _LONGEST, 40).astype(int)]))


@dataclass(frozen=True, slots=True, eq=False)
class Spread:
    """The spread of all patients who come, booked ones too, each weighed by how many they are.

    ``beyond`` and ``ended`` are E/m and I at ``_TIMES`` mean stays. ``grouping`` is Ca²; ``peakedness`` the variance ÷
    mean of the beds in use if nobody ever waited.
    """

    mean_days: float
    squared_variation: float
    grouping: float
    peakedness: float
    beyond: Array
    ended: Array


def _variance_of_ends(beyond: Array) -> Array:
    """Return I at every step: the renewal sums of one bed whose patients follow one another without a gap.

    The chance of each step is the second difference of E, which keeps the mean stay exact. The sum of all its
    convolutions is 1/(1 − transform); a falling weight keeps the sum from wrapping round.

    Source: Cox 1962, Renewal Theory, section 4.5 (variance of an equilibrium renewal process).
    """
    chance = np.empty(_TIMES.size)
    chance[0] = 1.0 + (beyond[1] - beyond[0]) * _STEPS
    chance[1:-1] = (beyond[:-2] - 2.0 * beyond[1:-1] + beyond[2:]) * _STEPS
    chance[-1] = 0.0
    size = 2 * (_TIMES.size - 1)
    weight = 1e-9 ** (np.arange(size) / size)
    transform = np.fft.rfft(np.concatenate([chance, np.zeros(size - chance.size)]) * weight)
    renewals = np.cumsum((np.fft.irfft(transform / (1.0 - transform), size) / weight)[: _TIMES.size])
    variance = np.zeros(_TIMES.size)
    variance[1:] = 2.0 / _STEPS * np.cumsum(renewals)[:-1]
    variance += _TIMES - _TIMES**2
    return np.concatenate([[1.0], np.maximum(variance[1:], 0.0) / _TIMES[1:]])


def _swing_within_hour(booked: BookedList) -> float:
    """Return the variance of how many of a list have come by a moment of its hour: n·u·(1 − u), for all u alike."""
    listed = sum(booked.per_weekday)
    return booked.attends * sum(many * many for many in booked.per_weekday) / max(listed, 1) / 6.0


@lru_cache(maxsize=128)
def spread_of(demand: Demand) -> Spread:
    """How widely do the stays of everyone who comes differ, turnaround included, and how much do arrivals swing?

    How many a list brings on a day is known but for who stays away: variance ÷ mean is 1 − the chance to attend.

    Checked by: tests/models/test_waiting.py
    """
    turnaround = demand.turnaround_hours / 24.0
    streams = [(demand.arrivals_per_day, demand.length_of_stay, demand.clustering)]
    streams += [(one.arrivals_per_day, one.length_of_stay, 1.0 - one.attends) for one in demand.booked]
    streams = [stream for stream in streams if stream[0] > 0]
    rate = math.fsum(rate for rate, _, _ in streams)
    mean = math.fsum(rate * stay.mean_days for rate, stay, _ in streams) / rate + turnaround
    square = math.fsum(
        rate * ((stay.mean_days + turnaround) ** 2 + (stay.variation * stay.mean_days) ** 2)
        for rate, stay, _ in streams
    )
    days = _TIMES * mean
    rest, ahead = np.maximum(days - turnaround, 0.0), np.maximum(turnaround - days, 0.0)
    beyond = sum(rate * (stay.days_beyond(rest) + ahead) for rate, stay, _ in streams) / (rate * mean)
    swing = math.fsum(
        (clustering - 1.0) * rate * (stay.mean_of_shorter_of_two() + turnaround) for rate, stay, clustering in streams
    )
    swing += math.fsum(one.arrivals_per_day * _swing_within_hour(one) for one in demand.booked) / rate
    return Spread(
        mean_days=mean,
        squared_variation=square / rate / mean**2 - 1.0,
        grouping=1.0 + math.fsum((clustering - 1.0) * one for one, _, clustering in streams) / rate,
        peakedness=max(1.0 + swing / (rate * mean), _SMOOTHEST),
        beyond=beyond,
        ended=_variance_of_ends(beyond),
    )


def _when_few_wait(spread: Spread, counts: Array) -> Array:
    """Return R where patients seldom wait: c/m·∫ (E/m)^c, the first of c beds to empty.

    Source: Burman & Smith 1983, Operations Research Letters 2 (light traffic).
    """
    logs = np.log(np.maximum(spread.beyond[_LIGHT], 1e-300))
    fall = np.maximum(-counts[:, None] * np.diff(logs), 1e-12)
    # between two points the logarithm is a straight line, which is exact for exponential stays
    pieces = np.exp(counts[:, None] * logs[:-1]) * -np.expm1(-fall) / fall
    return counts * (pieces @ np.diff(_TIMES[_LIGHT]))


def _ends_within(spread: Spread, times: Array) -> tuple[Array, Array]:
    """Return I and E/m at these times; I nears its limit Cs² as 1/time."""
    limit = spread.squared_variation
    near = np.interp(times, _TIMES, spread.ended)
    far = limit + (spread.ended[-1] - limit) * _LONGEST / np.maximum(times, _LONGEST)
    return np.where(times > _LONGEST, far, near), np.interp(times, _TIMES, spread.beyond)


def wait_ratio(spread: Spread, counts: Array, loads: Array) -> Array:
    """By which ratio is the mean wait longer than that of exponential stays that come singly?

    ``counts`` ``(n, 1)`` 1 or more, ``loads`` ``(n, k)`` below the counts. One bed is exact (Pollaczek 1930). The
    queue's own time is the relaxation time of its diffusion, 4·a·m/(c − a)², longer the more the stays spread.

    Source: Allen 1990, Probability, Statistics and Queueing Theory ((Ca² + Cs²)/2, after Allen & Cunneen); Burman &
    Smith 1983; Newell 1982, Applications of Queueing Theory (relaxation time); Whitt & You 2018, Operations Research
    66 (variance within the queue's own time).
    Checked by: tests/models/test_waiting.py
    """
    limit = spread.squared_variation
    relaxation = 4.0 * loads / np.maximum(counts - loads, 1e-9) ** 2
    few = _when_few_wait(spread, counts[:, 0])[:, None]
    ratio = np.ones_like(relaxation)
    away = limit - 1.0
    for _ in range(2):
        ended, left = _ends_within(spread, relaxation * np.sqrt(ratio))
        shown = np.clip(((ended - 1.0) * away + _NEAR_ONE * (1.0 - left)) / (away**2 + _NEAR_ONE), 0.0, 1.0)
        ratio = (1.0 + ended) / 2.0 + (few - 1.0) * (1.0 - shown)
    ratio = np.where(counts == 1, (1.0 + limit) / 2.0, ratio)
    return np.maximum(ratio + (spread.grouping - 1.0) / 2.0, 0.02)
