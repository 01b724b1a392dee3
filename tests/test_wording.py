"""Sentences and number formats: what people read aloud is short, plain and true to the figure."""

from __future__ import annotations

import datetime as dt
import itertools

import pytest

from bedplan import wording

HARD_SPACE = "\u00a0"


@pytest.mark.parametrize(
    ("share", "words"),
    [
        (0.05, "1 in 20"),
        (0.2, "1 in 5"),
        (0.5, "1 in 2"),
        (2 / 3, "2 in 3"),
        (0.4, "2 in 5"),
        (0.01, "1 in 100"),
        (0.0, "none"),
        (1.0, "everyone"),
        (0.0001, "almost none"),
    ],
)
def test_one_in(share: float, words: str) -> None:
    """A share is said as people say it, and its three words never part at the end of a line."""
    said = wording.one_in(share)

    assert said.replace(HARD_SPACE, " ") == words
    assert " in " not in said


def test_one_in_stays_near_the_share() -> None:
    """The spoken share is within an eighth of the figure behind it, from 0.1 % to 95 %."""
    for step in range(1, 951):
        share = step / 1000
        top, bottom = wording.one_in(share).replace(",", "").split(f"{HARD_SPACE}in{HARD_SPACE}")

        assert int(top) / int(bottom) == pytest.approx(share, rel=0.125)


def test_percent_keeps_a_small_share_visible() -> None:
    """A share that is not zero never reads as zero."""
    assert wording.percent(0.00001) == "under 0.1\u00a0%"
    assert wording.percent(0.0) == "0\u00a0%"
    assert wording.percent(0.0666) == "6.7\u00a0%"
    assert wording.percent(0.126) == "13\u00a0%"


@pytest.mark.parametrize("name", ["Kestrel", "Acute surgery", "Care of older people unit"])
@pytest.mark.parametrize(
    "verb", [*(words[1] for words in wording.WHEN_FULL.values()), wording.OVER_FULL[1], wording.waits_over(12)[1]]
)
@pytest.mark.parametrize("needed", [1, 134, None])
@pytest.mark.parametrize("today", [1, None])
def test_answer_has_at_most_30_words(name: str, verb: str, needed: int | None, today: int | None) -> None:
    """The first sentence on the page is at most 30 words, whatever the ward and the answer."""
    for within, month, share in itertools.product(
        ("year", "every_month"), (0, 8, None), (0.0, 0.0004, 0.05, 0.4, 0.97, 1.0)
    ):
        said = wording.answer_sentence(name, (today, 100, needed), (0.05, verb, within), (month, share))

        assert len(said.split()) <= 30, said


def test_beds_that_nobody_stated_are_not_claimed() -> None:
    """Where today's beds are not known, the answer says so, and says nothing about today."""
    said = wording.answer_sentence("Kestrel", (None, 29, 34), (0.05, "finding it full", "every_month"), (0, 0.3))

    assert said.startswith("Kestrel's staffed beds today are not known; the average formula says 29. ")
    assert "takes 34." in said
    assert "January" not in said


def test_days_and_months_in_words() -> None:
    """A day is written without a leading nought; a share keeps its month beside it."""
    assert wording.date(dt.date(2022, 4, 1)) == "1 April 2022"
    assert wording.in_month(0, 0.57) == "Jan\u00a057\u00a0%"


def test_waiting_wards_are_never_said_to_turn_away() -> None:
    """Only patients who leave are called turned away."""
    said = wording.answer_sentence(
        "Kestrel", (28, 29, 34), (0.05, wording.WHEN_FULL["stays anyway"][1], "every_month"), (0, 0.3)
    )

    assert "turned away" not in said
    assert not [
        when
        for when, words in wording.WHEN_FULL.items()
        if "turned away" in " ".join(words) and when not in {"leaves", "no chance"}
    ]


def test_names_cannot_format_the_page() -> None:
    """A ward's name is shown as typed, never read as formatting."""
    assert wording.plain("*Ward* [7](x)") == "\\*Ward\\* \\[7\\](x)"


@pytest.mark.parametrize(
    ("patients", "words"), [(0, "none"), (0.4, "under 1"), (8.3, "about 8"), (123, "about 120"), (2345, "about 2,350")]
)
def test_patients_a_year_are_rounded_for_reading(patients: float, words: str) -> None:
    """An expected number of patients is not given more digits than it has."""
    assert wording.patients_per_year(patients).replace(HARD_SPACE, " ") == words


def test_no_promise_is_made() -> None:
    """Nothing on screen promises safety or a best answer."""
    shown = " ".join(str(value) for name, value in vars(wording).items() if name.isupper()).lower()

    assert not [word for word in ("optimal", "guaranteed", "proves", "safe ") if word in shown]
