"""A census counted at another time than it says is found out."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pytest

from bedplan.data import adds_up, check_census, read_census
from bedplan.data.wards.occupancy import present

if TYPE_CHECKING:
    from bedplan.data import Census, Records


def census_of(records: Records, ward: str, clock: str, shift_hours: int, times: float = 1.0) -> Census:
    """Return a year's census of a ward dated as at ``clock``, counted so many hours later, its counts multiplied."""
    hourly = present(records, records.of_ward(ward), 3_600)
    first = records.window[0]
    rows = ["date,time,ward,occupied"]
    for day in pd.date_range("2023-04-01", periods=365):
        hour = int((day - first) / pd.Timedelta(hours=1)) + int(clock[:2]) + shift_hours
        rows.append(f"{day:%Y-%m-%d},{clock},{ward},{round(hourly[hour] * times)}")
    return read_census("\n".join(rows).encode())


@pytest.mark.parametrize(
    ("clock", "shift", "said"),
    [
        ("00:00", 24, "counted at 00:00 on the day after, a day apart, it would be the same on 100 %"),
        ("00:00", -24, "counted at 00:00 on the day before, a day apart, it would be the same on 100 %"),
        ("00:00", 7, "counted at 07:00 on the same day, it would be the same on 100 %"),
        ("11:00", 23, "counted at 10:00 on the day after, it would be the same on 100 %"),
        ("11:00", 0, ""),
    ],
)
def test_the_time_it_was_counted_at_is_named(larkmere: Records, clock: str, shift: int, said: str) -> None:
    """The best match of all hours a day either way is named where it is clearly better than the time stated."""
    check = check_census(larkmere, census_of(larkmere, "Heron", clock, shift), "Heron", clock)

    assert check.shift_hours == shift
    assert check.apart.replace("\u00a0", " ").startswith(said)
    assert ("in total only" in check.sentence) == (abs(shift) > 12)  # nearly a day: the same hours of other days
    assert (check.days_alike == 1.0) == (not said)


def test_the_table_of_checks_names_it_too(larkmere: Records) -> None:
    """Totals agree within 2 % though every count is a day late: the check says which wards are apart."""
    verdicts = [
        next(
            one.verdict
            for one in adds_up(larkmere, census_of(larkmere, "Heron", "00:00", shift))
            if "Patients" in one.what
        )
        for shift in (0, 24)
    ]

    assert verdicts[0] == "agree on every ward (1)"
    assert verdicts[1].startswith(
        "agree on every ward (1); day by day they do not on Heron: counted at 00:00 on the day after"
    )


def test_a_census_of_other_counts_has_no_better_hour(larkmere: Records) -> None:
    """Counts that have nothing to do with the stays are like them by chance only: no hour is named."""
    day = pd.date_range("2023-04-01", periods=365)
    counts = np.random.default_rng(1).integers(10, 40, 365)
    rows = [f"{one:%Y-%m-%d},Heron,{count}" for one, count in zip(day, counts, strict=True)]
    check = check_census(larkmere, read_census("\n".join(["date,ward,occupied", *rows]).encode()), "Heron")

    assert check.apart == ""


@pytest.mark.parametrize(("times", "word"), [(1.0, "agree"), (1.06, "do not agree"), (0.94, "do not agree")])
def test_two_in_a_hundred_are_no_difference_and_six_are(larkmere: Records, times: float, word: str) -> None:
    """A census 6 % off does not agree with the stays, in the sentence and in the table."""
    census = census_of(larkmere, "Plover", "00:00", 0, times)
    check = check_census(larkmere, census, "Plover")
    verdict = next(one.verdict for one in adds_up(larkmere, census) if "Patients" in one.what)

    assert f"stays and census {word}: " in check.sentence
    assert verdict.startswith(word)
