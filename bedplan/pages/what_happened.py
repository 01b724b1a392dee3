"""What happened: when the ward was full, how long patients stay, whether the model would have known, and the years ahead.

Each tab begins with its own answer, the largest line on the page.
"""

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
    from bedplan.data.ahead.forecasting import YearAhead


USUAL_HOURS = 4  # of a wait for a bed, where the planner's limit is on something else


def headline(seen: WardDescription) -> str:
    """Say when the ward was full, or how many patients were there."""
    if seen.full is None or np.isnan(seen.full.by_month).all():
        return f"{seen.ward} held {seen.midnight_mean:.1f} patients at midnight on average, {seen.daily_peak_mean:.1f} at the day's peak."
    worst = int(np.nanargmax(seen.full.by_month))
    return (
        f"{seen.ward} had no free bed {wording.percent(seen.full.share)} of the time; "
        f"in {wording.MONTHS[worst]} {wording.percent(float(seen.full.by_month[worst]))}."
    )


def table(rows: dict[str, str]) -> None:
    """Show figures, a row each, beside what they are."""
    st.table(pd.DataFrame({"": rows.keys(), "In the records": rows.values()}).set_index(""))


def presence(seen: WardDescription) -> dict[str, str]:
    """Return how full the ward was and how quickly its beds turned over."""
    low, high = seen.variance_interval
    rows = {
        "Patients at midnight, on average": f"{seen.midnight_mean:.1f}",
        "Patients at the day's peak, on average": f"{seen.daily_peak_mean:.1f}",
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
    return rows


def staying(seen: WardDescription) -> dict[str, str]:
    """Return how long patients stayed, and what the long stays took."""
    long = {one.days: one for one in seen.long_stays}[21]
    return {
        "Mean stay (for sizing)": wording.days(seen.mean_stay_days),
        "Median stay (for description only)": wording.days(seen.median_stay_days),
        "Stays over 21 days": f"{wording.percent(long.share_of_patients)} of patients, {wording.percent(long.share_of_bed_days)} of bed-days",
        "Beds filled after day 21": f"{long.beds_after:.1f} on average",
    }


def answer(sentence: str) -> None:
    """Show a tab's answer."""
    st.header(wording.plain(sentence), anchor=False)


def show_full(name: str, seen: WardDescription) -> None:
    """Show when a ward was full, and how many patients were there."""
    answer(headline(seen))
    if seen.full is not None:
        st.markdown("**Hours in a hundred without a free bed** (closed beds are not counted as beds)")
        for spec, data, said in (
            (charts.YEAR, charts.year_data(seen.full.by_month), "month by month"),
            (charts.WEEK, charts.week_data(seen.full.by_weekday_and_hour), "by weekday and hour"),
        ):
            alt = f"{headline(seen)} Share of hours full {said}."
            st.vega_lite_chart(charts.live(spec, data), theme=None, width="stretch", alt=alt)
    else:
        st.info("Load a file of staffed beds on the page Records to see when this ward was full.")
    table(presence(seen))
    census = loaded.files().census
    if census is not None and name in census.wards:
        st.markdown(wording.plain(check_census(loaded.records(), census, name).sentence))
    waited = loaded.waits(name, getattr(controls.rule_for("waits"), "hours", USUAL_HOURS))
    if waited is not None:
        st.markdown(wording.plain(waited.sentence))


def show_stays(name: str, seen: WardDescription) -> None:
    """Show how long patients stay, and which curve their stays follow."""
    found = loaded.stays(name)
    answer(f"{name}'s patients stay {wording.days(seen.mean_stay_days)} on average.")
    st.markdown(f"**{wording.plain(found.verdict)}**")
    data = charts.stays_data(found.shares(), found.planned.shape)
    st.vega_lite_chart(charts.live(charts.STAYS, data), theme=None, width="stretch", alt=found.in_the_plan)
    st.markdown(wording.plain(found.in_the_plan))
    table(staying(seen))
    st.markdown("**Which curve do stays follow?**")
    columns = ("Stays as", "Behind the best (AIC)", "In words")
    rows = [(family.capitalize(), f"{behind:.0f}", said) for family, behind, said in found.rows]
    st.table(pd.DataFrame(rows, columns=columns).set_index(columns[0]))
    st.caption(wording.plain(found.explained))


def show_check(name: str) -> None:
    """Show whether the earlier records would have told the last year."""
    found = loaded.checked(name)
    answer(found.headline)
    if not found.checked:
        st.info(wording.plain(found.verdict))
        return
    st.markdown(wording.plain(found.verdict))
    days = found.days.rename(columns={"date": "day", "present": "seen"})
    data = charts.check_data(days[["day", "seen", "middle", "low", "high"]])
    st.vega_lite_chart(charts.live(charts.CHECK, data), theme=None, width="stretch", alt=found.verdict)
    columns = ("", "Last year", "Held against")
    st.table(pd.DataFrame(found.figures, columns=columns).set_index(""))
    side_by_side = st.container(horizontal=True, gap="medium")
    with side_by_side.container(width=430):
        kept = charts.live(charts.CALIBRATION, charts.calibration_data(found.kept))
        st.vega_lite_chart(kept, theme=None, width="content", alt=found.promise)
    with side_by_side.container(width=385):
        st.markdown(f"**{wording.plain(found.promise)}**")
        st.caption(f"Each bar allows for chance 19 times in 20: of {len(found.kept)} bands, one outside may be chance.")
    with st.expander("What the check rests on"):
        for note in found.notes:
            st.markdown(f"- {wording.plain(note)}")


def show_ahead(name: str) -> None:
    """Show the next ten years, should it go on as before, with ranges that widen."""
    try:
        ahead = loaded.forecast(name)
    except BedplanError as error:
        answer(f"{name}'s years ahead cannot be told.")
        st.info(wording.plain(str(error)))
        return
    answer(year_ahead(name, ahead.years[0]))
    st.markdown(wording.plain(ahead.verdict))
    data = charts.fan_data(loaded.past(name), ahead.years)
    st.vega_lite_chart(charts.live(charts.FAN, data), theme=None, width="stretch", alt=ahead.verdict)
    st.markdown(wording.plain(ahead.why))
    for note in ahead.notes:
        st.markdown(f"- {wording.plain(note)}")
    with st.expander("Year by year"):
        st.table(years_ahead(ahead.years))


def year_ahead(name: str, year: YearAhead) -> str:
    """Say what the first year holds."""
    low, high = (days / 365 for days in year.bed_days_80)
    return (
        f"In the year from {wording.date(year.first_day)} {name}'s patients would want {year.beds_in_use:,.1f} beds on "
        f"average, at this growth; 8 in 10 such years {low:,.1f} to {high:,.1f}."
    )


def years_ahead(years: tuple[YearAhead, ...]) -> pd.DataFrame:
    """Return a row a year: admissions and beds wanted, each with the range that holds 8 in 10."""
    rows = [
        {
            "Year from": f"{year.first_day.day} {year.first_day:%b %Y}",
            "Admissions": f"{year.admissions:,.0f}",
            "8 in 10 between": f"{year.admissions_80[0]:,.0f} and {year.admissions_80[1]:,.0f}",
            "Beds wanted at this growth": f"{year.beds_in_use:,.1f}",
            "8 in 10 between ": f"{year.bed_days_80[0] / 365:,.1f} and {year.bed_days_80[1] / 365:,.1f}",
        }
        for year in years
    ]
    return pd.DataFrame(rows).set_index("Year from")


SHOWN = {
    "When full": show_full,
    "Length of stay": show_stays,
    "Last year checked": lambda name, _: show_check(name),
    "Years ahead": lambda name, _: show_ahead(name),
}
controls.show_origin()
ward_name = controls.choose_ward()
try:
    described = loaded.description(ward_name)
    for tab, show in zip(st.tabs(list(SHOWN), key="happened", on_change="rerun"), SHOWN.values(), strict=True):
        if tab.open:
            with tab:
                show(ward_name, described)
except BedplanError as error:
    st.error(wording.plain(str(error)))
