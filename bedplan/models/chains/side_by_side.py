"""Many wards side by side, each a chain over the patients in it, carried through time step by step.

A step is the third-order Padé approximation of the exponential of its rates, which keeps every rate stable, however
fast; it needs one complex solve that also gives the share of the step spent in each state.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from scipy import special
from scipy.linalg import lapack

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    Complex = NDArray[np.complex128]
    Counts = NDArray[np.int64]

# exp(x) ≈ (1 + x/3)/(1 − 2x/3 + x²/6) = 2·Re[end/(x − pole)]; (exp(x) − 1)/x the same with (1 − x/6) on top.
_POLE = 2.0 + 1j * np.sqrt(2.0)
_AT_END = (1.0 + _POLE / 3.0) * 6.0 / (2j * _POLE.imag)
_IN_STEP = (1.0 - _POLE / 6.0) * 6.0 / (2j * _POLE.imag)


class Wards:
    """Wards one after the other in one long tridiagonal system, each with its lowest to its most patients.

    ``patients`` ``(states,)`` in each state, and the ``ward`` it belongs to; ``first`` and ``last`` state of each ward.
    """

    def __init__(self, lowest: Counts, most: Counts) -> None:
        states = most - lowest + 1
        self.last = np.cumsum(states) - 1
        self.first = self.last - states + 1
        self.ward = np.repeat(np.arange(most.size), states)
        self.patients = (np.arange(self.ward.size) - (self.first - lowest)[self.ward]).astype(float)

    def total(self, figures: Array) -> Array:
        """Add up figures known at each state, for each ward."""
        return np.add.reduceat(figures, self.first)

    def scaled(self, state: Array) -> Array:
        """Return the state without rounding below 0, adding up to 1 in each ward."""
        state = np.maximum(state, 0.0)
        return state / self.total(state)[self.ward]

    def truncated_poisson(self, loads: Array) -> Array:
        """Return each ward's census if demand had always been at its load, ``(wards,)``."""
        logs = self.patients * np.log(np.maximum(loads, 1e-9))[self.ward] - special.gammaln(self.patients + 1.0)
        return self.scaled(np.exp(logs - np.maximum.reduceat(logs, self.first)[self.ward]))


def through_step(state: Array, come: Array, leave: Array) -> Complex:
    """Carry wards through one step at which patients come and leave at these rates, known in each state.

    Nobody may come in a ward's last state, or leave in its first. What is returned is read by :func:`at_end` and
    :func:`in_step`.

    Checked by: tests/models/test_periodic_chain.py, tests/models/test_settling.py
    """
    below, above = come[:-1].astype(complex), leave[1:].astype(complex)
    return lapack.zgtsv(below, -(come + leave) - _POLE, above, state.astype(complex), 1, 1, 1, 1)[3]


def at_end(solved: Complex) -> Array:
    """How likely is each state at the end of the step?

    Checked by: tests/models/test_periodic_chain.py, tests/models/test_settling.py
    """
    return 2.0 * (_AT_END * solved).real


def in_step(solved: Complex) -> Array:
    """Which share of the step is spent in each state?

    Checked by: tests/models/test_periodic_chain.py, tests/models/test_settling.py
    """
    return 2.0 * (_IN_STEP * solved).real
