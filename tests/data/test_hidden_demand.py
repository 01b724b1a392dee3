"""Hidden demand against wards whose every refusal is known: the demo's truth, printed tables, a ward of our own."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pytest

from bedplan.data import (
    Unmet,
    estimate_demand,
    hidden_demand,
    read_cancellations,
    read_capacity,
    read_records,
    read_refusals,
)
from bedplan.data.demand_methods import demand_behind_carried_load
from bedplan.errors import ImpossibleFigure
from bedplan.models import erlang_b

if TYPE_CHECKING:
    from pathlib import Path

    from bedplan.data import Capacity, HiddenDemand, Records


@pytest.fixture(scope="module")
def beds(demo_data: Path) -> Capacity:
    """Return the demo's beds by date."""
    return read_capacity(demo_data / "capacity.csv")


@pytest.fixture(scope="module")
def wanted(demo_data: Path) -> pd.DataFrame:
    """Return every want of the demo's patients, met or not: what no hospital knows of itself."""
    return pd.read_csv(demo_data / "truth_patients.csv")


@pytest.fixture(scope="module")
def load(demo_data: Path) -> pd.Series:
    """Return the beds each ward's patients would have used on average, had there always been one."""
    return pd.read_csv(demo_data / "truth_daily_load.csv").groupby("ward")["beds_wanted"].mean()


def test_published_refusals_of_a_neonatal_unit() -> None:
    """1,002 admitted and 179 refused are a demand of 1,181, 15.16 % of it refused (Asaduzzaman et al. 2010)."""
    rows = [
        f"p{n},Merlin,2024-{n % 12 + 1:02d}-{n % 28 + 1:02d} 10:{n % 60:02d},2024-12-30 10:00" for n in range(1_002)
    ]
    records = read_records("\n".join(["patient_key,ward,start,end", *rows]).encode())
    lines = "\n".join(["time,ward", *(f"2024-{n % 12 + 1:02d}-{n % 28 + 1:02d} 09:00,Merlin" for n in range(179))])
    hidden = hidden_demand(records, "Merlin", unmet=Unmet(read_refusals(lines.encode())))

    assert hidden.arrivals_per_day * records.days == pytest.approx(1_181)
    assert 1 - hidden.admitted_per_day / hidden.arrivals_per_day == pytest.approx(0.1516, abs=5e-5)


def test_carried_load_gives_the_load_of_the_printed_table() -> None:
    """10 beds that carry 7.026711 are asked for 8.00 (from the printed Erlang B value at 8 and 10)."""
    assert demand_behind_carried_load(7.026711, 10) == pytest.approx(8.0, abs=1e-5)


@pytest.mark.parametrize("true_load", [0.3, 5.0, 12.0, 40.0])
def test_carried_load_is_the_inverse_of_the_loss_formula(true_load: float) -> None:
    """Whatever load is put in comes out again, also where beds change half-way."""
    beds = np.array([12, 12, 16, 20])
    carried = float((true_load * (1 - erlang_b(true_load, beds))).mean())

    assert demand_behind_carried_load(carried, beds) == pytest.approx(true_load, rel=1e-6)


def test_a_ward_that_is_always_full_tells_nothing() -> None:
    """With every bed in use all the time, any demand is possible."""
    with pytest.raises(ImpossibleFigure, match="too near full"):
        demand_behind_carried_load(10.0, 10)


def loss_ward(beds: int, per_day: float, mean_days: float, days: int, seed: int) -> tuple[Records, Capacity, int]:
    """Return a ward that turns patients away, event by event, its beds, and how many were turned away."""
    rng = np.random.default_rng(seed)
    hour = np.array([0.3] * 8 + [1.8] * 8 + [0.9] * 8)
    came = np.sort(rng.uniform(0, days, rng.poisson(per_day * 1.8 * days)))
    came = came[rng.random(came.size) < hour[(came * 24 % 24).astype(int)] / 1.8]
    leave_at = np.zeros(beds)
    rows, lost = [], 0
    for moment in came:
        bed = int(leave_at.argmin())
        if leave_at[bed] > moment:
            lost += 1
            continue
        leave_at[bed] = moment + rng.exponential(mean_days)
        start, end = (pd.Timestamp("2022-01-01") + pd.Timedelta(days=float(day)) for day in (moment, leave_at[bed]))
        rows.append(
            f"p{len(rows)},Merlin,{start:%Y-%m-%d %H:%M:%S},{end:%Y-%m-%d %H:%M:%S}"
            if leave_at[bed] < days
            else f"p{len(rows)},Merlin,{start:%Y-%m-%d %H:%M:%S},"
        )
    records = read_records("\n".join(["patient_key,ward,start,end", *rows]).encode())
    return records, read_capacity(f"ward,from,staffed_beds\nMerlin,2022-01-01,{beds}\n".encode()), lost


def test_open_time_and_carried_load_find_the_demand_of_a_loss_ward() -> None:
    """Eight beds asked by 2 a day for 4 days turn away more than 1 in 5; both methods find the 2 a day."""
    records, beds, lost = loss_ward(8, 2.0, 4.0, 1_500, seed=1)
    assert lost > 0.2 * 2.0 * 1_500
    hidden = hidden_demand(records, "Merlin", beds)
    rate, carried = (figure for figure in hidden.figures if "free" in figure.method or "carried" in figure.method)

    for figure in (rate, carried):
        assert figure.low < 2.0 < figure.high
    assert rate.arrivals_per_day == pytest.approx(2.0, rel=0.08)
    assert hidden.admitted_per_day < 1.75
    assert hidden.patients_queue is False


def test_patients_who_queue_are_found_out() -> None:
    """Where patients wait for the ward, each freed bed is taken at once: the two methods are refused, with the reason."""
    rng = np.random.default_rng(2)
    came = np.cumsum(rng.exponential(1 / 1.9, 2_600))
    leave_at = np.zeros(8)
    rows = []
    for moment in came:
        bed = int(leave_at.argmin())
        begins = max(moment, leave_at[bed] + 0.01)
        leave_at[bed] = begins + rng.exponential(4.0)
        start, end = (pd.Timestamp("2020-01-01") + pd.Timedelta(days=float(day)) for day in (begins, leave_at[bed]))
        rows.append(f"p{len(rows)},Teal,{start:%Y-%m-%d %H:%M},{end:%Y-%m-%d %H:%M}")
    records = read_records("\n".join(["patient_key,ward,start,end", *rows]).encode())
    hidden = hidden_demand(records, "Teal", read_capacity(b"ward,from,staffed_beds\nTeal,2020-01-01,8\n"))

    assert hidden.patients_queue is True
    assert [figure.arrivals_per_day for figure in hidden.figures[2:]] == [None, None]
    assert all("queue" in figure.sentence for figure in hidden.figures[2:])
    assert hidden.arrivals_per_day == pytest.approx(hidden.admitted_per_day)


@pytest.mark.parametrize(
    ("ward", "recorded_share"),
    # How many refusals the demo's wards write down: the files say all for Merlin, 60 % for Curlew and Dunlin.
    [("Merlin", 1.0), ("Dunlin", 0.6), ("Curlew", 0.6)],
)
def test_the_demos_refusals(
    larkmere: Records, beds: Capacity, wanted: pd.DataFrame, demo_data: Path, ward: str, recorded_share: float
) -> None:
    """Demand found from the log lies within its own range of the wants that really happened."""
    hidden = hidden_demand(larkmere, ward, beds, Unmet(read_refusals(demo_data / "refusals.csv"), recorded_share))
    true_per_day = (wanted["wanted_ward"] == ward).sum() / larkmere.days
    logged = hidden.figures[0]

    assert logged.low < true_per_day < logged.high
    assert hidden.arrivals_per_day == pytest.approx(true_per_day, rel=0.02)


def test_the_demos_stroke_ward(larkmere: Records, beds: Capacity, wanted: pd.DataFrame, load: pd.Series) -> None:
    """Teal writes down no refusal, and a third of its patients lie elsewhere: counted at home, its load is found.

    The open-time method would say 2.7 a day or so where 1.7 is true, and is refused because patients queue.
    """
    hidden = hidden_demand(larkmere, "Teal", beds)

    assert hidden.patients_queue is True
    assert [figure.arrivals_per_day for figure in hidden.figures[2:]] == [None, None]
    assert hidden.beds_wanted == pytest.approx(load["Teal"], rel=0.03)
    assert hidden.arrivals_per_day == pytest.approx((wanted["wanted_ward"] == "Teal").sum() / larkmere.days, rel=0.02)
    assert hidden.steps[0].beds < 0.7 * hidden.beds_wanted


@pytest.mark.parametrize("ward", ["Curlew", "Dunlin", "Kestrel", "Merlin", "Plover", "Sandpiper", "Teal"])
def test_beds_wanted_of_every_ward(
    larkmere: Records, beds: Capacity, load: pd.Series, demo_data: Path, ward: str
) -> None:
    """With every file at hand, beds wanted come within 4 % of the truth, and the steps add up to them."""
    unmet = Unmet(
        read_refusals(demo_data / "refusals.csv"),
        1.0 if ward == "Merlin" else 0.6,
        read_cancellations(demo_data / "cancellations.csv"),
    )
    hidden = hidden_demand(larkmere, ward, beds, unmet)

    assert hidden.beds_wanted == pytest.approx(load[ward], rel=0.04)
    assert sum(step.beds for step in hidden.steps) == pytest.approx(hidden.beds_wanted)
    assert hidden.spread[0] <= hidden.arrivals_per_day <= hidden.spread[1]


def test_booked_patients_are_not_read_from_open_time(larkmere: Records, beds: Capacity) -> None:
    """Booked patients come by list; the time with a free bed says nothing of them."""
    hidden = hidden_demand(larkmere, "Sandpiper", beds)

    assert all("booked" in figure.sentence for figure in hidden.figures[2:])


def test_an_estimate_can_be_raised_to_demand(larkmere: Records, beds: Capacity) -> None:
    """The estimate crosses from admissions to arrivals by hidden demand, and says how."""
    hidden: HiddenDemand = hidden_demand(larkmere, "Teal", beds)
    plain, raised = estimate_demand(larkmere, "Teal"), estimate_demand(larkmere, "Teal", hidden=hidden)

    assert raised.arrivals_per_day / plain.arrivals_per_day == pytest.approx(
        hidden.arrivals_per_day / hidden.admitted_per_day
    )
    assert raised.demand.length_of_stay.mean_days == pytest.approx(hidden.beds_wanted / hidden.arrivals_per_day)
    assert raised.admissions_per_year == plain.admissions_per_year
    assert hidden.method in raised.method
    low, high = raised.arrivals_interval
    assert plain.arrivals_per_day < low < raised.arrivals_per_day < high


@pytest.mark.parametrize("share", [0.0, -0.1, 1.1])
def test_an_impossible_share_of_refusals_is_told(share: float) -> None:
    """A share recorded lies above 0 and at most at 1."""
    with pytest.raises(ImpossibleFigure, match=f"{share:g}"):
        Unmet(recorded_share=share)
