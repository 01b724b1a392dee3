"""Are figures of a month beds or bed-days? The figures tell where they can; else a person must."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    import pandas as pd

BEDS, BED_DAYS = "beds", "bed-days"
SHORTEST_DAYS, LONGEST_DAYS = 0.5, 90.0  # of a ward's mean stay; common practice, no source
MOST_BEDS = 300.0  # in use on one ward, or in one specialty of a hospital; common practice, no source
LEAST_BEDS = 1.0  # in use on average on a ward that reports
MOST_OCCUPANCY = 1.5  # more patients than beds are real; half as many more are other units. Common practice, no source


def unit_by_months(figure: pd.Series, days: pd.Series, ward: pd.Series) -> str | None:
    """What do a ward's available beds show from month to month: the same in long and short ones, or as many a day?

    ``figure``, ``days`` and ``ward``: (n,) rows of a return, with the days that each row holds. None: neither, or both.
    """
    found = set()
    for rows in ward.groupby(ward).groups.values():
        many, long = figure[rows].to_numpy(), days[rows].to_numpy()
        if many.min(initial=1.0) <= 0 or np.unique(long).size < 2:
            continue
        if np.ptp(many) == 0:
            found.add(BEDS)
        elif np.ptp(many / long) < 1e-6 * many.max():
            found.add(BED_DAYS)
    return found.pop() if len(found) == 1 else None


def unit_by_stay(figure: pd.Series, days: pd.Series, discharges: pd.Series, ward: pd.Series) -> str | None:
    """As which of the two are occupied beds believable, by how long patients would stay and how many beds would be in use?

    Stays of half a day to 90 days, one bed in use or more, 300 at most. None where both are, or neither, or wards differ.

    Checked by: tests/data/beside/test_returns.py
    """
    found = set()
    for rows in ward.groupby(ward).groups.values():
        many, long, left = (float(one[rows].sum()) for one in (figure, days, discharges))
        if many <= 0 or left <= 0:
            continue
        beds = float((figure[rows] * days[rows]).sum())  # bed-days, if the figures are beds
        as_beds = SHORTEST_DAYS <= beds / left <= LONGEST_DAYS and LEAST_BEDS <= beds / long <= MOST_BEDS
        as_days = SHORTEST_DAYS <= many / left <= LONGEST_DAYS and LEAST_BEDS <= many / long <= MOST_BEDS
        found |= {BEDS} if as_beds and not as_days else {BED_DAYS} if as_days and not as_beds else set()
    return found.pop() if len(found) == 1 else None


def unit_beside(figure: pd.Series, bed_days_in_use: pd.Series) -> str | None:
    """What are available beds, beside the bed-days in use? Bed-days, unless far more were in use than there were."""
    there = float(figure.sum())
    if there <= 0:
        return None
    return BED_DAYS if float(bed_days_in_use.sum()) <= MOST_OCCUPANCY * there else BEDS
