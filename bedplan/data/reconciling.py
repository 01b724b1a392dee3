"""Do the figures agree? The census rebuilt from stays against the official one, flows between wards, bed-days."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.occupancy import present
from bedplan.data.stays import stays_in_window

if TYPE_CHECKING:
    from bedplan.data.census import Census
    from bedplan.data.records import Records

AGREES = 0.02  # of patients on average; common practice, no source


@dataclass(frozen=True)
class CensusCheck:
    """The count rebuilt from stays against a census file. ``days``: date, rebuilt, official, one row a day both have."""

    ward: str
    days: pd.DataFrame

    @property
    def difference(self) -> float:
        """By which share does the rebuilt count differ on average? Above 0: the stays show more patients."""
        official = float(self.days["official"].sum())
        return float(self.days["rebuilt"].sum() - official) / official if official > 0 else 0.0

    @property
    def days_alike(self) -> float:
        """On which share of days do the two agree to the patient?"""
        return float((self.days["rebuilt"] == self.days["official"]).mean())

    @property
    def sentence(self) -> str:
        """Do the two agree?"""
        word = "agree" if abs(self.difference) <= AGREES else "do not agree"
        return (
            f"{self.ward}: stays and census {word}; rebuilt from stays, {self.difference:+.1%} patients over "
            f"{len(self.days):,} days, and the same count on {self.days_alike:.0%} of them."
        )


def check_census(records: Records, census: Census, ward: str, clock: str = "00:00") -> CensusCheck:
    """Does the count rebuilt from stays agree with the official one at this time of day?

    Raises:
        UnreadableRecords: the ward is not in both files.

    Checked by: tests/data/test_reconciling.py
    """
    official, records = census.linked_to(records).occupied(ward, clock), records.settled
    hour, minute = (int(part) for part in clock.split(":"))
    steps = present(records, stays_in_window(records, ward), 60)
    rebuilt = steps.reshape(records.days, 1_440)[:, hour * 60 + minute]
    both = pd.DataFrame({"rebuilt": pd.Series(rebuilt, index=records.calendar), "official": official}).dropna()
    both = both.astype({"rebuilt": int, "official": int})
    return CensusCheck(ward, both.rename_axis("date").reset_index())


@dataclass(frozen=True)
class Flows:
    """Who came and went?

    ``table``: from, to, patients, with "outside" for the world. ``balance``: one row a ward with external_in,
    transfers_in, transfers_out, external_out, present_first, present_last, which always add up.
    """

    table: pd.DataFrame
    balance: pd.DataFrame


def flows(records: Records) -> Flows:
    """Who moved from which ward to which within the window, and do comings and goings explain the patients present?

    A stay that starts within a day of the patient's last one, and where the file knows hospital stays within the same
    one, is a transfer.

    Checked by: tests/data/test_reconciling.py
    """
    stays = records.stays
    order = np.lexsort((stays["start"].to_numpy(), stays["patient_key"].to_numpy()))
    patient, start, end = (stays[key].to_numpy()[order] for key in ("patient_key", "start", "end"))
    ward = stays["ward"].astype(str).to_numpy()[order]
    moved = patient[1:] == patient[:-1]
    if "spell_key" in stays:
        spell = stays["spell_key"].to_numpy()[order]
        moved &= spell[1:] == spell[:-1]
    gap = start[1:] - end[:-1]
    moved &= ~np.isnat(end[:-1]) & (gap <= np.timedelta64(86_400, "s"))
    came_from, went_to = np.full(ward.size, "outside", dtype=object), np.full(ward.size, "outside", dtype=object)
    came_from[1:][moved], went_to[:-1][moved] = ward[:-1][moved], ward[1:][moved]
    first, last = (np.datetime64(moment, "s") for moment in records.window)
    comes = (start >= first) & (start < last)
    goes = ~np.isnat(end) & (end >= first) & (end < last)
    inside = pd.DataFrame({"from": came_from[comes], "to": ward[comes]})
    outside = pd.DataFrame({"from": ward[goes & (went_to == "outside")], "to": "outside"})
    table = pd.concat([inside, outside]).value_counts().rename("patients").reset_index()
    balance = pd.DataFrame(
        {
            "external_in": _count(ward, comes & (came_from == "outside")),
            "transfers_in": _count(ward, comes & (came_from != "outside")),
            "transfers_out": _count(ward, goes & (went_to != "outside")),
            "external_out": _count(ward, goes & (went_to == "outside")),
            "present_first": _count(ward, (start < first) & (np.isnat(end) | (end >= first))),
            "present_last": _count(ward, (start < last) & (np.isnat(end) | (end >= last))),
        },
        index=pd.Index(records.wards, name="ward"),
    )
    return Flows(table, balance.fillna(0).astype(int))


def _count(ward: np.ndarray, which: np.ndarray) -> pd.Series:
    """Return how many rows of each ward are marked."""
    return pd.Series(ward[which], dtype=object).value_counts()
