"""How far the repaired rows carry the answer: each ward's beds wanted with them and without."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from bedplan.data.demand.estimating import estimate_demand
from bedplan.errors import BedplanError

if TYPE_CHECKING:
    from bedplan.data.cleaning.records import Records


@dataclass(frozen=True, slots=True)
class RepairEffect:
    """One ward's beds wanted on average, with repaired rows and without; None where too little is left without."""

    ward: str
    beds_wanted: float
    without_repairs: float | None


def what_repairs_change(records: Records) -> tuple[RepairEffect, ...]:
    """What would each ward want if no row had been repaired? A row a ward; none where no row was repaired.

    Checked by: tests/data/demand/test_repairs.py
    """
    if not records.report.repaired:
        return ()
    bare = records.without_repairs()
    return tuple(
        RepairEffect(ward, wanted, _beds_wanted(bare, ward))
        for ward in records.wards
        if (wanted := _beds_wanted(records, ward)) is not None
    )


def _beds_wanted(records: Records, ward: str) -> float | None:
    try:
        return estimate_demand(records, ward).beds_wanted
    except BedplanError:
        return None
