"""Laws that every model keeps, whatever the rhythm; a new model is tried as soon as it is listed."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from scipy import stats

from bedplan.models import MODELS, BedCurve, BookedList, Demand, LengthOfStay
from bedplan.models.rhythm.year import offered_load_by_hour

if TYPE_CHECKING:
    from collections.abc import Callable

# a 365-day year without 31 December: 52 whole weeks
MONTH_DAYS = (31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 30)
HOURS = 52 * 7 * 24
ORDER = ("average_occupancy", "erlang_loss", "unlimited_beds", "seasonal_loss", "waiting")
lawful = settings(max_examples=4, suppress_health_check=list(HealthCheck))


def _months(swing: float) -> tuple[float, ...]:
    return tuple(1 + swing * math.cos(2 * math.pi * month / 12) for month in range(12))


def _weekdays(swing: float) -> tuple[float, ...]:
    return tuple(1 + swing * math.sin(2 * math.pi * day / 7) for day in range(7))


def _hours(swing: float) -> tuple[float, ...]:
    return tuple(1 - swing * math.cos(2 * math.pi * (hour - 2) / 24) for hour in range(24))


# kind of rhythm -> the figures of a demand, given a swing of 0 to 0.6
RHYTHMS: dict[str, Callable[[float], dict[str, object]]] = {
    "steady": lambda _: {},
    "months": lambda swing: {"month_factors": _months(swing)},
    "weekdays": lambda swing: {"weekday_factors": _weekdays(swing)},
    "hours": lambda swing: {"hour_factors": _hours(swing)},
    "clusters and drift": lambda swing: {"clustering": 1 + swing, "rate_variation": swing / 6},
    "booked": lambda swing: {
        "booked": (BookedList((4, 3, 3, 2, 1, 0, 0), LengthOfStay(2.5, 0.6), 8, 0.95),),
        "month_factors": _months(swing / 2),
    },
    "leaving": lambda swing: {
        "discharge_hours": (0,) * 8 + (1, 2, 4, 6, 6, 5, 4, 3, 2, 1) + (0,) * 6,
        "weekend_slip": (swing / 2, swing),
        "turnaround_hours": 4 * swing,
    },
    "everything": lambda swing: {
        "month_factors": _months(swing / 2),
        "weekday_factors": _weekdays(swing / 2),
        "hour_factors": _hours(swing),
        "clustering": 1 + swing / 2,
        "rate_variation": swing / 10,
    },
}
# a queue is followed through the year until it is as settled as this
SETTLED = 1e-3
FLAT = ("steady", "clusters and drift")
every_model = pytest.mark.parametrize("model", MODELS)
every_rhythm = pytest.mark.parametrize("rhythm", RHYTHMS)


@st.composite
def stays(draw: st.DrawFn) -> LengthOfStay:
    """Draw a stay of half a day to ten days, of any spread and either shape."""
    mean_days = draw(st.floats(0.5, 10.0))
    return LengthOfStay(mean_days, draw(st.floats(0.3, 1.8)), draw(st.sampled_from(["lognormal", "gamma"])))


@st.composite
def demands(draw: st.DrawFn, rhythm: str) -> Demand:
    """Draw a demand of this kind of rhythm, with a load of 1 to 40 beds besides its booked lists."""
    stay, load = draw(stays()), draw(st.floats(1.0, 40.0))
    return Demand(load / stay.mean_days, stay, **RHYTHMS[rhythm](draw(st.floats(0.0, 0.6))))


def some_beds(demand: Demand) -> list[int]:
    """Return a few counts: none, one, and some around the load."""
    load = demand.offered_load
    return sorted({0, 1, *(math.ceil(load * part) for part in (0.5, 0.8, 1.0, 1.1, 1.3, 1.7))})


def curve_of(model: str, demand: Demand, beds: list[int] | None = None) -> BedCurve:
    """Return a model's curve at a few counts, or at these."""
    return MODELS[model](demand, some_beds(demand) if beds is None else beds)


def test_models_are_listed_in_order_and_for_good() -> None:
    """The list holds known models only, in their order, under their own names, and can't be changed."""
    assert list(MODELS) == [name for name in ORDER if name in MODELS]
    assert all(function.__name__ == name for name, function in MODELS.items())
    with pytest.raises(TypeError):
        MODELS["guess"] = None


@every_model
@every_rhythm
@lawful
@given(data=st.data())
def test_a_curve_holds_shares_in_the_promised_shapes(model: str, rhythm: str, data: st.DataObject) -> None:
    """Shares lie in 0…1 for the year and twelve months, occupancy too unless everyone stays, and the demand is kept."""
    demand = data.draw(demands(rhythm))
    curve = curve_of(model, demand)
    count = curve.beds.size

    assert (curve.model, curve.demand) == (model, demand)
    assert curve.beds.tolist() == some_beds(demand)
    assert curve.turn_away_probability.shape == curve.occupancy.shape == (count,)
    assert curve.by_month.shape == (12, count)
    for shares in (curve.turn_away_probability, curve.by_month):
        assert ((shares >= 0) & (shares <= 1)).all()
    assert (curve.occupancy >= 0).all()
    if curve.when_full != "stays anyway":
        assert (curve.occupancy <= 1).all()


@every_model
@every_rhythm
@lawful
@given(data=st.data())
def test_more_beds_never_turn_more_away(model: str, rhythm: str, data: st.DataObject) -> None:
    """From one bed count to the next the share never rises: not over the year, not in any month."""
    demand = data.draw(demands(rhythm))
    middle = math.ceil(demand.offered_load)
    curve = curve_of(model, demand, [*range(0, middle, max(middle // 5, 1)), *range(middle, middle + 6)])

    assert (np.diff(curve.turn_away_probability) <= 1e-12).all()
    assert (np.diff(curve.by_month, axis=1) <= 1e-12).all()


@every_model
@every_rhythm
@lawful
@given(data=st.data())
def test_without_beds_everyone_finds_it_full(model: str, rhythm: str, data: st.DataObject) -> None:
    """At 0 beds the share is 1 in every month, and nothing is in use."""
    point = curve_of(model, data.draw(demands(rhythm)), [0, 1]).at(0)

    assert (point.turn_away_probability, point.occupancy) == (1.0, 0.0)
    assert (point.by_month == 1.0).all()


@every_model
@every_rhythm
def test_without_demand_nobody_finds_it_full(model: str, rhythm: str) -> None:
    """When nobody comes nobody is turned away and no bed is used, at 0 beds too."""
    figures = {**RHYTHMS[rhythm](0.5), "booked": ()}
    curve = curve_of(model, Demand(0.0, LengthOfStay(4.0), **figures), [0, 1, 7])

    assert (curve.turn_away_probability == 0.0).all()
    assert (curve.by_month == 0.0).all()
    assert (curve.occupancy == 0.0).all()


@every_model
@every_rhythm
@lawful
@given(data=st.data())
def test_an_answer_does_not_depend_on_the_other_counts_asked(model: str, rhythm: str, data: st.DataObject) -> None:
    """One bed count asked alone gives the same share as on a longer curve."""
    demand = data.draw(demands(rhythm))
    long = curve_of(model, demand)
    beds = data.draw(st.sampled_from(long.beds.tolist()))

    alone, among = curve_of(model, demand, [beds]).at(beds), long.at(beds)

    assert alone.turn_away_probability == pytest.approx(among.turn_away_probability, rel=1e-6, abs=1e-12)
    assert alone.occupancy == pytest.approx(among.occupancy, rel=1e-6, abs=1e-12)
    assert alone.by_month == pytest.approx(among.by_month, rel=1e-6, abs=1e-12)


@every_model
@pytest.mark.parametrize("rhythm", FLAT)
@lawful
@given(data=st.data())
def test_a_change_of_units_changes_nothing(model: str, rhythm: str, data: st.DataObject) -> None:
    """Without a rhythm, stays k times as long and arrivals k times as rare ask for the same beds."""
    demand, k = data.draw(demands(rhythm)), data.draw(st.floats(0.2, 5.0))
    stay = demand.length_of_stay
    slow = demand.with_changes(
        arrivals_per_day=demand.arrivals_per_day / k,
        length_of_stay=LengthOfStay(stay.mean_days * k, stay.variation, stay.shape),
    )
    beds = some_beds(demand)
    first, second = curve_of(model, demand, beds), curve_of(model, slow, beds)

    for name in ("turn_away_probability", "occupancy", "by_month"):
        assert getattr(second, name) == pytest.approx(getattr(first, name), rel=1e-6, abs=1e-9)
    if first.waits is not None:
        assert second.waits.share_over(24.0 * k) == pytest.approx(first.waits.share_over(24.0), rel=1e-6, abs=1e-9)


def arrivals_by_month(demand: Demand) -> np.ndarray:
    """Return each month's share of the year's arrivals, counted hour by hour over 52 weeks from a Monday."""
    hour = np.arange(HOURS)
    month, weekday, clock = np.repeat(np.arange(12), 24 * np.array(MONTH_DAYS)), hour // 24 % 7, hour % 24
    rhythm = np.array(demand.weekday_factors)[weekday] * np.array(demand.hour_factors)[clock]
    rhythm = rhythm * np.array(demand.month_factors)[month]
    rate = demand.arrivals_per_day / 24 * rhythm / rhythm.mean()
    for booked in demand.booked:
        rate = rate + np.array(booked.per_weekday)[weekday] * booked.attends * (clock == booked.hour)
    return np.bincount(month, weights=rate, minlength=12) / rate.sum()


@every_model
@every_rhythm
@lawful
@given(data=st.data())
def test_the_year_is_the_mean_of_its_months_over_patients(model: str, rhythm: str, data: st.DataObject) -> None:
    """The year's share is the months' shares, each weighed by the patients who come in it."""
    demand = data.draw(demands(rhythm))
    curve = curve_of(model, demand)

    assert arrivals_by_month(demand) @ curve.by_month == pytest.approx(curve.turn_away_probability, rel=1e-6, abs=1e-9)


@every_model
@every_rhythm
@lawful
@given(data=st.data())
def test_those_not_turned_away_are_in_the_beds(model: str, rhythm: str, data: st.DataObject) -> None:
    """Mean patients present = load × share not turned away (Little 1961); the whole load where nobody leaves."""
    demand = data.draw(demands(rhythm))
    curve = curve_of(model, demand)
    present, load, within = curve.occupancy * curve.beds, demand.offered_load, 1e-6
    if demand.discharge_hours:
        # each stay is moved to the hour and day patients leave at, which changes the mean stay (see test_year.py)
        load = offered_load_by_hour(demand.with_changes(turnaround_hours=0.0)).mean()
        within = 1e-5

    if curve.when_full in ("leaves", "no chance"):
        assert present == pytest.approx(load * (1 - curve.turn_away_probability), rel=within)
    elif curve.when_full == "stays anyway":
        assert present[1:] == pytest.approx(load, rel=within)
    else:
        assert (present <= np.minimum(load, curve.beds) * (1 + within)).all()
        # Everyone gets a bed in the end where the queue settles: at every rate, with beds made ready included.
        if demand.rate_variation == 0:
            settles = curve.beds > offered_load_by_hour(demand).mean() * (1 + 1e-6)
            assert present[settles] == pytest.approx(load, rel=SETTLED)


def made_ready_and_longer(demand: Demand, hours: float) -> tuple[Demand, Demand]:
    """Return a demand whose beds take so many hours to be made ready, and one whose stays, all even, are as much longer."""
    slow = {"length_of_stay": LengthOfStay(demand.length_of_stay.mean_days + hours / 24, 0.0)}
    slow["booked"] = tuple(
        replace(one, length_of_stay=LengthOfStay(one.length_of_stay.mean_days + hours / 24, 0.0))
        for one in demand.booked
    )
    return demand.with_changes(turnaround_hours=hours), demand.with_changes(**slow)


def with_even_stays(demand: Demand) -> Demand:
    """Return the demand with every stay as long as the mean, and nothing that keeps a bed longer."""
    return demand.with_changes(
        length_of_stay=LengthOfStay(demand.length_of_stay.mean_days, 0.0),
        booked=tuple(replace(one, length_of_stay=LengthOfStay(2.5, 0.0)) for one in demand.booked),
        discharge_hours=(),
        weekend_slip=(0.0, 0.0),
        turnaround_hours=0.0,
    )


@every_model
@every_rhythm
@lawful
@given(data=st.data(), hours=st.floats(1.0, 48.0))
def test_making_a_bed_ready_takes_it_like_a_longer_stay(
    model: str, rhythm: str, data: st.DataObject, hours: float
) -> None:
    """Even stays and h hours of turnaround find it full as stays h hours longer; occupancy leaves out the h hours."""
    demand = with_even_stays(data.draw(demands(rhythm)))
    ready, longer = made_ready_and_longer(demand, hours)
    beds = some_beds(longer)
    first, second = curve_of(model, ready, beds), curve_of(model, longer, beds)

    digits = SETTLED if model == "waiting" else 1e-6
    assert first.turn_away_probability == pytest.approx(second.turn_away_probability, rel=digits, abs=1e-9)
    assert first.by_month == pytest.approx(second.by_month, rel=digits, abs=1e-9)
    assert first.occupancy == pytest.approx(second.occupancy * demand.offered_load / longer.offered_load, rel=digits)


@every_model
@lawful
@given(stay=stays(), load=st.floats(1.0, 40.0), hours=st.floats(1.0, 48.0))
def test_on_a_steady_ward_turnaround_is_so_much_more_load(
    model: str, stay: LengthOfStay, load: float, hours: float
) -> None:
    """Stays of any spread: a steady ward feels arrivals × (stay + turnaround), and its patients are the stay's part."""
    ready = Demand(load / stay.mean_days, stay, turnaround_hours=hours)
    longer = Demand(ready.arrivals_per_day, LengthOfStay(stay.mean_days + hours / 24))
    beds = some_beds(longer)
    first, second = curve_of(model, ready, beds), curve_of(model, longer, beds)

    assert first.turn_away_probability == pytest.approx(second.turn_away_probability, rel=1e-6, abs=1e-9)
    assert first.occupancy == pytest.approx(second.occupancy * load / longer.offered_load, rel=1e-6)


@pytest.mark.parametrize("model", [name for name in ("erlang_loss", "waiting") if name in MODELS])
@settings(lawful, max_examples=60)
@given(
    stay=stays(), loads=st.tuples(st.floats(0.2, 30), st.floats(0.2, 30)), spare=st.tuples(*[st.integers(-5, 9)] * 2)
)
def test_sharing_beds_never_hurts_the_two_together(
    model: str, stay: LengthOfStay, loads: tuple[float, float], spare: tuple[int, int]
) -> None:
    """Two wards with the same stays turn away, or keep waiting, no more patients when they share their beds.

    Source: Smith & Whitt 1981, Bell System Technical Journal 60:39-55; waiting only where each load is below its beds.
    """
    beds = [max(math.floor(load) + 1 + more, 0) for load, more in zip(loads, spare, strict=True)]
    if model == "waiting":
        beds = [max(count, math.floor(load) + 1) for load, count in zip(loads, beds, strict=True)]

    def found_full(load: float, count: int) -> float:
        return load * curve_of(model, Demand(load / stay.mean_days, stay), [count]).turn_away_probability[0]

    apart = sum(found_full(load, count) for load, count in zip(loads, beds, strict=True))
    assert found_full(sum(loads), sum(beds)) <= apart + 1e-9


@pytest.mark.skipif("unlimited_beds" not in MODELS, reason="the model that turns nobody away isn't listed yet")
def test_sharing_can_hurt_where_nobody_is_turned_away() -> None:
    """Two wards with too few beds for their load find themselves full more often when they share: Poisson says so."""
    demand = Demand(2.5, LengthOfStay(4.0))
    apart = curve_of("unlimited_beds", demand, [8]).turn_away_probability[0]
    together = curve_of("unlimited_beds", demand.with_changes(arrivals_per_day=5.0), [16]).turn_away_probability[0]

    # share of time with as many patients as beds or more: Poisson about the load (Eick, Massey & Whitt 1993)
    assert apart == pytest.approx(stats.poisson.sf(7, 10), rel=1e-6)
    assert together == pytest.approx(stats.poisson.sf(15, 20), rel=1e-6)
    assert together > apart
