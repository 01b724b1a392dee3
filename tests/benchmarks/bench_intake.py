"""How fast records are read and cleaned: python tests/benchmarks/bench_intake.py [million dirty] [million clean].

Two rows: 2 million dirty stays through every rule (wanted: 8 × polars' bare parse of the same file, 1.5 GB), and 10
million clean ones from disk to hourly counts of every ward (3 ×, 2.5 GB). Seconds, processor seconds and the most memory
held, each in a process of its own, ours and the bare parse by turns. Whatever else runs on the machine is in the
seconds: compare them on an idle machine, processor seconds on a busy one.
"""

from __future__ import annotations

import subprocess
import sys
import tempfile
from pathlib import Path

import numpy as np
import polars as pl

ROOT = Path(__file__).resolve().parents[2]
REPEATS = 3
PARSE = """
import polars as pl
table = pl.read_csv(PATH)
"""
READ = """
from bedplan.data import read_records
records = read_records(PATH)
print(records.report.summary, file=sys.stderr)
"""
HOURLY = """
from bedplan.data import read_records
from bedplan.data.wards.occupancy import present_by_ward
counts = present_by_ward(read_records(PATH), 3_600)
"""
MEASURE = """
import sys, time
sys.path.insert(0, {root!r})
PATH = {path!r}
{imports}
began, worked = time.perf_counter(), time.process_time()
{code}
seconds, worked = time.perf_counter() - began, time.process_time() - worked
with open("/proc/self/status") as status:  # not getrusage: it counts what the parent held before
    held = next(int(line.split()[1]) for line in status if line.startswith("VmHWM"))
print(seconds, worked, held / 2**20)
"""


def write_stays(path: Path, rows: int, *, dirty: bool, by_start: bool = False) -> None:
    """Write a file of so many stays: 30 wards, three years, two ward stays a patient, and some of every fault.

    By patient, or by start, as exports come.
    """
    rng = np.random.default_rng(1)
    spell = np.arange(rows) // 2
    start = np.datetime64("2021-01-01T00:00", "m") + rng.integers(0, 3 * 365 * 1_440, spell.max() + 1)[spell]
    length = rng.lognormal(1.0, 1.0, rows) * 1_440
    start = start + np.where(np.arange(rows) % 2 == 1, np.roll(length, 1), 0).astype("timedelta64[m]")
    end = start + np.maximum(length, 40).astype("timedelta64[m]")
    table = pl.DataFrame(
        {
            "patient_key": [f"P{number:08d}" for number in spell],
            "spell_key": [f"S{number:08d}" for number in spell],
            "ward": np.array([f"Ward {number:02d}" for number in range(30)])[rng.integers(0, 30, rows)],
            "start": start.astype("datetime64[ms]"),
            "end": end.astype("datetime64[ms]"),
            "class": np.array(["ordinary", "day case"])[(rng.random(rows) < 0.1).astype(int)],
            "method": np.array(["emergency", "booked"])[(rng.random(rows) < 0.3).astype(int)],
            "home_specialty": np.array([f"specialty {number}" for number in range(20)])[rng.integers(0, 20, rows)],
            "age_band": np.array(["40-49", "60-69", "80-89"])[rng.integers(0, 3, rows)],
            "destination": np.array(["home", "another ward"])[rng.integers(0, 2, rows)],
        }
    ).with_columns(pl.col("start", "end").dt.strftime("%Y-%m-%d %H:%M"))
    if dirty:
        odd = pl.Series(rng.random(rows))
        table = table.with_columns(
            end=pl.when(odd < 0.01).then(pl.lit("")).when(odd < 0.02).then(pl.col("start")).otherwise(pl.col("end")),
            ward=pl.when(odd > 0.98).then(pl.col("ward") + " ").otherwise(pl.col("ward")),
            start=pl.when((odd > 0.5) & (odd < 0.501)).then(pl.lit("44927.5")).otherwise(pl.col("start")),
        )
        table = pl.concat([table, table[: rows // 100]])
    if by_start:
        table = table.sort("start")
    table.write_csv(path)


def measured(path: Path, code: str) -> tuple[float, float, float]:
    """Return seconds, processor seconds and gigabytes held, in a process of its own."""
    imports = "\n".join(line for line in code.splitlines() if line.startswith(("from", "import")))
    body = "\n".join(line for line in code.splitlines() if not line.startswith(("from", "import")))
    script = MEASURE.format(root=str(ROOT), path=str(path), imports=imports, code=body)
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
    seconds, worked, held = (float(word) for word in done.stdout.split())
    return seconds, worked, held


def compare(path: Path, code: str) -> str:
    """Return our best of three against the bare parse's, taken by turns."""
    turns = [(measured(path, PARSE), measured(path, code)) for _ in range(REPEATS)]
    (bare, bare_worked, _), (seconds, worked, _) = (np.min(runs, axis=0) for runs in zip(*turns, strict=True))
    held = max(ours[2] for _, ours in turns)
    return (
        f"{seconds:6.2f} s ({seconds / bare:4.1f} × {bare:.2f} s of a bare parse), "
        f"processor {worked:6.2f} s ({worked / bare_worked:4.1f} × {bare_worked:.2f} s), {held:.2f} GB"
    )


def main() -> None:
    """Measure dirty stays through every rule, and clean stays to hourly counts, against polars' bare parse."""
    asked = [float(word) for word in sys.argv[1:]]
    dirty, clean = (int(millions * 1e6) for millions in (*asked, *(2, 10)[len(asked) :]))
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "stays.csv"
        write_stays(path, dirty, dirty=True)
        print(f"{dirty:,} dirty stays ({path.stat().st_size / 2**20:.0f} MB) through every rule: wanted 8 ×, 1.5 GB")
        print(f"  {compare(path, READ)}")
        for order in ("patient", "start"):
            write_stays(path, clean, dirty=False, by_start=order == "start")
            print(f"{clean:,} clean stays in order of {order}, from disk to hourly counts: wanted 3 ×, 2.5 GB")
            print(f"  {compare(path, HOURLY)}")


if __name__ == "__main__":
    main()
