"""Does the demo behave as planned? Prints its means over ten seeds beside the planned figures.

    python demo_data/realised.py [--seeds 10] [--first-seed 20220401]

The planned figures are ten-seed means of a separate trial program for the same rules. The
script ends with an error when a ward's mean stay is more than 4 % from plan, or its
occupancy more than 2.5 points. The other figures are printed for reading: several swing so
much from seed to seed (see the range) that a limit on them would only measure luck.
"""

import argparse
import sys
from collections.abc import Iterable
from itertools import accumulate
from math import sqrt
from pathlib import Path
from typing import NamedTuple

HERE = Path(__file__).resolve().parent
if str(HERE.parent) not in sys.path:
    sys.path.insert(0, str(HERE.parent))  # so that the file also runs as a script

from demo_data.beds import Stay, Want  # noqa: E402 - the path comes first
from demo_data.files import WINDOW_END, WINDOW_START, in_window  # noqa: E402
from demo_data.flow import Flow, simulate  # noqa: E402
from demo_data.generate import DEMO_SEED  # noqa: E402
from demo_data.patients import MINUTES_A_DAY, day_of  # noqa: E402
from demo_data.truth import daily_minutes  # noqa: E402

STAY_LIMIT, OCCUPANCY_LIMIT = 0.04, 0.025
YEARS = 3
LONG_STAY_DAYS = 21
HOURS = range(WINDOW_START, WINDOW_END, 60)


class WardFigures(NamedTuple):
    """What is compared for one ward: stays in days, shares of 1."""

    mean_stay: float
    variation: float
    occupancy: float
    hours_full: float


PLANNED_WARDS = {
    "Heron": WardFigures(1.56, 0.80, 0.797, 0.276),
    "Kestrel": WardFigures(6.83, 0.95, 0.850, 0.314),
    "Plover": WardFigures(11.07, 1.15, 0.848, 0.258),
    "Teal": WardFigures(9.13, 1.02, 0.916, 0.556),
    "Curlew": WardFigures(4.19, 1.05, 0.763, 0.115),
    "Dunlin": WardFigures(3.53, 0.89, 0.680, 0.098),
    "Sandpiper": WardFigures(3.84, 0.50, 0.671, 0.162),
    "Merlin": WardFigures(4.05, 1.29, 0.582, 0.074),
}
PLANNED_FACTS = {
    "Teal's patients in beds, anywhere": 15.9,
    "... of them on Teal": 11.0,
    "Outliers a year": 304.0,
    "Merlin: turned away, of those from outside": 0.068,
    "Curlew: turned away, of those from outside": 0.104,
    "Dunlin: turned away, of those from outside": 0.088,
    "Sandpiper: cancelled, of those booked": 0.063,
    "... of those booked on a Wednesday": 0.25,
    "Plover: stays over 21 days": 0.114,
    "... their share of bed-days": 0.401,
    "... beds in use beyond day 21": 4.6,
    "Heron: waited over 4 hours for a bed": 0.226,
    "... in January": 0.68,
    "... in August": 0.02,
    "Heron: occupancy in January": 0.961,
    "Heron: occupancy in August": 0.72,
    "Kestrel: occupancy in January": 0.966,
    "Kestrel: occupancy in August": 0.73,
}


def mean(values: Iterable[float]) -> float:
    """Return the average of some values, 0 of none."""
    listed = list(values)
    return sum(listed) / len(listed) if listed else 0.0


def _end(stay: Stay) -> int:
    """Return the end of a stay, or of the three years while it lasts."""
    return WINDOW_END if stay.end is None else stay.end


def finished_days(flow: Flow, ward: str) -> list[float]:
    """How long were the stays on a ward that began in the three years and ended in them?"""
    return [
        (stay.end - stay.start) / MINUTES_A_DAY
        for stay in flow.stays
        if stay.ward == ward and stay.start >= WINDOW_START and stay.end is not None
    ]


def occupied_by_hour(flow: Flow, ward: str) -> list[int]:
    """How many patients are on a ward on the hour, for every hour of the three years?"""
    change = [0] * (WINDOW_END // 60 + 2)
    for stay in flow.stays:
        if stay.ward == ward:
            change[-(-stay.start // 60)] += 1
            change[-(-_end(stay) // 60)] -= 1
    return list(accumulate(change))[WINDOW_START // 60 : WINDOW_END // 60]


def open_by_hour(flow: Flow, ward: str) -> list[int]:
    """How many beds of a ward are open on the hour, for every hour of the three years?"""
    by_day = [flow.hospital.open_beds(ward, day_of(minute)) for minute in HOURS[::24]]
    return [beds for beds in by_day for _ in range(24)]


def ward_figures(flow: Flow, ward: str) -> WardFigures:
    """Return what is compared for one ward."""
    days = finished_days(flow, ward)
    average = mean(days)
    spread = sqrt(mean((stay - average) ** 2 for stay in days))
    occupied, beds = occupied_by_hour(flow, ward), open_by_hour(flow, ward)
    full = mean(patients >= number for patients, number in zip(occupied, beds, strict=True))
    return WardFigures(average, spread / average, sum(occupied) / sum(beds), full)


def _month_occupancy(flow: Flow, ward: str, month: int) -> float:
    """Return the occupancy of a ward in one calendar month of all years."""
    hours = [hour for hour, minute in enumerate(HOURS) if day_of(minute).month == month]
    occupied, beds = occupied_by_hour(flow, ward), open_by_hour(flow, ward)
    return sum(occupied[hour] for hour in hours) / sum(beds[hour] for hour in hours)


def _share(wants: Iterable[Want], outcome: str) -> float:
    """Return the share of wants that came to this outcome."""
    return mean(want.outcome == outcome for want in wants)


def _waited_long(wants: Iterable[Want]) -> float:
    """Return the share of wants that were placed after more than 4 hours, or not yet."""
    return mean((WINDOW_END if want.placed_at is None else want.placed_at) - want.wanted_at > 240 for want in wants)


def _teal_and_outlier_facts(flow: Flow, wants: list[Want]) -> list[float]:
    """Return where Teal's patients lie, and how many patients lie on another ward than their own."""
    minutes = daily_minutes(flow).minutes
    on_teal, elsewhere = (
        sum(minutes[counted, "Teal"]) / (WINDOW_END - WINDOW_START) for counted in ("on_own_ward", "as_outliers")
    )
    return [on_teal + elsewhere, on_teal, sum(want.outcome == "outlier" for want in wants) / YEARS]


def _refusal_facts(wants: list[Want]) -> list[float]:
    """Return the shares turned away and cancelled."""
    outside = [want for want in wants if want.came_from == "outside"]
    booked = [want for want in wants if want.came_from == "booked"]
    return [
        *(_share((want for want in outside if want.ward == ward), "lost") for ward in ("Merlin", "Curlew", "Dunlin")),
        _share(booked, "cancelled"),
        _share((want for want in booked if day_of(want.wanted_at).weekday() == 2), "cancelled"),
    ]


def _long_stay_facts(flow: Flow) -> list[float]:
    """Return Plover's long stays: share of stays, share of bed-days, and beds beyond day 21."""
    days = finished_days(flow, "Plover")
    long_stays = [stay for stay in days if stay > LONG_STAY_DAYS]
    beyond = sum(stay - LONG_STAY_DAYS for stay in long_stays) * MINUTES_A_DAY / (WINDOW_END - WINDOW_START)
    return [len(long_stays) / len(days), sum(long_stays) / sum(days), beyond]


def _winter_facts(flow: Flow, wants: list[Want]) -> list[float]:
    """Return the waits for Heron and the occupancy of Heron and Kestrel, January against August."""
    heron = [want for want in wants if want.ward == "Heron"]
    by_month = ([want for want in heron if day_of(want.wanted_at).month == month] for month in (1, 8))
    occupancy = (_month_occupancy(flow, ward, month) for ward in ("Heron", "Kestrel") for month in (1, 8))
    return [_waited_long(heron), *map(_waited_long, by_month), *occupancy]


def facts(flow: Flow) -> list[float]:
    """Return the figures of PLANNED_FACTS, in its order."""
    wants = [want for want in flow.wants if in_window(want)]
    return [
        *_teal_and_outlier_facts(flow, wants),
        *_refusal_facts(wants),
        *_long_stay_facts(flow),
        *_winter_facts(flow, wants),
    ]


def outside_limits(planned: WardFigures, realised: WardFigures) -> bool:
    """Is a ward further from plan than allowed?"""
    return (
        abs(realised.mean_stay / planned.mean_stay - 1.0) > STAY_LIMIT
        or abs(realised.occupancy - planned.occupancy) > OCCUPANCY_LIMIT
    )


def mean_figures(runs: list[WardFigures]) -> WardFigures:
    """Return the mean over the seeds of each figure."""
    return WardFigures(*(mean(column) for column in zip(*runs, strict=True)))


def _print_wards(by_ward: dict[str, WardFigures]) -> None:
    """Print the wards: realised, planned, and the difference that is limited."""
    print(f"{'ward':10} {'stay, days':>22} {'variation':>12} {'occupancy %':>20} {'hours full %':>13}")
    for ward, got in by_ward.items():
        plan = PLANNED_WARDS[ward]
        stay = f"{got.mean_stay:.2f} / {plan.mean_stay:.2f} ({got.mean_stay / plan.mean_stay - 1:+.1%})"
        occupancy = f"{got.occupancy:.1%} / {plan.occupancy:.1%} ({100 * (got.occupancy - plan.occupancy):+.1f})"
        full = f"{got.hours_full:.1%} / {plan.hours_full:.1%}"
        print(f"{ward:10} {stay:>22} {got.variation:>5.2f} / {plan.variation:.2f} {occupancy:>22} {full:>15}")


def _print_facts(runs: list[list[float]]) -> None:
    """Print the other figures: mean and range over the seeds, and the plan."""
    print(f"\n{'':44} {'mean':>8} {'lowest':>8} {'highest':>8} {'planned':>8}")
    for (name, planned), values in zip(PLANNED_FACTS.items(), zip(*runs, strict=True), strict=True):
        form = ".1%" if planned < 1 else ".1f"
        row = (mean(values), min(values), max(values), planned)
        print(f"{name:44} " + " ".join(f"{value:>8{form}}" for value in row))


def main() -> int:
    """Read the command line, run the seeds, print, and say whether all is within the limits."""
    parser = argparse.ArgumentParser(description="Compare the demo with its planned figures.")
    parser.add_argument("--seeds", type=int, default=10)
    parser.add_argument("--first-seed", type=int, default=DEMO_SEED)
    chosen = parser.parse_args()
    flows = (simulate(seed) for seed in range(chosen.first_seed, chosen.first_seed + chosen.seeds))
    runs = [({ward: ward_figures(flow, ward) for ward in PLANNED_WARDS}, facts(flow)) for flow in flows]
    by_ward = {ward: mean_figures([wards[ward] for wards, _ in runs]) for ward in PLANNED_WARDS}
    print(f"Mean of {chosen.seeds} seeds from {chosen.first_seed}: realised / planned (difference)\n")
    _print_wards(by_ward)
    _print_facts([others for _, others in runs])
    outside = [ward for ward, got in by_ward.items() if outside_limits(PLANNED_WARDS[ward], got)]
    print(f"\nOutside 4 % of stay or 2.5 points of occupancy: {', '.join(outside) or 'none'}")
    return 1 if outside else 0


if __name__ == "__main__":
    sys.exit(main())
