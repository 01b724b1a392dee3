"""The Larkmere demo's files: they come out the same everywhere, agree with each other, and no bed is used twice."""

from __future__ import annotations

from datetime import date, timedelta
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pytest

from demo_data import realised
from demo_data.generate import DEMO_SEED, write_demo
from demo_data.hospital import LARKMERE
from demo_data.patients import draw_patients

if TYPE_CHECKING:
    from collections.abc import Callable

    from demo_data.flow import Flow

    ReadDemo = Callable[[str], pd.DataFrame]

DEMO = Path(__file__).parents[2] / "demo_data"
FILES = (
    "stays",
    "census",
    "capacity",
    "refusals",
    "bed_requests",
    "cancellations",
    "monthly_return",
    "truth_patients",
    "truth_daily_load",
)
WINDOW = pd.Timestamp("2022-04-01"), pd.Timestamp("2025-04-01")
WARDS = ("Heron", "Kestrel", "Plover", "Teal", "Curlew", "Dunlin", "Sandpiper", "Merlin")


@pytest.fixture(scope="module")
def written(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder with the demo written afresh."""
    folder = tmp_path_factory.mktemp("demo")
    write_demo(DEMO_SEED, folder)
    return folder


def occupied(stays: pd.DataFrame, ward: str, moments: pd.DatetimeIndex) -> np.ndarray:
    """Count the patients in at each moment, one moment at a time."""
    here = stays[stays["ward"] == ward]
    start, left = here["start"].to_numpy(), here["left"].to_numpy()
    return np.array([np.count_nonzero((start <= moment) & (left > moment)) for moment in moments.to_numpy()])


@pytest.mark.parametrize("name", FILES)
def test_the_seed_gives_the_committed_files(written: Path, name: str) -> None:
    """Writing the demo again gives the committed files byte for byte."""
    assert (written / f"{name}.csv").read_bytes() == (DEMO / f"{name}.csv").read_bytes()


def test_another_seed_gives_other_patients(flow: Flow) -> None:
    """Another seed brings other patients."""
    other = draw_patients(DEMO_SEED + 1, LARKMERE)
    assert other[:50] != [want.patient for want in flow.wants if want.stay_number == 0][:50]


def test_nobody_is_in_two_places(stays: pd.DataFrame) -> None:
    """A patient's next stay begins in the minute in which the one before ends, and every stay has a length."""
    assert (stays["left"] > stays["start"]).all()
    ordered = stays.sort_values(["patient_key", "start"])
    same = ordered["patient_key"] == ordered["patient_key"].shift()
    assert same.sum() > 5000
    assert (ordered["start"][same] == ordered["left"].shift()[same]).all()
    assert (ordered["destination"].shift()[same] == "another ward").all()


def test_stays_cover_the_window(stays: pd.DataFrame) -> None:
    """Every stay overlaps the three years; some began before; those unfinished have no end and no destination."""
    assert (stays["start"] < WINDOW[1]).all()
    assert (stays["left"] > WINDOW[0]).all()
    assert (stays["end"].dropna() < WINDOW[1]).all()
    assert (stays["start"] < WINDOW[0]).sum() > 100
    assert ((stays["destination"] == "") == stays["end"].isna()).all()
    assert set(stays["ward"]) == set(WARDS)


def test_nobody_is_placed_on_a_full_ward(stays: pd.DataFrame, open_beds: dict[tuple[str, date], int]) -> None:
    """No patient takes a bed that is not open and free; only Sandpiper's come back from theatre before theirs is."""
    for ward in set(WARDS) - {"Sandpiper"}:
        here = stays[stays["ward"] == ward]
        moves = sorted([(time, -1) for time in here["left"]] + [(time, 1) for time in here["start"]])
        patients = 0
        for time, change in moves:
            patients += change
            if change == 1 and WINDOW[0] <= time < WINDOW[1]:
                assert patients <= open_beds[ward, time.date()], (ward, time)


def test_sandpiper_has_a_bed_for_everyone_by_evening(stays: pd.DataFrame) -> None:
    """Booked cases start in the hour from 13:00, and the beds they were promised are free by 20:00."""
    here = stays[stays["ward"] == "Sandpiper"]
    assert (here["start"].dt.hour == 13).all()
    evenings = pd.date_range(*WINDOW, freq="D", inclusive="left") + timedelta(hours=20)
    assert occupied(stays, "Sandpiper", evenings).max() <= 16


def test_census_is_the_stays_counted(
    read_demo: ReadDemo, stays: pd.DataFrame, open_beds: dict[tuple[str, date], int]
) -> None:
    """Counting the stays in at 00:00 and 11:00 gives the census, and its beds are those of the capacity file."""
    census = read_demo("census")
    assert len(census) == 1096 * 2 * 8
    for ward, rows in census.groupby("ward"):
        moments = pd.DatetimeIndex(pd.to_datetime(rows["date"] + " " + rows["time"], format="%Y-%m-%d %H:%M"))
        assert rows["beds_occupied"].tolist() == occupied(stays, ward, moments).tolist()
        assert rows["beds_available"].tolist() == [open_beds[ward, moment.date()] for moment in moments]


def test_monthly_return_adds_up_the_midnights(read_demo: ReadDemo, stays: pd.DataFrame) -> None:
    """The return is the midnight census summed by month, with the stays that ended in the month."""
    census = read_demo("census").query("time == '00:00'")
    sums = census.groupby([census["date"].str[:7], "ward"])[["beds_available", "beds_occupied"]].sum()
    ended = stays.dropna(subset="end")
    left = ended.groupby([ended["end"].dt.strftime("%Y-%m"), "ward"]).size()
    table = read_demo("monthly_return").set_index(["month", "ward"])
    assert len(table) == 36 * 8
    for key, row in table.iterrows():
        expected = [*sums.loc[key], left[key]]
        assert row.tolist() == expected


def test_capacity_tells_bay_and_closures(open_beds: dict[tuple[str, date], int]) -> None:
    """The winter bay and the four closures stand in the capacity file on their first and last days."""
    assert len(open_beds) == 1096 * 8
    for winter in (2022, 2023, 2024):
        bay = [date(winter, 12, 15), date(winter, 12, 16), date(winter + 1, 3, 9), date(winter + 1, 3, 10)]
        assert [open_beds["Kestrel", day] for day in bay] == [28, 32, 32, 28]
    closures = (
        ("Plover", date(2023, 1, 9), 8, 30, 24),
        ("Kestrel", date(2024, 1, 22), 7, 32, 26),
        ("Plover", date(2024, 2, 5), 9, 30, 18),
        ("Curlew", date(2024, 12, 9), 6, 20, 15),
    )
    for ward, first, days, before, during in closures:
        around = [first + timedelta(days=number) for number in (-1, 0, days - 1, days)]
        assert [open_beds[ward, day] for day in around] == [before, during, during, before]


def test_realised_figures_count_the_same_hours_as_the_census(read_demo: ReadDemo, flow: Flow) -> None:
    """The hourly counts behind the printed means agree with the census on its two hours."""
    census = read_demo("census")
    for ward in WARDS:
        counted = realised.occupied_by_hour(flow, ward)
        by_clock = {"00:00": counted[0::24], "11:00": counted[11::24]}
        for clock, rows in census[census["ward"] == ward].groupby("time"):
            assert rows["beds_occupied"].tolist() == by_clock[clock]


def test_a_ward_off_its_plan_is_noticed() -> None:
    """The comparison fails a ward beyond 4 % of stay or 2.5 points of occupancy, and passes one within."""
    plan = realised.PLANNED_WARDS["Merlin"]
    assert not realised.outside_limits(plan, plan._replace(mean_stay=4.05 * 1.039, occupancy=0.582 - 0.024))
    assert realised.outside_limits(plan, plan._replace(mean_stay=4.05 * 1.041))
    assert realised.outside_limits(plan, plan._replace(occupancy=0.582 - 0.026))
