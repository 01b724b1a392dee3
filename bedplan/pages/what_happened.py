"""What happened: when the ward was full, how it swings, how long patients stay; and whether the model would have known."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import streamlit as st

from bedplan import charts, wording
from bedplan.data import check_census
from bedplan.errors import BedplanError
from bedplan.pages import controls, loaded

if TYPE_CHECKING:
    from bedplan.data import WardDescription


def headline(seen: WardDescription) -> str:
    """Say when the ward was full, or how many patients were there."""
    if seen.full is None or np.isnan(seen.full.by_month).all():
        return f"{seen.ward} held {seen.midnight_mean:.1f} patients at midnight on average, {seen.daily_peak_mean:.1f} at the day's peak."
    worst = int(np.nanargmax(seen.full.by_month))
    return (
        f"{seen.ward} had no free bed {wording.percent(seen.full.share)} of the time; "
        f"in {wording.MONTHS[worst]} {wording.percent(float(seen.full.by_month[worst]))}."
    )


def facts(seen: WardDescription) -> pd.DataFrame:
    """Return what is asked about a ward, a row a figure."""
    low, high = seen.variance_interval
    long = {one.days: one for one in seen.long_stays}[21]
    rows = {
        "Patients at midnight, on average": f"{seen.midnight_mean:.1f}",
        "Patients at the day's peak, on average": f"{seen.daily_peak_mean:.1f}",
        "Mean stay (for sizing)": wording.days(seen.mean_stay_days),
        "Median stay (for description only)": wording.days(seen.median_stay_days),
        "Stays over 21 days": f"{wording.percent(long.share_of_patients)} of patients, {wording.percent(long.share_of_bed_days)} of bed-days",
        "Beds filled after day 21": f"{long.beds_after:.1f} on average",
        "Swing of the midnight count (variance ÷ mean)": f"{seen.variance_over_mean:.2f} ({low:.2f} to {high:.2f}); 1 = chance alone",
        "Bed-days of other wards' patients": f"{seen.outlier_bed_days:,.0f}",
    }
    if seen.full is not None:
        rows |= {
            "Occupancy of open beds": wording.percent(seen.full.occupancy, 0),
            "Hours with more patients than open beds": wording.percent(seen.full.over_full_share),
        }
    if seen.turnover_interval_days is not None and seen.throughput is not None:
        rows |= {
            "Turnover interval": f"{24 * seen.turnover_interval_days:.0f} hours empty between two patients",
            "Throughput": f"{seen.throughput:.0f} patients a bed a year",
        }
    return pd.DataFrame({"": rows.keys(), "In the records": rows.values()}).set_index("")


def show(name: str) -> None:
    """Show one ward as its records have it."""
    seen = loaded.description(name)
    st.header(wording.plain(headline(seen)), anchor=False)
    if seen.full is not None:
        st.markdown("**Hours in a hundred without a free bed**")
        week = charts.week_data(seen.full.by_weekday_and_hour)
        st.vega_lite_chart(charts.live(charts.WEEK, week), theme=None, width="stretch", alt=headline(seen))
        months = ["–" if np.isnan(share) else wording.percent(float(share), 0) for share in seen.full.by_month]
        st.table(pd.DataFrame([months], columns=list(wording.MONTHS_SHORT), index=["Full"]))
        st.caption("Closed beds are not counted as beds.")
    else:
        st.info("Load a file of staffed beds on the page Records to see when this ward was full.")
    st.table(facts(seen))
    census = loaded.files().census
    if census is not None and name in census.wards:
        st.markdown(wording.plain(check_census(loaded.records(), census, name).sentence))


def show_check(name: str) -> None:
    """Show whether the earlier records would have told the last year."""
    st.subheader("Would the earlier records have told the last year?", anchor=False)
    found = loaded.checked(name)
    if not found.checked:
        st.info(wording.plain(found.verdict))
        return
    st.markdown(f"**{wording.plain(found.verdict)}**")
    days = found.days.rename(columns={"date": "day", "present": "seen"})
    data = charts.check_data(days[["day", "seen", "middle", "low", "high"]], None)
    st.vega_lite_chart(charts.live(charts.CHECK, data), theme=None, width="stretch", alt=found.verdict)
    st.caption(f"Patients present at {found.clock}; the band should hold 8 days in 10, more where counts are small.")


def show_ahead(name: str) -> None:
    """Show the next ten years, should it go on as before, with ranges that widen."""
    st.subheader("If it goes on as before", anchor=False)
    try:
        ahead = loaded.forecast(name)
    except BedplanError as error:
        st.info(wording.plain(str(error)))
        return
    rows = [
        {
            "Year from": f"{year.first_day.day} {year.first_day:%B %Y}",
            "Admissions": f"{year.admissions:,.0f}",
            "8 in 10 between": f"{year.admissions_80[0]:,.0f} and {year.admissions_80[1]:,.0f}",
            "Beds in use on average": f"{year.beds_in_use:,.1f}",
            "8 in 10 between ": f"{year.bed_days_80[0] / 365:,.1f} and {year.bed_days_80[1] / 365:,.1f}",
        }
        for year in ahead.years
    ]
    st.table(pd.DataFrame(rows).set_index("Year from"))
    low, high = ahead.growth_range
    st.markdown(
        f"Growth of admissions {wording.signed_percent(ahead.growth_per_year)} a year "
        f"({wording.signed_percent(low)} to {wording.signed_percent(high)}); of bed-days "
        f"{wording.signed_percent(ahead.bed_days_growth_per_year)}. {wording.plain(ahead.why)}"
    )
    for note in ahead.notes:
        st.markdown(f"- {wording.plain(note)}")


controls.show_origin()
ward_name = controls.choose_ward()
try:
    show(ward_name)
    show_check(ward_name)
    show_ahead(ward_name)
except BedplanError as error:
    st.error(wording.plain(str(error)))
