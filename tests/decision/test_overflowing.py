"""Overflow between wards as their planners see it: cases whose answer is known in closed form, months included."""

from __future__ import annotations

import numpy as np
import pytest

from bedplan.decision import Ward, hold_back_effect, overflow_bay_effect, overflow_effect
from bedplan.decision.overflowing import BAY_STAYS_NOTE, STAYS_ALIKE_NOTE, STEADY_MONTHS_NOTE
from bedplan.errors import ImpossibleFigure
from bedplan.models import BookedList, Demand, LengthOfStay
from tests.erlang_sum import share

WINTER = np.array([1.4, 1.3, 1.1, 1.0, 0.9, 0.7, 0.7, 0.7, 0.9, 1.0, 1.1, 1.2])
# a 365-day year without 31 December
MONTH_DAYS = np.array([31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 30])
# so short that each month's load follows its own arrivals; factors are brought to a mean of 1 over the days
SHORT = LengthOfStay(0.02)
FACTORS = WINTER / (WINTER @ MONTH_DAYS / 364)
WEIGHTS = MONTH_DAYS * FACTORS / 364


def ward(name: str, beds: int, load: float, stay_days: float = 4.0, **rhythm: object) -> Ward:
    """Return a ward of this mean load."""
    return Ward(name, beds, Demand(load / stay_days, LengthOfStay(stay_days), **rhythm))


def test_a_host_without_patients_is_more_beds() -> None:
    """Overflow into a ward nobody else uses is a ward of all the beds: B(a, both), and Little's outliers."""
    effect = overflow_effect(ward("Plover", 8, 9.0), ward("Teal", 5, 0.0))

    assert effect.home_patients.share_before == pytest.approx(share(9.0, 8), rel=1e-7)
    assert effect.home_patients.share_after == pytest.approx(share(9.0, 13), rel=1e-7)
    assert effect.home_patients.before == pytest.approx(365 * 9 / 4 * share(9.0, 8), rel=1e-7)
    assert effect.outliers == pytest.approx(9.0 * (share(9.0, 8) - share(9.0, 13)), rel=1e-7)
    assert effect.host_patients.after == 0.0


def test_months_are_read_one_by_one_and_weighed_by_patients() -> None:
    """With a season and stays of half an hour the year is the patients' mean over twelve steady months."""
    home = Ward("Plover", 8, Demand(8.0 / 0.02, SHORT, month_factors=WINTER))
    host = Ward("Teal", 5, Demand(0.0, SHORT))
    effect = overflow_effect(home, host)

    expected = [sum(w * share(8.0 * f, beds) for w, f in zip(WEIGHTS, FACTORS, strict=True)) for beds in (8, 13)]
    assert effect.home_patients.share_before == pytest.approx(expected[0], rel=1e-3)
    assert effect.home_patients.share_after == pytest.approx(expected[1], rel=1e-3)
    # a year read at its mean load would hide the winter
    assert expected[1] > 1.5 * share(8.0, 13)


def test_the_hosts_patients_keep_their_own_months() -> None:
    """A seasonal host is weighed by its own patients: with nobody sent, it fares after as before."""
    effect = overflow_effect(Ward("Plover", 8, Demand(0.0, SHORT)), Ward("Teal", 9, Demand(400.0, SHORT, WINTER)))
    expected = sum(w * share(8.0 * f, 9) for w, f in zip(WEIGHTS, FACTORS, strict=True))

    assert effect.host_patients.share_before == pytest.approx(expected, rel=1e-3)
    assert effect.host_patients.share_after == pytest.approx(effect.host_patients.share_before, rel=1e-7)


def test_a_host_without_beds_changes_nothing() -> None:
    """Where the host has no beds the home's patients fare as before, and the host's are all refused."""
    effect = overflow_effect(ward("Plover", 8, 9.0), ward("Teal", 0, 3.0))

    assert effect.home_patients.share_after == pytest.approx(effect.home_patients.share_before, rel=1e-9)
    assert (effect.host_patients.share_before, effect.host_patients.share_after) == pytest.approx((1.0, 1.0))
    assert effect.outliers == pytest.approx(0.0, abs=1e-9)


def test_overflow_helps_the_home_and_costs_the_host() -> None:
    """Both sides are shown, and full sharing of the beds bounds what overflow one way can do for both together."""
    effect = overflow_effect(ward("Plover", 10, 10.0), ward("Teal", 12, 9.0))
    both = effect.home_patients.after + effect.host_patients.after

    assert effect.home_patients.after < effect.home_patients.before
    assert effect.host_patients.after > effect.host_patients.before
    assert effect.host_patients.share_before == pytest.approx(share(9.0, 12), rel=1e-7)
    assert both >= 365 * 19 / 4 * share(19.0, 22)
    assert effect.notes == (STEADY_MONTHS_NOTE,)


def test_large_wards_with_unlike_stays_say_what_they_leave_out() -> None:
    """Told apart where small enough, alike with a note where not; the home ward itself never feels the difference."""
    small = overflow_effect(ward("Plover", 10, 10.0, 2.0), ward("Teal", 12, 9.0, 9.0))
    large = overflow_effect(ward("Plover", 40, 38.0, 2.0), ward("Teal", 50, 45.0, 9.0))

    assert STAYS_ALIKE_NOTE not in small.notes
    assert STAYS_ALIKE_NOTE in large.notes
    assert large.home_patients.share_before == pytest.approx(share(38.0, 40), rel=1e-7)


def test_one_ward_with_a_bay_is_a_larger_ward() -> None:
    """A bay that one ward has to itself makes it the same ward with more beds."""
    effect = overflow_bay_effect([ward("Plover", 10, 11.0)], 4)

    assert effect.patients.share_before == pytest.approx(share(11.0, 10), rel=1e-7)
    assert effect.patients.share_after == pytest.approx(share(11.0, 14), rel=1e-4)
    assert effect.patients.after == pytest.approx(365 * 11 / 4 * share(11.0, 14), rel=1e-4)
    assert effect.notes == (STEADY_MONTHS_NOTE,)


def test_a_bay_refuses_what_is_known_of_it() -> None:
    """Loads 8 and 10 on 10 beds each with 5 shared: 4.2971 % by an exact chain; both wards gain by the bay."""
    effect = overflow_bay_effect([ward("Plover", 10, 8.0), ward("Teal", 10, 10.0)], 5)
    none = overflow_bay_effect([ward("Plover", 10, 8.0), ward("Teal", 10, 10.0)], 0)

    # an exact chain of both wards and the bay, computed independently
    assert effect.patients.share_after == pytest.approx(0.042971, abs=1e-6)
    assert effect.patients.after == pytest.approx(sum(one.after for one in effect.by_ward))
    assert all(one.after < one.before for one in effect.by_ward)
    assert none.patients.share_after == pytest.approx(none.patients.share_before, rel=1e-6)
    assert effect.patients.share_before == pytest.approx((8 * share(8.0, 10) + 10 * share(10.0, 10)) / 18, rel=1e-7)


def test_patients_count_once_however_long_they_stay() -> None:
    """Without a bay each ward keeps Erlang's share, and all together are weighed by patients, not by the beds they want."""
    quick, slow = ward("Plover", 10, 8.0, 1.0), ward("Teal", 10, 10.0, 5.0)
    effect = overflow_bay_effect([quick, slow], 0)

    # 8 patients a day and 2
    assert effect.patients.share_before == pytest.approx(0.8 * share(8.0, 10) + 0.2 * share(10.0, 10), rel=1e-7)
    assert effect.patients.share_after == pytest.approx(effect.patients.share_before, rel=1e-6)
    assert effect.notes == (STEADY_MONTHS_NOTE, BAY_STAYS_NOTE)


def test_a_bay_follows_each_wards_own_season() -> None:
    """A winter ward and one without seasons: each is the mean of its months over its own patients."""
    winter, steady = Ward("Plover", 6, Demand(6.0 / 0.02, SHORT, month_factors=WINTER)), ward("Teal", 6, 5.0, 0.02)
    effect = overflow_bay_effect([winter, steady], 0)

    expected = sum(w * share(6.0 * f, 6) for w, f in zip(WEIGHTS, FACTORS, strict=True))
    assert effect.by_ward[0].share_after == pytest.approx(expected, rel=1e-3)
    assert effect.by_ward[1].share_after == pytest.approx(share(5.0, 6), rel=1e-6)


def held_back_by_hand(loads: tuple[float, float], beds: int, held_back: int) -> tuple[float, float]:
    """Return both shares refused when stays are alike: a chain of the number of beds in use only."""
    weight = [1.0]
    for used in range(beds):
        weight.append(weight[-1] * (loads[0] + (loads[1] if used < beds - held_back else 0.0)) / (used + 1))
    return weight[-1] / sum(weight), sum(weight[beds - held_back :]) / sum(weight)


@pytest.mark.parametrize("held_back", [0, 2, 5])
def test_holding_back_beds_moves_the_risk_to_booked_patients(held_back: int) -> None:
    """Emergencies gain, booked patients lose, by the chain of beds in use worked out here."""
    booked = BookedList((7, 7, 7, 0, 0, 0, 0), LengthOfStay(4.0), attends=0.8)
    emergency = Ward("Curlew", 18, Demand(2.0, LengthOfStay(4.0), booked=(booked,)))
    effect = hold_back_effect(emergency, held_back)
    # 21 × 0.8 ÷ 7 = 2.4 a day for four days
    before, after = held_back_by_hand((8.0, 9.6), 18, 0), held_back_by_hand((8.0, 9.6), 18, held_back)

    assert (effect.emergencies.share_before, effect.booked.share_before) == pytest.approx(before, rel=1e-6)
    assert (effect.emergencies.share_after, effect.booked.share_after) == pytest.approx(after, rel=1e-6)
    assert effect.booked.patients_per_year == pytest.approx(365 * 2.4)
    assert effect.emergencies.patients_per_year == pytest.approx(730.0)


def test_held_back_beds_follow_the_emergencies_season() -> None:
    """With a season and short stays, emergencies are weighed by their months and booked patients by the days."""
    booked = BookedList((350,) * 7, SHORT)
    seasonal = Ward("Curlew", 18, Demand(8.0 / 0.02, SHORT, month_factors=WINTER, booked=(booked,)))
    effect = hold_back_effect(seasonal, 2)
    months = [held_back_by_hand((8.0 * factor, 7.0), 18, 2) for factor in FACTORS]

    assert effect.emergencies.share_after == pytest.approx(WEIGHTS @ [first for first, _ in months], rel=1e-3)
    assert effect.booked.share_after == pytest.approx(MONTH_DAYS @ [second for _, second in months] / 364, rel=1e-3)


def test_impossible_overflows_are_explained() -> None:
    """A ward overflowing into itself, an empty group, half a bed, and holding back from nobody are refused."""
    plover = ward("Plover", 10, 9.0)
    with pytest.raises(ImpossibleFigure, match="Two wards are called 'Plover'"):
        overflow_effect(plover, plover)
    with pytest.raises(ImpossibleFigure, match="at least one ward"):
        overflow_bay_effect([], 4)
    with pytest.raises(ImpossibleFigure, match=r"2\.5 beds is not possible"):
        overflow_bay_effect([plover], 2.5)
    with pytest.raises(ImpossibleFigure, match="Plover has no booked patients"):
        hold_back_effect(plover, 2)


def test_wards_nobody_comes_to_lose_nobody() -> None:
    """Without patients every share stays at none."""
    nobody = [Ward(name, 5, Demand(0.0, LengthOfStay(4.0))) for name in ("Plover", "Teal")]

    assert overflow_effect(*nobody).home_patients.after == 0.0
    assert overflow_bay_effect(nobody, 3).patients.share_after == 0.0
