"""How far repairs carry the answer is shown, ward by ward."""

from __future__ import annotations

import pandas as pd
import pytest

from bedplan.data import estimate_demand, read_records, what_repairs_change

HEAD = b"patient_key,ward,start,end\n"


def rows(ward: str, first: int) -> bytes:
    """Return a stay of four days every second day of a year, each by another patient."""
    days = [f"2024-{1 + k // 28:02d}-{1 + k % 28:02d}" for k in range(0, 300, 2)]
    ends = [f"2024-{1 + (k + 4) // 28:02d}-{1 + (k + 4) % 28:02d}" for k in range(0, 300, 2)]
    return b"".join(
        f"P{first + k},{ward},{start} 10:00,{end} 10:00\n".encode()
        for k, (start, end) in enumerate(zip(days, ends, strict=True))
    )


def test_nothing_repaired_nothing_said() -> None:
    """A file that needed no repair has no such table."""
    assert what_repairs_change(read_records(HEAD + rows("A", 0), name="a.csv")) == ()


def test_a_repair_shows_where_it_acts() -> None:
    """A stay cut short because its patient was already on another ward moves its own ward's figure and no other's."""
    again = b"P0,B,2024-01-03 10:00,2024-01-06 10:00\n"
    records = read_records(HEAD + rows("A", 0) + rows("B", 1000) + again, name="a.csv")
    effect = {one.ward: one for one in what_repairs_change(records)}

    assert records.report.repaired >= 1
    assert effect["A"].without_repairs != effect["A"].beds_wanted
    assert effect["B"].without_repairs == effect["B"].beds_wanted


def test_a_forgotten_end_is_doubted_not_hidden() -> None:
    """A patient in since January of a year in which nobody stays a week: aside, and one bed more if it is true."""
    forgotten = b"P900,A,2024-01-02 10:00,\n"
    clean, records = (read_records(HEAD + rows("A", 0) + more, name="a.csv") for more in (b"", forgotten))
    (effect,) = what_repairs_change(records)
    days = (records.window[1] - pd.Timestamp("2024-01-02 10:00")) / pd.Timedelta(days=1)

    assert records.unread == {"A": 1}
    assert len(records.set_aside) == records.report.set_aside == 1
    assert effect.beds_wanted == estimate_demand(clean, "A").beds_wanted
    assert effect.if_doubted_are_true == pytest.approx(effect.beds_wanted + days / records.days)
    assert any("their end seems forgotten" in note for note in estimate_demand(records, "A").notes)
