"""Rules about a patient's stays in a row: duplicates, forgotten ends, moves, pass-throughs, overlaps."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.files.blocks import in_blocks, order_of, taken
from bedplan.data.files.dates import DAY_SECONDS, MISSING
from bedplan.data.values.rows import OPEN_END, SPAN

if TYPE_CHECKING:
    from collections.abc import Iterable

    from numpy.typing import NDArray

    from bedplan.data.values.rows import Rows, Way

BRIDGED_GAP_SECONDS = 60 * 60
PASS_THROUGH_SECONDS = 30 * 60


def in_order(rows: Rows) -> Way:
    """Return the live rows by patient, then start; of two that start together the one with the later end first."""
    way = rows.along(np.flatnonzero(rows.live))
    steps = _steps(way)
    if steps.min(initial=0) < 0:
        order = taken(way.row, order_of(way.start))
        way = rows.along(taken(order, order_of(taken(rows.patient, order))))
        steps = _steps(way)
    tied = np.zeros(way.row.size + 1, dtype=bool)
    tied[1:-1] = steps == 0
    tied[:-1] |= tied[1:]
    which = np.flatnonzero(tied[:-1])
    if not which.size:
        return way
    order, together = way.row.copy(), way.row[which]
    order[which] = together[np.lexsort((-_ends(rows, together), rows.start[together], rows.patient[together]))]
    return rows.along(order)


def _steps(way: Way) -> NDArray[np.int8]:
    """Return 1 where the patient, or their start, goes up from one row to the next, −1 where it goes down."""

    def step(block: slice) -> NDArray[np.int8]:
        """Compare the rows of one block, and the last of it with the next."""
        moment = way.patient[block.start : block.stop + 1] * SPAN + way.start[block.start : block.stop + 1]
        return (moment[1:] > moment[:-1]).astype(np.int8) - (moment[1:] < moment[:-1])

    return np.concatenate([np.zeros(0, dtype=np.int8), *in_blocks(way.row.size, step)])


def to_look_at(way: Way, always: NDArray[np.bool_]) -> NDArray[np.int64]:
    """Return the places of the stays of patients to whom a rule about stays in a row may apply: in most files few.

    The rules leave a patient alone whose stays all end, last long enough to be no pass-through, and either begin more
    than an hour after the one before or just when it ends, on another ward. ``always``: wards whose patients are looked
    at whatever their times are.
    """
    asked = np.zeros(int(way.patient.max(initial=0)) + 1, dtype=bool)

    def ask(block: slice) -> None:
        """Note the patients of one block."""
        _, patient, _, ward, start, end = (every[block.start : block.stop + 1] for every in way)
        asked[patient[(end < start + PASS_THROUGH_SECONDS) | always[ward]]] = True  # a missing end is early, too
        moves = (start[1:] == end[:-1]) & (ward[1:] != ward[:-1])
        near = (start[1:] <= end[:-1] + BRIDGED_GAP_SECONDS) & ~moves
        asked[patient[1:][near & (patient[1:] == patient[:-1])]] = True

    in_blocks(way.row.size, ask)
    return np.flatnonzero(taken(asked, way.patient))


def _still(rows: Rows, order: NDArray[np.int64]) -> NDArray[np.int64]:
    """Return the order without rows that were set aside or merged since."""
    return order[rows.live[order]]


def _ends(rows: Rows, order: NDArray[np.int64]) -> NDArray[np.int64]:
    """Return ends with unfinished stays last."""
    end = rows.end[order]
    return np.where(end == MISSING, OPEN_END, end)


def drop_repeats(rows: Rows, order: NDArray[np.int64]) -> NDArray[np.int64]:
    """Keep one of the rows that show the same patient starting on the same ward at the same time.

    Of those that end, the one sent last is kept: the last row of the file, where others lie between it and the one
    before. Rows next to each other may stand in any order: of these the longest is kept.
    """
    patient, start = rows.patient[order], rows.start[order]
    new_time = np.ones(order.size, dtype=bool)
    new_time[1:] = (patient[1:] != patient[:-1]) | (start[1:] != start[:-1])
    if new_time.all():
        return order
    crowded = ~new_time
    crowded[:-1] |= ~new_time[1:]
    busy = order[crowded]
    finished = ~rows.is_open[busy]
    ranked = busy[
        np.lexsort(
            (
                -busy,
                -np.where(finished, rows.end[busy], 0),
                ~_sent_last(rows, busy, finished),
                ~finished,
                rows.ward[busy],
                rows.start[busy],
                rows.patient[busy],
            )
        )
    ]
    same = np.zeros(ranked.size, dtype=bool)
    same[1:] = (
        (rows.patient[ranked[1:]] == rows.patient[ranked[:-1]])
        & (rows.start[ranked[1:]] == rows.start[ranked[:-1]])
        & (rows.ward[ranked[1:]] == rows.ward[ranked[:-1]])
    )
    head = np.maximum.accumulate(np.where(same, 0, np.arange(ranked.size)))
    equal = same & (rows.end[ranked] == rows.end[ranked[head]])
    rows.mark(ranked[equal], "duplicate")
    unsure = same & (ranked == ranked[head] + 1) & ~rows.is_open[ranked]
    rows.mark(ranked[same & ~equal & unsure], "two ends")
    rows.mark(ranked[same & ~equal & ~unsure], "resubmitted")
    return _still(rows, order)


def _sent_last(rows: Rows, busy: NDArray[np.int64], finished: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """Return which of these rows end, and come so late in the file after their like that they were sent again."""
    last = np.zeros(busy.size, dtype=bool)
    which = np.flatnonzero(finished)
    ranked = which[
        np.lexsort((busy[which], rows.ward[busy[which]], rows.start[busy[which]], rows.patient[busy[which]]))
    ]
    row = busy[ranked]
    if row.size < 2:
        return last
    like = np.ones(row.size - 1, dtype=bool)
    for every in (rows.patient, rows.start, rows.ward):
        like &= every[row[1:]] == every[row[:-1]]
    again = like & (np.diff(row) > 1) & ~np.append(like[1:], False)
    last[ranked[1:][again]] = True
    return last


def drop_copies(rows: Rows, text: Iterable[NDArray[np.int8]]) -> None:
    """Without patients' keys, keep one of the rows alike in all else: to the minute that is no chance."""
    which = np.flatnonzero(rows.live & ~rows.is_open)
    which = which[order_of(rows.start[which])]
    tied = np.flatnonzero(rows.start[which[1:]] == rows.start[which[:-1]])
    which = which[np.union1d(tied, tied + 1)]
    which = which[(rows.start[which] % DAY_SECONDS > 0) | (rows.end[which] % DAY_SECONDS > 0)]
    columns = [every[which] for every in (rows.start, rows.end, rows.ward, *text)]
    order = np.lexsort((which, *columns))
    alike = np.ones(max(order.size - 1, 0), dtype=bool)
    for values in columns:
        alike &= values[order[1:]] == values[order[:-1]]
    rows.mark(which[order[1:][alike]], "duplicate")


def close_forgotten(rows: Rows, order: NDArray[np.int64], longest: NDArray[np.int64], until: int) -> NDArray[np.int64]:
    """End an unfinished stay where the patient's next one starts; set it aside when it is far too long ago."""
    patient = rows.patient[order]
    followed = np.zeros(order.size, dtype=bool)
    followed[:-1] = patient[1:] == patient[:-1]
    is_open = rows.is_open[order]
    close = np.flatnonzero(followed & is_open)
    rows.end[order[close]] = rows.start[order[close + 1]]
    rows.mark(order[close], "forgotten, closed")
    left = order[is_open & ~followed]
    rows.mark(left[until - rows.start[left] > longest[rows.ward[left]]], "forgotten, aside")
    return _still(rows, order)


def hold_beds(rows: Rows, order: NDArray[np.int64], is_leave: NDArray[np.bool_]) -> None:
    """Count leave on the ward whose stay ended up to an hour before it; ``is_leave``: of each ward code, whether it is leave.

    Leave after leave stays with the ward that was left first. What follows no stay is left as it is.
    """
    leave = is_leave[rows.ward[order]]
    follows = np.zeros(order.size, dtype=bool)
    gap = rows.start[order[1:]] - _ends(rows, order[:-1])
    follows[1:] = leave[1:] & (rows.patient[order[1:]] == rows.patient[order[:-1]]) & (gap <= BRIDGED_GAP_SECONDS)
    left = np.maximum.accumulate(np.where(follows, 0, np.arange(order.size)))
    held = np.flatnonzero(follows & ~leave[left])
    rows.start[order[held]] -= np.maximum(gap[held - 1], 0)
    rows.ward[order[held]] = rows.ward[order[left[held]]]
    rows.mark(order[held], "leave, held")


def join_same_ward(rows: Rows, order: NDArray[np.int64]) -> NDArray[np.int64]:
    """Join stays that go on in the same ward within an hour, or overlap there, to one ward stay: one admission."""
    patient, ward, end = rows.patient[order], rows.ward[order], _ends(rows, order)
    same = (patient[1:] == patient[:-1]) & (ward[1:] == ward[:-1])
    if not same.any():
        return order
    goes_on = np.zeros(order.size, dtype=bool)
    run = np.concatenate(([0], np.cumsum(~same)))
    reach = np.maximum.accumulate(end + run * SPAN) - run * SPAN
    goes_on[1:] = same & (rows.start[order[1:]] - reach[:-1] <= BRIDGED_GAP_SECONDS)
    heads = np.flatnonzero(~goes_on)
    furthest = np.maximum.reduceat(end, heads)
    grown = np.diff(np.append(heads, order.size)) > 1
    rows.end[order[heads[grown]]] = np.where(furthest[grown] == OPEN_END, MISSING, furthest[grown])
    rows.mark(order[goes_on], "joined")
    rows.merged[order[goes_on]] = True
    return _still(rows, order)


def merge_pass_throughs(rows: Rows, order: NDArray[np.int64]) -> NDArray[np.int64]:
    """Count less than 30 minutes on a ward in the patient's next stay, else the one before, else set it aside."""
    start, end, patient = rows.start[order], _ends(rows, order), rows.patient[order]
    short = end - start < PASS_THROUGH_SECONDS
    if not short.any():
        return order
    near = np.zeros(order.size + 1, dtype=bool)
    near[1:-1] = (patient[1:] == patient[:-1]) & (start[1:] - end[:-1] <= BRIDGED_GAP_SECONDS)
    into_next = short & near[1:] & ~np.append(short[1:], False)
    into_last = short & ~into_next & near[:-1] & ~np.insert(short[:-1], 0, False)
    place = np.flatnonzero(into_next)
    rows.start[order[place + 1]] = np.minimum(rows.start[order[place + 1]], start[place])
    place = np.flatnonzero(into_last)
    longer = np.maximum(_ends(rows, order[place - 1]), end[place])
    rows.end[order[place - 1]] = np.where(longer == OPEN_END, MISSING, longer)
    merged = order[into_next | into_last]
    rows.mark(merged, "passed through")
    rows.merged[merged] = True
    rows.mark(order[short & ~into_next & ~into_last], "too short")
    return _still(rows, order)


def part_overlaps(rows: Rows, order: NDArray[np.int64]) -> int:
    """Give each patient one bed at a time where stays overlap; returns how many overlaps were longer than 12 hours."""
    patient, start, end = rows.patient[order], rows.start[order], _ends(rows, order)
    gap = start[1:] - end[:-1]
    same = patient[1:] == patient[:-1]
    cut = np.flatnonzero(same & (gap < 0))
    rows.end[order[cut]] = rows.start[order[cut + 1]]
    rows.mark(order[cut], "overlap")
    bridge = np.flatnonzero(same & (gap > 0) & (gap <= BRIDGED_GAP_SECONDS))
    rows.end[order[bridge]] = rows.start[order[bridge + 1]]
    rows.mark(order[bridge], "bridged")
    return int((gap[cut] < -DAY_SECONDS // 2).sum())
