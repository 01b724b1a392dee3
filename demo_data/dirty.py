"""Write the dirty edition: the demo's stays and census as such files really arrive, faults counted.

    python demo_data/dirty.py --out FOLDER

writes, from the committed stays.csv and census.csv,

- dirty_stays.csv, and the same rows as dirty_stays_semicolon.csv (decimal commas),
  dirty_stays_utf16.txt (UTF-16, tabs) and dirty_stays.xlsx;
- dirty_census.csv: cells such as "28 (+4)", and two days whose zeros mean missing, not empty;
- dirty_truth.json: how many rows carry which fault. No row carries two.

Times are written YYYY-MM-DD HH:MM but for the faults: the patients of one month came from an
export with the month first, those of another in UTC (in summer, an hour behind the hospital's
clock). Kestrel is called "Ward 7" on stays begun before October 2022. A row sent again stands
after all others, and the one sent last is right.
"""

import argparse
import csv
import io
import json
import sys
from collections.abc import Iterable
from pathlib import Path

from openpyxl import Workbook

HERE = Path(__file__).resolve().parent
if str(HERE.parent) not in sys.path:
    sys.path.insert(0, str(HERE.parent))  # so that the file also runs as a script

from demo_data import faults as spoil  # noqa: E402 - the path comes first
from demo_data import strangers  # noqa: E402
from demo_data.draws import uniforms  # noqa: E402

DIRTY_SEED = 20220402
TITLES = (
    "Larkmere District Hospital",
    "Ward stays that overlap 1 April 2022 to 31 March 2025",
    "Run on 1 April 2025 at 06:00",
)
FOOTER = "Page 1 of 1"
ZERO_DAYS = ("2023-05-17", "2024-09-03")
BEYOND_MENDING = (
    "no end: forgotten, long ago and no later stay",
    "ends before it starts: no swap mends it",
)  # the only faults whose stays no reader can put right

Row = spoil.Row


def read_rows(path: Path) -> list[Row]:
    """Return the rows of one of the demo's files."""
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def spoiled(rows: list[Row], seed: int) -> spoil.Faults:
    """Put every fault into the rows of the clean file.

    Checked by: tests/demo_data/test_dirty.py
    """
    faults = spoil.Faults(rows, uniforms(seed))
    spoil.set_groups_apart(faults)
    for put in (
        spoil.lose_ends,
        spoil.turn_stays_round,
        spoil.send_again,
        spoil.overlap,
        spoil.pass_through,
        spoil.spoil_cells,
        strangers.add_virtual_ward,
        strangers.add_cots,
        strangers.add_day_attenders,
        strangers.add_test_patients,
    ):
        put(faults)
    return faults


def _lines(columns: list[str], rows: Iterable[Row], number: int) -> list[list[str]]:
    """Return the report line by line: titles, headings, rows, total, footer."""
    total = ["Total", str(number), *[""] * (len(columns) - 2)]
    return [*([title] for title in TITLES), columns, *([*row.values()] for row in rows), total, [FOOTER]]


def _as_text(lines: list[list[str]], separator: str) -> str:
    """Return the lines as one text."""
    text = io.StringIO()
    csv.writer(text, delimiter=separator, lineterminator="\n").writerows(lines)
    return text.getvalue()


def _decimal_commas(lines: list[list[str]]) -> list[list[str]]:
    """Return the lines with a comma in their day numbers, as spreadsheets write them where semicolons part cells."""
    return [[cell.replace(".", ",") if cell.replace(".", "").isdigit() else cell for cell in line] for line in lines]


def _write_workbook(lines: list[list[str]], path: Path) -> None:
    """Write the lines into a workbook; day numbers as numbers, all else as text."""
    book = Workbook(write_only=True)
    sheet = book.create_sheet("Ward stays")
    for line in lines:
        sheet.append(
            [float(cell) if "." in cell and cell.replace(".", "").isdigit() else cell or None for cell in line]
        )
    book.save(path)


def _write_census(folder: Path, source: Path) -> dict[str, object]:
    """Write the dirty census and return its truth."""
    rows, beds = read_rows(source / "census.csv"), read_rows(source / "capacity.csv")
    extra = {
        (row["ward"], row["from"], row["to"]): (row["funded_beds"], int(row["staffed_beds"]) - int(row["funded_beds"]))
        for row in beds
        if row["staffed_beds"] != row["funded_beds"] and row["closed_beds"] == "0"
    }
    written = 0
    for row in rows:
        for (ward, first, last), (funded, more) in extra.items():
            if row["ward"] == ward and first <= row["date"] <= last:
                row["beds_available"] = f"{funded} (+{more})"
                written += 1
        if row["date"] in ZERO_DAYS:
            row["beds_occupied"] = "0"
    text = _as_text([[*rows[0]], *([*row.values()] for row in rows)], ",")
    (folder / "dirty_census.csv").write_text(text, encoding="utf-8", newline="\n")
    return {"cells such as 28 (+4)": written, "days of zeros that are missing": list(ZERO_DAYS)}


def write_dirty(
    folder: Path | str,
    *,
    seed: int = DIRTY_SEED,
    source: Path | str = HERE,
    workbook: bool = True,
) -> dict[str, object]:
    """What does the demo look like as such files really arrive, and how many rows carry which fault?

    Writes the files into the folder and returns the truth, as it is in dirty_truth.json.
    `workbook` False leaves out the Excel copy, which takes longest.

    Checked by: tests/demo_data/test_dirty.py
    """
    folder, source = Path(folder), Path(source)
    folder.mkdir(parents=True, exist_ok=True)
    rows = read_rows(source / "stays.csv")
    columns, clean = list(rows[0]), len(rows)
    first_start = {id(row): row["start"] for row in rows}  # the order of the clean file, whatever is written now
    faults = spoiled(rows, seed)
    ordered = sorted(faults.rows, key=lambda row: first_start.get(id(row), row["start"])) + faults.late
    lines = _lines(columns, ordered, len(ordered))
    (folder / "dirty_stays.csv").write_text(_as_text(lines, ","), encoding="utf-8", newline="\n")
    semicolons = _as_text(_decimal_commas(lines), ";")
    (folder / "dirty_stays_semicolon.csv").write_text(semicolons, encoding="utf-8", newline="\n")
    (folder / "dirty_stays_utf16.txt").write_text(_as_text(lines, "\t"), encoding="utf-16", newline="\n")
    if workbook:
        _write_workbook(lines, folder / "dirty_stays.xlsx")
    truth = {
        "seed": seed,
        "rows": len(ordered),
        "rows of the clean file": clean,
        "ward stays left after mending": clean - sum(faults.counts[fault] for fault in BEYOND_MENDING),
        "rows by fault": faults.counts,
        "lines that are no rows": {"titles above the headings": len(TITLES), "total": 1, "page footer": 1},
        "census": _write_census(folder, source),
    }
    (folder / "dirty_truth.json").write_text(json.dumps(truth, indent=1) + "\n", encoding="utf-8", newline="\n")
    return truth


def main() -> None:
    """Read the command line and write the dirty edition."""
    parser = argparse.ArgumentParser(description="Write the demo's files as they really arrive, with faults.")
    parser.add_argument("--seed", type=int, default=DIRTY_SEED)
    parser.add_argument("--out", type=Path, required=True)
    chosen = parser.parse_args()
    truth = write_dirty(chosen.out, seed=chosen.seed)
    print(json.dumps(truth, indent=1))


if __name__ == "__main__":
    main()
