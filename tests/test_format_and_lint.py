"""The code is formatted and linted, so that a change shows only what it changes."""

from __future__ import annotations

import subprocess
import sys
from typing import TYPE_CHECKING

import pytest

if TYPE_CHECKING:
    from pathlib import Path


@pytest.mark.parametrize("task", [["format", "--check", "."], ["check", "."]], ids=["format", "lint"])
def test_code_is_clean(root: Path, task: list[str]) -> None:
    """Ruff finds nothing to format and nothing to complain about."""
    done = subprocess.run([sys.executable, "-m", "ruff", *task], cwd=root, capture_output=True, text=True, check=False)

    assert done.returncode == 0, done.stdout + done.stderr
