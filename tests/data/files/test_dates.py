"""Dates as people write them, against the calendar of Python's standard library."""

from __future__ import annotations

import datetime as dt

import numpy as np
import pyarrow as pa
import pytest
from hypothesis import given
from hypothesis import strategies as st

from bedplan.data.files.dates import MISSING, UNREADABLE, read_times, seconds_of


def at(text: str) -> dt.datetime:
    """Return a moment on the ward's clock."""
    return dt.datetime.fromisoformat(text)


EPOCH = at("1970-01-01 00:00")


def seconds(moment: dt.datetime) -> int:
    """Return whole seconds since 1970."""
    return int((moment - EPOCH).total_seconds())


def read_one(text: str, order: str | None = None, zone: str | None = None) -> int:
    """Return one text as seconds."""
    return int(read_times(pa.chunked_array([[text, "unreadable"]]), order, zone).seconds[0])


FOURTH_OF_MARCH = seconds(at("2023-03-04 14:05"))


@pytest.mark.parametrize(
    "text",
    [
        "2023-03-04 14:05",
        "2023-03-04T14:05:00",
        "2023-03-04 14:05:00.000",
        "2023/03/04 14:05",
        "20230304 14:05",
        "04/03/2023 14:05",
        "4/3/2023 14:05",
        "04-03-2023 14:05:00",
        "04.03.2023 14:05",
        "04.03.23 14.05",
        "04/03/23 2:05 PM",
        "4 March 2023 14:05",
        "04-Mar-2023 14:05",
        "04MAR2023 14:05",
        "Sat 4 Mar 2023 14:05",
        "March 4, 2023 2:05 pm",
        "Mar 4th, 2023 14:05",
        " 2023-03-04 14:05 ",
        "2023-3-4 14:05",
        "2023-03-04 1405",
        "202303041405",
        "04/03/2023, 14:05",
        "4/3/2023, 2:05 PM",
        "04/03/2023 - 14:05",
        "04/03/2023 \u2013 14:05",
        "2023-03-04_14:05",
        "'2023-03-04 14:05",
        "'04/03/2023 14:05",
        "14:05 04/03/2023",
        "14:05:00, 04.03.2023",
        "2:05 PM 04/03/2023",
        "04MAR2023:14:05:00",
        "04-Mar-23:14:05",
        "2023-03-04 kl. 14:05",
        "04/03/2023 \u00e0 14:05",
        "04/03/2023 alle 14:05",
        "2023-03-04 14:05 GMT",
        "2023-03-04 14:05 (UTC)",
        "04.03.2023 14:05 CET",
        "Sat, 04 Mar 2023 14:05:00 GMT",
        "Sat Mar 04 2023 14:05:00 GMT+0000",
        "1677938700",
        "2023-Mar-04 14:05",
        "2023 March 4 14:05",
        "2023-03-04t14:05:00z",
        "1677938700000",
        "20230304140500",
        "04.03.2023 14:05 Uhr",
        "04.03.2023 um 14:05 Uhr",
        "4. März 2023 14:05",
        "4 mars 2023 14h05",
        "4 maart 2023 14:05",
        "4 mrt. 2023 14:05",
        "4 de marzo de 2023 14:05",
    ],
)
def test_one_moment_in_many_spellings(text: str) -> None:
    """Every spelling of 4 March 2023, 14:05, is that moment."""
    assert read_one(text, "day first") == FOURTH_OF_MARCH


@pytest.mark.parametrize(
    ("written", "year"), [("00", 2000), ("24", 2024), ("49", 2049), ("50", 1950), ("89", 1989), ("99", 1999)]
)
def test_years_of_two_digits_have_their_century(written: str, year: int) -> None:
    """Up to 49 they are of this century, from 50 on of the last, in numbers and beside a month's name."""
    wanted = seconds(dt.datetime(year, 3, 4, 14, 5))  # noqa: DTZ001  the ward's clock has no zone

    assert read_one(f"04/03/{written} 14:05", "day first") == wanted
    assert read_one(f"4-Mar-{written} 14:05") == wanted


def test_month_first_is_the_other_reading() -> None:
    """04/03 is 3 April when the month comes first."""
    assert read_one("04/03/2023 14:05", "month first") == seconds(at("2023-04-03 14:05"))


@pytest.mark.parametrize(
    ("text", "moment"),
    [
        # The serial numbers of spreadsheets count days from 30 December 1899.
        ("44927", at("2023-01-01 00:00")),
        ("44927.75", at("2023-01-01 18:00")),
        ("44927,5", at("2023-01-01 12:00")),
        ("2023-03-04", at("2023-03-04 00:00")),
        ("2023-03-04 24:00", at("2023-03-05 00:00")),
        ("2023-03-04 12:30 AM", at("2023-03-04 00:30")),
        ("2023-03-04 12:30 PM", at("2023-03-04 12:30")),
        ("2024-02-29 08:00", at("2024-02-29 08:00")),
    ],
)
def test_special_moments(text: str, moment: dt.datetime) -> None:
    """Day numbers, bare dates, 24:00, noon and midnight, leap days."""
    assert read_one(text) == seconds(moment)


@pytest.mark.parametrize(
    "text",
    [
        "2023-02-29",
        "2023-13-01",
        "31/11/2023",
        "2023-03-04 25:00",
        "2023-03-04 14:61",
        "13:00 PM",
        "soon",
        "12",
        "99999999",
    ],
)
def test_what_is_no_date_is_unreadable(text: str) -> None:
    """Days that no calendar has and hours that no clock shows are not bent into dates."""
    assert read_one(text, "day first") == UNREADABLE


@pytest.mark.parametrize("text", ["", " ", "NULL", "n/a", "-", "NaT"])
def test_blanks_are_missing(text: str) -> None:
    """Words for nothing are nothing."""
    assert read_one(text) == MISSING


@pytest.mark.parametrize(
    ("text", "moment"),
    [
        ("2023-07-01T10:00:00Z", at("2023-07-01 11:00")),
        ("2023-07-01T10:00:00+02:00", at("2023-07-01 09:00")),
        ("2023-01-01T10:00:00-0500", at("2023-01-01 15:00")),
    ],
)
def test_offsets_are_brought_to_london(text: str, moment: dt.datetime) -> None:
    """London is an hour ahead of world time in summer and level with it in winter."""
    assert read_one(text, zone="Europe/London") == seconds(moment)


@given(st.dates(dt.date(1600, 1, 1), dt.date(9000, 12, 31)))
def test_the_calendar_is_pythons(day: dt.date) -> None:
    """Every day of the calendar comes out as Python's own calendar has it."""
    got = seconds_of(*(np.array([part]) for part in (day.year, day.month, day.day, 0)))

    assert got[0] == (day - EPOCH.date()).days * 86_400


@given(st.integers(1, 9_000), st.integers(-3, 15), st.integers(-3, 35))
def test_days_that_are_not_are_refused(year: int, month: int, day: int) -> None:
    """A date is read exactly when Python's calendar has it."""
    try:
        dt.date(year, month, day)
        possible = True
    except ValueError:
        possible = False

    got = seconds_of(*(np.array([part]) for part in (year, month, day, 0)))
    assert (got[0] != UNREADABLE) == possible


@given(st.datetimes(at("1990-01-01 00:00"), at("2049-12-31 00:00")), st.sampled_from(["/", "-", "."]))
def test_day_first_dates_round_trip(moment: dt.datetime, sign: str) -> None:
    """Any minute written day first is read back."""
    moment = moment.replace(second=0, microsecond=0)

    assert read_one(moment.strftime(f"%d{sign}%m{sign}%Y %H:%M"), "day first") == seconds(moment)


# Months 1 to 12 as their languages write them, in full and short (from memory).
MONTHS = {
    "German": "Januar Februar März April Mai Juni Juli August September Oktober November Dezember",
    "German, short": "Jän. Feb. Mrz Apr. Mai Jun. Jul. Aug. Sept. Okt. Nov. Dez.",
    "French": "janvier février mars avril mai juin juillet août septembre octobre novembre décembre",
    "French, short": "janv. févr. mars avr. mai juin juil. aout sept. oct. nov. déc.",
    "Dutch": "januari februari maart april mei juni juli augustus september oktober november december",
    "Italian": "gennaio febbraio marzo aprile maggio giugno luglio agosto settembre ottobre novembre dicembre",
    "Spanish": "enero febrero marzo abril mayo junio julio agosto septiembre octubre noviembre diciembre",
}


@pytest.mark.parametrize("language", MONTHS)
def test_months_of_other_languages(language: str) -> None:
    """Every month is read, in full and as it is cut short, whatever its capitals."""
    for number, name in enumerate(MONTHS[language].split(), 1):
        wanted = seconds(dt.datetime(2023, number, 5))  # noqa: DTZ001  the ward's clock has no zone
        assert read_one(f"5 {name} 2023") == wanted
        assert read_one(f"05-{name.upper()}-23") == wanted


@pytest.mark.parametrize("sign", "-./")
def test_years_of_two_digits_may_stand_first(sign: str) -> None:
    """A column whose first numbers are 22 and 23 and whose last ones run to 31 is written year first; else day first."""
    days = [dt.datetime(2022, 12, 20) + dt.timedelta(days=day) for day in range(40)]  # noqa: DTZ001
    for form in (f"%y{sign}%m{sign}%d %H:%M", f"%d{sign}%m{sign}%y %H:%M"):
        read = read_times(pa.chunked_array([[None, *(f"{day:{form}}" for day in days)]]), "day first").seconds

        assert list(read[1:]) == [seconds(day) for day in days]
