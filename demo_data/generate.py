"""Write the demo: three years of records of Larkmere District Hospital, which is invented.

    python demo_data/generate.py [--seed N] [--out FOLDER]

writes, from 1 April 2022 to 31 March 2025, for eight wards (UTF-8, commas, local wall-clock
time without clock changes, `YYYY-MM-DD HH:MM`):

- stays.csv: a row a patient's stay on a ward; every stay that overlaps the three years, also
  those begun earlier (the hospital has run since 1 October 2021); `end` blank: still in at
  1 April 2025 00:00. `ready_date`: since when the patient was fit to leave, known only for
  Plover's long-stay patients. `home_specialty`: of the ward that the patient wanted;
- census.csv: open and occupied beds at 00:00 and 11:00. A patient is in from the minute of
  `start` to the minute before `end`;
- capacity.csv: beds by ward and dates, `from` and `to` both included; open = staffed - closed;
- refusals.csv: patients sent to another hospital, as far as someone wrote it down: always on
  Merlin, 60 % on Curlew and Dunlin; the other wards keep no such list;
- bed_requests.csv: every request for a bed on Heron and the wait for it; `placed_at` blank:
  still waiting;
- cancellations.csv: booked Sandpiper cases cancelled at 07:00 for want of a bed;
- monthly_return.csv: bed-days counted at midnight, and stays ended (home or to another ward);
- truth_patients.csv and truth_daily_load.csv: what really happened; truth.py says what is in them.

Kestrel's old name, "Ward 7" (to 30 September 2022), appears only in the dirty edition.
The same seed gives the same files byte for byte.
"""

import argparse
import sys
from pathlib import Path

HERE = Path(__file__).resolve().parent
if str(HERE.parent) not in sys.path:
    sys.path.insert(0, str(HERE.parent))  # so that the file also runs as a script

from demo_data.files import write_records  # noqa: E402 - the path comes first
from demo_data.flow import simulate  # noqa: E402
from demo_data.truth import write_truth  # noqa: E402

DEMO_SEED = 20220401


def write_demo(seed: int = DEMO_SEED, folder: Path | str = HERE) -> None:
    """Which three years does Larkmere have for this seed? Writes all its files into the folder.

    Checked by: tests/demo_data/test_demo.py
    """
    folder = Path(folder)
    folder.mkdir(parents=True, exist_ok=True)
    flow = simulate(seed)
    write_records(flow, folder)
    write_truth(flow, folder)


def main() -> None:
    """Read the command line and write the demo."""
    parser = argparse.ArgumentParser(description="Write three years of records of an invented hospital.")
    parser.add_argument("--seed", type=int, default=DEMO_SEED)
    parser.add_argument("--out", type=Path, default=HERE)
    chosen = parser.parse_args()
    write_demo(chosen.seed, chosen.out)


if __name__ == "__main__":
    main()
