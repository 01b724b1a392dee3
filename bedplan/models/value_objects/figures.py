"""Figures that somebody gave: each is checked in one way, and refused in a sentence that quotes it."""

from __future__ import annotations

import math
from numbers import Real

import numpy as np

from bedplan.errors import ImpossibleFigure

ABOVE_ZERO = math.ulp(0.0)


def quoted(value: object) -> str:
    """How is a figure written in a sentence? A number in short, anything else as it was given.

    Checked by: tests/models/test_figures.py
    """
    if not _is_number(value):
        return repr(value)
    return "a number past 300 digits" if 1e300 < abs(value) < math.inf else f"{float(value):g}"


def _is_number(value: object) -> bool:
    return isinstance(value, Real) and not isinstance(value, bool | np.bool_)


def number(said: str, value: object, limits: tuple[float, float], allowed: str, *, is_whole: bool = False) -> float:
    """Which number is this? ``said`` has ``{}`` where the figure goes: "A mean stay of {} days".

    Raises:
        ImpossibleFigure: no number, not finite, outside ``limits`` (both may be reached), or not whole where it must be.

    Checked by: tests/models/test_figures.py
    """
    lowest, highest = limits
    if _is_number(value) and lowest <= value <= highest and math.isfinite(value):
        found = float(value)
        if not is_whole or found.is_integer():
            return found
    raise ImpossibleFigure(f"{said.format(quoted(value))} is not possible: {allowed}.")


def whole(said: str, value: object, limits: tuple[int, int], allowed: str) -> int:
    """Which whole number is this? As :func:`number`.

    Checked by: tests/models/test_figures.py
    """
    return int(number(said, value, limits, allowed, is_whole=True))


def listed(values: object, wanted: str) -> tuple[object, ...]:
    """Which figures are in this list, tuple or array? ``wanted`` says what was asked for: "Month factors need …".

    Raises:
        ImpossibleFigure: not a plain list of figures.

    Checked by: tests/models/test_figures.py
    """
    if isinstance(values, str | bytes | dict):
        raise ImpossibleFigure(f"{wanted}, but {values!r} was given.")
    try:
        return tuple(values)
    except TypeError:
        raise ImpossibleFigure(f"{wanted}, but {values!r} was given.") from None


def all_of_kind(values: object, kind: type, wanted: str) -> tuple[object, ...]:
    """Which of these are there? A tuple of one kind of value object; ``wanted`` as for :func:`listed`.

    Checked by: tests/models/test_figures.py
    """
    found = listed(values, wanted)
    for one in found:
        if not isinstance(one, kind):
            raise ImpossibleFigure(f"{wanted}, but {one!r} was given.")
    return found


def array_of(said: str, values: object, limits: tuple[float, float], allowed: str) -> np.ndarray:
    """Which numbers are these? Any shape with at least one; as :func:`number` for each.

    Checked by: tests/models/test_figures.py
    """
    try:
        given = np.asarray(values)
    except ValueError:
        given = np.zeros(0, dtype=object)
    if given.size == 0 or given.dtype.kind not in "iuf":
        raise ImpossibleFigure(f"{said.format(quoted(values))} is not possible: {allowed}.")
    found = given.astype(float)
    bad = ~(np.isfinite(found) & (found >= limits[0]) & (found <= limits[1]))
    if bad.any():
        raise ImpossibleFigure(f"{said.format(quoted(float(found[bad][0])))} is not possible: {allowed}.")
    return found


def days_given(said: str, values: object) -> np.ndarray:
    """Which days of a stay were asked about? Any shape; before a stay begins reads as its beginning.

    Raises:
        ImpossibleFigure: no numbers, or missing ones.

    Checked by: tests/models/test_figures.py
    """
    try:
        days = np.asarray(math.nan if isinstance(values, str) else values, dtype=float)
    except (TypeError, ValueError):
        days = np.asarray(math.nan)
    if np.isnan(days).any():
        raise ImpossibleFigure(f"{said.format(quoted(values))} is not possible: give numbers.")
    return np.maximum(days, 0.0)
