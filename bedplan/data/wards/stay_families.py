"""Which family of curves do a ward's stays follow, and how near is the curve that the plan draws from?"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan import wording
from bedplan.data.wards.stays import fitted_stay, stay_curve, stays_in_window, watched_stays
from bedplan.models import SeenStays, fit_stay

if TYPE_CHECKING:
    from bedplan.data.cleaning.records import Records
    from bedplan.data.wards.survival import StayCurve
    from bedplan.models import LengthOfStay, StayFit

NAMES = {
    "lognormal": "one lognormal curve",
    "gamma": "one gamma curve",
    "two lognormals": "two groups of patients, each lognormal",
}
# AIC differences: Burnham & Anderson 2002, Model Selection and Multimodel Inference, section 2.6 (from memory)
AS_GOOD, RULED_OUT = 2.0, 10.0
CLEARLY_LONGER, FEWEST_IN_GROUP = 1.5, 0.05  # two groups worth telling apart; common practice, no source
EXPLAINED = (
    "The records' line is the product limit: patients still in count for what was seen of them. 10 behind by AIC is as good "
    "as ruled out. Beds hang on the mean stay; the shape acts on waiting, on how late a busy season is felt, and on groups."
)
SHOWN_UNTIL = 0.01  # the picture ends where so few are still in
PICTURE_POINTS = 240


@dataclass(frozen=True, slots=True, eq=False)
class StayFamilies:
    """How a ward's stays run, as recorded (``curve``), as drawn in the plan (``planned``), and by likelihood (``fit``).

    ``planned`` has the records' own mean and spread; a fitted curve's mean is used nowhere.
    """

    ward: str
    curve: StayCurve
    planned: LengthOfStay
    fit: StayFit

    @property
    def groups(self) -> tuple[tuple[float, float], ...]:
        """Which two groups of patients are there, as (share, mean days), shorter first? None where one curve will do."""
        single = min(self.fit.behind["lognormal"], self.fit.behind["gamma"])
        streams = self.fit.length_of_stay.streams
        if single <= RULED_OUT or not streams:
            return ()
        (first, shorter), (second, longer) = sorted(
            ((share, stay.mean_days) for share, stay in streams), key=lambda group: group[1]
        )
        apart = longer >= CLEARLY_LONGER * shorter and min(first, second) >= FEWEST_IN_GROUP
        return ((first, shorter), (second, longer)) if apart else ()

    @property
    def rows(self) -> tuple[tuple[str, float, str], ...]:
        """How far is each family behind the best, best first? (family, AIC difference, what that says)."""
        ordered = sorted(self.fit.behind.items(), key=lambda pair: pair[1])
        return tuple((NAMES[family], behind, self._said(family, behind)) for family, behind in ordered)

    def _said(self, family: str, behind: float) -> str:
        """Say what a difference means, and which family the plan draws from."""
        limits = ((0.0, "fits best"), (AS_GOOD, "fits as well"), (RULED_OUT, "a little behind"))
        said = next((words for limit, words in limits if behind <= limit), "as good as ruled out")
        return f"{said}; in the plan" if family == self.planned.shape else said

    @property
    def explained(self) -> str:
        """What is being compared, and what hangs on it?"""
        return EXPLAINED

    @property
    def verdict(self) -> str:
        """Which family do the records prefer, in one sentence?"""
        single = min(("lognormal", "gamma"), key=lambda family: self.fit.behind[family])
        name, behind = NAMES[single], self.fit.behind[single]
        if self.groups:
            (first, shorter), (second, longer) = self.groups
            return (
                f"Two groups of patients fit best: {wording.percent(first)} stay {wording.days(shorter)} on average, "
                f"{wording.percent(second)} stay {wording.days(longer)}. They are groups in the figures, not diagnoses."
            )
        if self.fit.family in ("lognormal", "gamma"):
            return f"{name.capitalize()} fits best."
        if behind <= RULED_OUT:
            return f"{name.capitalize()} does nearly as well as two groups of patients: the records hardly tell them apart."
        return (
            f"A mix of two curves fits better than {name}, but its parts are no two kinds of patient: they stay about "
            "as long, or one holds hardly anyone."
        )

    @property
    def in_the_plan(self) -> str:
        """Which curve does the plan draw stays from, and how far is it from the records?"""
        shares = self.shares()
        apart = 100.0 * float((shares["measured"] - shares["planned"]).abs().max())
        return (
            f"The plan draws stays from a {self.planned.shape} curve with the records' own mean, "
            f"{wording.days(self.planned.mean_days)}, never a fitted curve's ({wording.days(self.fit.fitted_mean_days)} here). "
            f"It is at most {apart:.0f} in 100 patients off the records on any day."
        )

    def shares(self) -> pd.DataFrame:
        """Which share is still in after so many days? Columns day, measured, planned; until 1 in 100 is left."""
        left = np.flatnonzero(self.curve.share_left <= SHOWN_UNTIL)
        until = float(self.curve.days[left[0]]) if left.size else self.curve.longest_days
        days = np.linspace(0.0, max(np.ceil(until), 2.0), PICTURE_POINTS + 1)
        return pd.DataFrame({"day": days, "measured": self.curve.at(days), "planned": self.planned.survival(days)})


def stay_families(records: Records, ward: str) -> StayFamilies:
    """Which family do this ward's stays follow: lognormal, gamma or two groups; and how near is the plan's curve?

    Compared by whole days: finished stays are rounded to the nearest, so that the hour of the ward's discharge round is
    not taken for a kind of patient, and a ward of any size takes as long as its longest stay has days. Patients still
    in, and those who were in before the records begin, count for what was seen of them.

    Raises:
        UnreadableRecords: no stays on it in the file's window, or none that ended.

    Source: see :func:`bedplan.models.fit_stay`.
    Checked by: tests/data/wards/test_stay_families.py
    """
    stays = stays_in_window(records, ward)
    curve = stay_curve(records, stays, ward)
    days, finished, entered = watched_stays(records, stays)
    seen = SeenStays(np.where(finished, np.floor(days + 0.5), days), finished, entered)
    planned = fitted_stay(curve)
    return StayFamilies(ward, curve, planned, fit_stay(seen, planned.mean_days, planned.variation))
