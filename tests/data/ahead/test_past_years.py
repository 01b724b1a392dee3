"""The years of the records: counted back from their end, admissions and beds in use as a plain count has them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

from bedplan.data import forecast_arrivals
from bedplan.data.ahead.past_years import past_years
from tests.data.made_wards import FIRST_DAY, MadeWard, as_records, made_records, without_arrivals


def test_years_by_hand() -> None:
    """Two a day for exactly three days, then three a day in the last year: 730 and 1,095 a year, 6 and 9 beds in use."""
    days = np.arange(-3.0, 740.0)
    begin = np.sort(np.concatenate((days + 0.3, days + 0.6, days[days >= 370] + 0.4)))
    years = past_years(as_records(begin, begin + 3.0, 740), "Heron")

    assert [year.first_day for year in years] == [FIRST_DAY + pd.Timedelta(days=number) for number in (10, 375)]
    assert [year.admissions for year in years] == pytest.approx([730 + 5, 1_095], abs=1.0)  # five days of the new rate
    assert [year.beds_in_use for year in years] == pytest.approx([6.0, 9.0], abs=0.05)


def test_days_left_out_do_not_lower_a_year() -> None:
    """A quarter shut and excluded leaves the year's admissions as they were; half a year and more leaves no year."""
    records = as_records(np.arange(-3.0, 740.0, 0.5) + 0.2, np.arange(-3.0, 740.0, 0.5) + 2.2, 740)
    shut = (pd.Timestamp("2023-06-01"), pd.Timestamp("2023-08-31"))
    away = records.stays["start"].between(shut[0], shut[1] + pd.Timedelta(days=1))
    quiet = replace(records, stays=records.stays[~away].reset_index(drop=True), excluded=(shut,))
    long = replace(records, excluded=((pd.Timestamp("2022-05-01"), pd.Timestamp("2023-01-31")),))

    assert [year.admissions for year in past_years(quiet, "Heron")] == pytest.approx([730, 730], rel=0.01)
    assert [year.first_day.year for year in past_years(long, "Heron")] == [2023]
    assert past_years(as_records(np.arange(0.0, 300.0), np.arange(1.0, 301.0), 300), "Heron") == ()


def test_a_year_with_a_closure_is_one_of_open_days() -> None:
    """Two months without anyone, chosen by nobody, lower neither the year's admissions nor its beds in use."""
    begin = np.arange(-3.0, 740.0, 0.5) + 0.2
    years = past_years(without_arrivals(as_records(begin, begin + 2.0, 740), 500, 560), "Heron")

    assert [year.admissions for year in years] == pytest.approx([730, 730], rel=0.01)
    assert [year.beds_in_use for year in years] == pytest.approx([4.0, 4.0], rel=0.01)


def test_past_and_future_join() -> None:
    """In a ward that neither grows nor shrinks, the years of the records lie in the forecast's range of the year ahead."""
    records = made_records(MadeWard(6.0, 5.0, 1.0, growth=0.0), 3)
    ahead = forecast_arrivals(records, "Heron").years[0]
    years = past_years(records, "Heron")

    assert len(years) == 3
    for year in years:
        assert ahead.admissions_95[0] < year.admissions < ahead.admissions_95[1]
        assert ahead.bed_days_95[0] < 365 * year.beds_in_use < ahead.bed_days_95[1]
    came = records.stays["start"]
    assert years[-1].admissions == pytest.approx((came >= records.window[1] - pd.Timedelta(days=365)).sum(), abs=8)
