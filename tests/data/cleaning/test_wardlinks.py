"""Names that may mean one ward are proposed to a person, never joined unasked."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pandas as pd

if TYPE_CHECKING:
    from collections.abc import Callable

    from bedplan.data import Records


def rows(ward: str, first: str, last: str, every_hours: int = 24) -> list[str]:
    """Return a stay every so many hours from one day to another."""
    return [
        f"{ward}{n},{ward}{n},{ward},{day:%Y-%m-%d %H:%M},{day + pd.Timedelta(days=2):%Y-%m-%d %H:%M}"
        for n, day in enumerate(pd.date_range(first, last, freq=f"{every_hours}h"))
    ]


def test_a_renamed_ward_is_proposed(read: Callable[..., Records]) -> None:
    """One name stops in September and another starts in October, as busy as the first."""
    records = read(
        *rows("Ward 7", "2024-04-01", "2024-09-30"),
        *rows("Kestrel", "2024-10-01", "2025-03-28"),
        *rows("Heron", "2024-04-01", "2025-03-28"),
    )

    (link,) = records.links
    assert (link.old, link.new, link.kind) == (("Ward 7",), ("Kestrel",), "renamed")
    assert link.since == pd.Timestamp("2024-10-01")
    assert records.wards == ("Heron", "Kestrel", "Ward 7")
    assert link.sentence in records.report.notes


def test_merged_and_split_wards_are_proposed(read: Callable[..., Records]) -> None:
    """Two names stop and one starts with their admissions together; or the reverse."""
    parts = [*rows("North", "2024-04-01", "2024-09-30", 24), *rows("South", "2024-04-01", "2024-09-30", 24)]
    whole = rows("Teal", "2024-10-01", "2025-03-28", 12)
    (merged,) = read(*parts, *whole).links
    assert (set(merged.old), merged.new, merged.kind) == ({"North", "South"}, ("Teal",), "merged")

    whole = rows("Teal", "2024-04-01", "2024-09-30", 12)
    parts = [*rows("North", "2024-10-01", "2025-03-28", 24), *rows("South", "2024-10-01", "2025-03-28", 24)]
    (split,) = read(*whole, *parts).links
    assert (split.old, set(split.new), split.kind) == (("Teal",), {"North", "South"}, "split")


def test_two_spellings_of_a_number_are_proposed(read: Callable[..., Records]) -> None:
    """Ward 7, WARD07 and W7 may be one ward; a person must say so."""
    records = read(
        *(row for name in ("Ward 7", "WARD07", "W7", "Ward 8") for row in rows(name, "2024-04-01", "2024-05-01"))
    )

    assert [link.kind for link in records.links] == ["spelling", "spelling"]
    assert len(records.wards) == 4


def test_wards_that_run_all_along_are_left_alone(read: Callable[..., Records]) -> None:
    """Nothing is proposed for wards that neither start nor stop."""
    assert read(*rows("Heron", "2024-04-01", "2025-03-28"), *rows("Teal", "2024-04-02", "2025-03-27")).links == ()
