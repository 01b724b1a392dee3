"""Small files for the tests of reading: a clean ward, written out row by row."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pytest

from bedplan.data import Records, read_records

if TYPE_CHECKING:
    from collections.abc import Callable

HEADINGS = "patient_key,spell_key,ward,start,end"


def stay_file(*rows: str, headings: str = HEADINGS) -> bytes:
    """Return a CSV file of these rows."""
    return "\n".join([headings, *rows, ""]).encode()


@pytest.fixture(scope="session")
def read() -> Callable[..., Records]:
    """Return a reader for rows written out as text."""

    def reader(*rows: str, headings: str = HEADINGS, **options: object) -> Records:
        return read_records(stay_file(*rows, headings=headings), name="stays.csv", **options)

    return reader


@pytest.fixture(scope="session")
def larkmere(demo_data) -> Records:  # noqa: ANN001
    """Return the invented hospital's stays."""
    return read_records(demo_data / "stays.csv")
