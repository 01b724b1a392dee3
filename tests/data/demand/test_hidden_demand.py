"""Hidden demand against wards whose every patient is known: the invented hospital's truth, printed figures, own wards."""

from __future__ import annotations

import datetime as dt
import math
import re
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pytest
from scipy import stats

from bedplan.data import (
    IntakeChoices,
    estimate_demand,
    hidden_demand,
    read_bed_requests,
    read_cancellations,
    read_capacity,
    read_records,
    read_refusals,
)
from bedplan.data.demand.carried_load import beds_below_wall, load_behind
from bedplan.data.wards.patients import own_patients
from bedplan.errors import ImpossibleFigure
from bedplan.models import erlang_b
from demo_data.generate import DEMO_SEED, write_demo
from tests.data.made_wards import RUN_IN_DAYS, MadeWard, made_records, with_beds

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    from bedplan.data import Capacity, DemandMethod, EventLog, HiddenDemand, Records

BY_LIST, BY_SPECIALTY, BY_OPEN_TIME, BY_FORMULA = range(4)  # their places in HiddenDemand.methods
HEADINGS = "patient_key,spell_key,ward,start,end,specialty"
# How much of it the invented hospital's wards write down (its generator says so).
SHARE_RECORDED = {"Merlin": 1.0, "Curlew": 0.6, "Dunlin": 0.6}


@dataclass(frozen=True)
class Years:
    """Three years of the invented hospital: their files, read."""

    folder: Path
    records: Records
    beds: Capacity
    listed: EventLog

    def of(self, ward: str, **options: object) -> HiddenDemand:
        """Return what the files say of one ward."""
        return hidden_demand(self.records, ward, capacity=self.beds, refusals=self.listed, **options)


@pytest.fixture(scope="module", params=["the committed years", "other years"])
def years(request: pytest.FixtureRequest, demo_data: Path, tmp_path_factory: pytest.TempPathFactory) -> Years:
    """Return the committed three years, then three others of the same hospital."""
    folder = demo_data
    if request.param == "other years":
        folder = tmp_path_factory.mktemp("other_years")
        write_demo(DEMO_SEED + 1, folder)
    files = (folder / name for name in ("stays.csv", "capacity.csv", "refusals.csv"))
    return Years(
        folder, *(read(file) for read, file in zip((read_records, read_capacity, read_refusals), files, strict=True))
    )


@pytest.fixture(scope="module")
def beds(demo_data: Path) -> Capacity:
    """Return the committed years' beds by date."""
    return read_capacity(demo_data / "capacity.csv")


@pytest.fixture(scope="module")
def listed(demo_data: Path) -> EventLog:
    """Return the committed years' list of patients who could not be given a bed."""
    return read_refusals(demo_data / "refusals.csv")


def truth(folder: Path, ward: str) -> dict[str, float]:
    """Return what really was, on average: who wanted the ward first, beds wanted, beds its patients used, here and in all."""
    load, wants = pd.read_csv(folder / "truth_daily_load.csv"), pd.read_csv(folder / "truth_patients.csv")
    load, wants = load[load["ward"] == ward].mean(numeric_only=True), wants[wants["wanted_ward"] == ward]
    return {
        "per_day": wants["second_choice"].isna().sum() / 1_096,
        "not_given": wants["outcome"].isin(["lost", "cancelled"]).sum() / 1_096,
        "written_down": (wants["recorded"] == "yes").sum() / max((wants["outcome"] == "lost").sum(), 1),
        "beds": load["beds_wanted"],
        "here": load["on_own_ward"],
        "used": load["on_own_ward"] + load["as_outliers"],
    }


@pytest.mark.parametrize("ward", list(SHARE_RECORDED))
def test_every_method_finds_the_demand_of_wards_that_send_patients_away(years: Years, ward: str) -> None:
    """From the files alone, each method's 90 % interval holds who really wanted the ward, and the beds they wanted."""
    found, true = years.of(ward, share_recorded=SHARE_RECORDED[ward]), truth(years.folder, ward)
    used = [method for method in found.methods if method.used]

    assert [found.methods.index(method) for method in used] == [BY_LIST, BY_OPEN_TIME, BY_FORMULA]
    for method in used:
        assert method.interval[0] < true["per_day"] < method.interval[1], method
        assert method.beds_interval[0] < true["beds"] < method.beds_interval[1], method
    assert found.method == used[0].name
    assert found.demand_per_day == pytest.approx(true["per_day"], rel=0.02)


def test_the_stroke_wards_patients_are_found_where_they_lay(years: Years) -> None:
    """Teal turns nobody away and a third of its patients lie elsewhere: counted wherever they lay, their beds are found.

    Those who wait for Teal on Heron are not counted as lying there.
    """
    found, true = years.of("Teal"), truth(years.folder, "Teal")

    assert found.method == found.methods[BY_SPECIALTY].name
    assert found.steps[0].beds == pytest.approx(true["here"], abs=0.01)
    assert found.beds_wanted == pytest.approx(true["used"], abs=0.05)  # shared minutes; the truth is rounded a day
    assert found.beds_interval[0] < true["beds"] < found.beds_interval[1]
    assert found.interval[0] < true["per_day"] < found.interval[1]
    assert any("Heron" in note and "pass through" in note for note in found.notes)


def test_a_list_kept_in_part_widens_the_interval_as_thinning_does() -> None:
    """Where each of those sent away is noted with chance p, N noted stand for N/p, off by (1 − p)/p of it on top of chance.

    Source: variance of a thinned count, N/p given Poisson's law: N/p · (1 + (1 − p)/p) (any text on sampling); the
    interval is 1.645 standard errors of the logarithm.
    """
    records, rng = made_records(MadeWard(6.0, 4.0, 1.0, growth=0.0), 5), np.random.default_rng(6)
    days = records.days
    noted = np.append(rng.uniform(0, days, 2_000), [0.1, days - 0.1])
    times = (records.window[0] + pd.to_timedelta(np.sort(noted), unit="D")).strftime("%Y-%m-%d %H:%M")
    listed = read_refusals("\n".join(["time,ward,reason", *(f"{time},Heron,no bed" for time in times)]).encode())

    def variance(share: float) -> float:
        """Return the variance of patients a day that the interval of the list tells."""
        found = hidden_demand(records, "Heron", refusals=listed, share_recorded=share).methods[BY_LIST]
        return (
            found.patients_per_day * math.log(found.interval[1] / found.patients_per_day) / stats.norm.ppf(0.95)
        ) ** 2

    had = ((records.stays["start"] >= records.window[0]) & (records.stays["start"] < records.window[1])).sum() / days
    sent_away = noted.size / days
    swing = variance(1.0) * days / (had + sent_away)
    for share in (0.5, 0.25):
        wanted = swing * had / days + (swing + (1 - share) / share) * sent_away / share / days
        assert variance(share) == pytest.approx(wanted, rel=1e-3)


def test_open_time_is_refused_where_patients_queue(years: Years) -> None:
    """Freed beds of the stroke ward go to patients who were waiting: the two methods for other wards say why not."""
    found = years.of("Teal")

    for place in (BY_OPEN_TIME, BY_FORMULA):
        method = found.methods[place]
        assert not method.used
        assert (method.patients_per_day, method.beds, method.interval) == (None, None, None)
        assert "queue for Teal" in method.reason
        assert "Heron" in method.reason


@pytest.mark.parametrize("ward", ["Heron", "Kestrel", "Plover"])
def test_every_ward_that_is_queued_for_is_recognised(larkmere: Records, beds: Capacity, ward: str) -> None:
    """Whether they wait in the emergency department or on another ward, the open-time method is refused."""
    found = hidden_demand(larkmere, ward, capacity=beds)

    assert "queue" in found.methods[BY_OPEN_TIME].reason
    assert "queue" in found.methods[BY_FORMULA].reason


@pytest.mark.parametrize("ward", ["Kestrel", "Plover", "Curlew"])
def test_other_wards_patients_are_taken_out(larkmere: Records, demo_data: Path, beds: Capacity, ward: str) -> None:
    """The steps run from all that lay on the ward to its own patients, wherever they lay, and add up."""
    found, true = hidden_demand(larkmere, ward, capacity=beds), truth(demo_data, ward)
    labels = [step.label for step in found.steps]
    guests = found.steps[1]

    assert "taken out" in labels[1]
    assert guests.beds < 0
    assert found.steps[0].beds + guests.beds == pytest.approx(true["here"], abs=0.01)
    assert found.beds_wanted == pytest.approx(
        true["used"] if ward != "Curlew" else found.methods[BY_OPEN_TIME].beds, abs=0.05
    )
    assert sum(step.patients_per_day for step in found.steps) == pytest.approx(found.demand_per_day)
    assert any("left out" in note for note in found.notes)


def test_a_formula_that_misses_full_hours_says_so(larkmere: Records, beds: Capacity) -> None:
    """Curlew was full for longer than its use of beds explains: the formula's range is wide, and its sentence says why."""
    by_open_time, by_formula = hidden_demand(larkmere, "Curlew", capacity=beds).methods[BY_OPEN_TIME:]
    wide, narrow = ((high - low) / high for low, high in (by_formula.interval, by_open_time.interval))

    assert by_formula.patients_per_day < by_open_time.patients_per_day
    assert wide > 2 * narrow
    assert "misses demand" in by_formula.reason


def test_cancelled_patients_are_added(larkmere: Records, demo_data: Path, beds: Capacity, listed: EventLog) -> None:
    """Booked cases cancelled for want of a bed are in the demand; open time is refused, as they come by list."""
    cancelled = read_cancellations(demo_data / "cancellations.csv")
    found = hidden_demand(larkmere, "Sandpiper", capacity=beds, refusals=(listed, cancelled), share_recorded=0.6)
    true = truth(demo_data, "Sandpiper")

    assert found.demand_per_day == pytest.approx(true["per_day"], rel=0.001)
    assert found.beds_interval[0] < true["beds"] < found.beds_interval[1]
    assert "booked" in found.methods[BY_OPEN_TIME].reason


def test_a_list_that_misses_some_is_noticed(
    larkmere: Records, demo_data: Path, beds: Capacity, listed: EventLog
) -> None:
    """Taken as complete, Curlew's list finds too little; the note says so and about which share is written down."""
    found, true = hidden_demand(larkmere, "Curlew", capacity=beds, refusals=listed), truth(demo_data, "Curlew")
    told = next(note for note in found.notes if "may miss more" in note)
    share = int(told.split("About ")[1].split()[0].split("\N{NO-BREAK SPACE}")[0]) / 100

    assert found.demand_per_day < 0.98 * true["per_day"]
    assert share == pytest.approx(true["written_down"], abs=0.15)
    assert "of such cases" in told
    assert found.spread[1] > true["per_day"]


def test_a_complete_list_is_not_suspected(larkmere: Records, beds: Capacity, listed: EventLog) -> None:
    """Merlin writes down everybody; nothing is said against its list."""
    found = hidden_demand(larkmere, "Merlin", capacity=beds, refusals=listed)

    assert not any("may miss" in note for note in found.notes)


def test_an_unsure_share_widens_the_range(larkmere: Records, listed: EventLog) -> None:
    """Half to seven tenths written down instead of exactly six tenths: about the same demand, a wider range."""
    sure = hidden_demand(larkmere, "Curlew", refusals=listed, share_recorded=0.6)
    unsure = hidden_demand(larkmere, "Curlew", refusals=listed, share_recorded=(0.5, 0.7))

    assert unsure.demand_per_day == pytest.approx(sure.demand_per_day)
    assert unsure.interval[0] < sure.interval[0]
    assert sure.interval[1] < unsure.interval[1]
    assert "50\N{NO-BREAK SPACE}% to 70\N{NO-BREAK SPACE}%" in unsure.methods[BY_LIST].reason


@pytest.mark.parametrize("share", [0.0, -0.1, 1.1, (0.7, 0.5), (0.0, 0.5)])
def test_an_impossible_share_is_told(larkmere: Records, share: float | tuple[float, float]) -> None:
    """A share written down lies above 0, at most at 1, the lower figure first."""
    with pytest.raises(ImpossibleFigure, match=r"above 0 and is at most 1"):
        hidden_demand(larkmere, "Merlin", share_recorded=share)


def test_words_are_kind(larkmere: Records, beds: Capacity, listed: EventLog) -> None:
    """Nothing on screen calls a patient refused, and nothing says optimal or safe."""
    said = []
    for ward in larkmere.wards:
        found = hidden_demand(larkmere, ward, capacity=beds, refusals=listed)
        said += [*found.notes, *(step.label for step in found.steps)]
        said += [f"{method.name} {method.reason.replace(listed.name, '')}" for method in found.methods]

    for sentence in said:
        assert not {"refused", "refusal", "optimal", "safe", "lost"} & set(sentence.lower().split()), sentence


def test_published_figures_of_a_neonatal_unit() -> None:
    """1,002 admitted and 179 not (144 and 35, two units) are a demand of 1,181, of whom 15.16 % had no cot.

    Source: Asaduzzaman, Chaussalet et al. 2010, Archives of Disease in Childhood, fetal and neonatal edition.
    """
    start = pd.Timestamp("2006-01-01") + pd.to_timedelta(np.arange(1_002) * 524, unit="min")
    stays = [
        f"p{n},Swift,{when:%Y-%m-%d %H:%M},{when + pd.Timedelta(days=9):%Y-%m-%d %H:%M}" for n, when in enumerate(start)
    ]
    lines = [f"{pd.Timestamp('2006-01-01') + pd.Timedelta(hours=48 * n):%Y-%m-%d %H:%M},Swift" for n in range(179)]
    records = read_records("\n".join(["patient_key,ward,start,end", *stays]).encode())
    found = hidden_demand(records, "Swift", refusals=read_refusals("\n".join(["time,ward", *lines]).encode()))

    # Rates leave out the first nine days, in which patients who were in already are missing: 1 in 1,000 off at most.
    assert found.demand_per_day * records.days == pytest.approx(1_181, rel=1e-3)
    assert 1 - found.admitted_per_day / found.demand_per_day == pytest.approx(0.1516, rel=5e-3)


def test_a_list_begun_late_counts_for_its_own_days(read: Callable[..., Records]) -> None:
    """A list kept in the last 100 of 400 days gives a rate over 100 days, not a quarter of it over 400."""
    start = pd.Timestamp("2023-01-01")
    days = [start + pd.Timedelta(days=day) for day in range(400)]
    records = read(*(f"p{n},p{n},Merlin,{day:%Y-%m-%d} 08:00,{day:%Y-%m-%d} 20:00" for n, day in enumerate(days)))
    listed = "\n".join(["time,ward", *(f"{day:%Y-%m-%d} 12:00,Merlin" for day in days[300:])])
    found = hidden_demand(records, "Merlin", refusals=read_refusals(listed.encode()))

    assert found.demand_per_day == pytest.approx(2.0)


def test_a_log_of_all_requests_is_no_list_of_those_without_a_bed(larkmere: Records, demo_data: Path) -> None:
    """Nearly everybody on it had a bed: adding them would double the demand, so the method says what to bring."""
    found = hidden_demand(larkmere, "Heron", refusals=read_bed_requests(demo_data / "bed_requests.csv"))

    assert not found.methods[BY_LIST].used
    assert "asked for a bed" in found.methods[BY_LIST].reason


def test_a_silent_list_and_no_beds_file_are_told(larkmere: Records, listed: EventLog) -> None:
    """Without anything to go by the recorded admissions stand, and every method says what is missing."""
    found = hidden_demand(larkmere, "Heron", refusals=listed)

    assert found.method == "recorded admissions alone"
    assert "nobody noted it" in found.methods[BY_LIST].reason
    assert "beds by ward and date" in found.methods[BY_OPEN_TIME].reason
    assert any("demand may be higher" in note for note in found.notes)


# -- whose patients, and where ---------------------------------------------------------------------------------------


def one_by_one(
    ward: str, specialty: str, number: int, *, name: str = "", first_day: int = 1, nights: int = 2
) -> list[str]:
    """Return that many patients on one ward, a day apart, each for some nights."""
    day = pd.Timestamp("2024-01-01") + pd.Timedelta(days=first_day - 1)
    return [
        f"{name or ward}{n},{name or ward}{n},{ward},{day + pd.Timedelta(days=n):%Y-%m-%d} 10:00,"
        f"{day + pd.Timedelta(days=n + nights):%Y-%m-%d} 10:00,{specialty}"
        for n in range(number)
    ]


def test_patients_elsewhere_are_brought_home_once(read: Callable[..., Records]) -> None:
    """One who lay elsewhere first and came home later is one patient, with the bed-days of both."""
    records = read(
        *one_by_one("Teal", "stroke", 20),
        *one_by_one("Plover", "older people", 20),
        *one_by_one("Plover", "stroke", 5, name="outlier"),
        *one_by_one("Plover", "stroke", 2, name="late", first_day=10),
        *one_by_one("Teal", "stroke", 2, name="late", first_day=12),
        headings=HEADINGS,
    )
    found = hidden_demand(records, "Teal")

    assert found.steps[0].patients_per_day * records.days == pytest.approx(22)
    assert found.demand_per_day * records.days == pytest.approx(27)
    assert found.beds_wanted * records.days == pytest.approx(2 * (22 + 7))


def test_care_on_the_way_is_no_bed_short(read: Callable[..., Records]) -> None:
    """Patients assessed on Heron who then move to Teal, and those who go on from Teal to Robin, never lay away."""
    records = read(
        *one_by_one("Heron", "acute", 30, name="acute"),
        *one_by_one("Heron", "stroke", 12, name="stroke"),
        *one_by_one("Teal", "stroke", 12, name="stroke", first_day=3, nights=4),
        *one_by_one("Robin", "stroke", 12, name="stroke", first_day=7),
        *one_by_one("Robin", "recovery", 20, name="recovery"),
        headings=HEADINGS,
    )
    own = own_patients(records, "Teal")

    assert len(own.elsewhere) == 0
    assert sorted(set(own.on_the_way["ward"])) == ["Heron", "Robin"]
    assert hidden_demand(records, "Teal").demand_per_day * records.days == pytest.approx(12)


def test_wards_of_one_specialty_don_t_count_each_others_patients(read: Callable[..., Records]) -> None:
    """Patients of medicine on either medical ward are at home there; only those on the surgical ward lie away."""
    records = read(
        *one_by_one("Kestrel", "medicine", 20),
        *one_by_one("Swift", "medicine", 15),
        *one_by_one("Curlew", "surgery", 20),
        *one_by_one("Curlew", "medicine", 4, name="away"),
        headings=HEADINGS,
    )
    own = own_patients(records, "Kestrel")

    assert own.twins == ("Swift",)
    assert set(own.elsewhere["ward"]) == {"Curlew"}


def test_a_ward_of_two_specialties_keeps_both(read: Callable[..., Records]) -> None:
    """Gynaecology lies mostly on Dunlin, so its patients belong there though urology has more; so do unknown ones."""
    records = read(
        *one_by_one("Dunlin", "urology", 12, name="u"),
        *one_by_one("Dunlin", "gynaecology", 8, name="g"),
        *one_by_one("Dunlin", "", 3, name="unknown"),
        *one_by_one("Dunlin", "surgery", 4, name="guest"),
        *one_by_one("Curlew", "surgery", 20, name="s"),
        headings=HEADINGS,
    )
    own = own_patients(records, "Dunlin")

    assert own.specialties == ("gynaecology", "urology")
    assert (len(own.here), len(own.guests)) == (23, 4)


def test_a_mixed_ward_does_not_swell_another_wards_demand(read: Callable[..., Records]) -> None:
    """Skin patients lie mostly on a ward of many specialties; the small skin ward does not claim them as its own."""
    mixed = [row for n in range(8) for row in one_by_one("Wren", f"other {n}", 9, name=f"other{n}")]
    home = [row for n in range(8) for row in one_by_one("Curlew", f"other {n}", 20, name=f"at_home{n}")]
    records = read(*mixed, *home, *one_by_one("Wren", "skin", 20), *one_by_one("Swift", "skin", 6), headings=HEADINGS)

    assert own_patients(records, "Wren").specialties == ()
    assert len(own_patients(records, "Swift").elsewhere) == 0
    assert "many specialties" in hidden_demand(records, "Wren").methods[BY_SPECIALTY].reason


def test_patients_placed_elsewhere_at_once_are_not_counted_twice() -> None:
    """Where those who find the ward full lie elsewhere instead and nobody waits, free hours would count them again."""
    records, beds, _ = own_ward(5, elsewhere="Plover")
    found = hidden_demand(records, "Merlin", capacity=beds)

    # The ward starts empty, so its first weeks are left out.
    settled, stays = records.settled, records.stays
    came = ((stays["specialty"] == "heart") & (stays["start"] >= settled.window[0])).sum()
    assert found.demand_per_day * settled.days == pytest.approx(came)
    assert "count some of them twice" in found.methods[BY_OPEN_TIME].reason


def test_without_specialties_everybody_on_the_ward_is_its_own(read: Callable[..., Records]) -> None:
    """Nothing is taken out and nobody brought home; the method that needs specialties says so."""
    records = read(*(row.rpartition(",")[0] for row in one_by_one("Teal", "", 20)))
    found = hidden_demand(records, "Teal")

    assert found.demand_per_day * records.days == pytest.approx(20)
    assert "no column for the patients' specialty" in found.methods[BY_SPECIALTY].reason


def test_excluded_days_count_for_nothing(larkmere: Records, demo_data: Path) -> None:
    """With a year left out, the figures are those of the other two."""
    left_out = (dt.date(2023, 4, 1), dt.date(2024, 3, 31))
    records = read_records(demo_data / "stays.csv", choices=IntakeChoices(excluded=(left_out,)))
    load = pd.read_csv(demo_data / "truth_daily_load.csv").query("ward == 'Teal'")
    kept = load[(load["date"] < "2023-04-01") | (load["date"] > "2024-03-31")].mean(numeric_only=True)
    found = hidden_demand(records, "Teal")

    assert found.beds_wanted == pytest.approx(kept["on_own_ward"] + kept["as_outliers"], abs=0.05)
    assert found.beds_wanted != pytest.approx(hidden_demand(larkmere, "Teal").beds_wanted, abs=0.05)


# -- free and full hours ---------------------------------------------------------------------------------------------

CLOCK = np.array([0.3] * 8 + [1.8] * 8 + [0.9] * 8)
WINTER = np.array([1.4, 1.3, 1.1, 1.0, 0.9, 0.7, 0.6, 0.7, 0.9, 1.0, 1.1, 1.3])
WARD_FROM = pd.Timestamp("2022-01-01")


def own_ward(
    seed: int,
    *,
    per_day: float = 2.0,
    beds: int = 8,
    months: np.ndarray | None = None,
    waits: bool = False,
    elsewhere: str = "",
) -> tuple[Records, Capacity, float]:
    """Play a ward bed by bed: patients who find it full leave, wait, or lie elsewhere at once.

    Return its records (of heart patients, and of lung patients on the other ward), its beds, and who came a day.
    """
    rng, days = np.random.default_rng(seed), 1_096
    season = np.ones(12) if months is None else months
    most = CLOCK.max() * season.max()
    came = np.sort(rng.uniform(0, days, rng.poisson(per_day * most * days)))
    month = (WARD_FROM + pd.to_timedelta(came, unit="D")).month.to_numpy() - 1
    came = came[rng.random(came.size) * most < CLOCK[(came * 24 % 24).astype(int)] * season[month]]
    free_at, stays = np.zeros(beds), []
    for moment in came:
        bed = int(free_at.argmin())
        if free_at[bed] > moment and not waits:
            if elsewhere:
                stays.append((moment, moment + rng.exponential(4.0), elsewhere))
            continue
        begins = max(moment, free_at[bed] + 0.02)  # half an hour to make the bed
        free_at[bed] = begins + rng.exponential(4.0)
        stays.append((begins, free_at[bed], "Merlin"))
    times = np.array([stay[:2] for stay in stays])
    text = np.datetime_as_string(WARD_FROM.to_datetime64() + (times * 86_400e6).astype("timedelta64[us]"), "m")
    rows = [
        f"p{n},{stays[n][2]},{start},{end if stays[n][1] < days else ''},heart"
        for n, (start, end) in enumerate(text)
        if stays[n][0] < days
    ]
    if elsewhere:
        rows += [f"q{n},{elsewhere},2022-01-01 00:00,2022-06-{n % 30 + 1:02d} 12:00,lung" for n in range(2_000)]
    records = read_records("\n".join(["patient_key,ward,start,end,specialty", *rows]).encode())
    return records, read_capacity(f"ward,from,staffed_beds\nMerlin,2022-01-01,{beds}\n".encode()), came.size / days


def two_methods(records: Records, beds: Capacity) -> tuple[DemandMethod, DemandMethod]:
    """Return what open time and the formula say."""
    methods = hidden_demand(records, "Merlin", capacity=beds).methods
    return methods[BY_OPEN_TIME], methods[BY_FORMULA]


def test_open_time_and_the_formula_find_who_was_sent_away() -> None:
    """Eight beds asked for by 2 a day for 4 days send 1 in 4 away; both methods find the 2, as often as they promise."""
    played = [own_ward(seed) for seed in range(12)]
    answers = [two_methods(records, beds) for records, beds, _ in played]

    for records, _, came in played:
        assert len(records.stays) / records.days < 0.85 * came
    for method in (0, 1):
        assert all(answer[method].used for answer in answers)
        assert np.mean([answer[method].patients_per_day for answer in answers]) == pytest.approx(2.0, rel=0.02)
        # At 90 % each, fewer than 8 of 12 would come by chance once in 200 times.
        assert sum(answer[method].interval[0] < 2.0 < answer[method].interval[1] for answer in answers) >= 8


def test_winter_does_not_mislead_open_time() -> None:
    """Beds are free in summer, when few come: month by month the year's mean is found all the same."""
    played = [own_ward(seed, months=WINTER) for seed in range(8)]
    found = [two_methods(records, beds)[0].patients_per_day / came for records, beds, came in played]

    assert np.mean(found) == pytest.approx(1.0, abs=0.02)


def test_patients_who_wait_for_a_bed_are_found_out() -> None:
    """Where patients wait, freed beds are taken at once: both methods are refused, though no record says who waited."""
    for seed in range(4):
        records, beds, _ = own_ward(seed, per_day=1.8, waits=True)

        for method in two_methods(records, beds):
            assert not method.used
            assert "times as fast as usual" in method.reason


def test_a_ward_that_is_nearly_always_full_can_t_tell() -> None:
    """Two beds for 4 patients a day are never free at noon for long enough: nothing is made up."""
    records, beds, _ = own_ward(1, per_day=8.0, beds=2)
    by_open_time, by_formula = two_methods(records, beds)

    assert not by_open_time.used
    assert "too little" in by_open_time.reason
    assert not by_formula.used


def test_dates_without_times_leave_the_formula() -> None:
    """Nights alone don't say when a bed was free, but they say how many beds were in use."""
    records, beds, came = own_ward(3)
    stays = records.stays
    rows = [
        f"p{n},Merlin,{start:%Y-%m-%d},{'' if pd.isna(end) else f'{end:%Y-%m-%d}'}"
        for n, (start, end) in enumerate(zip(stays["start"], stays["end"], strict=True))
    ]
    by_open_time, by_formula = two_methods(
        read_records("\n".join(["patient_key,ward,start,end", *rows]).encode()), beds
    )

    assert "dates without times" in by_open_time.reason
    assert by_formula.interval[0] < came < by_formula.interval[1]


def test_beds_in_use_give_the_load_of_the_worked_example() -> None:
    """10 beds, 7.026711 of them in use: 8.00 wanted (read backwards from a worked example of Erlang's B at 8 and 10)."""
    assert load_behind(7.026711, 10)[0] == pytest.approx(8.0, abs=1e-5)


@pytest.mark.parametrize("true_load", [0.3, 5.0, 12.0, 40.0])
def test_the_formula_is_solved_both_ways(true_load: float) -> None:
    """Whatever load is put in comes out again, with the slope there, also where beds change half-way."""
    beds = np.array([12, 12, 16, 20])

    def in_use(load: float) -> float:
        return float((load * (1 - erlang_b(load, beds))).mean())

    load, slope = load_behind(in_use(true_load), beds)

    assert load == pytest.approx(true_load, rel=1e-6)
    assert slope == pytest.approx((in_use(true_load + 1e-3) - in_use(true_load - 1e-3)) / 2e-3, rel=1e-3)


@pytest.mark.parametrize("in_use", [-1.0, 9.99, 12.0])
def test_beds_all_in_use_can_t_tell(in_use: float) -> None:
    """With every bed in use all the time any demand is possible."""
    with pytest.raises(ImpossibleFigure, match=f"{in_use:.1f} beds in use of 10.0"):
        load_behind(in_use, 10)


# -- what is done with it --------------------------------------------------------------------------------------------


def test_an_estimate_can_be_raised_to_demand(larkmere: Records, beds: Capacity, demo_data: Path) -> None:
    """The estimate crosses from admissions to those who wanted the ward in the latest year, and says how."""
    found = hidden_demand(larkmere, "Teal", capacity=beds)
    plain, raised = estimate_demand(larkmere, "Teal"), estimate_demand(larkmere, "Teal", hidden=found)
    low, high = raised.arrivals_interval
    wants = pd.read_csv(demo_data / "truth_patients.csv", parse_dates=["wanted_at"])
    wanted = wants[(wants["wanted_ward"] == "Teal") & wants["second_choice"].isna()]

    assert raised.arrivals_per_day == pytest.approx((wanted["wanted_at"] >= "2024-04-01").sum() / 365, rel=0.03)
    assert raised.demand.length_of_stay.mean_days == pytest.approx(found.mean_stay_days)
    assert raised.admissions_per_year == plain.admissions_per_year
    assert found.method in raised.method
    assert plain.arrivals_per_day < low < raised.arrivals_per_day < high


def _free(beds: int, load: float, stated: int) -> np.ndarray:
    """Return the shares of time with 0, 1, 2, ... of the stated beds free in a ward whose patients leave when it is full.

    Source: Erlang 1917, the Poisson shares cut off at the beds there are.
    """
    taken = stats.poisson.pmf(np.arange(beds + 1), load)
    return np.concatenate((np.zeros(stated - beds), taken[::-1] / taken.sum()))


@pytest.mark.parametrize("too_many", [0, 1, 2])
def test_a_wall_below_the_stated_beds_is_found(too_many: int) -> None:
    """Nineteen beds that twenty or more are stated for; none where the beds are stated right."""
    free = _free(19, 20.0, 19 + too_many)
    in_use = float(free @ (19 + too_many - np.arange(free.size)))

    assert beds_below_wall(free, 19 + too_many, in_use, 250.0) == too_many


def test_free_beds_alone_are_no_wall() -> None:
    """A ward half empty, one that falls smoothly towards its last beds, and one seen for two stays have none."""
    smooth = stats.norm.pdf(20 - np.arange(21), 15.0, 2.0)  # less spread than chance has: patients come by list

    assert beds_below_wall(_free(40, 8.0, 40)[20:], 20, 8.0, 250.0) == 0
    assert beds_below_wall(smooth / smooth.sum(), 20, 15.0, 250.0) == 0
    assert beds_below_wall(_free(19, 20.0, 20), 20, 15.9, 2.0) == 0


@pytest.mark.parametrize("too_many", [0, 1, 2])
@pytest.mark.parametrize("dates_only", [False, True])
def test_beds_stated_too_many_never_hide_demand(too_many: int, dates_only: bool) -> None:
    """Where one or two beds too many are stated the methods that need them are refused, and the range holds the truth."""
    ward = MadeWard(5.0, 4.0, 1.0, growth=0.0, beds=19)
    truth = ward.rates()[RUN_IN_DAYS:].mean()
    for seed in range(3):
        records = made_records(ward, seed, dates_only=dates_only)
        found = hidden_demand(records, "Heron", capacity=with_beds(19 + too_many))
        told = [
            note
            for note in found.notes
            if note.startswith(f"Hardly ever were more than 19 patients on Heron, though {19 + too_many} beds")
        ]
        assert bool(told) == found.methods[BY_FORMULA].reason.startswith("Hardly ever") == bool(too_many)
        assert found.methods[BY_FORMULA].used == (not too_many)
        assert found.spread[0] < truth < found.spread[1]
        estimate = estimate_demand(records, "Heron", hidden=found)
        assert estimate.uncertainty.beds_wanted[0] < truth * 4.0 < estimate.uncertainty.beds_wanted[1]


def test_beds_stated_right_are_not_doubted() -> None:
    """Wards that lose patients, that are queued for, or both, small and large, long and short: no bed is called unused."""
    rng = np.random.default_rng(3)
    for seed in range(24):
        mean_days, per_day = float(rng.choice([1.5, 4.0, 8.0])), float(rng.uniform(0.5, 4.0))
        beds = round(mean_days * per_day + rng.uniform(0.2, 2.0) * math.sqrt(mean_days * per_day)) + 1
        ward = MadeWard(per_day, mean_days, 1.0, days=400, beds=beds, waits=seed % 3 / 2, handover_days=0.05)
        found = hidden_demand(made_records(ward, seed), "Heron", capacity=with_beds(beds, 400))
        assert not any("are stated as staffed" in note for note in found.notes)


@pytest.mark.parametrize("waits", [0.6, 0.9])
def test_where_some_wait_and_others_leave_the_range_reaches_up(waits: float) -> None:
    """Some who find the ward full wait, the others are lost: recorded admissions are too few, the range holds the truth."""
    ward = MadeWard(5.0, 4.0, 1.0, growth=0.0, beds=20, waits=waits)
    truth = ward.rates()[RUN_IN_DAYS:].mean()
    found = [hidden_demand(made_records(ward, seed), "Heron", capacity=with_beds(20)) for seed in range(5)]

    for one in found:
        assert one.method == "recorded admissions alone"
        assert one.interval[1] < truth
        assert any("The range reaches up" in note for note in one.notes)
    # 95 chances in 100 each by its upper bound: fewer than 4 of 5 would come once in 44 times.
    assert sum(one.spread[0] < truth < one.spread[1] for one in found) >= 4


def test_a_specialty_does_not_show_who_found_no_bed_at_all(years: Years) -> None:
    """Where the ward's specialty is followed, those whom every ward turned away are said to be missing, and how many."""
    for ward, hosts in (("Teal", ("Plover", "Kestrel")), ("Plover", ("Curlew", "Kestrel"))):
        found = hidden_demand(years.records, ward, capacity=years.beds)
        assert found.method == "patients of its specialty on every ward"
        (note,) = (note for note in found.notes if "on none of these wards" in note)
        # Counted here the slow way, by looking every six hours at who is in.
        looks = pd.date_range(years.records.window[0], years.records.window[1], freq="6h", inclusive="left")
        taken = np.ones(looks.size, dtype=bool)
        for name in (ward, *hosts):
            stays = years.records.of_ward(name)
            start, end = np.sort(stays["start"].to_numpy()), np.sort(stays["end"].dropna().to_numpy())
            present = np.searchsorted(start, looks.to_numpy(), "right") - np.searchsorted(
                end, looks.to_numpy(), "right"
            )
            beds = years.beds.open_beds_by_day(name, looks.normalize()).to_numpy()
            taken &= present >= beds
        said = float(re.search(r"full at once ([\d.]+)", note)[1]) / 100
        assert said == pytest.approx(taken.mean(), abs=0.015)
