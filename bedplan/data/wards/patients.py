"""Whose patients lie on a ward, and where a ward's own patients lie when it is full."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.files.dates import DAY_SECONDS
from bedplan.data.wards.occupancy import bed_days

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bedplan.data.cleaning.records import Records

LEAST_OWN_SHARE = 0.5  # of a ward's stays of specialties at home on it: below, its own can't be told from others
MOSTLY = 0.5  # of a specialty's stays on another ward that only pass through it
SAME_SPELL_HOURS = 24  # longer away and it is another time in hospital


@dataclass(frozen=True)
class OwnPatients:
    """A ward's own patients, told from others by specialty, and where they lay.

    ``specialties`` are at home on the ward: that of most stays on it, and those that have most of their bed-days on it.
    None where the file has no specialties, or those at home make up less than half of the stays (``share``): then
    everybody on the ward counts as its own. ``here`` and ``guests``: stays on the ward, its own (unknown specialties
    among them) and others. ``elsewhere``: own stays on wards where they are not at home. ``on_the_way``: own stays on
    wards through which most of them pass before or after their bed here; that is care of its own, not a bed short
    here. ``twins``: other wards where its specialties are at home. ``moved_in`` and ``waited`` (here,): came from
    another ward; came from one where they lay as this ward's patients. All stays touch the file's window.
    """

    records: Records
    ward: str
    specialties: tuple[str, ...]
    share: float
    here: pd.DataFrame
    guests: pd.DataFrame
    elsewhere: pd.DataFrame
    on_the_way: pd.DataFrame
    twins: tuple[str, ...]
    moved_in: NDArray[np.bool_]
    waited: NDArray[np.bool_]
    knows_moves: bool

    @property
    def brought_home(self) -> pd.DataFrame:
        """Which patients lay elsewhere and never here? The first stay of each."""
        away = self.elsewhere[~self.elsewhere["spell"].isin(self.here["spell"])]
        return away.drop_duplicates("spell")

    @property
    def waiting_share(self) -> float:
        """Which share of its own patients lay on another ward before, or instead of, lying here?"""
        brought = self.brought_home
        return (int(self.waited.sum()) + len(brought)) / max(len(self.here) + len(brought), 1)

    @property
    def own(self) -> pd.DataFrame:
        """Which stays are those of its own patients, here and elsewhere?"""
        return pd.concat([self.here, self.elsewhere])


def own_patients(records: Records, ward: str) -> OwnPatients:
    """Who are this ward's own patients, and where else did they lie?

    Raises:
        UnreadableRecords: the ward has no stay in the file.

    Checked by: tests/data/demand/test_hidden_demand.py
    """
    on_ward, homes = records.of_ward(ward), _homes(records)
    specialties, share = homes.get(ward, ((), 0.0))
    specialties = specialties if share >= LEAST_OWN_SHARE else ()
    stays = _with_neighbours(records, on_ward, specialties, homes)
    touching = ((stays["start"] < records.window[1]) & ~(stays["end"] <= records.window[0])).to_numpy()
    is_own = np.ones(len(stays), dtype=bool)
    if specialties:
        is_own = (stays["specialty"].isin(specialties) | stays["specialty"].isna()).to_numpy()
    is_here = (stays["ward"] == ward).to_numpy()
    here, away = stays[is_here & is_own & touching], stays[~is_here & touching & stays["is_away"].to_numpy()]
    passing = away["ward"].isin(_passed_through(away, ward))
    return OwnPatients(
        records=records,
        ward=ward,
        specialties=specialties,
        share=share,
        here=here,
        guests=stays[is_here & ~is_own & touching],
        elsewhere=away[~passing],
        on_the_way=away[passing],
        twins=tuple(name for name, (kinds, _) in homes.items() if name != ward and set(kinds) & set(specialties)),
        moved_in=(here["came_from"] != "").to_numpy(),
        waited=here["came_away"].to_numpy(),
        knows_moves=bool(records.stays["patient_key"].duplicated().any()),
    )


def _homes(records: Records) -> dict[str, tuple[tuple[str, ...], float]]:
    """Return ward → (specialties at home on it, their share of its stays); nothing where the file has no specialties."""
    if "specialty" not in records.stays:
        return {}
    ward, kind = records.stays["ward"].astype(str), records.stays["specialty"].astype(object)
    days = (records.stays["end"].fillna(records.window[1]) - records.stays["start"]).dt.total_seconds().clip(lower=0)
    counts = pd.crosstab(ward, kind)
    if counts.empty:
        return {}
    table = counts.to_numpy()
    bed_days = pd.crosstab(ward, kind, days, aggfunc="sum").fillna(0.0).to_numpy()
    at_home = np.zeros(table.shape, dtype=bool)
    at_home[np.arange(table.shape[0]), table.argmax(axis=1)] = True
    at_home[bed_days.argmax(axis=0), np.arange(table.shape[1])] = True
    share = (table * at_home).sum(axis=1) / np.maximum(table.sum(axis=1), 1)
    names = [tuple(counts.columns[row]) for row in at_home]
    return {name: (kinds, float(part)) for name, kinds, part in zip(counts.index, names, share, strict=True)}


def _with_neighbours(
    records: Records,
    on_ward: pd.DataFrame,
    specialties: tuple[str, ...],
    homes: dict[str, tuple[tuple[str, ...], float]],
) -> pd.DataFrame:
    """Return the stays of every patient who lay on the ward or has one of its specialties, in order.

    Added: the time in hospital (spell) each belongs to, the wards before and after, whether it is an own stay away
    from home, and whether the one before was.
    """
    stays, key = records.stays, "patient_key"
    near = stays[key].isin(on_ward[key])
    if specialties:
        near = stays[key].isin(stays.loc[near | stays["specialty"].isin(specialties), key])
    stays = stays[near].sort_values([key, "start"], kind="stable").reset_index(drop=True)
    gap = stays["start"] - stays["end"].shift()
    same = ((stays[key] == stays[key].shift()) & ~(gap > pd.Timedelta(hours=SAME_SPELL_HOURS))).to_numpy()
    ward = stays["ward"].astype(object)
    away = _is_away(stays, specialties, homes)
    return stays.assign(
        spell=np.cumsum(~same),
        came_from=ward.shift().where(same, ""),
        went_to=ward.shift(-1).where(np.append(same[1:], False), ""),
        is_away=away,
        came_away=np.append(False, away[:-1]) & same,
    )


def _is_away(
    stays: pd.DataFrame, specialties: tuple[str, ...], homes: dict[str, tuple[tuple[str, ...], float]]
) -> NDArray[np.bool_]:
    """Return which stays are of these specialties, on a ward where theirs is not at home."""
    away = np.zeros(len(stays), dtype=bool)
    for specialty in specialties:
        at_home = [ward for ward, (kinds, _) in homes.items() if specialty in kinds]
        away |= ((stays["specialty"] == specialty) & ~stays["ward"].isin(at_home)).to_numpy()
    return away


def _passed_through(away: pd.DataFrame, ward: str) -> list[str]:
    """Return the wards that most of these stays left for another ward, or reached after their bed on this one."""
    finished = away[away["end"].notna()]
    if finished.empty:
        return []
    passing = (finished["went_to"] != "") | (finished["came_from"] == ward)
    shares = passing.groupby(finished["ward"].astype(str)).mean()
    return [str(name) for name in shares.index[shares >= MOSTLY]]


def beds_used(records: Records, stays: pd.DataFrame) -> float:
    """How many beds did these stays use on average over the days that count? Unfinished ones run to the file's end."""
    return float(bed_days(records, stays).sum()) / counted_days(records)


def started(records: Records, starts: pd.Series) -> int:
    """How many of these moments fall on the days that count?"""
    return int(on_counted_day(records, starts).sum())


def on_counted_day(records: Records, moments: pd.Series) -> NDArray[np.bool_]:
    """Which of these moments fall on a day that counts? (n,); unknown ones don't."""
    since = moments.to_numpy().astype("datetime64[s]").astype(np.int64) - int(records.window[0].timestamp())
    days = since // DAY_SECONDS
    inside = moments.notna().to_numpy() & (days >= 0) & (days < records.days)
    return inside & records.counted_days[np.where(inside, days, 0)]


def counted_days(records: Records) -> int:
    """How many days count? At least 1."""
    return max(int(records.counted_days.sum()), 1)
