"""What others rely on: every public name is there, from the top and from its own part."""

from __future__ import annotations

import subprocess
import sys
from typing import TYPE_CHECKING

import pytest

import bedplan

if TYPE_CHECKING:
    from pathlib import Path


def test_every_public_name_is_the_part_s_own() -> None:
    """The top of the package hands out the very objects of its parts."""
    from bedplan import decision, models  # noqa: PLC0415

    assert len(dir(bedplan)) >= 30
    for name in dir(bedplan):
        assert getattr(bedplan, name) is not None
    assert bedplan.decide is decision.decide
    assert bedplan.MODELS is models.MODELS


def test_an_unknown_name_says_so() -> None:
    """A name that is not public is refused by its name."""
    with pytest.raises(AttributeError, match="no public name 'solve'"):
        _ = bedplan.solve


def test_models_come_in_their_order() -> None:
    """The models are listed once, from the average formula to patients who wait, and the list can't be changed."""
    assert list(bedplan.MODELS) == ["average_occupancy", "erlang_loss", "unlimited_beds", "seasonal_loss", "waiting"]
    with pytest.raises(TypeError):
        bedplan.MODELS["mine"] = None


def test_asking_for_one_part_loads_no_other(root: Path) -> None:
    """The models can be had without the page server, tables or charts being loaded."""
    code = "import sys, bedplan.models; print(sorted({'pandas', 'streamlit', 'altair'} & set(sys.modules)))"
    done = subprocess.run([sys.executable, "-c", code], cwd=root, capture_output=True, text=True, check=True)

    assert done.stdout.strip() == "[]"
