"""What a planner is told beside waits: which way and how far kinds of wards were off when simulated."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from bedplan.models.demand import Demand

# deviation ÷ mean of stays; mean stay
_VERY_UNEVEN, _SHORT_DAYS = 1.5, 1.5


def kinds_of_ward_notes(demand: Demand) -> tuple[str, ...]:
    """Which way and how far were wards of some kinds off in simulations, where 1 in 100 or more wait?

    Checked by: tests/models/test_waiting.py
    """
    notes = []
    if demand.discharge_hours and demand.arrivals_per_day > 0 and demand.length_of_stay.mean_days < _SHORT_DAYS:
        notes.append(
            "Short stays and set hours of leaving: the share who wait may be up to a seventh too low and the share who "
            "wait for hours a quarter; with stays under a day up to a third, and the mean wait two thirds too short. Run "
            "the simulation."
        )
    if demand.booked:
        notes.append(
            "Booked lists: where their stays are shorter than the others, or they come on one or two weekdays, the share "
            "who wait may be up to a third too low; with stays alike two or three times too high, with lists alone many "
            "times. Run the simulation."
        )
    if demand.length_of_stay.variation > _VERY_UNEVEN and demand.arrivals_per_day > 0:
        notes.append(
            "Stays differ widely: the share who wait may be up to an eighth too low, with seasons and weekdays up to a "
            "quarter and in the worst month a third. Plan with more, or run the simulation."
        )
    kinds = len(notes) + (demand.clustering > 1.0) + (demand.rate_variation > 0.0)
    if kinds > 1:
        notes.append("Several of these together were not checked: run the simulation under the picture.")
    return tuple(notes)
