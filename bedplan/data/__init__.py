"""Reading, cleaning, describing and estimating: from a records file to a demand."""

from bedplan.data.ahead.backtesting import Backtest, backtest
from bedplan.data.ahead.forecasting import Forecast, forecast_arrivals
from bedplan.data.ahead.past_years import PastYear, past_years
from bedplan.data.beside.capacity import Capacity, read_capacity
from bedplan.data.beside.census import Census, read_census
from bedplan.data.beside.census_alone import return_of_census, swing_beyond_chance
from bedplan.data.beside.logs import EventLog, read_bed_requests, read_cancellations, read_refusals
from bedplan.data.beside.returns import MonthlyReturn, read_monthly_return
from bedplan.data.beside.waits import BedWaits, waits_for_a_bed
from bedplan.data.cleaning.records import Records, read_records
from bedplan.data.cleaning.wardlinks import WardLink
from bedplan.data.demand.estimating import DemandEstimate, Uncertainty, estimate_demand
from bedplan.data.demand.evidence import DemandMethod
from bedplan.data.demand.hidden_demand import DemandStep, HiddenDemand, hidden_demand
from bedplan.data.demand.repairs import RepairEffect, what_repairs_change
from bedplan.data.files.preview import ColumnPreview, preview_columns
from bedplan.data.files.report import IntakeReport
from bedplan.data.values.choices import DateQuestion, IntakeChoices
from bedplan.data.values.ready import ReadyDates
from bedplan.data.values.ready_reading import read_ready_dates
from bedplan.data.wards.census_check import CensusCheck, check_census
from bedplan.data.wards.describing import FullTimes, LongStays, WardDescription, describe_ward
from bedplan.data.wards.reconciling import Check, Flows, adds_up, flows
from bedplan.data.wards.stay_families import StayFamilies, stay_families

__all__ = [
    "Backtest",
    "BedWaits",
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
    "return_of_census",
    "stay_families",
    "swing_beyond_chance",
    "waits_for_a_bed",
    "what_repairs_change",
]
