"""How far the repaired rows, and stays whose dates are doubted, carry the answer: beds wanted with them and without."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from bedplan.data.demand.doubted import beds_doubted
from bedplan.data.demand.estimating import estimate_demand
from bedplan.errors import BedplanError

if TYPE_CHECKING:
    from bedplan.data.cleaning.records import Records


@dataclass(frozen=True, slots=True)
class RepairEffect:
    """One ward's beds wanted on average, with repaired rows and without; None where too little is left without.

    ``if_doubted_are_true``: what it would be if the stays set aside as forgotten or mistyped lasted as long as their
    rows say.
    """

    ward: str
    beds_wanted: float
    without_repairs: float | None
    if_doubted_are_true: float


def what_repairs_change(records: Records) -> tuple[RepairEffect, ...]:
    """What would each ward want if no row had been repaired, and if no stay's dates had been doubted? A row a ward.

    None where no row was repaired and none is doubted.

    Checked by: tests/data/demand/test_repairs.py
    """
    doubted = beds_doubted(records)
    if not records.report.repaired and not doubted:
        return ()
    bare = records.without_repairs()
    return tuple(
        RepairEffect(ward, wanted, _beds_wanted(bare, ward), wanted + doubted.get(ward, 0.0))
        for ward in records.wards
        if (wanted := _beds_wanted(records, ward)) is not None
    )


def _beds_wanted(records: Records, ward: str) -> float | None:
    try:
        return estimate_demand(records, ward).beds_wanted
    except BedplanError:
        return None
