"""Every label, unit, number format and sentence that pages, charts and documents share.

Shares are 0–1 everywhere else in the program; percent exists only here. Standard library only.
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import datetime as dt

PROGRAM = "bedplan"
VERSION = "0.1.0"

MONTHS = (
    "January",
    "February",
    "March",
    "April",
    "May",
    "June",
    "July",
    "August",
    "September",
    "October",
    "November",
    "December",
)
MONTHS_SHORT = tuple(month[:3] for month in MONTHS)
_HARD_SPACE = "\u00a0"  # a number and its sign stay on one line
WEEKDAYS = ("Monday", "Tuesday", "Wednesday", "Thursday", "Friday", "Saturday", "Sunday")

# model name -> its line's label
LINES = {
    "average_occupancy": "average formula",
    "erlang_loss": "steady demand",
    "unlimited_beds": "everyone finds a bed",
    "seasonal_loss": "with seasons",
    "waiting": "patients wait",
}

# what a full ward does to a patient, by the model's answer: (after "1 in 20", in the short sentence, as a heading)
WHEN_FULL = {
    "leaves": ("turned away", "turned away", "Patients turned away"),
    "no chance": ("turned away", "turned away", "Patients turned away"),
    "waits": ("waiting for a bed", "waiting", "Patients who wait for a bed"),
    "stays anyway": ("finding the ward full", "finding it full", "Patients who find the ward full"),
}
OVER_FULL = ("hours over-full", "hours over-full", "Hours with more patients than beds")
WHEN_WARD_IS_FULL = {"leaves": "go elsewhere", "waits": "wait, or are placed elsewhere"}

NOT_YET_CHECKED = "Not yet checked against last year."
NO_DAYS_TO_CHECK = "Cannot be checked on last year: only averages are known, not its days."

BEDS_UNKNOWN = (
    "Today's staffed beds are not in the records: until they are typed, the beds wanted on average stand for them."
)
GUESTS_OUT = (
    "Planned on its own patients' demand, which is lower than its use: other wards' patients on it are taken out. Plan on "
    "this only where their own ward gets the beds for them; else too few beds come out."
)

# what a place in a file can be taken for, as a person says it
PLACES = {
    "bed ward": "ward with beds",
    "waiting place": "waiting place, such as an emergency department",
    "procedure place": "theatre, X-ray, lounge",
    "virtual": "virtual ward, care at home",
    "cot": "cots for well babies",
    "delivery": "delivery suite",
    "leave": "patients on leave",
}

COLUMNS = {  # of files, where our name for one doesn't say enough
    "from": "First day",
    "to": "Last day",
    "funded": "Funded beds",
    "staffed": "Staffed beds",
    "closed": "Closed beds",
    "placed": "Time the bed was given",
    "wait_hours": "Wait in hours",
    "wait_minutes": "Wait in minutes",
    "available_beds": "Beds available on average, not bed-days",
    "occupied_beds": "Beds occupied on average, not bed-days",
}
CAUTIONS = (
    "This is an estimate for planning, from past records and simplified mathematics. Real days will be better and worse.",
    "It does not decide who is admitted, clinical priorities or nurse staffing. Staffing law and licensed judgement come first.",
    "It is about wards over a year. It is not for the care of individual patients.",
    "Records hold admissions: patients who found a bed. Where the ward was full, true demand is higher than recorded.",
    "The range of chance is in these figures; events outside past experience are not.",
    "Before closing beds, look at the busiest month, at infection closures and at demand above what is assumed here.",
)


def percent(share: float, digits: int | None = None) -> str:
    """Write a share as percent: 0.0666 -> "6.7 %"; what would round to nothing reads "under 0.1 %"."""
    if digits is None:
        digits = 0 if share >= 0.095 or share == 0 else 1
    if 0 < share < 0.0005 and digits <= 1:
        return f"under 0.1{_HARD_SPACE}%"
    return f"{100 * share:.{digits}f}{_HARD_SPACE}%"


def signed_percent(share: float) -> str:
    """Write a change as percent with its sign: 0.05 -> "+5 %", 0 -> "no change"."""
    text = f"{100 * share:+.1f}".removesuffix(".0")
    return "no change" if text in {"+0", "-0"} else f"{text.replace('-', '−')}{_HARD_SPACE}%"


def one_in(share: float) -> str:
    """Write a share as people say it: 0.05 -> "1 in 20", 0.4 -> "2 in 5", 0.97 -> "nearly all"."""
    if share <= 0:
        return "none"
    if share >= 0.995:
        return "everyone"
    if share > 0.95:
        return "nearly all"
    if share > 0.285:
        top = min(
            ((n, d) for d in (2, 3, 4, 5, 10) for n in range(1, d)), key=lambda pair: abs(pair[0] / pair[1] - share)
        )
        common = math.gcd(*top)
        return f"{top[0] // common}{_HARD_SPACE}in{_HARD_SPACE}{top[1] // common}"
    count = 1 / share
    if count > 1000:
        return "almost none"
    return f"1{_HARD_SPACE}in{_HARD_SPACE}{_about(count):,}"


def _about(count: float) -> int:
    """Round a count to what people remember: whole up to 20, then to 5, 10, 50 or 100."""
    step = 1 if count < 20.5 else 5 if count < 100 else 10 if count < 200 else 50
    return int(step * round(count / step))


def beds_text(beds: float) -> str:
    """Write a whole bed count with its noun: "1 bed", "28 beds"."""
    return f"{beds:,.0f} bed" if round(beds) == 1 else f"{beds:,.0f} beds"


def wards_text(wards: int) -> str:
    """Write a count of wards with its noun: "1 ward", "8 wards"."""
    return f"{wards:,} ward" if wards == 1 else f"{wards:,} wards"


def beds_on_average(beds: float) -> str:
    """Write average beds wanted or in use: one decimal and the words."""
    return f"{beds:,.1f} beds on average"


def patients_per_year(patients: float) -> str:
    """Write patients a year for reading aloud: "about 120", "about 8", "under 1", "none"."""
    if patients <= 0:
        return "none"
    if patients < 1:
        return "under 1"
    step = 1 if patients < 20 else 5 if patients < 100 else 10 if patients < 1000 else 50
    return f"about{_HARD_SPACE}{step * round(patients / step):,}"


def in_month(month: int, share: float) -> str:
    """Write a share beside its month: "Jan 57 %"."""
    return f"{MONTHS_SHORT[month]}{_HARD_SPACE}{percent(share)}"


def date(day: dt.date) -> str:
    """Write a day: "1 April 2022"."""
    return f"{day.day} {day:%B %Y}"


def days(value: float) -> str:
    """Write days with one decimal: "4.2 days"."""
    return f"{value:,.1f} days"


def with_range(value: float, between: tuple[float, float]) -> str:
    """Write an estimate with its range: "3.44 (3.25 to 3.64)"."""
    digits = 2 if value < 10 else 1
    return f"{value:,.{digits}f} ({between[0]:,.{digits}f} to {between[1]:,.{digits}f})"


def column(key: str) -> str:
    """Return what a column is called where the planner is asked about it."""
    return COLUMNS.get(key, key.replace("_", " ").capitalize())


def plain(text: str) -> str:
    """Take the marks out of a name that a page would read as formatting."""
    for mark in "\\`*_{}[]<>#|~$:":
        text = text.replace(mark, f"\\{mark}")
    return text


def waits_over(hours: float) -> tuple[str, str, str]:
    """Say a wait as the entries of ``WHEN_FULL`` do."""
    return (
        f"waiting over {hours:g} hours",
        f"waiting {hours:g}+ hours",
        f"Patients who wait over {hours:g} hours for a bed",
    )


def waits_checked(name: str, recorded: float, modelled: float, hours: float, beds: int) -> str:
    """Set the waits in a list of requests against the model's: a check, where beds and demand are as they were."""
    return (
        f"{name}: {percent(recorded)} of requests waited over {hours:g} hours; the model has {percent(modelled)} with "
        f"{beds_text(beds)}. They should be near each other where beds and demand are as they were then."
    )


def limit_text(share: float, verb: str, within: str) -> str:
    """Say a limit: "every month within 5.0 % (1 in 20) turned away"."""
    span = "every month" if within == "every_month" else "the year"
    return f"{span} within {percent(share)} ({one_in(share)}) {verb}"


def not_used(name: str, wards: list[str]) -> str:
    """Name the wards of a file that have no stays, five at most."""
    shown = wards if len(wards) <= 5 else [*wards[:4], f"{len(wards) - 4} more"]
    listed = shown[0] if len(shown) == 1 else f"{', '.join(shown[:-1])} and {shown[-1]}"
    return f"{name}: the records hold no stays on {listed}, so their rows are not used."


def few(count: int) -> str:
    """Write a count of patients for a document: 1 to 7 is "a few", so that it points at nobody."""
    return "a few" if 0 < count < 8 else f"{count:,}"


def answer_sentence(
    name: str, beds: tuple[int | None, int, int | None], limit: tuple[float, str, str], worst: tuple[int | None, float]
) -> str:
    """Say the answer in at most 30 words: today's beds, the average formula's, the limit's, the worst month.

    ``beds`` = (today or None where not known, average formula, by the limit or None), ``limit`` = (share, its words,
    within), ``worst`` = (month, or None where all months are alike; share there with today's beds). A name of more than
    two words becomes "This ward".
    """
    today, formula, needed = beds
    share, verb, within = limit
    who = name if len(name.split()) <= 2 else "This ward"
    span = "every month" if within == "every_month" else "the year"
    takes = "more" if needed is None else str(needed)
    month, share_there = worst
    when = "All months alike" if month is None else f"{MONTHS[month]} is worst"
    rest = f"the average formula says {formula}. Keeping {span} to {one_in(share)} {verb} takes {takes}."
    if today is None:
        return f"{who}'s staffed beds today are not known; {rest}"
    return f"{who} has {today} staffed {'bed' if today == 1 else 'beds'}; {rest} {when}: {one_in(share_there)} today."
