"""The command line: the same documents without a browser, for large files and for repeating a figure.

python -m bedplan stays.csv --ward Kestrel --capacity capacity.csv --limit 0.05 --out .
"""

from __future__ import annotations

import argparse
import datetime as dt
import hashlib
import sys
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

from bedplan import wording
from bedplan.data import (
    Capacity,
    Records,
    adds_up,
    backtest,
    estimate_demand,
    read_capacity,
    read_ready_dates,
    read_records,
)
from bedplan.data.values.choices import DATE_ANSWERS
from bedplan.decision import TurnAwayLimit
from bedplan.errors import BedplanError, UnreadableRecords
from bedplan.export import Justification, Source, as_html, as_xlsx, case_for, with_check
from bedplan.plan import Changes, FileAnswers, SavedPlan, from_estimate, from_json, planned_ward

if TYPE_CHECKING:
    from collections.abc import Sequence

    from bedplan.export import WardCase
    from bedplan.plan import Answers

CHANGES = ("demand", "stay", "spread", "growth")


def arguments() -> argparse.ArgumentParser:
    """Describe what can be asked on the command line."""
    parser = argparse.ArgumentParser(
        prog="python -m bedplan", description="Write a bed-count justification from a ward-stay file."
    )
    parser.add_argument("stays", type=Path, help="ward stays: CSV with ward, start and end")
    parser.add_argument(
        "--answers", type=Path, help="a saved plan, for how the files are to be read: columns, dates, places, periods"
    )
    parser.add_argument(
        "--ready", type=Path, help="when patients were ready to leave: CSV with stay or patient key and date"
    )
    parser.add_argument("--dates", choices=DATE_ANSWERS, help="how dates are written in the files")
    parser.add_argument("--ward", action="append", help="a ward to justify; repeat for more (default: every ward)")
    parser.add_argument("--capacity", type=Path, help="staffed beds by ward: CSV")
    parser.add_argument("--beds", type=int, help="today's staffed beds, where there is no capacity file")
    parser.add_argument(
        "--leaves", action="append", default=[], help="a ward whose patients go elsewhere when it is full; repeat"
    )
    parser.add_argument(
        "--limit", type=float, default=0.05, help="largest share of patients who find no free bed (0.05)"
    )
    parser.add_argument("--within", choices=("every_month", "year"), default="every_month", help="when the limit holds")
    for name in CHANGES:
        parser.add_argument(
            f"--{name}",
            type=float,
            default=0.0,
            help=f"change of {name} against the records, as a share: 0.05 = 5 %% more",
        )
    parser.add_argument("--peak", type=float, default=1.0, help="size of the season against the recorded one")
    parser.add_argument("--out", type=Path, default=Path(), help="folder for the two documents")
    return parser


def ward_case(records: Records, capacity: Capacity | None, name: str, asked: argparse.Namespace) -> WardCase:
    """Return one ward's case under what was asked."""
    beds = capacity.beds_today(name) if capacity and name in capacity.wards else asked.beds
    changes = Changes(asked.demand, asked.stay, asked.spread, asked.peak, asked.growth)
    baseline = from_estimate(estimate_demand(records, name, capacity=capacity), beds)
    ward = planned_ward(baseline, baseline.beds, "leaves" if name in asked.leaves else "waits", changes)
    case = case_for(ward, TurnAwayLimit(asked.limit, asked.within), baseline.facts, changes.rows())
    return with_check(case, lambda: backtest(records, name, capacity=capacity))


def staffed_beds(path: Path | None, records: Records, said: FileAnswers) -> Capacity | None:
    """Read the file of staffed beds, its wards named as the records name them; say which have no stays."""
    if path is None:
        return None
    capacity = read_capacity(path, **said.to_read()).linked_to(records)
    if capacity.unknown_wards:
        print(wording.not_used(capacity.name, list(capacity.unknown_wards)), file=sys.stderr)
    return capacity


def answers_of(asked: argparse.Namespace, plan: SavedPlan) -> Answers:
    """Return how the stays are to be read; say which file of ready dates a saved plan was made with, if it is not here."""
    answers = plan.answers
    if asked.dates:
        answers = replace(answers, date_order=asked.dates)
    if asked.ready:
        ready = read_ready_dates(asked.ready, **said_of(asked.ready, plan, asked.dates).to_read())
        answers = replace(answers, choices=replace(answers.choices, ready_dates=ready))
    if answers.ready_sentence:
        print(answers.ready_sentence, file=sys.stderr)
    return answers


def fingerprint(path: Path) -> str:
    """Return the fingerprint of a file."""
    return hashlib.sha256(path.read_bytes()).hexdigest()


def said_of(path: Path | None, plan: SavedPlan, dates: str | None) -> FileAnswers:
    """Return what a saved plan says of exactly this file; dates are read as the command line says, where it says so."""
    said = FileAnswers() if path is None else plan.files.get(fingerprint(path), FileAnswers())
    return replace(said, date_order=dates) if dates else said


def beside(what: str, path: Path | None, said: FileAnswers) -> tuple[tuple[str, str], ...]:
    """Return (what, name and fingerprint) of a file beside the records, and what was said of it, for the document."""
    if path is None:
        return ()
    return ((what, f"{path.name}, SHA-256 {fingerprint(path)}"), *said.rows(what))


def write(asked: argparse.Namespace) -> Justification:
    """Read, decide and write both documents; return what they say.

    Raises:
        BedplanError: anything that can be explained, in a sentence.

    Checked by: tests/test_command_line.py
    """
    plan = from_json(asked.answers.read_bytes()) if asked.answers else SavedPlan("", {}, {})
    answers = answers_of(asked, plan)
    records = read_records(asked.stays, **answers.to_read())
    of_beds, of_ready = (said_of(path, plan, asked.dates) for path in (asked.capacity, asked.ready))
    capacity = staffed_beds(asked.capacity, records, of_beds)
    unknown = [name for name in (*(asked.ward or ()), *asked.leaves) if name not in records.wards]
    if unknown:
        raise UnreadableRecords([f"Ward “{unknown[0]}” is not in {records.name}; it holds {', '.join(records.wards)}."])
    names = asked.ward or records.wards
    cases = tuple(ward_case(records, capacity, name, asked) for name in names)
    others = (
        *beside("Staffed beds", asked.capacity, of_beds),
        *beside("Ready dates", asked.ready, of_ready),
        *answers.rows(),
    )
    source = Source.from_records(records, others, adds_up(records))
    paper = Justification(cases, source, dt.datetime.now().astimezone().date())
    asked.out.mkdir(parents=True, exist_ok=True)
    for ending, content in (("html", as_html(paper)), ("xlsx", as_xlsx(paper))):
        (asked.out / f"bed-count-justification-{paper.fingerprint()}.{ending}").write_bytes(content)
    return paper


def main(words: Sequence[str] | None = None) -> int:
    """Run the command line; 0 when the documents were written, 2 with a sentence when they could not be."""
    asked = arguments().parse_args(words)
    try:
        paper = write(asked)
    except BedplanError as error:
        print(error, file=sys.stderr)
        return 2
    except OSError as error:
        print(f"{error.filename}: {error.strerror}. Check the path.", file=sys.stderr)
        return 2
    for line in paper.decision_lines():
        print(line)
    print(f"Documents {paper.fingerprint()} are in {asked.out.resolve()}. {wording.CAUTIONS[1]}")
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
