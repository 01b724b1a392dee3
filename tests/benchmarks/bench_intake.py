"""How fast records are read and cleaned: python tests/benchmarks/bench_intake.py [million rows].

Prints seconds and processor seconds with their ratios to polars' bare parse of the same file, and the most memory
held, each in a process of its own. Whatever else runs on the machine is in the seconds; compare processor ratios.
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
from bedplan.data.occupancy import present
records = read_records(PATH)
counts = [present(records, records.of_ward(ward), 3_600) for ward in records.wards]
"""
MEASURE = """
import resource, sys, time
sys.path.insert(0, {root!r})
PATH = {path!r}
{imports}
began, worked = time.perf_counter(), time.process_time()
{code}
print(time.perf_counter() - began, time.process_time() - worked, resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 2**20)
"""


def write_stays(path: Path, rows: int, *, dirty: bool) -> None:
    """Write a file of so many stays: 30 wards, three years, two ward stays a patient, and some of every fault."""
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
    table.write_csv(path)


def measure(path: Path, code: str) -> tuple[float, float, float]:
    """Return seconds, processor seconds (the best of three each) and gigabytes held, each time in a new process."""
    imports = "\n".join(line for line in code.splitlines() if line.startswith(("from", "import")))
    body = "\n".join(line for line in code.splitlines() if not line.startswith(("from", "import")))
    script = MEASURE.format(root=str(ROOT), path=str(path), imports=imports, code=body)
    runs = []
    for _ in range(REPEATS):
        done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
        runs.append(tuple(float(word) for word in done.stdout.split()))
    seconds, worked, held = zip(*runs, strict=True)
    return min(seconds), min(worked), max(held)


def main() -> None:
    """Measure reading through every rule, and clean stays to hourly counts, against polars' bare parse."""
    rows = int(float(sys.argv[1]) * 1e6) if len(sys.argv) > 1 else 2_000_000
    with tempfile.TemporaryDirectory() as folder:
        for dirty in (True, False):
            path = Path(folder) / f"{'dirty' if dirty else 'clean'}.csv"
            write_stays(path, rows, dirty=dirty)
            print(f"{path.name}: {rows:,} stays, {path.stat().st_size / 2**20:.0f} MB")
            bare, bare_worked, _ = measure(path, PARSE)
            for name, code in (
                ("polars, bare parse", PARSE),
                ("read through every rule", READ),
                ("from disk to hourly counts", HOURLY),
            ):
                seconds, worked, held = measure(path, code)
                print(
                    f"  {name:28} {seconds:6.2f} s ({seconds / bare:4.1f} × bare parse), "
                    f"processor {worked:6.2f} s ({worked / bare_worked:4.1f} ×), {held:.2f} GB"
                )


if __name__ == "__main__":
    main()
