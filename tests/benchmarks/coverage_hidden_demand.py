"""Does hidden demand find the truth of the invented hospital? Prints how often each 90 % interval holds it.

    python tests/benchmarks/coverage_hidden_demand.py [--seeds 10]

Every seed is another three years of the same hospital; seed 0 is the committed one. From each one's own files (stays,
beds by date, refusals; 60 % of them written down on Curlew and Dunlin, all on Merlin) every method's answer is held
against the truth file: patients a day who wanted the ward (first choice), and beds wanted; for Teal also the beds its
patients used. "Long run" holds the same intervals against the mean truth of all seeds, which is harder: nine of ten is
then what a 90 % interval should reach.
"""

from __future__ import annotations

import argparse
import sys
import tempfile
from pathlib import Path

import pandas as pd

ROOT = Path(__file__).resolve().parents[2]
if str(ROOT) not in sys.path:
    sys.path.insert(0, str(ROOT))  # so that the file also runs as a script

from bedplan.data import hidden_demand, read_capacity, read_records, read_refusals  # noqa: E402 - the path comes first
from demo_data.generate import DEMO_SEED, write_demo  # noqa: E402

SHARE_RECORDED = {"Teal": 1.0, "Merlin": 1.0, "Curlew": 0.6, "Dunlin": 0.6}


def truth(folder: Path) -> pd.DataFrame:
    """Return what was really wanted: ward → patients_per_day, beds (wanted), beds_used."""
    load = pd.read_csv(folder / "truth_daily_load.csv")
    wants = pd.read_csv(folder / "truth_patients.csv")
    first_choice = wants[wants["second_choice"].isna()].groupby("wanted_ward").size()
    mean = load.groupby("ward")[["on_own_ward", "as_outliers", "beds_wanted"]].mean()
    return pd.DataFrame(
        {
            "patients_per_day": first_choice / load["date"].nunique(),
            "beds": mean["beds_wanted"],
            "beds_used": mean["on_own_ward"] + mean["as_outliers"],
        }
    )


def answers(folder: Path, seed: int) -> list[dict[str, object]]:
    """Return one row for every ward, method used and figure."""
    records, beds = read_records(folder / "stays.csv"), read_capacity(folder / "capacity.csv")
    refusals, true = read_refusals(folder / "refusals.csv"), truth(folder)
    rows = []
    for ward, share in SHARE_RECORDED.items():
        found = hidden_demand(records, ward, capacity=beds, refusals=refusals, share_recorded=share)
        for method in found.methods:
            figures = [("patients_per_day", method.patients_per_day, method.interval)]
            figures += [
                (kind, method.beds, method.beds_interval) for kind in ("beds", "beds_used")[: 1 + (ward == "Teal")]
            ]
            rows += [
                {"seed": seed, "ward": ward, "method": method.name, "figure": kind, "truth": true.loc[ward, kind]}
                | {"estimate": estimate, "low": interval[0], "high": interval[1]}
                for kind, estimate, interval in figures
                if method.used
            ]
    return rows


def main() -> None:
    """Run the seeds and print the table."""
    parser = argparse.ArgumentParser(description="How often do the intervals of hidden demand hold the truth?")
    parser.add_argument("--seeds", type=int, default=10, help="other seeds than the committed one")
    rows: list[dict[str, object]] = []
    for seed in range(parser.parse_args().seeds + 1):
        with tempfile.TemporaryDirectory() as folder:
            write_demo(DEMO_SEED + seed, folder)
            rows += answers(Path(folder), seed)
    table = pd.DataFrame(rows)
    table["long_run"] = table.groupby(["ward", "figure"])["truth"].transform("mean")
    print(
        f"{'ward, method, figure':76} {'truth':>7} {'found':>7} {'range':>13} {'own':>3} {'seeds':>6} {'long run':>8} {'off by':>7}"
    )
    for (ward, method, figure), group in table.groupby(["ward", "method", "figure"], sort=False):
        first, others = group.iloc[0], group[group["seed"] > 0]
        holds = (others["low"] <= others["truth"]) & (others["truth"] <= others["high"])
        holds_long = (others["low"] <= others["long_run"]) & (others["long_run"] <= others["high"])
        off = float((group["estimate"] / group["truth"] - 1).mean())
        own = "yes" if first["low"] <= first["truth"] <= first["high"] else "NO"
        print(
            f"{f'{ward}: {method}: {figure}':76} {first['truth']:7.3f} {first['estimate']:7.3f} "
            f"{first['low']:6.2f} {first['high']:6.2f} {own:>3} {holds.sum():3}/{len(others)} "
            f"{holds_long.sum():5}/{len(others)} {off:+7.1%}"
        )


if __name__ == "__main__":
    main()
