"""Monthly returns: averages, and nothing that averages can't hold."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pytest

from bedplan.data import IntakeChoices, read_monthly_return, read_records
from bedplan.data.values.months import month_of
from bedplan.errors import ImpossibleFigure, UnreadableRecords

if TYPE_CHECKING:
    from pathlib import Path

RETURN = b"""month,ward,available_bed_days,occupied_bed_days,discharges
2024-01,Heron,310,248,62
2024-02,Heron,290,261,58
Total,,600,509,120
"""


def test_averages_worked_out_by_hand() -> None:
    """Ten beds over 60 days with 509 bed-days and 120 discharges."""
    figures = read_monthly_return(RETURN)

    assert figures.occupancy("Heron") == pytest.approx(509 / 600)
    assert figures.mean_stay_days("Heron") == pytest.approx(509 / 120)
    assert figures.turnover_interval_days("Heron") == pytest.approx((600 - 509) / 120)
    assert figures.throughput("Heron") == pytest.approx(120 / 10 / 60 * 365)
    assert (figures.report.rows_in, figures.report.used, figures.report.set_aside) == (3, 2, 1)


def test_stay_and_turnover_are_the_time_between_patients(demo_data: Path) -> None:
    """Mean stay + turnover interval = period ÷ throughput, for every ward of the demo (an identity)."""
    figures = read_monthly_return(demo_data / "monthly_return.csv")
    for ward in figures.wards:
        total = figures.mean_stay_days(ward) + figures.turnover_interval_days(ward)
        assert total == pytest.approx(365 / figures.throughput(ward))


def test_demand_from_averages_has_their_load(demo_data: Path) -> None:
    """The demand built from a return wants as many beds as were occupied last year, give or take the unequal months."""
    figures = read_monthly_return(demo_data / "monthly_return.csv")
    for ward in figures.wards:
        rows = figures.table[(figures.table["ward"] == ward) & (figures.table["month"] >= "2024-04")]
        assert figures.demand(ward).offered_load == pytest.approx(
            rows["occupied"].sum() / rows["days"].sum(), rel=0.005
        )
    assert figures.demand("Kestrel").month_factors[0] > 1.0


def test_a_return_says_what_it_cannot_tell() -> None:
    """How demand swings is not in it."""
    assert any("assumed" in note for note in read_monthly_return(RETURN).report.notes)


@pytest.mark.parametrize(
    ("text", "month"),
    [
        ("2024-04", (2024, 4)),
        ("2024/4", (2024, 4)),
        ("202404", (2024, 4)),
        ("2024-04-30", (2024, 4)),
        ("Apr 2024", (2024, 4)),
        ("April-24", (2024, 4)),
        ("30 April 2024", (2024, 4)),
        ("APR-2024", (2024, 4)),
        ("04/2024", (2024, 4)),
        ("30/04/2024", (2024, 4)),
        ("01/04/2024", (2024, 4)),
        ("04/30/2024", (2024, 4)),
        ("2024-04-01 00:00:00", (2024, 4)),
        ("20240430", (2024, 4)),
        ("2024M04", (2024, 4)),
        ("45017", (2023, 4)),
        ("45017.0", (2023, 4)),
        ("M\u00e4rz 2024", (2024, 3)),
        ("Mai 2024", (2024, 5)),
        ("Dez-24", (2024, 12)),
        ("juin 2024", (2024, 6)),
        ("juil. 2024", (2024, 7)),
        ("2024 October", (2024, 10)),
        ("15/04/2024", (2024, 4)),
        ("05/04/2024", None),
        ("45017 beds", None),
        ("4501", None),
        ("2024-13", None),
        ("Quarter 1", None),
        ("", None),
    ],
)
def test_months_in_many_spellings(text: str, month: tuple[int, int] | None) -> None:
    """A month is read, or it is said that it can't be."""
    assert month_of(text) == month


@pytest.mark.parametrize(
    "content",
    [b"month,ward\n2024-01,Heron\n", b"month,ward,occupied_bed_days,discharges\nsometime,Heron,200,50\n"],
)
def test_a_return_that_cannot_be_used_says_why(content: bytes) -> None:
    """One sentence names the file and what it lacks."""
    with pytest.raises(UnreadableRecords, match=r"return\.csv"):
        read_monthly_return(content, name="return.csv")


def test_a_ward_without_bed_days_has_no_demand() -> None:
    """No bed-days, no length of stay: the message says so."""
    figures = read_monthly_return(b"month,ward,occupied_bed_days,discharges\n2024-01,Heron,0,0\n")

    with pytest.raises(ImpossibleFigure):
        figures.demand("Heron")


def lines(*rows: str) -> bytes:
    """Return a return of these rows."""
    return "\n".join(["month;ward;available_bed_days;occupied_bed_days;discharges", *rows]).encode()


QUARTERS = [("2023-03-31", 90), ("2023-06-30", 91), ("2023-09-30", 92), ("2023-12-31", 92)]


@pytest.mark.parametrize("heading", ["month", "quarter_ending"])
def test_rows_three_months_apart_are_quarters(heading: str) -> None:
    """Forty-nine beds in use all year, written down by quarter, are 49 and not 147."""
    rows = [f"{day};Heron;{60 * days};{49 * days};{7 * days}" for day, days in QUARTERS]
    figures = read_monthly_return(lines(*rows).replace(b"month", heading.encode(), 1))

    assert figures.demand("Heron").offered_load == pytest.approx(49)
    assert figures.occupancy("Heron") == pytest.approx(49 / 60)
    assert figures.table["days"].sum() == 365
    assert figures.report.used == 4
    assert any("hold 3 months, up to the one it names" in note for note in figures.report.notes)


def test_quarters_may_be_named_by_their_first_month() -> None:
    """January, April, July and October hold the months from there on."""
    rows = [f"2023-{month:02d};Heron;;{49 * days};{days}" for month, days in ((1, 90), (4, 91), (7, 92), (10, 92))]
    figures = read_monthly_return(lines(*rows))

    assert figures.demand("Heron").offered_load == pytest.approx(49)
    assert str(figures.table["month"].max()) == "2023-12"


def test_two_months_far_apart_are_months_until_somebody_says_otherwise() -> None:
    """Two Januaries may be two months or two years: taken as months, which asks for more beds, and told."""
    rows = lines("2023-01;Heron;;310;31", "2024-01;Heron;;310;31")
    figures = read_monthly_return(rows)

    assert figures.demand("Heron").offered_load == pytest.approx(10)
    assert any("12 months apart" in note for note in figures.report.notes)
    assert read_monthly_return(rows, months_a_row=12).demand("Heron").offered_load == pytest.approx(620 / 730)
    with pytest.raises(ImpossibleFigure, match="0 months a row"):
        read_monthly_return(rows, months_a_row=0)


@pytest.mark.parametrize("figure", ["1.234", "1.234,0", "1234", "1,234", "1'234", "1 234", "1\u202f234", "1,234.0"])
def test_a_thousand_and_more_in_every_spelling(figure: str) -> None:
    """Whoever writes 1.234 bed-days beside 180 discharges means more than a thousand."""
    figures = read_monthly_return(lines(f"2024-01;Heron;1550;{figure};180"))

    assert figures.mean_stay_days("Heron") == pytest.approx(1234 / 180)


def test_real_decimals_stay_decimals() -> None:
    """733.125 bed-days beside 466 discharges are not seven hundred thousand."""
    assert read_monthly_return(lines("2024-01;Heron;900;733.125;466")).mean_stay_days("Heron") == pytest.approx(
        733.125 / 466
    )
    assert read_monthly_return(lines("2024-01;Heron;900;733,5;466")).mean_stay_days("Heron") == pytest.approx(
        733.5 / 466
    )


def test_american_firsts_of_the_month_are_read() -> None:
    """04/01 beside 05/01 is the first of April: days other than the first or last make no month."""
    figures = read_monthly_return(lines("04/01/2023;Heron;;300;30", "05/01/2023;Heron;;310;31"))

    assert [str(month) for month in figures.table["month"]] == ["2023-04", "2023-05"]


def test_dates_within_a_month_are_asked_for_where_open() -> None:
    """05/04 may be in April or May, and the answer holds."""
    content = lines("05/04/2024;Heron;;300;30")

    with pytest.raises(UnreadableRecords) as problem:
        read_monthly_return(content)
    assert problem.value.question.examples[0][1:] == ("05 April 2024", "04 May 2024")
    for order, month in (("day first", "2024-04"), ("month first", "2024-05")):
        assert str(read_monthly_return(content, date_order=order).table["month"][0]) == month


def test_every_row_of_a_return_has_its_reason() -> None:
    """Totals, months and figures nobody can read, rows twice: each is counted under its own name."""
    rows = ["2024-01;Heron;310;248;62", "2024-01;Heron;310;248;62", "Q1;Heron;1;1;1", "2024-02;Heron;290;many;58"]
    figures = read_monthly_return(lines(*rows, "2024-01;Total;310;248;62", "2024-01;Summerfield;310;248;62", "end"))

    assert figures.wards == ("Heron", "Summerfield")
    assert (figures.report.rows_in, figures.report.used, figures.report.set_aside) == (7, 2, 5)
    assert dict(figures.report.reasons) == {
        "The same row twice": 1,
        "The month can't be read": 1,
        "A figure is missing or can't be read": 1,
        "No ward is named, or the row is a total": 1,
        "A title, total or footer, or a line with another number of cells": 1,
    }


def test_the_advice_names_what_is_wrong() -> None:
    """Where figures are to blame the months are not."""
    with pytest.raises(UnreadableRecords, match=r"a figure is missing or can't be read \(1 row\)"):
        read_monthly_return(lines("2024-01;Heron;310;many;62"))


def test_specialties_of_one_ward_are_added() -> None:
    """Two rows for one ward and month are parts of it, and the note says so."""
    figures = read_monthly_return(lines("2024-01;Heron;;200;20", "2024-01;Heron;;110;11"))

    assert figures.demand("Heron").offered_load == pytest.approx(10)
    assert any("2 rows share their ward and month" in note for note in figures.report.notes)


def test_beds_read_as_bed_days_are_told() -> None:
    """A heading that says beds, not bed-days, may hold something else."""
    figures = read_monthly_return(b"month,ward,occupied_beds,discharges\n2024-01,Heron,310,31\n")

    assert any("“occupied_beds” is read as bed-days" in note for note in figures.report.notes)


def test_wards_of_a_return_are_matched_to_the_stays() -> None:
    """Capitals don't matter, merged wards are added, the rest is named."""
    stays = read_records(
        b"patient_key,ward,start,end\na,W,2024-01-01 10:00,2024-01-04 10:00\n",
        choices=IntakeChoices(ward_names={"Ash": "W"}),
    )
    figures = read_monthly_return(lines("2024-01;w;;200;20", "2024-01;Ash;;110;11", "2024-01;Owl;;31;1")).linked_to(
        stays
    )

    assert figures.demand("W").offered_load == pytest.approx(10)
    assert figures.unknown_wards == ("Owl",)


def test_a_return_whose_every_row_has_a_cell_too_many_says_so() -> None:
    """Lines that don't fit the headings are named, not stumbled over."""
    with pytest.raises(
        UnreadableRecords, match=r"a title, total or footer, or a line with another number of cells \(2 rows\)"
    ):
        read_monthly_return(lines("2024-01;Heron;310;248;62;9", "2024-02;Heron;290;248;62;9"))


LENGTHS = {"2024-01": 31, "2024-02": 29, "2024-03": 31, "2024-04": 30}


def units(heads: str, occupied: float, discharges: int, available: float | None = None, *, times_days: bool) -> bytes:
    """Return four months of a ward with so many beds occupied and available, times the month's days or not."""
    rows = [f"month;ward;{heads};discharges"]
    for month, days in LENGTHS.items():
        by = days if times_days else 1
        there = "" if available is None else f"{available * by:g};"
        rows.append(f"{month};Heron;{there}{occupied * by:g};{discharges}")
    return "\n".join(rows).encode()


@pytest.mark.parametrize("times_days", [True, False])
@pytest.mark.parametrize(
    ("heads", "occupied", "discharges", "available"),
    [
        ("occupied_beds", 24.3, 190, None),  # 3.9 days a stay as beds, 0.1 as bed-days
        ("occupied", 24.3, 190, None),
        ("Available beds;Occupied beds", 24, 20, 28),  # stays of 1.2 or 36 days: the constant available beds tell
        ("Beds available;Beds occupied", 5.5, 60, 8),
        ("Average available beds;Average occupied beds", 420, 3_100, 450),
    ],
)
def test_beds_and_bed_days_are_told_apart(
    heads: str, occupied: float, discharges: int, available: float | None, *, times_days: bool
) -> None:
    """Whatever the heading says, the figures show whether they are of a day or of a month, and a sentence says so."""
    figures = read_monthly_return(units(heads, occupied, discharges, available, times_days=times_days))

    assert figures.mean_stay_days("Heron") == pytest.approx(occupied * 121 / (4 * discharges))
    assert figures.occupancy("Heron") == pytest.approx(occupied / available if available else 0.0)
    meant = "is read as bed-days" if times_days else "is read as beds on average"
    assert any(meant in note for note in figures.report.notes)


def test_beds_a_quarter_are_beds_on_every_day_of_it() -> None:
    """Forty-nine beds occupied on average in each quarter are 49."""
    rows = [f"{day};Heron;60;49;{7 * days}" for day, days in QUARTERS]
    figures = read_monthly_return(lines(*rows).replace(b"_bed_days", b"_beds"))

    assert figures.demand("Heron").offered_load == pytest.approx(49)
    assert figures.occupancy("Heron") == pytest.approx(49 / 60)


def test_where_figures_leave_it_open_somebody_must_say() -> None:
    """Sixty a month beside 60 discharges: two beds for a day each, or 60 beds for a month each."""
    content = b"month,ward,occupied_beds,discharges\n2024-01,Heron,62,60\n2024-02,Heron,58,60\n"

    with pytest.raises(UnreadableRecords, match=r"“occupied_beds” in return\.csv may be beds"):
        read_monthly_return(content, name="return.csv")
    as_beds = read_monthly_return(content, columns={"occupied_beds": "occupied_beds"})
    as_days = read_monthly_return(content, columns={"occupied": "occupied_beds"})
    assert as_beds.mean_stay_days("Heron") == pytest.approx((62 * 31 + 58 * 29) / 120)
    assert as_days.mean_stay_days("Heron") == pytest.approx(1.0)


def test_available_beds_beside_occupied_bed_days() -> None:
    """Each column is read by itself: 28 beds and 744 bed-days in January."""
    content = b"month,ward,available_beds,occupied_bed_days,discharges\n2024-01,Heron,28,744,190\n"

    assert read_monthly_return(content).occupancy("Heron") == pytest.approx(744 / 868)


def test_bed_days_that_make_stays_of_hours_are_doubted() -> None:
    """Where a column is called bed-days and holds beds, the heading counts, and a sentence says what is odd."""
    figures = read_monthly_return(b"month,ward,occupied_bed_days,discharges\n2024-01,Heron,24,190\n")

    assert figures.mean_stay_days("Heron") == pytest.approx(24 / 190)
    assert any("would stay 0.13 days" in note for note in figures.report.notes)
