"""What all tests share: where the project is, and skips that count as failures where everything must be installed."""

from __future__ import annotations

import datetime as dt
import os
from pathlib import Path
from typing import TYPE_CHECKING

import pytest
from hypothesis import settings

if TYPE_CHECKING:
    from collections.abc import Generator

# a busy machine is slow, not wrong: no example is timed; and every run tries the same ones
settings.register_profile("bedplan", deadline=None, derandomize=True)
settings.load_profile("bedplan")

ROOT = Path(__file__).resolve().parent.parent
NO_SKIPS = bool(os.environ.get("BEDPLAN_NO_SKIPS"))


def _skip_is_failure(report: pytest.TestReport | pytest.CollectReport) -> None:
    if NO_SKIPS and report.skipped and not hasattr(report, "wasxfail"):
        report.outcome = "failed"
        report.longrepr = f"skipped where nothing may be skipped: {report.longrepr}"


@pytest.hookimpl(hookwrapper=True)
def pytest_runtest_makereport() -> Generator[None]:
    """Turn a skipped test into a failed one where everything must be installed."""
    outcome = yield
    _skip_is_failure(outcome.get_result())


@pytest.hookimpl(hookwrapper=True)
def pytest_make_collect_report() -> Generator[None]:
    """Turn a skipped file into a failed one where everything must be installed."""
    outcome = yield
    _skip_is_failure(outcome.get_result())


@pytest.fixture(scope="session")
def root() -> Path:
    """Return the project's folder."""
    return ROOT


@pytest.fixture(scope="session")
def demo_data() -> Path:
    """Return the folder of the invented hospital's files."""
    return ROOT / "demo_data"


@pytest.fixture(scope="session")
def stays_csv() -> bytes:
    """Return ward stays in three columns: a stay every 21 hours for a year, on East and West in turn, for 3 to 6 days."""
    first = dt.datetime(2024, 1, 1, 9)  # noqa: DTZ001  records hold local clock times
    rows = ["Ward,Start,End"]
    for count in range(418):
        came = first + dt.timedelta(hours=21 * count)
        left = came + dt.timedelta(days=3 + count // 2 % 4, hours=count % 5)
        rows.append(f"{'East' if count % 2 else 'West'},{came:%Y-%m-%d %H:%M},{left:%Y-%m-%d %H:%M}")
    return "\n".join(rows).encode()
