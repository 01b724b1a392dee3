"""A plan: sliders change the demand the records show, by exactly what they say."""

from __future__ import annotations

import datetime as dt
import itertools
import json
from typing import TYPE_CHECKING

import pytest

from bedplan import wording
from bedplan.data import (
    IntakeChoices,
    estimate_demand,
    hidden_demand,
    read_capacity,
    read_ready_dates,
    read_records,
)
from bedplan.errors import ImpossibleFigure, UnreadableRecords
from bedplan.models import Demand, LengthOfStay
from bedplan.plan import (
    NO_COLUMN,
    Answers,
    Baseline,
    Changes,
    FileAnswers,
    SavedPlan,
    as_json,
    changed_demand,
    changed_stay,
    from_estimate,
    from_json,
    from_totals,
    peaked,
    planned_ward,
)

if TYPE_CHECKING:
    from pathlib import Path

WINTER = (1.3, 1.18, 1.06, 0.97, 0.9, 0.84, 0.8, 0.8, 0.88, 1.0, 1.1, 1.17)


def baseline() -> Baseline:
    """Return a ward with a winter."""
    return Baseline("Kestrel", Demand(3.4, LengthOfStay(7.0, 0.95), month_factors=WINTER), 1200.0, 28)


def test_no_change_is_the_records() -> None:
    """With every slider where it starts, the demand is the one the records show."""
    assert changed_demand(baseline(), Changes()) == baseline().demand


def test_changes_multiply_the_load() -> None:
    """5 % more patients, 10 % shorter stays and 2 % growth change the load by their product."""
    changed = changed_demand(baseline(), Changes(demand=0.05, stay=-0.10, growth=0.02))

    assert changed.offered_load == pytest.approx(3.4 * 7.0 * 1.05 * 0.90 * 1.02)


def test_peak_stretches_the_season_about_its_mean() -> None:
    """Twice the peak is twice as far from 1 in every month; no peak is a flat year; the mean stays 1."""
    flat, double = peaked(WINTER, 0.0), peaked(WINTER, 2.0)

    assert flat == pytest.approx((1.0,) * 12)
    assert [factor - 1 for factor in double] == pytest.approx([2 * (factor - 1) for factor in WINTER])
    assert sum(peaked(WINTER, 9.0)) == pytest.approx(12.0)
    assert min(peaked(WINTER, 9.0)) >= 0


def test_spread_changes_the_variation_only() -> None:
    """Half as much again of spread keeps the mean."""
    stay = changed_stay(LengthOfStay(7.0, 0.8, "gamma"), Changes(spread=0.5))

    assert (stay.mean_days, stay.variation, stay.shape) == (7.0, pytest.approx(1.2), "gamma")


def test_longer_stays_keep_their_shape() -> None:
    """Two streams scaled by a tenth keep their spread and stretch every quantile by a tenth."""
    mix = LengthOfStay.two_streams(0.12, LengthOfStay(7.8, 0.75), LengthOfStay(37, 0.6))
    longer = changed_stay(mix, Changes(stay=0.1))

    assert longer.variation == pytest.approx(mix.variation)
    assert longer.quantile(0.9) == pytest.approx(1.1 * mix.quantile(0.9))


def test_totals_make_a_ward() -> None:
    """1,460 admissions of 5 days want 20 beds on average, and the notes say no season is known."""
    ward = planned_ward(from_totals("Ward A", 1460, LengthOfStay(5.0), 24), 24, "leaves", Changes())

    assert ward.demand.offered_load == pytest.approx(20.0)
    assert ward.average_formula_beds == 24  # 1460 × 5 / 365 / 0.85 = 23.5
    assert any("no season" in note for note in ward.notes)


def test_impossible_changes_are_a_sentence() -> None:
    """A stay changed to nothing is refused in words that quote the figure."""
    with pytest.raises(ImpossibleFigure, match="mean stay of 0 days"):
        changed_demand(baseline(), Changes(stay=-1.0))


def test_the_formula_follows_the_planned_demand() -> None:
    """A tenth more patients and 2 % growth give the average formula a tenth and 2 % more admissions."""
    ward = planned_ward(baseline(), 28, "waits", Changes(demand=0.1, growth=0.02))

    assert ward.admissions_per_year == pytest.approx(1200.0 * 1.1 * 1.02)


def test_a_saved_plan_comes_back_as_it_was() -> None:
    """Settings, typed totals and answers survive the file, names of any language included."""
    plan = SavedPlan(
        records="ab12",
        settings={"Häher": {"demand": 5, "beds": 28, "full": "waits"}},
        typed={
            "Ward A": {
                "admissions_per_year": 1460.0,
                "arrivals_per_day": 4.0,
                "mean_days": 5.0,
                "variation": 1.0,
                "beds": 24.0,
                "rate_variation": 0.04,
                "month_factors": [1.0] * 12,
                "origin": "typed",
                "beds_known": False,
            }
        },
        answers=Answers(
            {"ward": "Station"},
            "day first",
            IntakeChoices(
                ward_names={"Ward 7": "Häher"},
                places={"Aufwachraum": "procedure place"},
                window=(dt.date(2023, 4, 1), dt.date(2025, 3, 31)),
                excluded=((dt.date(2023, 5, 1), dt.date(2023, 5, 9)), (dt.date(2024, 2, 1), dt.date(2024, 2, 2))),
                excluded_because=("pandemic", ""),
                time_zone="Europe/London",
                bed_on_leave="held",
            ),
        ),
        limit={"limit": 3, "within": "year", "measure": "wait4"},
        files={
            "ab" * 32: FileAnswers({"ward": "Häuser", "reason": NO_COLUMN}, "month first", 3, ("Code 7", "überbelegt")),
            "cd" * 32: FileAnswers(no_bed_reasons=()),
        },
    )

    assert from_json(as_json(plan)) == plan


def test_an_earlier_plan_is_read() -> None:
    """A plan file that knows columns, date order and ward names only is read; whatever else was not said."""
    answers = {"columns": {"ward": "Station"}, "date_order": None, "ward_names": {"Ward 7": "Kestrel"}}
    plan = from_json(json.dumps({"plan": 1, "records": "", "settings": {}, "typed": {}, "answers": answers}))

    assert plan.answers == Answers({"ward": "Station"}, None, IntakeChoices(ward_names={"Ward 7": "Kestrel"}))


@pytest.mark.parametrize(
    ("answers", "told"),
    [
        ({"places": {"Heron": "castle"}}, "castle"),
        ({"time_zone": "Nowhere/Town"}, "Nowhere/Town"),
        ({"window": ["2024-02-01", "2024-01-01"]}, "ends before it starts"),
        ({"bed_on_leave": "lost"}, "lost"),
    ],
)
def test_impossible_answers_in_a_plan_are_a_sentence(answers: dict, told: str) -> None:
    """An answer nobody knows is quoted; the plan is not called something else."""
    with pytest.raises(ImpossibleFigure, match=told):
        from_json(json.dumps({"plan": 1, "records": "", "settings": {}, "typed": {}, "answers": answers}))


@pytest.mark.parametrize("answers", [{"window": "always"}, {"window": ["2024-01-01"]}, {"excluded": [[1, 2]]}])
def test_damaged_answers_are_not_a_plan(answers: dict) -> None:
    """Days that are none make the file no plan."""
    with pytest.raises(UnreadableRecords, match="not a plan saved by bedplan"):
        from_json(json.dumps({"plan": 1, "records": "", "settings": {}, "typed": {}, "answers": answers}))


def test_reasons_in_an_earlier_plan_are_read() -> None:
    """A plan of this format that kept reasons only says the same of the same lists."""
    reasons = {"ab" * 32: ["Code 7"], "cd" * 32: []}
    held = {"plan": 1, "records": "", "settings": {}, "typed": {}, "answers": {}, "limit": {}, "reasons": reasons}

    assert from_json(json.dumps(held)).files == {
        "ab" * 32: FileAnswers(no_bed_reasons=("Code 7",)),
        "cd" * 32: FileAnswers(no_bed_reasons=()),
    }


@pytest.mark.parametrize(
    ("said", "told"),
    [
        ({"date_order": "year first"}, "year first"),
        ({"months_a_row": 0}, "0 months a row is not possible"),
        ({"months_a_row": 13}, "13 months a row is not possible"),
    ],
)
def test_impossible_answers_about_other_files_are_a_sentence(said: dict, told: str) -> None:
    """An answer about a file beside the stays that nobody can have given is quoted."""
    held = {"plan": 1, "records": "", "settings": {}, "typed": {}, "answers": {}, "files": {"ab": said}}
    with pytest.raises(ImpossibleFigure, match=told):
        from_json(json.dumps(held))


@pytest.mark.parametrize(
    "said", [3, {"columns": 4}, {"columns": ["ward"]}, {"months_a_row": "3"}, {"no_bed_reasons": "C"}]
)
def test_damaged_answers_about_other_files_are_not_a_plan(said: object) -> None:
    """Answers about a file that are none make the file no plan."""
    held = {"plan": 1, "records": "", "settings": {}, "typed": {}, "answers": {}, "files": {"ab": said}}
    with pytest.raises(UnreadableRecords, match="not a plan saved by bedplan"):
        from_json(json.dumps(held))


def test_every_answer_about_a_file_is_named_in_a_document() -> None:
    """A row an answer given, beside the file's name; a column the file doesn't have and reasons of which none counts are said."""
    said = FileAnswers({"ward": "Station", "to": NO_COLUMN}, "day first", 3, ())

    assert FileAnswers().rows("Staffed beds") == ()
    assert dict(said.rows("Staffed beds")) == {
        "Staffed beds: columns": "ward = Station; to = no column",
        "Staffed beds: dates": "day first",
        "Staffed beds: months a row": "3",
        "Staffed beds: reasons taken for lack of a bed": "none",
    }


@pytest.mark.parametrize("reasons", [["Code 7"], {"ab": "Code 7"}, {"ab": 7}])
def test_damaged_reasons_are_not_a_plan(reasons: object) -> None:
    """Reasons that are no lists by fingerprint make the file no plan; a text is not taken for its letters."""
    held = {"plan": 1, "records": "", "settings": {}, "typed": {}, "answers": {}, "reasons": reasons}
    with pytest.raises(UnreadableRecords, match="not a plan saved by bedplan"):
        from_json(json.dumps(held))


def test_ready_dates_are_named_and_never_kept() -> None:
    """A plan names the file of ready dates and holds no key of it; opened, it asks for the file unless it is in use."""
    ready = read_ready_dates(b"patient_key,date\nSECRET-1,2024-02-01 10:00\n", name="ready.csv")
    used = Answers(choices=IntakeChoices(ready_dates=ready))
    text = as_json(SavedPlan("", {}, {}, used))
    opened = from_json(text).answers

    assert "SECRET" not in text
    assert "ready dates from ready.csv" in opened.ready_sentence
    assert opened.with_ready_dates(used).ready_sentence == ""
    assert opened.with_ready_dates(used).choices.ready_dates is ready
    assert Answers().ready_sentence == ""


def test_every_answer_is_named_in_a_document() -> None:
    """A row an answer given, none for what was not said."""
    left_out = (dt.date(2024, 2, 1), dt.date(2024, 2, 9))
    choices = IntakeChoices(places={"Recovery": "bed ward"}, excluded=(left_out,), excluded_because=("flood",))

    assert Answers().rows() == ()
    assert [value for _, value in Answers(date_order="day first", choices=choices).rows()] == [
        "day first",
        "Recovery = bed ward",
        "2024-02-01 to 2024-02-09 (flood)",
    ]


@pytest.mark.parametrize(
    "text",
    [
        "",
        "[]",
        "{}",
        '{"plan": 1}',
        '{"plan": 1, "records": "x", "settings": 3, "typed": {}, "answers": {}}',
        b"\xff\xfe",
    ],
)
def test_other_files_are_not_plans(text: str | bytes) -> None:
    """Any other file is refused in a sentence."""
    with pytest.raises(UnreadableRecords, match="not a plan saved by bedplan"):
        from_json(text)


def test_a_later_format_is_named() -> None:
    """A plan of a later version says which format it has."""
    with pytest.raises(UnreadableRecords, match="format 99"):
        from_json('{"plan": 99, "records": "", "settings": {}, "typed": {}, "answers": {}}')


def test_more_beds_than_a_ward_has_is_a_sentence() -> None:
    """A hospital's total in a return is not taken for a ward."""
    with pytest.raises(ImpossibleFigure, match="2,400 staffed beds"):
        from_totals("Hospital", 90_000, LengthOfStay(6.0), 2400)


@pytest.mark.parametrize(("ward", "warned"), [("Plover", True), ("Teal", False)])
def test_a_ward_that_hosts_others_is_warned_of(demo_data: Path, ward: str, warned: bool) -> None:
    """Where planning on its own patients takes beds away the first note says so; where it adds beds none does."""
    records = read_records(demo_data / "stays.csv")
    found = hidden_demand(records, ward, capacity=read_capacity(demo_data / "capacity.csv"))
    start = from_estimate(estimate_demand(records, ward, hidden=found), 30, found)

    assert found.takes_away is warned
    assert (start.notes[0] == wording.GUESTS_OUT) is warned


def test_growth_starts_from_bed_days_not_heads(demo_data: Path) -> None:
    """Where later days of a stay grow faster than admissions, the slider's trend is that of beds: bed-days of each year."""
    records = read_records(demo_data / "stays.csv")
    start = from_estimate(estimate_demand(records, "Heron"), 30)
    stays = records.of_ward("Heron")
    first, last = records.window
    years = [first + (last - first) * part for part in (0.0, 1 / 3, 2 / 3, 1.0)]
    ends = stays["end"].fillna(last)
    used = [
        (ends.clip(upper=end) - stays["start"].clip(lower=begin)).dt.total_seconds().clip(lower=0).sum()
        for begin, end in itertools.pairwise(years)
    ]

    assert start.growth_per_year == pytest.approx((used[2] / used[0]) ** 0.5 - 1.0, abs=0.02)
    assert start.growth_per_year > start.admissions_growth_per_year + 0.01
