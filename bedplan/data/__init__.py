"""Reading, cleaning, describing and estimating: from a records file to a demand."""

from bedplan.data.backtesting import Backtest, backtest
from bedplan.data.capacity import Capacity, read_capacity
from bedplan.data.census import Census, read_census
from bedplan.data.choices import DateQuestion, IntakeChoices
from bedplan.data.describing import FullTimes, LongStays, WardDescription, describe_ward
from bedplan.data.estimating import DemandEstimate, Uncertainty, estimate_demand
from bedplan.data.evidence import DemandMethod
from bedplan.data.forecasting import Forecast, forecast_arrivals
from bedplan.data.hidden_demand import DemandStep, HiddenDemand, hidden_demand
from bedplan.data.logs import EventLog, read_bed_requests, read_cancellations, read_refusals
from bedplan.data.past_years import PastYear, past_years
from bedplan.data.preview import ColumnPreview, preview_columns
from bedplan.data.ready import ReadyDates
from bedplan.data.ready_reading import read_ready_dates
from bedplan.data.reconciling import CensusCheck, Check, Flows, adds_up, check_census, flows
from bedplan.data.records import Records, read_records
from bedplan.data.repairs import RepairEffect, what_repairs_change
from bedplan.data.report import IntakeReport
from bedplan.data.returns import MonthlyReturn, read_monthly_return
from bedplan.data.stay_families import StayFamilies, stay_families
from bedplan.data.wardlinks import WardLink

__all__ = [
    "Backtest",
    "Capacity",
    "Census",
    "CensusCheck",
    "Check",
    "ColumnPreview",
    "DateQuestion",
    "DemandEstimate",
    "DemandMethod",
    "DemandStep",
    "EventLog",
    "Flows",
    "Forecast",
    "FullTimes",
    "HiddenDemand",
    "IntakeChoices",
    "IntakeReport",
    "LongStays",
    "MonthlyReturn",
    "PastYear",
    "ReadyDates",
    "Records",
    "RepairEffect",
    "StayFamilies",
    "Uncertainty",
    "WardDescription",
    "WardLink",
    "adds_up",
    "backtest",
    "check_census",
    "describe_ward",
    "estimate_demand",
    "flows",
    "forecast_arrivals",
    "hidden_demand",
    "past_years",
    "preview_columns",
    "read_bed_requests",
    "read_cancellations",
    "read_capacity",
    "read_census",
    "read_monthly_return",
    "read_ready_dates",
    "read_records",
    "read_refusals",
    "stay_families",
    "what_repairs_change",
]
