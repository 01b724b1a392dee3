"""Stays that lie inside another stay of the same patient: intensive care in the middle of a ward stay."""

from __future__ import annotations

from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.files.dates import DAY_SECONDS, MISSING
from bedplan.data.values.rows import OPEN_END, SPAN

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from bedplan.data.values.rows import Rows

LEAST_PIECE_SECONDS = 30 * 60  # less on a ward is no stay of its own


def part_nested(
    rows: Rows, order: NDArray[np.int64], is_bed: NDArray[np.bool_], *, held: bool
) -> tuple[NDArray[np.int64], int]:
    """Part stays round those inside them: a patient lies in one bed; returns the order and how many lasted over 12 hours.

    What goes on after the inner stay becomes a row of its own behind the file's. Stays inside one on the same ward, of
    exactly the same times, or in a place without beds (``is_bed``: of each ward code) are set aside instead. ``held``:
    beds wait for their patients, so that both stays count whole.

    Checked by: tests/data/cleaning/test_nesting.py
    """
    nested, holder = _inside(rows, order)
    if not nested.any():
        return order, 0
    ward, start, end = rows.ward[order], rows.start[order], rows.end[order]
    alike = (start == start[holder]) & (end == end[holder])
    drop = nested & (~is_bed[ward] | (ward == ward[holder]) | alike)
    rows.mark(order[drop], "nested")
    order, nested = order[~drop], nested[~drop]
    inner = order[nested]
    long = int((_ends(rows, inner) - rows.start[inner] > DAY_SECONDS // 2).sum())
    if held or not inner.size:
        return order[~nested], long
    whose = np.isin(rows.patient[order], rows.patient[inner])
    crowd = order[whose]
    bounds = np.flatnonzero(np.diff(rows.patient[crowd], prepend=-1, append=-1))
    added = [piece for first, last in pairwise(bounds) for piece in _part(rows, crowd[first:last])]
    size = rows.start.size
    rows.go_on(*np.array(added, dtype=np.int64).reshape(-1, 3).T)
    order = np.concatenate((order, np.arange(size, rows.start.size)))
    order = order[rows.live[order]]
    return order[np.lexsort((rows.start[order], rows.patient[order]))], long


def _ends(rows: Rows, order: NDArray[np.int64]) -> NDArray[np.int64]:
    """Return ends with unfinished stays last."""
    return np.where(rows.end[order] == MISSING, OPEN_END, rows.end[order])


def _inside(rows: Rows, order: NDArray[np.int64]) -> tuple[NDArray[np.bool_], NDArray[np.int64]]:
    """Return which stays lie wholly inside an earlier one of the same patient, and the place of the one that ends last."""
    patient = rows.patient[order]
    nested, holder = np.zeros(order.size, dtype=bool), np.zeros(order.size, dtype=np.int64)
    if order.size < 2:
        return nested, holder
    same = patient[1:] == patient[:-1]
    end = _ends(rows, order)
    shifted = end + np.concatenate(([0], np.cumsum(~same))) * SPAN
    reach = np.maximum.accumulate(shifted)
    holder[1:] = np.maximum.accumulate(np.where(shifted == reach, np.arange(order.size), 0))[:-1]
    nested[1:] = same & (shifted[1:] <= reach[:-1])
    return nested, holder


def _part(rows: Rows, stays: NDArray[np.int64]) -> list[tuple[int, int, int]]:
    """Give one patient one bed at a time; return (row, start, end) of what goes on after another stay."""
    added = []
    pieces = bed_times(rows.start[stays].tolist(), _ends(rows, stays).tolist())
    for row, mine in zip(stays.tolist(), pieces, strict=True):
        kept = [piece for piece in mine if piece[1] - piece[0] >= LEAST_PIECE_SECONDS]
        if not kept:
            rows.mark(np.array([row]), "nested")
            continue
        (rows.start[row], until), *others = ((begin, MISSING if end == OPEN_END else end) for begin, end in kept)
        if until != rows.end[row]:
            rows.mark(np.array([row]), "parted" if others else "overlap")
        rows.end[row] = until
        added += [(row, begin, end) for begin, end in others]
    return added


def bed_times(start: Sequence[int], end: Sequence[int]) -> list[list[tuple[int, int]]]:
    """When did the patient lie in the bed of each of these stays? In the one begun last of those that go on."""
    pieces: list[list[tuple[int, int]]] = [[] for _ in start]
    for since, until in pairwise(sorted({*start, *end})):
        going = [(start[stay], -end[stay], stay) for stay in range(len(start)) if start[stay] <= since < end[stay]]
        if going:
            mine = pieces[max(going)[2]]
            if mine and mine[-1][1] == since:
                since = mine.pop()[0]  # noqa: PLW2901  one piece with the one before
            mine.append((since, until))
    return pieces
