"""What is worth knowing about a file as a whole, though no row is changed for it."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bedplan.data.files.blocks import in_blocks
from bedplan.data.files.dates import DAY_SECONDS, MISSING
from bedplan.wording import few, percent

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.data.cleaning.windows import Period
    from bedplan.data.values.rows import Way
    from bedplan.data.values.table import StayTable

HOUR_SECONDS = 3_600
DEFAULT_SHARE = 0.05  # of stays in one minute of the day: a default, not a time
FEWEST_STAYS = 200


def sequences(way: Way, table: StayTable, long_overlaps: int) -> list[str]:
    """Say what the patients' ways through the wards show: transfers, gaps, long overlaps."""
    notes = []
    if long_overlaps:
        notes.append(
            f"{long_overlaps:,} overlaps of one patient's stays were longer than 12 hours: look at those wards."
        )
    if not table.knows_spells:
        return notes
    moves, place = _moves(way)
    if moves:
        notes.append(
            f"{way.start.size:,} arrivals on wards are {way.start.size - moves:,} arrivals in hospital and {moves:,} moves "
            "between wards; both are counted, apart."
        )
    if place.size:
        pair = way.ward[place].astype(np.int64) * len(table.wards) + way.ward[place + 1]
        common = int(np.bincount(pair).argmax())
        first, second = (table.wards[code] for code in divmod(common, len(table.wards)))
        notes.append(
            f"{place.size:,} gaps of more than an hour inside a hospital stay (theatre, leave or a ward that is missing), "
            f"most often between {first} and {second}; no bed is counted in them."
        )
    return notes


def _moves(way: Way) -> tuple[int, NDArray[np.int64]]:
    """Count moves inside a hospital stay; return the places after which more than an hour is missing."""

    def look(block: slice) -> tuple[int, NDArray[np.int64]]:
        """Look at one block, and from it to the next."""
        _, patient, spell, _, start, end = (every[block.start : block.stop + 1] for every in way)
        same = (spell[1:] == spell[:-1]) & (patient[1:] == patient[:-1])
        gap = same & (end[:-1] != MISSING) & (start[1:] - end[:-1] > HOUR_SECONDS)
        return int(same.sum()), block.start + np.flatnonzero(gap)

    found = in_blocks(way.start.size, look)
    places = [np.zeros(0, dtype=np.int64), *(places for _, places in found)]
    return sum(moves for moves, _ in found), np.concatenate(places)


def whole_file(start: NDArray[np.int64], end: NDArray[np.int64], table: StayTable, period: Period) -> list[str]:
    """Say what the stays show together: starts and ends of the kept rows."""
    notes = []
    unfinished = int((end == MISSING).sum())
    if unfinished:
        notes.append(
            f"{few(unfinished).capitalize()} patients were still in; their stays are treated as unfinished, not dropped."
        )
    if table.has_times:
        notes += _clock_notes(start, end)
    else:
        notes.append("The file has dates without times: stays are counted in nights, and hours of the day are unknown.")
    if not table.knows_patients:
        notes.append(
            "No patient key was found: rows sent again, moves and overlaps of one patient can't be recognised."
        )
    if period.note:
        notes.append(period.note)
    days = (period.last - period.first) // DAY_SECONDS
    if start.size < FEWEST_STAYS or days < 90:
        notes.append(
            f"A small file ({start.size:,} stays in {days:,} days): intervals are wide and no season is read from it."
        )
    return notes


def _clock_notes(start: NDArray[np.int64], end: NDArray[np.int64]) -> list[str]:
    """Say whether times of day can be trusted."""
    notes = []
    if start.size >= FEWEST_STAYS:
        by_day = _by_day_and_minute(start)
        notes += _default_note("start", by_day.sum(axis=0)) + _default_note("end", _minutes(end))
        notes += _world_time_note(by_day, int(start.min()) // DAY_SECONDS)
    stays, inside, whole = np.sum(in_blocks(start.size, lambda block: _same_day(start[block], end[block])), axis=0)
    if stays:
        hours = inside / max(float(whole), 1.0)
        notes.append(
            f"{percent(stays / start.size)} of stays start and end on one day ({percent(hours)} of bed-hours): no night, but a bed; "
            "they are counted by the hour."
        )
    return notes


def _default_note(word: str, minutes: NDArray[np.int64]) -> list[str]:
    """Say where too many stays share one of the day's minutes (1440,)."""
    worst, every = int(minutes.argmax()), int(minutes.sum())
    if minutes[worst] <= DEFAULT_SHARE * every:
        return []
    told = f"{percent(minutes[worst] / every)} of stays {word} at {worst // 60:02d}:{worst % 60:02d}"
    return [f"{told}, which looks like a default and not a time: don't rely on hours of the day."]


def _minutes(times: NDArray[np.int64]) -> NDArray[np.int64]:
    """Return how many known times fall into each minute of the day."""

    def count(block: slice) -> NDArray[np.int64]:
        """Count one block; the last place holds those not known."""
        some = times[block]
        return np.bincount(np.where(some == MISSING, 1_440, some % DAY_SECONDS // 60), minlength=1_441)

    return np.sum(in_blocks(times.size, count), axis=0)[:1_440]


def _by_day_and_minute(start: NDArray[np.int64]) -> NDArray[np.int64]:
    """Return how many stays start on each day from the first on, in each minute of it, (days, 1440)."""
    first = int(start.min()) // DAY_SECONDS
    days = int(start.max()) // DAY_SECONDS - first + 1
    counts = np.bincount(start // 60 - first * 1_440, minlength=days * 1_440)
    return counts.reshape(days, 1_440)


def _same_day(start: NDArray[np.int64], end: NDArray[np.int64]) -> tuple[int, int, int]:
    """Return how many stays start and end on one day, their seconds, and the seconds of all finished stays."""
    finished = end != MISSING
    stay = np.where(finished, end - start, 0)
    same = finished & (start // DAY_SECONDS == end // DAY_SECONDS)
    return int(same.sum()), int(stay[same].sum()), int(stay.sum())


def _world_time_note(by_day: NDArray[np.int64], first_day: int) -> list[str]:
    """Compare the hours of arrival of summer and winter: a shift of a whole hour betrays world time (UTC)."""
    days = (first_day + np.arange(len(by_day))).astype("datetime64[D]")
    month = days.astype("datetime64[M]").astype(np.int64) % 12 + 1
    summer = (month >= 4) & (month <= 10)
    by_half_hour = by_day.reshape(-1, 48, 30).sum(axis=2)
    halves = [by_half_hour[half].sum(axis=0) for half in (summer, ~summer)]
    if min(half.sum() for half in halves) < 2_000:
        return []
    halves = [half / half.sum() for half in halves]
    misfit = {shift: float(((halves[0] - np.roll(halves[1], shift)) ** 2).sum()) for shift in (-2, 0, 2)}
    best = min(misfit, key=misfit.get)
    if best == 0 or misfit[best] > 0.5 * misfit[0]:
        return []
    return [
        "Arrivals come a whole hour apart in summer and winter: the times may be world time (UTC), not the ward's clock."
    ]
