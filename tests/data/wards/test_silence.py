"""Times in which a ward was closed, not yet open or missing from the file, against wards whose truth is known."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pytest

from bedplan.data import IntakeChoices, describe_ward, estimate_demand, hidden_demand, read_records
from bedplan.data.wards.patients import beds_used
from bedplan.data.wards.silence import find_silences, without_silences
from tests.data.made_wards import FIRST_DAY, MadeWard, made_records, with_beds, without_arrivals

if TYPE_CHECKING:
    from bedplan.data import Records

DAYS = 1_096
WARD = MadeWard(6.0, 5.0, 1.1, growth=0.0)


def day(number: int) -> pd.Timestamp:
    """Return a day of the file."""
    return FIRST_DAY + pd.Timedelta(days=number)


def test_a_month_that_was_not_exported_does_not_lower_the_rate() -> None:
    """Without the rows of 30 days of the latest year six a day are still six, and the note names those days."""
    estimates = [
        estimate_demand(without_arrivals(made_records(WARD, seed), 950, 980), "Heron") for seed in range(6)
    ]  # six wards: 12,000 arrivals, 0.9 % either way by chance; counted in, the month would take 8 %

    assert np.mean([one.arrivals_per_day for one in estimates]) == pytest.approx(6.0, rel=0.025)
    for one in estimates:
        (note,) = (note for note in one.notes if note.startswith("Nobody came"))
        assert f"{day(979).day} {day(979):%B %Y}" in note
        assert "the last 12 months that count" in one.method


def test_a_ward_that_opened_half_a_year_ago_counts_from_then() -> None:
    """The days before it opened are no quiet days: rate, patients present and hidden demand are those since."""
    records = without_arrivals(made_records(MadeWard(6.0, 5.0, 1.1, growth=0.0, beds=45), 3), -999, DAYS - 182)
    since = MadeWard(6.0, 5.0, 1.1, growth=0.0).rates()[-182:].mean()
    estimate = estimate_demand(records, "Heron")

    assert estimate.arrivals_per_day == pytest.approx(since, rel=0.12)  # 1,190 arrivals: 3 standard errors are 9 %
    assert abs((estimate.counted_from - day(DAYS - 182)).days) <= 1
    assert any("until" in note for note in estimate.notes if note.startswith("Nobody came"))
    assert describe_ward(records, "Heron").midnight_mean == pytest.approx(since * 5.0, rel=0.15)
    hidden = hidden_demand(records, "Heron", capacity=with_beds(45))
    assert hidden.beds_wanted == pytest.approx(since * 5.0, rel=0.15)


def test_a_ward_that_closed_keeps_the_rate_it_had() -> None:
    """Two months without anyone at the end are left out and said."""
    estimate = estimate_demand(without_arrivals(made_records(WARD, 4), DAYS - 60, DAYS), "Heron")

    assert estimate.arrivals_interval[0] * 0.97 < 6.0 < estimate.arrivals_interval[1] * 1.03
    assert any("on, where about" in note for note in estimate.notes)


def test_silence_by_chance_is_left_alone() -> None:
    """Wards of one patient in three weeks to twelve a day, of 200 days to three years: none is called closed."""
    rng = np.random.default_rng(2)
    for seed in range(60):
        per_day = float(np.exp(rng.uniform(np.log(0.05), np.log(12.0))))
        ward = MadeWard(per_day, 3.0, 1.1, days=int(rng.choice([200, 400, DAYS])))
        assert find_silences(made_records(ward, seed), "Heron") == ()


def test_weekends_and_public_holidays_are_no_closure() -> None:
    """A ward with five booked patients each working day and four days off at Easter is open."""
    rows = [
        f"p{n}-{k},Heron,{date:%Y-%m-%d} 08:00,{date + pd.Timedelta(days=2):%Y-%m-%d} 12:00"
        for n, date in enumerate(pd.bdate_range("2023-01-02", "2024-12-31"))
        for k in range(5)
        if date not in (pd.Timestamp("2024-03-29"), pd.Timestamp("2024-04-01"))
    ]
    records = read_records("\n".join(["patient_key,ward,start,end", *rows]).encode())

    assert find_silences(records, "Heron") == ()


def test_a_quiet_ward_that_grows_was_open_all_along() -> None:
    """One in three weeks for two years, then ten a day: the early gaps are what such a rate leaves."""
    quiet, busy = made_records(MadeWard(0.05, 3.0, 1.1), 8), made_records(MadeWard(10.0, 3.0, 1.1), 9)
    late = busy.stays[busy.stays["start"] >= day(730)]
    both = pd.concat([quiet.stays[quiet.stays["start"] < day(730)], late]).reset_index(drop=True)

    assert all(first >= day(600) for first, _ in find_silences(replace(quiet, stays=both), "Heron"))


def test_days_chosen_and_days_silent_are_left_out_once() -> None:
    """A chosen period inside a silence takes nothing twice from the beds in use, and only chosen days are called so."""
    records = replace(without_arrivals(made_records(WARD, 5), 950, 1_010), excluded=((day(960), day(970)),))
    fewer = without_silences(records, "Heron")

    assert int((~fewer.counted_days).sum()) == pytest.approx(60, abs=2)
    assert beds_used(fewer, fewer.of_ward("Heron")) == pytest.approx(30.0, rel=0.12)
    assert any(note.startswith("11 days were left out, as chosen") for note in estimate_demand(records, "Heron").notes)


def test_a_chosen_period_is_not_told_as_a_silence() -> None:
    """A quarter in which nobody came, left out by choice, needs no second note."""
    rows = [
        f"p{n}{k},Heron,{date:%Y-%m-%d} {8 + 4 * k:02d}:00,{date + pd.Timedelta(days=3):%Y-%m-%d} 12:00"
        for n, date in enumerate(pd.date_range("2023-01-01", periods=365))
        for k in range(2)
        if not 4 <= date.month <= 6
    ]
    content = "\n".join(["patient_key,ward,start,end", *rows]).encode()
    chosen = IntakeChoices(excluded=((pd.Timestamp("2023-04-01").date(), pd.Timestamp("2023-06-30").date()),))

    assert find_silences(read_records(content, choices=chosen), "Heron") == ()


def test_no_ward_of_the_invented_hospital_was_closed(larkmere: Records) -> None:
    """All eight wards were open for three years, the booked one over Christmas too."""
    assert all(find_silences(larkmere, ward) == () for ward in larkmere.wards)


def test_a_ward_that_is_filling_up_is_not_taken_for_one_with_few_patients() -> None:
    """After a ward opens its beds fill for weeks where stays are long: counts of patients present begin after that."""
    ratios = []
    for seed in range(3):
        records = made_records(MadeWard(6.0, 20.0, 0.8, growth=0.0), seed)
        open_all_along = describe_ward(records, "Heron").hourly.to_numpy()[-24 * 182 :: 24].mean()
        opened = describe_ward(without_arrivals(records, -999, DAYS - 182), "Heron").midnight_mean
        ratios.append(opened / open_all_along)

    assert np.mean(ratios) == pytest.approx(
        1.0, abs=0.05
    )  # with the first weeks counted: 1 − 20 · (1 + 0.8²) / 2 / 182 = 0.91


def test_beds_of_long_stays_are_those_since_the_ward_opened() -> None:
    """Days in which the ward was not open yet don't thin out the beds that late days of long stays fill."""
    records = made_records(MadeWard(6.0, 8.0, 1.2, growth=0.0), 4)
    whole, opened = (describe_ward(one, "Heron") for one in (records, without_arrivals(records, -999, DAYS - 182)))

    for all_along, since in zip(whole.long_stays, opened.long_stays, strict=True):
        assert since.beds_after == pytest.approx(all_along.beds_after, rel=0.35)  # a winter; spread over all days: 0.17
