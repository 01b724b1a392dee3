"""Whose ward is whose, and who lies elsewhere."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pytest

from bedplan.data.wards.specialty import find_home_wards

if TYPE_CHECKING:
    from collections.abc import Callable

    from bedplan.data import Records

HEADINGS = "patient_key,spell_key,ward,start,end,specialty"


def rows(ward: str, specialty: str, number: int, days: int, *, then: str = "") -> list[str]:
    """Return stays of one specialty on one ward, each followed by one on another if asked."""
    result = []
    for n in range(1, number + 1):
        key = f"{ward}{specialty}{n}"
        result.append(f"{key},{key},{ward},2024-01-{n:02d} 10:00,2024-01-{n + days:02d} 10:00,{specialty}")
        if then:
            result.append(
                f"{key},{key},{then},2024-01-{n + days:02d} 10:00,2024-01-{n + days + 2:02d} 10:00,{specialty}"
            )
    return result


def test_a_ward_belongs_to_the_specialty_that_fills_it(read: Callable[..., Records]) -> None:
    """Stroke patients on the surgical ward are outliers of the stroke ward."""
    homes = find_home_wards(
        read(
            *rows("Teal", "stroke", 9, 4),
            *rows("Curlew", "surgery", 9, 4),
            *rows("Curlew", "stroke", 3, 4),
            headings=HEADINGS,
        )
    )

    assert homes.home == {"stroke": "Teal", "surgery": "Curlew"}
    assert homes.outliers_by_ward().to_numpy().tolist() == [["Teal", "Curlew", 3, pytest.approx(12)]]
    assert len(homes.own_patients("Teal")) == 12


def test_assessment_on_the_way_is_no_outlier(read: Callable[..., Records]) -> None:
    """Stroke patients who are assessed on Heron and move on to Teal were never outliers there."""
    homes = find_home_wards(
        read(*rows("Heron", "stroke", 9, 1, then="Teal"), *rows("Heron", "acute", 9, 2), headings=HEADINGS)
    )

    assert homes.through == ("Heron",)
    assert homes.outliers_by_ward().empty
    assert len(homes.own_patients("Teal")) == 9


def test_without_a_specialty_nothing_is_said(read: Callable[..., Records]) -> None:
    """No column, no claim."""
    assert find_home_wards(read("a,a,Heron,2024-01-01 10:00,2024-01-02 10:00")) is None
