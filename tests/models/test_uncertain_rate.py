"""An uncertain rate: printed cost in beds, slow integration over the gamma spread."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import integrate, stats

from bedplan.models import Demand, LengthOfStay, erlang_b, seasonal_loss
from bedplan.models.formulas.uncertain_rate import few_rates, possible_rates


@pytest.mark.parametrize("variation", [0.0, 0.01, 0.05, 0.2, 0.5])
def test_rates_have_the_mean_and_spread_asked_for(variation: float) -> None:
    """The weighted rates have mean 1 and the stated SD ÷ mean."""
    for rates, weights in (possible_rates(variation, 30.0), few_rates(variation, 31)):
        assert weights.sum() == pytest.approx(1.0)
        assert weights @ rates == pytest.approx(1.0)
        assert math.sqrt(max(weights @ rates**2 - 1.0, 0.0)) == pytest.approx(variation, rel=1e-4, abs=1e-7)


@pytest.mark.parametrize(
    ("load", "variation", "beds"), [(20.0, 0.2, 25), (5.0, 0.5, 9), (100.0, 0.1, 117), (8.0, 1.0, 20)]
)
def test_patients_turned_away_match_slow_integration(load: float, variation: float, beds: int) -> None:
    """E[a·B(c, a)]/E[a] over a gamma load, by adaptive integration (Jongbloed & Koole 2001)."""
    spread = stats.gamma(variation**-2, scale=load * variation**2)
    expected = (
        integrate.quad(
            lambda a: a * float(erlang_b(a, beds)) * spread.pdf(a), 0, load * (1 + 14 * variation), limit=200
        )[0]
        / load
    )
    demand = Demand(load / 4.0, LengthOfStay(4.0), rate_variation=variation)

    assert seasonal_loss(demand, [beds]).turn_away_probability[0] == pytest.approx(expected, rel=1e-4)


def test_published_share_at_an_uncertain_load() -> None:
    """Mean load 20, variation 0.2, 25 beds: 7.540 % against 5.022 % at the mean load.

    Source: the idea is Jongbloed & Koole 2001; values recomputed.
    """
    demand = Demand(5.0, LengthOfStay(4.0), rate_variation=0.2)

    assert seasonal_loss(demand, [25]).turn_away_probability[0] == pytest.approx(0.0754042, abs=1e-6)
    assert float(erlang_b(20.0, 25)) == pytest.approx(0.0502218, abs=1e-7)


# Erlang B mixed over a gamma rate that stays put through a stay, arrival-weighted: offered load; beds for 1 % turned
# away at a certain rate and the share there; then for rate variations of 5 and 10 % the true share there and the beds
# needed. Computed independently when data on daily arrivals were described, to two decimals of a per cent.
COST_OF_DRIFT = """
 10  18  0.71  0.77  18  0.95  18
 25  36  0.80  0.92  36  1.26  37
 50  64  0.84  1.03  65  1.57  67
100 117  0.98  1.28 119  2.10 124
200 221  0.99  1.44 226  2.53 237
500 527  0.95  1.64 539  3.06 569
"""


@pytest.mark.parametrize("row", COST_OF_DRIFT.strip().splitlines())
def test_what_an_uncertain_rate_costs_in_beds(row: str) -> None:
    """Share turned away where a certain rate would need 1 %, and the beds that 1 % then needs."""
    load, beds, certain, at_5, beds_5, at_10, beds_10 = map(float, row.split())
    counts = np.arange(int(beds), int(beds) + 60)
    for variation, percent, needed in ((0.0, certain, beds), (0.05, at_5, beds_5), (0.10, at_10, beds_10)):
        demand = Demand(load / 4.0, LengthOfStay(4.0, 1.0, "gamma"), rate_variation=variation)
        shares = seasonal_loss(demand, counts).turn_away_probability

        assert 100 * shares[0] == pytest.approx(percent, abs=0.0051)
        assert counts[np.argmax(shares <= 0.01)] == needed


def test_an_uncertain_demand_is_never_better_than_the_mean_demand() -> None:
    """Averaged over patients, more are turned away at an uncertain rate, at every bed count."""
    demand = Demand(10.0, LengthOfStay(4.0), month_factors=(1.2,) * 6 + (0.8,) * 6)
    counts = np.arange(80)
    certain, uncertain = (
        seasonal_loss(demand.with_changes(rate_variation=variation), counts).turn_away_probability
        for variation in (0.0, 0.08)
    )

    # to the error of interpolation
    assert (uncertain >= certain - 2e-6).all()
    assert uncertain[50] > certain[50] + 1e-3
