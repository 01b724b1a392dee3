"""Erlang's loss a second time, slowly, for tests to compare with: its defining sum (Erlang 1917)."""

from __future__ import annotations

import itertools
import math
from fractions import Fraction


def exact_share(load: float | Fraction, beds: int) -> Fraction:
    """Which share finds all beds taken, in exact fractions?"""
    term, total = Fraction(1), Fraction(1)
    for bed in range(1, beds + 1):
        term = term * Fraction(load) / bed
        total += term
    return term / total


def share(load: float, beds: int) -> float:
    """Which share finds all beds taken, to fifteen digits?"""
    terms = list(itertools.accumulate(range(1, beds + 1), lambda term, bed: term * load / bed, initial=1.0))
    return terms[-1] / math.fsum(terms)
