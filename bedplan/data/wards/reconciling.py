"""Do the figures agree? The census rebuilt from stays against the official one, flows between wards, bed-days."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from bedplan.data.files.dates import DAY_SECONDS
from bedplan.data.wards.census_check import AGREES, check_census
from bedplan.data.wards.occupancy import present_by_ward
from bedplan.wording import percent

if TYPE_CHECKING:
    from collections.abc import Mapping

    from bedplan.data.beside.census import Census
    from bedplan.data.beside.returns import MonthlyReturn
    from bedplan.data.cleaning.records import Records

SMALLEST_GAP_DAYS = 0.001
FEWEST_TOLD = 8  # counts of 1 to 7 are withheld in documents: common disclosure practice for health statistics
OUTSIDE = "outside"


@dataclass(frozen=True)
class Flows:
    """Who came and went?

    ``table``: from, to, patients, with "outside" for the world. ``balance``: one row a ward with external_in,
    transfers_in, transfers_out, external_out, present_first, present_last, which always add up.
    """

    table: pd.DataFrame
    balance: pd.DataFrame


def flows(records: Records) -> Flows:
    """Who moved from which ward to which within the window, and do comings and goings explain the patients present?

    A stay that starts within a day of the patient's last one, and where the file knows hospital stays within the same
    one, is a transfer.

    Checked by: tests/data/wards/test_reconciling.py
    """
    stays = records.stays
    order = np.lexsort((stays["start"].to_numpy(), stays["patient_key"].to_numpy()))
    patient, start, end = (stays[key].to_numpy()[order] for key in ("patient_key", "start", "end"))
    names = np.array([*stays["ward"].cat.categories, OUTSIDE], dtype=object)
    outside = len(names) - 1
    ward = stays["ward"].cat.codes.to_numpy().astype(np.int64)[order]
    moved = patient[1:] == patient[:-1]
    if "spell_key" in stays:
        spell = stays["spell_key"].to_numpy()[order]
        moved &= spell[1:] == spell[:-1]
    moved &= ~np.isnat(end[:-1]) & (start[1:] - end[:-1] <= np.timedelta64(86_400, "s"))
    came_from, went_to = np.full(ward.size, outside), np.full(ward.size, outside)
    came_from[1:][moved], went_to[:-1][moved] = ward[:-1][moved], ward[1:][moved]
    first, last = (np.datetime64(moment, "s") for moment in records.window)
    comes = (start >= first) & (start < last)
    goes = ~np.isnat(end) & (end >= first) & (end < last)
    left = goes & (went_to == outside)
    pairs = np.concatenate([came_from[comes] * names.size + ward[comes], ward[left] * names.size + outside])
    found, patients = np.unique(pairs, return_counts=True)
    table = pd.DataFrame({"from": names[found // names.size], "to": names[found % names.size], "patients": patients})
    marked = {
        "external_in": comes & (came_from == outside),
        "transfers_in": comes & (came_from != outside),
        "transfers_out": goes & (went_to != outside),
        "external_out": left,
        "present_first": (start < first) & ~(end < first),
        "present_last": (start < last) & ~(end < last),
    }
    counts = {what: np.bincount(ward[which], minlength=outside) for what, which in marked.items()}
    balance = pd.DataFrame(counts, index=pd.Index(names[:outside], name="ward"))
    return Flows(table.sort_values("patients", ascending=False, ignore_index=True), balance)


@dataclass(frozen=True, slots=True)
class Check:
    """One thing that must agree: what was compared, the figures, and a plain verdict.

    ``points_at_few``: the figures rest on 1 to 7 rows or patients, so a document withholds them.
    """

    what: str
    figures: str
    verdict: str
    points_at_few: bool = False


def adds_up(records: Records, census: Census | None = None, returned: MonthlyReturn | None = None) -> tuple[Check, ...]:
    """Does it add up? Bed-days, comings and goings, and counts rebuilt from stays against the official ones.

    Bed-days are summed once more from the stays that count, and patients present are counted by another way than
    comings and goings are. The official count is compared at midnight, or at its usual time where it has no midnight.

    Checked by: tests/data/wards/test_reconciling.py
    """
    checks = [_bed_days(records), _comings_and_goings(records), _wards_a_stay(records), _times(records)]
    if census is not None:
        checks.append(_against_census(records, census.linked_to(records)))
    if returned is not None:
        checks.append(_against_return(records, returned.linked_to(records)))
    return tuple(checks)


def _few(count: int) -> bool:
    """Could a count point at a person?"""
    return 0 < count < FEWEST_TOLD


def _bed_days(records: Records) -> Check:
    """Do the bed-days of the file, less those set aside, come back in the stays that count?"""
    report, stays = records.report, records.stays
    start = stays["start"].to_numpy()
    end = stays["end"].fillna(records.seen_until).to_numpy()
    counted = float((np.maximum(end, start) - start).astype("timedelta64[s]").astype(np.int64).sum()) / DAY_SECONDS
    expected = report.bed_days_in + report.bed_days_added - report.bed_days_set_aside
    by_repairs = f" {'+' if report.bed_days_added >= 0 else '−'} {abs(report.bed_days_added):,.0f} by repairs"
    gap = counted - expected
    return Check(
        "Bed-days in the file = used + set aside",
        f"{report.bed_days_in:,.0f}{by_repairs if report.repaired or report.bed_days_added else ''}"
        f" = {counted:,.0f} + {report.bed_days_set_aside:,.0f}",
        "adds up" if abs(gap) <= SMALLEST_GAP_DAYS else f"does not add up: {gap:+,.1f} bed-days",
        _few(report.set_aside) or _few(report.repaired),
    )


def _comings_and_goings(records: Records) -> Check:
    """Do comings and goings on every ward explain how many more or fewer patients were in at the end?"""
    balance = flows(records).balance
    came, moved_in, moved_out, left = (
        balance[key] for key in ("external_in", "transfers_in", "transfers_out", "external_out")
    )
    change = balance["present_last"] - balance["present_first"]
    gap = came + moved_in - moved_out - left - change
    off = [str(ward) for ward in gap.index[gap != 0]]
    return Check(
        "Came in + moved in − moved out − left = change in patients",
        f"{came.sum():,} + {moved_in.sum():,} − {moved_out.sum():,} − {left.sum():,} = {_signed(int(change.sum()))}",
        f"does not add up on {', '.join(off[:5])}" if off else "adds up on every ward",
        any(_few(int(one.sum())) for one in (came, moved_in, moved_out, left)) or _few(abs(int(change.sum()))),
    )


def _wards_a_stay(records: Records) -> Check:
    """How many ward stays does a hospital stay hold?"""
    what, stays = "Ward stays for each hospital stay", records.stays
    if "spell_key" not in stays:
        return Check(what, "not known", "the file has no key of hospital stays, so moves can't be told")
    whole = int(stays["spell_key"].nunique())
    verdict = (
        "moves between wards are in the file" if len(stays) > whole else "no moves: ask whether they were exported"
    )
    return Check(what, f"{len(stays):,} ÷ {whole:,} = {len(stays) / whole:.2f}", verdict, _few(len(stays) - whole))


def _times(records: Records) -> Check:
    """How many stays have times of day? Midnight sharp is taken for none: by chance it is 1 minute in 1,440."""
    stays, what = records.stays, "Stays with times of day"
    sharp = [(stays[key].dt.normalize() == stays[key]).to_numpy() for key in ("start", "end")]
    without = int((sharp[0] | sharp[1]).sum()) if records.has_times else len(stays)
    if not records.has_times:
        return Check(what, percent(0.0, 0), "dates only: peaks within the day can't be seen")
    share = without / len(stays)
    verdict = "counted by the hour" if share <= AGREES else f"{percent(share)} stand at midnight sharp: ask why"
    return Check(what, percent(1.0 - share), verdict, _few(without))


def _against_census(records: Records, census: Census) -> Check:
    """Does the count rebuilt from stays agree with the census?"""
    clocks = census.table["time"] - census.table["time"].dt.normalize()
    usual = pd.Timedelta(0) if (clocks == pd.Timedelta(0)).any() else clocks.mode()[0]
    clock = f"{pd.Timestamp(0) + usual:%H:%M}"
    kept = census.table[clocks == usual]
    wards = [ward for ward in records.wards if (kept["ward"] == ward).any()]
    checks = [check_census(records, replace(census, table=kept), ward, clock) for ward in wards]
    sums = {one.ward: (one.days["rebuilt"].sum(), one.days["official"].sum()) for one in checks if len(one.days)}
    found = _compared(f"Patients at {clock}, all days: from stays, against {census.name}", sums)
    shifted = [one for one in checks if one.apart]
    if not shifted:
        return found
    named = ", ".join(one.ward for one in shifted[:5])
    return replace(found, verdict=f"{found.verdict}; day by day they do not on {named}: {shifted[0].apart}")


def _against_return(records: Records, returned: MonthlyReturn) -> Check:
    """Do the nights counted from stays agree with the occupied bed-days of a monthly return, over whole months?"""
    whole = records.settled
    nights = {name: pd.Series(counts, whole.calendar) for name, counts in present_by_ward(whole, DAY_SECONDS).items()}
    days_known = pd.Series(1, whole.calendar.to_period("M")).groupby(level=0).sum()
    months = days_known.index[days_known == days_known.index.days_in_month]
    rows = returned.table[returned.table["month"].isin(months)]
    sums = {}
    for ward, official in rows.groupby("ward"):
        if ward in nights:
            mine = nights[ward][whole.calendar.to_period("M").isin(official["month"])]
            sums[str(ward)] = (float(mine.sum()), float(official["occupied"].sum()))
    return _compared(f"Nights: from stays, against {returned.name}", sums)


def _compared(what: str, sums: Mapping[str, tuple[float, float]]) -> Check:
    """Say by how much rebuilt counts differ from official ones, all wards together, and on which they don't agree."""
    if not sums:
        return Check(what, "not known", "no ward and day in both files")
    mine, official = (float(sum(column)) for column in zip(*sums.values(), strict=True))
    off = {ward: one - other for ward, (one, other) in sums.items() if abs(one - other) > AGREES * other}
    named = ", ".join(f"{ward} {_change(gap, sums[ward][1])}" for ward, gap in list(off.items())[:5])
    figures = f"{mine:,.0f} against {official:,.0f} ({_change(mine - official, official)})"
    return Check(what, figures, f"do not agree: {named}" if off else f"agree on every ward ({len(sums)})")


def _change(gap: float, of: float) -> str:
    """Write a difference as percent, or as a count where there is nothing to compare it with."""
    return f"{100 * gap / of:+.1f} %".replace("-", "−") if of > 0 else _signed(round(gap))


def _signed(count: int) -> str:
    """Write a change of a count."""
    return f"{count:+,}".replace("-", "−") if count else "0"
