"""Stays that were set aside because their dates are hard to believe, and the beds they would have used."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pandas as pd

from bedplan.data.cleaning.counting import DOUBTED
from bedplan.data.files.rules import RULES

if TYPE_CHECKING:
    from collections.abc import Mapping

    from bedplan.data.cleaning.records import Records

DOUBTS = [RULES[key].sentence for key in (*DOUBTED, "mistyped year")]


def beds_doubted(records: Records) -> Mapping[str, float]:
    """How many beds more would each ward have used on average, if stays taken for forgotten or mistyped were true?

    Those without an end would then have gone on to the end of the file. Wards without such stays are not in it.

    Checked by: tests/data/demand/test_repairs.py
    """
    if records.set_aside.empty:
        return {}
    rows = records.set_aside[records.set_aside["reason"].isin(DOUBTS)]
    first, last = records.window
    start, end = rows["start"].clip(lower=first), rows["end"].fillna(last).clip(upper=last)
    days = ((end - start) / pd.Timedelta(days=1)).clip(lower=0.0)
    beds = days.groupby(rows["ward"].astype(str)).sum() / records.days
    return {ward: float(more) for ward, more in beds.items() if more > 0}
