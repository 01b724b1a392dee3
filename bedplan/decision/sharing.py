"""The same beds re-dealt between wards, so that the fewest patients find no free bed. Exact, not step by step."""

from __future__ import annotations

import math
from dataclasses import dataclass
from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np

from bedplan.decision.comparing import DAYS_PER_YEAR
from bedplan.errors import ImpossibleFigure
from bedplan.models.value_objects.figures import number, whole

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping, Sequence

    from numpy.typing import NDArray

    from bedplan.decision.ward import Ward

    Array = NDArray[np.float64]

MOST_SHARED_BEDS = 20_000
# Patients a year: what a move must at least gain, so that nothing moves for nothing and no bed is left over.
_WORTH_A_MOVE = 1e-9


@dataclass(frozen=True, slots=True, eq=False)
class SharedBeds:
    """Beds by ward today (``beds_before``) and re-dealt (``beds``), with the patients a year each ward turns away.

    ``turned_away_before`` and ``turned_away_after`` are patients a year over all wards, each patient counted once;
    ``weights`` are what the split was chosen by, and are shown beside it. ``left_over`` beds fit no ward's step.
    """

    beds: Mapping[str, int]
    beds_before: Mapping[str, int]
    patients: Mapping[str, float]
    patients_before: Mapping[str, float]
    weights: Mapping[str, float]
    left_over: int

    @property
    def turned_away_before(self) -> float:
        """Patients a year who find no free bed with today's beds."""
        return math.fsum(self.patients_before.values())

    @property
    def turned_away_after(self) -> float:
        """Patients a year who find no free bed with the beds re-dealt."""
        return math.fsum(self.patients.values())

    @property
    def moves(self) -> Mapping[str, int]:
        """Beds gained (above 0) or given up (below 0) by each ward that changes; empty when no move helps."""
        changes = {name: count - self.beds_before[name] for name, count in self.beds.items()}
        return MappingProxyType({name: change for name, change in changes.items() if change})


@dataclass(frozen=True, slots=True, eq=False)
class _Choices:
    """The bed counts one ward may be given, what each costs in weighted patients, and patients a year by count."""

    counts: NDArray[np.int64]
    costs: Array
    patients: Array


def share_beds(
    wards: Iterable[Ward],
    total: int | None = None,
    *,
    floors: Mapping[str, int] | None = None,
    steps: Mapping[str, int] | None = None,
    weights: Mapping[str, float] | None = None,
) -> SharedBeds:
    """How would these wards turn fewest patients away, if they dealt the same beds out again?

    Exact, by dynamic programming over each ward's own curve (its model, seasons, closures), for any curves. ``total``
    beds, by default today's; by ward name: ``floors`` fewest beds (0), ``steps`` the bay size, in which a ward's beds
    change (1), ``weights`` how much one of its patients counts (1): weights are a clinical judgement and the user's.
    A ward whose patients wait or stay anyway counts those who find it full. Every bed is dealt out unless steps don't
    allow it. A split as good as today's leaves today's.

    Raises:
        ImpossibleFigure: two wards of one name, an unknown name, floors above the total, a figure outside its meaning.

    Source: Bellman 1957, Dynamic Programming.
    Checked by: tests/decision/test_sharing.py (every split tried)
    """
    wards = named_once(wards)
    today = {ward.name: ward.beds for ward in wards}
    total = sum(today.values()) if total is None else _beds("beds to share", total, 0)
    floors = {name: _beds("fewest beds", beds, 0) for name, beds in _by_name(today, floors, 0).items()}
    steps = {name: _beds("bay size", beds, 1) for name, beds in _by_name(today, steps, 1).items()}
    weights = {
        name: number("A weight of {}", weight, (0.0, math.inf), "a patient counts 0 or more")
        for name, weight in _by_name(today, weights, 1.0).items()
    }
    _enough(total, [_fewest_of(ward, floors[ward.name], steps[ward.name]) for ward in wards])
    choices = [_choices(ward, total, floors[ward.name], steps[ward.name], weights[ward.name]) for ward in wards]
    beds = dict(zip(today, _fewest(choices, total), strict=True))
    read = {ward.name: one.patients for ward, one in zip(wards, choices, strict=True)}
    return SharedBeds(
        beds=MappingProxyType(beds),
        beds_before=MappingProxyType(today),
        patients=MappingProxyType({name: float(read[name][count]) for name, count in beds.items()}),
        patients_before=MappingProxyType({name: float(read[name][count]) for name, count in today.items()}),
        weights=MappingProxyType(weights),
        left_over=total - sum(beds.values()),
    )


def named_once(wards: Iterable[Ward]) -> tuple[Ward, ...]:
    """Return the wards, or say that there are none or two of one name.

    Checked by: tests/decision/test_sharing.py
    """
    wards = tuple(wards)
    names = [ward.name for ward in wards]
    if not wards:
        raise ImpossibleFigure("Give at least one ward to share beds between.")
    for name in names:
        if names.count(name) > 1:
            raise ImpossibleFigure(f"Two wards are called {name!r}: each ward needs its own name.")
    return wards


def _by_name(today: Mapping[str, int], given: Mapping[str, float] | None, otherwise: float) -> dict[str, float]:
    """Return a figure for every ward, or say which name no ward has."""
    given = given or {}
    for name in given:
        if name not in today:
            raise ImpossibleFigure(f"No ward is called {name!r}; the wards are {', '.join(today)}.")
    return {name: given.get(name, otherwise) for name in today}


def _beds(name: str, beds: object, least: int) -> int:
    allowed = f"give a whole number from {least} to {MOST_SHARED_BEDS:,}"
    return whole(f"{{}} as {name}", beds, (least, MOST_SHARED_BEDS), allowed)


def _fewest_of(ward: Ward, floor: int, step: int) -> int:
    """Return the smallest count at or above the floor that is whole steps away from today's."""
    return floor + (ward.beds - floor) % step


def _enough(total: int, fewest: Sequence[int]) -> None:
    if sum(fewest) > total:
        raise ImpossibleFigure(
            f"{total} beds to share is not possible: the fewest these wards may have add up to {sum(fewest)}."
        )


def _choices(ward: Ward, total: int, floor: int, step: int, weight: float) -> _Choices:
    """List a ward's possible counts; past the end of its curve, where next to nobody is left, its last share stands."""
    curve = ward.curve()
    shares = curve.turn_away_probability
    most = max(total, ward.beds)
    shares = np.concatenate([shares, np.full(max(0, most + 1 - shares.size), shares[-1])])
    patients = ward.demand.total_arrivals_per_day * DAYS_PER_YEAR * shares
    counts = np.arange(_fewest_of(ward, floor, step), total + 1, step)
    # two small prizes: one for leaving beds where they are, twice that for not leaving a bed over
    small = _WORTH_A_MOVE * (np.abs(counts - ward.beds) - 2.0 * counts)
    return _Choices(counts, weight * patients[counts] + small, patients)


def _fewest(choices: Sequence[_Choices], total: int) -> list[int]:
    """Return the count of each ward for which the costs add up to the least, over every possible split."""
    best = np.full(total + 1, np.inf)
    best[0] = 0.0
    taken = []
    for one in choices:
        reached, count_at = np.full(total + 1, np.inf), np.zeros(total + 1, dtype=np.int64)
        for count, cost in zip(one.counts, one.costs, strict=True):
            tried = best[: total + 1 - count] + cost
            better = tried < reached[count:]
            reached[count:][better] = tried[better]
            count_at[count:][better] = count
        best = reached
        taken.append(count_at)
    place, beds = int(np.argmin(best)), []
    for count_at in reversed(taken):
        beds.append(int(count_at[place]))
        place -= beds[-1]
    return beds[::-1]
