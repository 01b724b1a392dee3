"""The HTML document stands alone, escapes what was typed, and holds the figures of the curve."""

from __future__ import annotations

import re
from dataclasses import replace
from html.parser import HTMLParser
from typing import TYPE_CHECKING

import pytest

from bedplan import wording
from bedplan.decision import OverfullLimit
from bedplan.export import as_html
from bedplan.export.html import curve_rows

if TYPE_CHECKING:
    from bedplan.export import Justification


@pytest.fixture(scope="module")
def page(justification: Justification) -> str:
    """Return the document as text."""
    return as_html(justification).decode()


class _Tags(HTMLParser):
    def __init__(self) -> None:
        super().__init__()
        self.open: list[str] = []
        self.seen: list[tuple[str, dict[str, str | None]]] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.seen.append((tag, dict(attrs)))


def test_stands_alone(page: str) -> None:
    """Nothing in the document runs, and nothing is fetched from anywhere."""
    tags = _Tags()
    tags.feed(page)

    assert not [tag for tag, _ in tags.seen if tag in {"script", "link", "img", "iframe", "object"}]
    assert not [
        attrs
        for _, attrs in tags.seen
        if any(name in attrs and not (attrs[name] or "").startswith("#") for name in ("src", "href"))
    ]
    assert "default-src 'none'" in page


def test_typed_text_cannot_become_code(page: str) -> None:
    """A ward's name and a file's name are shown as typed."""
    assert "<script>" not in page
    assert "&lt;script&gt;" in page
    assert "stays &lt;b&gt;.csv" in page


def test_drawings_share_no_id(page: str) -> None:
    """Every drawing's ids are its own, so that one does not clip another."""
    ids = re.findall(r'\bid="([^"]+)"', page)

    assert len(ids) == len(set(ids))
    assert page.count("<svg ") == 4


def test_curve_table_is_the_curve(justification: Justification, page: str) -> None:
    """The printed rows are each model's own share at each bed count."""
    case = justification.cases[0]
    heading, rows = curve_rows(case)
    others = [name for name in case.curves if name != case.ward.model]  # whose own figure is the watched one here

    assert heading[1:] == ("Patients turned away", *(f"no free bed: {wording.LINES[name]}" for name in others))
    for beds, watched, *shares in rows:
        assert watched == case.curve.at(beds).turn_away_probability
        assert shares == [case.curves[name].at(beds).turn_away_probability for name in others]
    assert f"<td>{rows[0][0]}</td><td>{wording.percent(rows[0][1])}</td>" in page


def test_every_line_beside_another_figure(justification: Justification) -> None:
    """Where the limit is on hours over-full, the share who find the ward full stands beside them for every line."""
    case = replace(justification.cases[1], rule=OverfullLimit(0.05))

    assert case.compared == tuple(case.curves)
    assert case.ward.model not in justification.cases[1].compared


def test_what_is_asked_for_comes_first_and_largest(justification: Justification, page: str) -> None:
    """The box begins with the ask of the first ward, in a class of its own, before anything else but the title."""
    ask, check = justification.decisions()[0]

    assert f'id="decision"><p class="ask">{ask}</p><p>{check}</p>' in page.replace("&#x27;", "'")
    assert page.index('id="decision"') < page.index("<h2>")


def test_withheld_counts_are_explained(page: str) -> None:
    """A withheld count shows as a star, and the star is explained."""
    assert "<td>*</td>" in page
    assert "counts of 1 to 7 are withheld" in page


def test_cautions_and_reproducibility_are_printed(justification: Justification, page: str) -> None:
    """Every caution, the file's fingerprint and the figures' own fingerprint are in the document."""
    for caution in wording.CAUTIONS:
        assert caution.replace("'", "&#x27;") in page
    assert "ab" * 32 in page
    assert justification.fingerprint() in page
    assert wording.NOT_YET_CHECKED in page


def test_same_figures_same_bytes(justification: Justification) -> None:
    """The same justification gives the same document, byte for byte."""
    assert as_html(justification) == as_html(justification)
