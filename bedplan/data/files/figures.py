"""Figures as tables write them: thousands and decimals with points, commas, blanks or apostrophes."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

BETWEEN = re.compile(r"(?<=\d)[ '\u2019\u00a0\u2009\u202f](?=\d{3}(?!\d))")
DOTTED = re.compile(r"[1-9]\d{0,2}(\.\d{3})+", re.ASCII)  # 1.234: a thousand and more, or little more than one
NUMBER = re.compile(r"\d+(\.\d+)?", re.ASCII)
ENGLISH = re.compile(r"\d{1,3}(,\d{3})+\.\d+|\d+\.(\d{1,2}|\d{4,})", re.ASCII)
CONTINENTAL = re.compile(r"\d{1,3}(\.\d{3})+,\d+|\d+,(\d{1,2}|\d{4,})|\d{1,3}(\.\d{3}){2,}", re.ASCII)
FAR_BELOW = 10.0  # times; points that make figures so much smaller than the others stand between thousands
LEAST_BED_DAYS = 30.0  # of a ward in a month


def read_figures(columns: Mapping[str, list[str]]) -> tuple[dict[str, NDArray[np.float64]], list[str]]:
    """Which figures do these columns of one table hold? Not a number where a cell holds none; and what was decided.

    1.234 is 1234 where other cells are written so, or where it would be far below the others as a little more than one.

    Checked by: tests/data/files/test_figures.py
    """
    tidy = {key: [BETWEEN.sub("", cell.strip()) for cell in cells] for key, cells in columns.items()}
    every = [cell for cells in tidy.values() for cell in cells]
    dotted = [cell for cell in every if DOTTED.fullmatch(cell)]
    points = bool(dotted) and _between_thousands(dotted, every)
    commas = not points and not any(CONTINENTAL.fullmatch(cell) for cell in every)
    read = {
        key: np.array([_figure(cell, points=points, commas=commas) for cell in cells]) for key, cells in tidy.items()
    }
    return read, [f"Figures such as {dotted[0]} are read with a point between thousands."] if points else []


def _between_thousands(dotted: list[str], every: list[str]) -> bool:
    """Do points stand between thousands here?"""
    if any(CONTINENTAL.fullmatch(cell) for cell in every):
        return True
    if any(ENGLISH.fullmatch(cell) for cell in every):
        return False
    as_decimals = float(np.median([float(cell) for cell in dotted]))
    others = [float(cell) for cell in every if cell.isdecimal() and float(cell) > 0]
    return as_decimals < (float(np.median(others)) / FAR_BELOW if others else LEAST_BED_DAYS)


def _figure(cell: str, *, points: bool, commas: bool) -> float:
    """Return one cell as a figure; ``points``, ``commas``: which of them stand between thousands."""
    if "," in cell and "." in cell:
        points, commas = cell.rindex(".") < cell.rindex(","), cell.rindex(",") < cell.rindex(".")
    if points and (DOTTED.fullmatch(cell) or "," in cell):
        cell = cell.replace(".", "")
    if commas and re.fullmatch(r"\d{1,3}(,\d{3})+(\.\d+)?", cell, re.ASCII):
        cell = cell.replace(",", "")
    cell = cell.replace(",", ".")
    return float(cell) if NUMBER.fullmatch(cell) else np.nan
