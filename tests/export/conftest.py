"""A justification with a ward that turns away and one that does not, both with a winter."""

from __future__ import annotations

import datetime as dt

import numpy as np
import pytest

from bedplan.decision import TurnAwayLimit, Ward, decide
from bedplan.export import Justification, Source, WardCase
from bedplan.models import MODELS, Demand, LengthOfStay

WINTER = (1.3, 1.18, 1.06, 0.97, 0.9, 0.84, 0.8, 0.8, 0.88, 1.0, 1.1, 1.17)


def make_case(name: str, beds: int, when_full: str) -> WardCase:
    """Return one ward's case at a limit of 1 in 20 in every month."""
    ward = Ward(name, beds, Demand(3.4, LengthOfStay(7.0, 0.95), month_factors=WINTER), when_full=when_full)
    curves = {model: compute(ward.demand, np.arange(60)) for model, compute in MODELS.items()}
    rule = TurnAwayLimit(0.05)
    settings = (("Demand, against the records", "+5 %"),)
    return WardCase(
        ward, curves, rule, decide(curves[ward.model], rule), (("Mean stay", "7.0 days", "records"),), settings
    )


@pytest.fixture(scope="session")
def justification() -> Justification:
    """Return a justification of two wards, one with a name that tries to be code."""
    source = Source(
        name="stays <b>.csv",
        fingerprint="ab" * 32,
        window="01 April 2022 to 01 April 2025",
        rows_in=1000,
        used=985,
        repaired=3,
        set_aside=12,
        reasons=(("The stay ends before it starts.", 12, 40.0), ("A lost end was filled.", 3, 9.0)),
    )
    cases = (make_case("Curlew", 20, "leaves"), make_case('=HYPERLINK("x") <script>alert(1)</script>', 28, "waits"))
    return Justification(cases, source, dt.date(2026, 12, 1))
