"""Reading, cleaning, describing and estimating: from a records file to a demand."""

from bedplan.data.capacity import Capacity, read_capacity
from bedplan.data.choices import DateQuestion, IntakeChoices
from bedplan.data.estimating import DemandEstimate, Uncertainty, estimate_demand
from bedplan.data.preview import ColumnPreview, preview_columns
from bedplan.data.records import Records, read_records
from bedplan.data.report import IntakeReport

__all__ = [
    "Capacity",
    "ColumnPreview",
    "DateQuestion",
    "DemandEstimate",
    "IntakeChoices",
    "IntakeReport",
    "Records",
    "Uncertainty",
    "estimate_demand",
    "preview_columns",
    "read_capacity",
    "read_records",
]
