"""The command line writes the same documents as the page, and answers mistakes in a sentence."""

from __future__ import annotations

import hashlib
from typing import TYPE_CHECKING

import openpyxl
import pytest

from bedplan.__main__ import main
from bedplan.data import estimate_demand, read_capacity, read_records
from bedplan.decision import TurnAwayLimit, decide
from bedplan.plan import Changes, from_estimate, planned_ward

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


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (["missing.csv"], "missing.csv"),
        (["{demo}/stays.csv", "--ward", "Heronn"], "Heronn"),
        (["{demo}/stays.csv", "--ward", "Merlin", "--limit", "5"], "above 0 and below 1"),
        (["{demo}/census.csv"], "census.csv"),
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
