"""The command line writes the same documents as the page, and answers mistakes in a sentence."""

from __future__ import annotations

import datetime as dt
import hashlib
from typing import TYPE_CHECKING

import openpyxl
import pytest

from bedplan.__main__ import main
from bedplan.data import IntakeChoices, estimate_demand, read_capacity, read_ready_dates, read_records
from bedplan.decision import TurnAwayLimit, decide
from bedplan.plan import Answers, Changes, FileAnswers, SavedPlan, as_json, from_estimate, planned_ward

if TYPE_CHECKING:
    from pathlib import Path


def test_writes_both_documents(demo_data: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """One ward's documents hold the beds that the same records, limit and changes give in the program."""
    stays, beds = demo_data / "stays.csv", demo_data / "capacity.csv"
    words = [
        str(stays),
        "--ward",
        "Merlin",
        "--capacity",
        str(beds),
        "--leaves",
        "Merlin",
        "--demand",
        "0.1",
        "--out",
        str(tmp_path),
    ]
    records, capacity = read_records(stays), read_capacity(beds)
    baseline = from_estimate(estimate_demand(records, "Merlin", capacity=capacity), capacity.beds_today("Merlin"))
    ward = planned_ward(baseline, baseline.beds, "leaves", Changes(demand=0.1))
    expected = decide(ward.curve(), TurnAwayLimit(0.05)).beds

    assert main(words) == 0
    assert f"approve {expected} staffed beds (today 8)" in capsys.readouterr().out
    book = openpyxl.load_workbook(next(tmp_path.glob("*.xlsx")))
    assert book["Wards"]["D2"].value == expected
    document = next(tmp_path.glob("*.html")).read_text(encoding="utf-8")
    assert hashlib.sha256(beds.read_bytes()).hexdigest() in document


def test_a_plans_answers_are_taken(stays_csv: bytes, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Headings, places and days left out come from a saved plan, and stand in the document."""
    stays, plan = tmp_path / "stays.csv", tmp_path / "plan.json"
    stays.write_bytes(stays_csv.replace(b"Ward,Start,End", b"Zimmer,Zugang,Abgang"))
    answers = Answers(
        {"ward": "Zimmer", "start": "Zugang", "end": "Abgang"},
        choices=IntakeChoices(places={"West": "virtual"}, excluded=((dt.date(2024, 2, 1), dt.date(2024, 2, 20)),)),
    )
    plan.write_text(as_json(SavedPlan("", {}, {}, answers)), encoding="utf-8")
    assert main([str(stays), "--out", str(tmp_path)]) == 2
    capsys.readouterr()

    assert main([str(stays), "--answers", str(plan), "--beds", "9", "--out", str(tmp_path)]) == 0
    said = capsys.readouterr().out
    assert "East" in said
    assert "West" not in said
    document = next(tmp_path.glob("*.html")).read_text(encoding="utf-8")
    assert "01 February 2024 to 20 February 2024 is left out" in document
    assert "2024-02-01 to 2024-02-20" in document
    assert "West = virtual" in document


def test_staffed_beds_follow_the_wards_names(
    stays_csv: bytes, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """A ward in other capitals has its beds; one without stays is named and left out; dates are read as said."""
    stays, beds = tmp_path / "stays.csv", tmp_path / "beds.csv"
    stays.write_bytes(stays_csv)
    beds.write_text("ward,from,staffed beds\nEAST,01/02/2024,9\nNorth,01/02/2024,30\n")
    words = [str(stays), "--ward", "East", "--capacity", str(beds), "--out", str(tmp_path)]
    assert main(words) == 2
    assert "beds.csv can be read day first or month first" in capsys.readouterr().err

    assert main([*words, "--dates", "day first"]) == 0
    said = capsys.readouterr()
    assert "(today 9)" in said.out
    assert "no stays on North" in said.err


def test_a_plan_says_how_other_files_are_read(
    stays_csv: bytes, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """What a plan says of exactly this file of staffed beds holds, and stands in the document; of a changed file it doesn't."""
    stays, beds, plan = (tmp_path / name for name in ("stays.csv", "beds.csv", "plan.json"))
    stays.write_bytes(stays_csv)
    beds.write_text("K1,K2,K3 today\nEast,01/02/2024,9\nEast,01/03/2024,11\n")
    said = FileAnswers({"ward": "K1", "from": "K2", "staffed": "K3 today"}, "day first")
    files = {hashlib.sha256(beds.read_bytes()).hexdigest(): said}
    plan.write_text(as_json(SavedPlan("", {}, {}, files=files)), encoding="utf-8")
    words = [str(stays), "--ward", "East", "--capacity", str(beds), "--out", str(tmp_path)]
    assert main(words) == 2
    assert "no line of headings that is understood" in capsys.readouterr().err

    assert main([*words, "--answers", str(plan)]) == 0
    assert "(today 11)" in capsys.readouterr().out
    document = next(tmp_path.glob("*.html")).read_text(encoding="utf-8")
    assert "staffed = K3 today" in document
    assert "Staffed beds: dates" in document
    beds.write_text(beds.read_text().replace("11", "12"))
    assert main([*words, "--answers", str(plan)]) == 2


def test_the_order_of_dates_can_be_said(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A file whose dates read two ways is taken once the command line says which it is."""
    stays = tmp_path / "stays.csv"
    rows = [f"East,{1 + day % 9:02d}/0{1 + day % 7}/2024,{3 + day % 9:02d}/0{1 + day % 7}/2024" for day in range(40)]
    stays.write_text("\n".join(["Ward,Start,End", *rows]))
    assert main([str(stays), "--out", str(tmp_path)]) == 2
    assert "day first" in capsys.readouterr().err

    assert main([str(stays), "--dates", "day first", "--out", str(tmp_path)]) == 0


def test_ready_dates_are_joined(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A file of ready dates is read and named in the document; a plan made with one asks for it where it is not given."""
    first = dt.datetime(2024, 1, 1, 9)  # noqa: DTZ001  records hold local clock times
    stays, ready, plan = (tmp_path / name for name in ("stays.csv", "ready.csv", "plan.json"))
    moments = [first + dt.timedelta(hours=17 * count) for count in range(300)]
    rows = [f"p{n},East,{at:%Y-%m-%d %H:%M},{at + dt.timedelta(days=4):%Y-%m-%d %H:%M}" for n, at in enumerate(moments)]
    stays.write_text("\n".join(["patient_key,ward,start,end", *rows]))
    days = [f"p{n},{at + dt.timedelta(days=3):%Y-%m-%d %H:%M}" for n, at in enumerate(moments)]
    ready.write_text("\n".join(["patient_key,date", *days]))
    answers = Answers(choices=IntakeChoices(ready_dates=read_ready_dates(ready)))
    plan.write_text(as_json(SavedPlan("", {}, {}, answers)), encoding="utf-8")
    words = [str(stays), "--beds", "9", "--answers", str(plan), "--out", str(tmp_path)]

    assert main(words) == 0
    assert "ready dates from ready.csv" in capsys.readouterr().err
    assert main([*words, "--ready", str(ready)]) == 0
    assert capsys.readouterr().err == ""
    pages = [path.read_text(encoding="utf-8") for path in tmp_path.glob("*.html")]
    mark = hashlib.sha256(ready.read_bytes()).hexdigest()
    assert any(mark in page and "300 ward stays have a ready date from it" in page for page in pages)


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (["missing.csv"], "missing.csv"),
        (["{demo}/stays.csv", "--ward", "Heronn"], "Heronn"),
        (["{demo}/stays.csv", "--ward", "Merlin", "--limit", "5"], "above 0 and below 1"),
        (["{demo}/census.csv"], "census.csv"),
        (["{demo}/stays.csv", "--answers", "nowhere.json"], "nowhere.json"),
        (["{demo}/stays.csv", "--answers", "{demo}/census.csv"], "not a plan"),
    ],
)
def test_mistakes_are_sentences(
    words: list[str], said: str, demo_data: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """A wrong path, ward, limit or file ends with a sentence that names it, and writes nothing."""
    out = tmp_path / "out"

    assert main([*(word.format(demo=demo_data) for word in words), "--out", str(out)]) == 2
    assert said in capsys.readouterr().err
    assert not list(out.glob("*")) if out.exists() else True
