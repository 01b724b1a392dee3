"""Which family stays follow: the truth of made-up wards is found again, and what is said follows from the figures."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np
import pytest

from bedplan.data.wards.stay_families import StayFamilies, stay_families
from bedplan.data.wards.stays import stay_curve
from bedplan.data.wards.survival import product_limit
from bedplan.errors import UnreadableRecords
from bedplan.models import MODELS, Demand, LengthOfStay, SeenStays, StayFit, fit_stay
from tests.data.made_wards import as_records

if TYPE_CHECKING:
    from bedplan.data import Records

TRUTHS = {
    "lognormal": LengthOfStay(6.0, 0.9),
    "gamma": LengthOfStay(6.0, 0.8, "gamma"),
    "two lognormals": LengthOfStay.two_streams(0.3, LengthOfStay(2.5, 0.4), LengthOfStay(15.0, 0.6)),
}


def drawn_ward(truth: LengthOfStay, patients: int, days: int = 1_000) -> Records:
    """Return a ward whose patients come at any hour from 100 days before the records and stay as the truth says."""
    rng = np.random.default_rng(7)
    begin = np.sort(rng.uniform(-100.0, days, patients))
    end = begin + np.maximum(truth.sample(patients, rng), 1.0 / 1_440)
    seen = end > 0
    return as_records(begin[seen], end[seen], days)


@pytest.fixture(scope="module")
def found() -> dict[str, StayFamilies]:
    """Judge a ward of about 5,000 stays for every truth."""
    return {name: stay_families(drawn_ward(truth, 5_000), "Heron") for name, truth in TRUTHS.items()}


@pytest.mark.parametrize("name", ["lognormal", "gamma"])
def test_the_single_family_is_found(found: dict[str, StayFamilies], name: str) -> None:
    """Stays drawn from one curve are said to follow it, and the other single curve is ruled out; there are no two groups."""
    other = {"lognormal": "gamma", "gamma": "lognormal"}[name]
    one = found[name]
    said = {family: words for family, _, words in one.rows}

    assert one.planned.shape == name
    assert one.fit.behind[name] <= 10.0
    assert said[f"one {other} curve"] == "as good as ruled out"
    assert said[f"one {name} curve"].endswith("; in the plan")
    assert one.groups == ()
    assert one.verdict.lower().startswith(f"one {name} curve")


def test_two_groups_are_found(found: dict[str, StayFamilies]) -> None:
    """A ward of 7 in 10 who stay 2.5 days and 3 in 10 who stay 15 is told so, about right in shares and means."""
    one = found["two lognormals"]
    (first, shorter), (second, longer) = one.groups

    assert (first, second) == pytest.approx((0.7, 0.3), abs=0.03)
    assert (shorter, longer) == pytest.approx((2.5, 15.0), rel=0.08)
    assert one.verdict.startswith("Two groups of patients fit best: ")
    assert one.rows[0] == ("two groups of patients, each lognormal", 0.0, "fits best")
    assert [behind for _, behind, _ in one.rows] == sorted(behind for _, behind, _ in one.rows)


@pytest.mark.parametrize("name", list(TRUTHS))
def test_the_mean_is_the_records_own(found: dict[str, StayFamilies], name: str) -> None:
    """Plan and fit both carry the product limit's mean; the sentence says it beside the fitted curve's."""
    one, records = found[name], drawn_ward(TRUTHS[name], 5_000)
    mean = stay_curve(records, records.of_ward("Heron"), "Heron").mean_days

    assert one.planned.mean_days == pytest.approx(mean, rel=1e-9)
    assert one.fit.length_of_stay.mean_days == pytest.approx(mean, rel=1e-9)
    assert f"own mean, {mean:.1f} days" in one.in_the_plan
    assert f"({one.fit.fitted_mean_days:.1f} days here)" in one.in_the_plan


@pytest.mark.parametrize("name", list(TRUTHS))
def test_whole_days_give_the_same_answer(name: str) -> None:
    """Stays rounded to whole days say the same family as the same stays to the minute, and nearly the same curve."""
    exact = TRUTHS[name].sample(4_000, np.random.default_rng(5))
    mean, variation = float(exact.mean()), float(exact.std() / exact.mean())
    to_the_minute = fit_stay(SeenStays(exact, whole_days=False), mean, variation)
    by_days = fit_stay(SeenStays(np.floor(exact + 0.5)), mean, variation)

    assert by_days.family == to_the_minute.family == name
    grid = np.linspace(0.0, 40.0, 81)
    curves = [fit.length_of_stay.survival(grid) for fit in (to_the_minute, by_days)]
    assert curves[0] == pytest.approx(curves[1], abs=0.02)


def test_a_large_ward_is_no_more_work() -> None:
    """40,000 stays by whole days are no more than a few hundred different ones, which is all that is fitted."""
    days = np.floor(TRUTHS["lognormal"].sample(40_000, np.random.default_rng(1)) + 0.5)

    assert SeenStays(days).intervals()[0].size <= 200


def test_patients_still_in_and_met_late_count_for_what_was_seen() -> None:
    """In a short file, where 1 stay in 5 is cut off at one end or the other, the family and its curve are still those of the truth."""
    truth = TRUTHS["lognormal"]
    one = stay_families(drawn_ward(truth, 12_000, days=60), "Heron")
    mu, sigma = one.fit.parameters["lognormal"]
    expected = math.sqrt(math.log1p(0.9**2))

    assert (mu, sigma) == pytest.approx((math.log(6.0) - expected**2 / 2.0, expected), abs=0.06)
    assert one.groups == ()


def test_the_picture_is_the_product_limit(found: dict[str, StayFamilies]) -> None:
    """The measured line is the product limit's, the planned line the plan's; both start at 1, and 1 in 100 is left."""
    one = found["lognormal"]
    shares = one.shares()

    assert shares.iloc[0][["day", "measured", "planned"]].tolist() == [0.0, 1.0, 1.0]
    assert shares["measured"].to_numpy() == pytest.approx(one.curve.at(shares["day"]))
    assert shares["planned"].to_numpy() == pytest.approx(TRUTHS["lognormal"].survival(shares["day"]), abs=0.03)
    assert 0.0 < shares["measured"].iloc[-1] <= 0.01
    assert shares["measured"].is_monotonic_decreasing


def judged(shape: str, behind: tuple[float, float, float], groups: LengthOfStay | None = None) -> StayFamilies:
    """Return an answer with these AIC differences (lognormal, gamma, two groups), the plan drawing from ``shape``."""
    families = dict(zip(("lognormal", "gamma", "two lognormals"), behind, strict=True))
    best = min(families, key=families.__getitem__)
    curve = product_limit([2.0, 4.0, 6.0], [True, True, True])
    fit = StayFit(best, families, {}, groups or LengthOfStay(4.0, 0.5), 4.3)
    return StayFamilies("Heron", curve, LengthOfStay(4.0, 0.5, shape), fit)


APART = LengthOfStay.two_streams(0.2, LengthOfStay(3.0, 0.5), LengthOfStay(12.0, 0.5))
ALIKE = LengthOfStay.two_streams(0.4, LengthOfStay(4.0, 0.2), LengthOfStay(5.0, 1.5))
LONE = LengthOfStay.two_streams(0.02, LengthOfStay(4.0, 0.5), LengthOfStay(40.0, 0.5))


@pytest.mark.parametrize(
    ("answer", "said"),
    [
        (judged("lognormal", (0.0, 40.0, 4.0)), "One lognormal curve fits best."),
        (judged("lognormal", (40.0, 0.0, 4.0)), "One gamma curve fits best."),
        (judged("lognormal", (9.0, 40.0, 0.0), APART), "does nearly as well as two groups"),
        (
            judged("lognormal", (30.0, 40.0, 0.0), APART),
            "80\u00a0% stay 3.0 days on average, 20\u00a0% stay 12.0 days.",
        ),
        (judged("lognormal", (30.0, 40.0, 0.0), ALIKE), "no two kinds of patient"),
        (judged("lognormal", (30.0, 40.0, 0.0), LONE), "no two kinds of patient"),
    ],
)
def test_what_is_said(answer: StayFamilies, said: str) -> None:
    """Two groups are told only where one curve is ruled out, and where they differ in stay and both have patients."""
    assert said in answer.verdict
    assert (answer.groups != ()) == ("80" in said)


def test_how_far_behind_is_said() -> None:
    """0 is best, up to 2 as good, up to 10 a little behind, beyond that ruled out; the plan's own family is marked."""
    rows = judged("gamma", (0.0, 1.9, 10.5)).rows

    assert [words for _, _, words in rows] == ["fits best", "fits as well; in the plan", "as good as ruled out"]
    assert judged("gamma", (0.0, 9.9, 30.0)).rows[1][2] == "a little behind; in the plan"


def test_how_far_the_plan_is_off() -> None:
    """Stays of 2, 4 and 6 days against a lognormal of mean 4: the gap said is the widest on the picture's days."""
    answer = judged("lognormal", (0.0, 40.0, 4.0))
    days = np.linspace(0.0, 6.0, 241)
    measured = np.array([1.0, 2 / 3, 1 / 3, 0.0])[np.searchsorted([2.0, 4.0, 6.0], days, side="right")]
    gap = np.abs(measured - LengthOfStay(4.0, 0.5).survival(days)).max()

    assert f"at most {100 * gap:.0f} in 100 patients" in answer.in_the_plan


def test_no_stays_are_refused() -> None:
    """A ward where nobody has left yet can't be judged, and the message says why."""
    with pytest.raises(UnreadableRecords, match="has ended"):
        stay_families(as_records(np.array([1.0, 2.0]), np.array([2_000.0, 2_000.0]), 10), "Heron")


@pytest.mark.parametrize(
    "groups",
    [
        LengthOfStay.two_streams(0.12, LengthOfStay(7.8, 0.75), LengthOfStay(37.0, 0.6)),
        LengthOfStay.two_streams(0.4, LengthOfStay(0.5, 0.5), LengthOfStay(6.0, 0.5)),
        LengthOfStay.two_streams(0.3, LengthOfStay(1.0, 0.6), LengthOfStay(12.0, 0.7)),
    ],
)
@pytest.mark.parametrize("line", ["seasonal_loss", "waiting", "unlimited_beds"])
def test_one_curve_stands_for_two_groups(groups: LengthOfStay, line: str) -> None:
    """A curve with the mean and spread of two groups gives the worst month within 5 % of theirs, less than a bed: why the plan keeps one.

    Seasons, a busy start of the week and patients who come in twos: all that a stay's shape can act on.
    """
    winter = np.array([1.24, 1.15, 1.02, 0.95, 0.92, 0.88, 0.86, 0.84, 0.92, 1.0, 1.06, 1.16])
    week, beds, worst = (1.2, 1.1, 1.05, 1.0, 1.0, 0.85, 0.8), np.array([35, 36, 37]), []
    until = np.linspace(0.0, 200.0, 800)
    curves = [LengthOfStay(groups.mean_days, groups.variation, shape) for shape in ("lognormal", "gamma")]
    one = min(curves, key=lambda curve: float(np.abs(curve.survival(until) - groups.survival(until)).sum()))
    for stay in (groups, one):
        demand = Demand(
            24.0 / stay.mean_days,
            stay,
            month_factors=tuple(winter / winter.mean()),
            weekday_factors=week,
            clustering=2.0,
        )
        worst.append(MODELS[line](demand, beds).by_month.max(axis=0))

    assert worst[1] == pytest.approx(worst[0], rel=0.05)
    assert worst[0][2] < worst[1][1] < worst[0][0]
