"""Which ward is a specialty's own, and how many beds its patients use on other wards."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.wards.occupancy import bed_days

if TYPE_CHECKING:
    from collections.abc import Mapping

    from bedplan.data.cleaning.records import Records

THROUGH_SHARE = 0.5  # of other specialties' stays that go on to another ward: an assessment ward, not outliers


@dataclass(frozen=True)
class HomeWards:
    """Specialties and their own wards. ``home``: specialty → ward; ``through``: wards that patients pass through.

    ``stays``: the records' stays with bed_days, home (their specialty's ward, "" = none) and is_outlier.

    Checked by: tests/data/wards/test_specialty.py
    """

    home: Mapping[str, str]
    through: tuple[str, ...]
    stays: pd.DataFrame

    def own_patients(self, ward: str) -> pd.DataFrame:
        """Which stays are those of this ward's patients, on it or as outliers elsewhere?"""
        mine = self.stays["home"] == ward
        return self.stays[mine & ((self.stays["ward"] == ward) | self.stays["is_outlier"])]

    def outliers_by_ward(self) -> pd.DataFrame:
        """How many stays and bed-days do outliers take? One row for each home ward and the ward they lay on."""
        away = self.stays[self.stays["is_outlier"]]
        grouped = away.groupby(["home", away["ward"].astype(str)])["bed_days"].agg(["size", "sum"]).reset_index()
        return grouped.set_axis(["home", "ward", "stays", "bed_days"], axis=1)


def find_home_wards(records: Records) -> HomeWards | None:
    """Which ward is each specialty's own, and who lies elsewhere? None where the file has no specialty.

    A specialty's own ward is where most of its bed-days are; stays on a ward that patients of other specialties mostly
    pass through on their way (an assessment ward) are not outliers.

    Checked by: tests/data/wards/test_specialty.py
    """
    if "specialty" not in records.stays or records.stays["specialty"].isna().all():
        return None
    stays = records.stays.copy()
    stays["bed_days"] = bed_days(records, stays)
    table = stays.pivot_table(index="specialty", columns="ward", values="bed_days", aggfunc="sum", observed=True)
    table = table.fillna(0.0)
    goes_on = _goes_on(stays)
    own = {
        str(specialty): str(table.columns[row.argmax()])
        for specialty, row in zip(table.index, table.to_numpy(), strict=True)
    }
    stays["home"] = stays["specialty"].map(own).astype(object).fillna("")
    ward = stays["ward"].astype(str)
    strange = (stays["home"] != "") & (stays["home"] != ward)
    passing = goes_on[strange.to_numpy()]
    shares = pd.Series(passing).groupby(ward[strange].to_numpy()).mean() if passing.size else pd.Series(dtype=float)
    through = tuple(shares.index[shares > THROUGH_SHARE])
    stays["is_outlier"] = strange & ~ward.isin(through)
    return HomeWards(own, through, stays)


def _goes_on(stays: pd.DataFrame) -> np.ndarray:
    """Which stays are followed by another ward stay of the same patient within a day?"""
    order = np.lexsort((stays["start"].to_numpy(), stays["patient_key"].to_numpy()))
    patient, start, end = (stays[key].to_numpy()[order] for key in ("patient_key", "start", "end"))
    follows = np.zeros(len(stays), dtype=bool)
    gap = start[1:] - end[:-1]
    follows[order[:-1]] = (patient[1:] == patient[:-1]) & ~np.isnat(end[:-1]) & (gap <= np.timedelta64(86_400, "s"))
    return follows
