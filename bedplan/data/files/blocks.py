"""Large columns worked on block by block, on every core: numpy and pyarrow let other threads run while they compute."""

from __future__ import annotations

import os
from concurrent.futures import ThreadPoolExecutor
from typing import TYPE_CHECKING, TypeVar

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable

    from numpy.typing import NDArray

Item = TypeVar("Item")
Done = TypeVar("Done")

BLOCK_ROWS = 2**17  # a few columns of a block fit the processor's cache
MOST_THREADS = 8


def each(work: Callable[[Item], Done], items: Iterable[Item]) -> list[Done]:
    """Do the same work on every item, several at once; results in the items' order."""
    waiting = list(items)
    if len(waiting) < 2:
        return [work(item) for item in waiting]
    with ThreadPoolExecutor(min(os.cpu_count() or 1, MOST_THREADS, len(waiting))) as pool:
        return list(pool.map(work, waiting))


def side_by_side(*jobs: Callable[[], object]) -> list:
    """Do several jobs at once; results in the jobs' order."""
    return each(lambda job: job(), jobs)


def in_blocks(rows: int, work: Callable[[slice], Done]) -> list[Done]:
    """Do the same work on every block of rows, several at once; results in the rows' order."""
    return each(work, [slice(first, min(first + BLOCK_ROWS, rows)) for first in range(0, rows, BLOCK_ROWS)])


def taken(values: NDArray, which: NDArray[np.int64]) -> NDArray:
    """Return ``values[which]``."""
    found = np.empty(which.size, dtype=values.dtype)

    def take(block: slice) -> None:
        """Fetch one block."""
        found[block] = values[which[block]]

    in_blocks(which.size, take)
    return found


def order_of(values: NDArray[np.int64]) -> NDArray[np.int64]:
    """Return the rows by value, equal ones in their present order, as ``argsort(kind="stable")`` does, ten times as fast.

    Value and row number are packed into one number where both fit, because plain numbers sort so much faster.
    """
    if not values.size:
        return np.zeros(0, dtype=np.int64)
    bits, lowest = values.size.bit_length(), int(values.min())
    if int(values.max()) - lowest >= 2 ** (63 - bits):
        return np.argsort(values, kind="stable")
    packed = np.empty(values.size, dtype=np.int64)

    def pack(block: slice) -> None:
        """Pack one block."""
        packed[block] = (values[block].astype(np.int64) - lowest) << bits | np.arange(block.start, block.stop)

    in_blocks(values.size, pack)
    packed.sort()
    packed &= 2**bits - 1
    return packed
