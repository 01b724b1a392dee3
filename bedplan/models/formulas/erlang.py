"""Erlang's loss and delay formulas: which share finds every bed taken, and which share must wait.

Symbols: a offered load (beds wanted on average), c beds, B the share who find every bed taken, C the share who wait.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from scipy import special

from bedplan.models.value_objects.bed_curve import MOST_BEDS
from bedplan.models.value_objects.figures import array_of

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    Array = NDArray[np.float64]

MOST_LOAD_BEDS = 1e9


def _checked(offered_load: ArrayLike, beds: ArrayLike) -> tuple[Array, Array]:
    """Return both as broadcast float arrays, or say which figure is impossible."""
    load = array_of("An offered load of {} beds", offered_load, (0.0, MOST_LOAD_BEDS), "it is 0 or more")
    count = array_of("{} beds", beds, (0.0, MOST_BEDS), f"give 0 to {MOST_BEDS:,} beds")
    load, count = np.broadcast_arrays(load, count)
    return load, count


def _log_inverse_at_fraction(load: Array, fraction: Array) -> Array:
    """Return ln(1/B) at a bed count of 0 ≤ fraction < 1, load above 0.

    1/B(f, a) = a·∫ e^(−ay)·(1 + y)^f dy (Jagerman 1974). Above a load of 2 by Legendre's continued fraction of the
    incomplete gamma function, below by the function itself.
    """
    order = fraction + 1.0
    low = np.minimum(load, 2.0)
    by_gamma = low - fraction * np.log(low) + special.gammaln(order) + np.log(special.gammaincc(order, low))
    high = np.maximum(load, 2.0)
    tail = np.zeros_like(high)
    for k in range(200, 0, -1):
        tail = k * (order - k) / (high + 2 * k + 1 - order + tail)
    by_fraction = np.log(high / (high + 1.0 - order + tail))
    return np.where(load < 2.0, by_gamma, by_fraction)


def _over_needed_counts(load: Array, beds: Array, *, in_logs: bool) -> Array:
    """Run the recursion 1/B(c) = 1 + (c/a)/B(c−1) once per different load, and read it where it is asked for.

    Source: Erlang 1917; the recursion in this form loses no digits at any size.
    """
    whole = np.floor(beds)
    keys, key_of = np.unique(np.stack([load.ravel(), (beds - whole).ravel()]), axis=1, return_inverse=True)
    counts, count_of = np.unique(whole.ravel().astype(np.int64), return_inverse=True)
    table = erlang_b_table(keys[0], counts, fraction=keys[1], in_logs=in_logs)
    return table[count_of.ravel(), key_of.ravel()].reshape(load.shape)


def erlang_b_table(
    load: Array, counts: NDArray[np.int64], *, fraction: Array | float = 0.0, in_logs: bool = False
) -> Array:
    """Which share finds every bed taken, for each bed count (rows, ascending) and each load (columns)?

    ``load`` ``(k,)`` 0 or more; ``counts`` ``(n,)`` whole and ascending; ``fraction`` is added to every count.
    Returns ``(n, k)``, or its natural logarithm. Unchecked: for use inside models.

    Checked by: tests/models/test_erlang.py
    """
    fraction = np.broadcast_to(np.asarray(fraction, dtype=float), load.shape)
    some = np.where(load > 0, load, 1.0)
    log_inverse = np.zeros(load.shape)
    if np.any(fraction > 0):
        log_inverse = np.where(fraction > 0, _log_inverse_at_fraction(some, fraction), 0.0)
    state = log_inverse if in_logs else np.exp(-log_inverse)
    table = np.empty((counts.size, load.size))
    row, rounded_off = 0, 0.0
    for beds in range(int(counts[-1]) + 1):
        if beds:
            bed_number = beds + fraction
            if in_logs:
                # Kahan's sum: 20,000 rounded logarithms would otherwise add up to more than 1e-9
                step = np.log(bed_number / some) - rounded_off
                raised = state + step
                rounded_off = (raised - state) - step
                state = np.logaddexp(0.0, raised)
            else:
                used = some * state
                state = used / (bed_number + used)
        if counts[row] == beds:
            table[row] = state
            row += 1
    blocked = -table if in_logs else table
    nobody, somewhere = load <= 0, (counts[:, None] + fraction) > 0
    return np.where(nobody & somewhere, -np.inf if in_logs else 0.0, blocked)


def erlang_b(offered_load: ArrayLike, beds: ArrayLike) -> Array:
    """Which share of patients finds every bed taken, if demand is steady and they then go elsewhere?

    Holds for any spread of stay (the formula is insensitive to it) when arrivals are independent at a steady rate.
    Arguments broadcast like numpy arrays: loads of 0 or more beds, 0 to 20,000 beds, fractions of a bed allowed
    (peaked demand needs them). Results below 1e-300 lose digits: use :func:`erlang_b_log` there.

    Raises:
        ImpossibleFigure: a negative or endless load, beds outside 0–20,000.

    Source: Erlang 1917; fractional beds: Jagerman 1974, Bell System Technical Journal 53.
    Checked by: tests/models/test_erlang.py (50-digit arithmetic; a printed table).
    """
    load, count = _checked(offered_load, beds)
    return _over_needed_counts(load, count, in_logs=False)


def erlang_b_log(offered_load: ArrayLike, beds: ArrayLike) -> Array:
    """What is the natural logarithm of that share, however small it is?

    Same arguments as :func:`erlang_b`; right to 1e-9 absolutely where the share itself underflows. −inf for no load.

    Source: Erlang 1917.
    Checked by: tests/models/test_erlang.py
    """
    load, count = _checked(offered_load, beds)
    return _over_needed_counts(load, count, in_logs=True)


def erlang_c(offered_load: ArrayLike, beds: ArrayLike) -> Array:
    """Which share of patients must wait for a bed, if demand is steady and everyone waits as long as it takes?

    1 where the load is at or above the beds: the queue then only grows. Exact for exponential stays.

    Source: Erlang 1917: C = B / (1 − (a/c)·(1 − B)).
    Checked by: tests/models/test_erlang.py
    """
    load, count = _checked(offered_load, beds)
    blocked = _over_needed_counts(load, count, in_logs=False)
    steady = load < count
    use = np.where(steady, load / np.where(steady, count, 1.0), 0.0)
    return np.where(steady, blocked / (1.0 - use * (1.0 - blocked)), np.where(load > 0, 1.0, 0.0))
