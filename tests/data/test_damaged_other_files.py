"""Hundreds of damaged copies of each file beside the stays: never a traceback, and the counts always add up."""

from __future__ import annotations

import datetime as dt
import random
from typing import TYPE_CHECKING, NamedTuple

import pandas as pd
import pytest

from bedplan.data import (
    read_bed_requests,
    read_cancellations,
    read_capacity,
    read_census,
    read_monthly_return,
    read_ready_dates,
    read_records,
    read_refusals,
)
from bedplan.errors import BedplanError
from tests.data.spoiling import spoiled_bytes

if TYPE_CHECKING:
    from collections.abc import Callable

COPIES, BATCHES = 500, 5
MOST_USED = ("capacity", "refusals", "census", "return")  # of the others there are a hundred copies each
DAYS = pd.date_range("2024-01-20", periods=40)
WARDS = ("Heron", "Teal", "Merlin")
STAYS = (
    b"patient_key,ward,start,end\na,heron,2024-01-01 10:00,2024-01-04 10:00\nb,Owl,2024-01-01 10:00,2024-01-04 10:00\n"
)


class Kind(NamedTuple):
    """One kind of file: how it is read, its headings and its rows."""

    read: Callable
    headings: str
    rows: list[str]


KINDS = {
    "capacity": Kind(
        read_capacity,
        "ward,from,to,funded_beds,staffed_beds,closed_beds,reason",
        [
            f"{WARDS[n % 3]},{day:%Y-%m-%d},{day:%Y-%m-%d},28,{26 + n % 3} (+2),{n % 2},outbreak"
            for n, day in enumerate(DAYS)
        ],
    ),
    "refusals": Kind(
        read_refusals,
        "date,time,ward,reason,outcome",
        [f"{day:%Y-%m-%d},{n % 24:02d}:15,{WARDS[n % 3]},no bed,another hospital" for n, day in enumerate(DAYS)],
    ),
    "bed requests": Kind(
        read_bed_requests,
        "requested_at,placed_at,ward,outcome",
        [f"{day:%Y-%m-%d} 10:00,{day:%Y-%m-%d} 16:00,{WARDS[n % 3]},placed" for n, day in enumerate(DAYS)],
    ),
    "cancellations": Kind(
        read_cancellations,
        "planned_date,ward,reason,cancelled",
        [f"{day:%Y-%m-%d},{WARDS[n % 3]},no bed,{'YN'[n % 4 // 3]}" for n, day in enumerate(DAYS)],
    ),
    "census": Kind(
        read_census,
        "date,time,ward,beds_available,beds_occupied,beds_closed",
        [f"{day:%Y-%m-%d},08:00,{ward},24 (+2),{20 + n % 5},0" for n, day in enumerate(DAYS[:14]) for ward in WARDS],
    ),
    "wide census": Kind(
        read_census,
        "Date,Heron occupied,Heron beds,Teal occupied,Teal beds,Merlin",
        [f"{day:%Y-%m-%d},{20 + n % 5},24,{9 + n % 3},12,{n % 4}" for n, day in enumerate(DAYS)],
    ),
    "return": Kind(
        read_monthly_return,
        "month,ward,available_bed_days,occupied_bed_days,discharges",
        [f'2024-{n % 12 + 1:02d},{WARDS[n // 12]},"1.{n:03d}",{700 + n},{160 + n}' for n in range(36)],
    ),
    "ready dates": Kind(
        read_ready_dates,
        "patient_key,spell_key,ready",
        [f"p{n % 9},s{n},{day:%Y-%m-%d} 10:00" for n, day in enumerate(DAYS)],
    ),
}
CELLS = (
    *("", " ", "=1+1", "2024-02-30 10:00", "31/12/2024", "12/31/2024", "03/04/2024", "45321.5", "45017", "1e400", "-1"),
    *("Total", "NULL", "n/a", "ÿ", "²", "\u202e", "99999999999999", "2024-01-01T10:00Z", "0001-01-01", "9999-12-31"),
    *("é" * 300, '"', "';--", "\t", "20/24", "24 (+2)", "closed", "1.234,5", "1'234", "25:00", "Q1", "K7", "admitted"),
    *("31/12/9999", "00000-1", "٣", "1/1/0", "Mai 0000", "inf", "nan", "0x1F", "1_000"),
)


def damaged(kind: Kind, seed: int) -> bytes:
    """Return one damaged copy: spoiled one to six times, then encoded, then perhaps bytes spoiled."""
    chance = random.Random(seed)  # noqa: S311  not for secrets
    table = [row.split(",") for row in (kind.headings, *kind.rows)]
    for _ in range(chance.randrange(1, 7)):
        chance.choice((_cell, _cell, _cell, _column, _swap, _drop, _repeat, _longer))(table, chance)
    text = "\n".join(chance.choice((",", ";", "\t") if seed % 3 == 0 else (",",)).join(row) for row in table)
    return spoiled_bytes(text, chance)


def _cell(table: list[list[str]], chance: random.Random) -> None:
    """Spoil one to twenty cells, headings now and then."""
    for _ in range(chance.randrange(1, 20)):
        row = chance.choice(table if chance.random() < 0.1 else table[1:] or table)
        row[chance.randrange(len(row))] = chance.choice(CELLS)


def _column(table: list[list[str]], chance: random.Random) -> None:
    """Write the same into a whole column, or another way of writing dates."""
    place, cell = chance.randrange(len(table[0])), chance.choice(CELLS)
    form = chance.choice(("%d/%m/%Y", "%m/%d/%Y", "%d-%b-%y", "%Y%m%d", "%d.%m.%Y %H.%M"))
    for row in table[1:]:
        if len(row) <= place or chance.random() > 0.7:
            continue
        try:
            row[place] = dt.datetime.fromisoformat(row[place]).strftime(form)
        except ValueError:
            row[place] = cell if chance.random() < 0.5 else row[place]


def _swap(table: list[list[str]], chance: random.Random) -> None:
    """Exchange two columns under their headings."""
    one, other = chance.sample(range(len(table[0])), 2)
    for row in table[1:]:
        if len(row) > max(one, other):
            row[one], row[other] = row[other], row[one]


def _drop(table: list[list[str]], chance: random.Random) -> None:
    """Lose rows, or a column."""
    if chance.random() < 0.5 and len(table[0]) > 2:
        place = chance.randrange(len(table[0]))
        for row in table:
            del row[place : place + 1]
        return
    table[1:] = [row for row in table[1:] if chance.random() < 0.8]


def _repeat(table: list[list[str]], chance: random.Random) -> None:
    """Repeat rows, headings among them, and shuffle."""
    rows = table[1:] + [list(chance.choice(table)) for _ in range(chance.randrange(1, 8))]
    chance.shuffle(rows)
    table[1:] = rows


def _longer(table: list[list[str]], chance: random.Random) -> None:
    """Put one cell more into some rows, now and then into all."""
    every = chance.random() < 0.2
    for row in table[1:]:
        if every or chance.random() < 0.1:
            row.append(chance.choice(CELLS))


def outcome(kind: Kind, seed: int, records: object) -> str:
    """Read one damaged copy and check what comes back."""
    try:
        order = {"date_order": ("day first", "month first", "row by row")[seed % 3]} if seed % 2 else {}
        found = kind.read(damaged(kind, seed), name="damaged.csv", **order)
    except BedplanError as problem:
        return "refused" if str(problem).strip().endswith(".") else f"{seed}: {problem}"
    report = found.report
    assert report.rows_in == report.used + report.repaired + report.set_aside, seed
    assert sum(report.reasons.values()) == report.repaired + report.set_aside, seed
    assert report.used + report.repaired > 0, seed
    if hasattr(found, "wards"):
        linked = found.linked_to(records)
        assert set(linked.unknown_wards) == set(linked.wards) - {"heron", "Owl"}, seed
        _ask_everything(linked)
    return "read"


def _ask_everything(found: object) -> None:
    """Ask each ward's figures: they may be refused in a sentence, never stop the program or be no numbers."""
    for ward in found.wards:
        try:
            if hasattr(found, "open_beds_by_day"):
                assert (found.open_beds_by_day(ward, DAYS) >= 0).all()
                assert min(found.beds_today(ward), found.funded_today(ward)) >= 0
            if hasattr(found, "for_lack_of_beds"):
                assert len(found.for_lack_of_beds(ward)) <= len(found.of_ward(ward))
                assert isinstance(found.notes_on(ward), tuple)
            if hasattr(found, "variance_over_mean"):
                assert found.variance_over_mean(ward, "08:00") >= 0
            if hasattr(found, "mean_stay_days"):
                assert found.mean_stay_days(ward) >= 0
                assert found.demand(ward).offered_load > 0
        except BedplanError as problem:
            if not str(problem).endswith("."):
                raise


@pytest.mark.parametrize(
    ("name", "batch"), [(name, batch) for name in KINDS for batch in range(BATCHES if name in MOST_USED else 1)]
)
def test_damage_is_reported_never_a_traceback(name: str, batch: int) -> None:
    """Each copy is read with all rows accounted for, or refused in whole sentences; nothing else may happen."""
    records, each = read_records(STAYS), COPIES // BATCHES
    outcomes = [outcome(KINDS[name], seed, records) for seed in range(batch * each, (batch + 1) * each)]

    assert set(outcomes) == {"read", "refused"}
    assert outcomes.count("read") > each // 5  # most damage leaves something to read


@pytest.mark.parametrize("name", KINDS)
def test_the_undamaged_files_are_read_whole(name: str) -> None:
    """What the damage starts from is used row by row; the bookings kept are set aside."""
    kind = KINDS[name]
    report = kind.read("\n".join([kind.headings, *kind.rows]).encode()).report

    assert report.set_aside == (10 if name == "cancellations" else 0)
