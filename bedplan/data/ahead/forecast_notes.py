"""What is said beside a forecast: which method is used and why, what the records are too short for, what changed lately."""

from __future__ import annotations

from typing import TYPE_CHECKING

from bedplan import wording
from bedplan.data.ahead.outlook import FEWEST_PAST_FORECASTS, NAIVE, REGRESSION, SPECTRUM, USUAL_SEASON
from bedplan.data.ahead.rhythm import LEAST_DAYS_FOR_GROWTH, LEAST_DAYS_FOR_SEASON

if TYPE_CHECKING:
    from bedplan.data.ahead.lately import LevelChange
    from bedplan.data.ahead.outlook import Choice, Outlook

AS_BEFORE = "It goes on as before: no new service, no new rule and no change among neighbours is foreseen."


def why_method(choice: Choice) -> str:
    """Which method is used, and how did it do against the others?

    Checked by: tests/data/ahead/test_forecasting.py
    """
    if choice.forecasts < FEWEST_PAST_FORECASTS:
        return f"{choice.method.capitalize()}: the records are too short to try others on their own past."
    used, naive = choice.errors[choice.method], choice.errors[NAIVE]
    name = SPECTRUM if choice.method == REGRESSION else REGRESSION
    other = choice.errors[name]
    against = "less" if used < naive else "more"
    share = wording.percent(abs(1.0 - used / naive)) if naive > 0 else "0"
    return (
        f"{choice.method.capitalize()}: in {choice.forecasts} forecasts of past days it missed a week's patients by "
        f"{used:.1f} on average, {share} {against} than the same week last year ({naive:.1f}); {name} missed by {other:.1f}."
    )


def outlook_notes(outlook: Outlook, days: int) -> list[str]:
    """What belongs beside a forecast from so many days?

    Checked by: tests/data/ahead/test_forecasting.py
    """
    notes = [AS_BEFORE]
    if days < LEAST_DAYS_FOR_SEASON:
        notes.append(
            "Too few days to tell the seasons: every month is taken as average. The range allows for seasons of "
            f"{wording.percent(USUAL_SEASON)} (SD ÷ mean)."
        )
    if days < LEAST_DAYS_FOR_GROWTH:
        notes.append("Too few days to tell growth from season: none is foreseen, and it may be there.")
    choice = outlook.choice
    if choice.forecasts < FEWEST_PAST_FORECASTS:
        notes.append("Too short to look at past forecasts: the range takes the usual drift of demand, 3 % a year.")
    elif choice.errors[choice.method] >= choice.errors[NAIVE]:
        notes.append(
            "The same week last year was nearer than any method: expect surprises, and take the range seriously."
        )
    return [*notes, *change_notes(outlook.change)]


def change_notes(change: LevelChange | None) -> list[str]:
    """Did arrivals change lately, and what does the forecast make of it? Nothing where they did not.

    Checked by: tests/data/ahead/test_forecasting.py
    """
    if change is None or not change.is_clear:
        return []
    word, errs = ("grew", "few") if change.share > 0 else ("fell", "many")
    return [
        (
            f"Arrivals {word} by {wording.percent(abs(change.share))} lately: in the last {change.days // 7} weeks "
            f"{change.came:,} came, where about {change.expected:,.0f} were to be expected from the days before. Whether "
            "that lasts the records can't tell: the forecast goes half-way, and its range holds both. If the change "
            f"lasts, the forecast errs towards too {errs} beds: move demand then."
        )
    ]
