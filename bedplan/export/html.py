"""The justification as one HTML file that stands alone: no script, no network, prints on A4."""

from __future__ import annotations

import html
import re
from string import Template
from typing import TYPE_CHECKING

import vl_convert

from bedplan import charts, wording
from bedplan.export.justification import SMALLEST_COUNT_SHOWN, count_or_withheld

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from bedplan.export.justification import Justification, WardCase

VEGA_LITE = "6.1"
PAGE_WIDTH = 640  # of a drawing that takes the whole page
WHOLE = ' class="whole"'  # short: all on one page
WIDE = ' class="wide"'  # the first column holds words, not figures
_STYLE = """
@page { size: A4; margin: 16mm 15mm 18mm; @bottom-right { content: "Page " counter(page) " of " counter(pages); font-size: 9pt }
  @bottom-left { content: "$foot"; font-size: 9pt } }
html { print-color-adjust: exact; -webkit-print-color-adjust: exact }
body { font: 11pt/1.45 "Liberation Sans", Arial, sans-serif; color: #0f1419; max-width: 180mm; margin: 8mm auto; padding: 0 4mm }
h1 { font-size: 20pt; margin: 0 0 2mm } h2 { font-size: 14pt; margin: 8mm 0 2mm; break-after: avoid } h3 { font-size: 11.5pt; break-after: avoid } .lead { break-after: avoid }
.answer { font-size: 12pt; margin: 3mm 0 }
.box { border: 1.5pt solid #0f1419; padding: 3mm 4mm; margin: 3mm 0; break-inside: avoid } .box p { margin: 1mm 0 } .ask { font-size: 14pt; line-height: 1.3; font-weight: bold }
table { border-collapse: collapse; width: 100%; font-variant-numeric: tabular-nums; font-size: 9.5pt; margin: 2mm 0 }
th, td { text-align: left; padding: 1.2mm 2mm; border-bottom: .5pt solid #b8bec4; vertical-align: top; overflow-wrap: break-word }
td:first-child, th:first-child { min-width: 24mm } .wide td:first-child { min-width: 42mm } .wide td { overflow-wrap: anywhere }
.whole { break-inside: avoid } thead { display: table-header-group } tr { break-inside: avoid } figure { margin: 3mm 0; break-inside: avoid }
figure svg { width: 100%; height: auto } figcaption { font-size: 9.5pt }
.side { display: flex; gap: 6mm; align-items: flex-start; break-inside: avoid } .side figure { flex: 0 0 80mm }
"""
_PAGE = Template(
    '<!doctype html>\n<html lang="en"><head><meta charset="utf-8"><title>$title</title>'
    "<meta http-equiv=\"Content-Security-Policy\" content=\"default-src 'none'; style-src 'unsafe-inline'\">"
    '<meta name="viewport" content="width=device-width"><style>$style</style></head><body>\n$body\n</body></html>\n'
)
_IDENTIFIER = re.compile(r'(?<=\bid=")([^"]+)(?=")|(?<=url\(#)([^)]+)(?=\))|(?<=href="#)([^"]+)(?=")')


def as_html(justification: Justification) -> bytes:
    """How does the justification read as a document? One HTML file, UTF-8, charts inside as drawings.

    Checked by: tests/export/test_html.py
    """
    esc = html.escape
    parts = [
        f"<h1>{esc(justification.title)}</h1>",
        f'<div class="box" id="decision">{_decisions(justification)}</div>',
        *(_ward(case, number) for number, case in enumerate(justification.cases)),
        _source(justification),
        "<h2>Cautions</h2>",
        _list(wording.CAUTIONS),
        f'<h2>To get the same figures again</h2><div class="box">{_table(("What", "Value"), justification.reproducibility(), WIDE)}</div>',
    ]
    style = Template(_STYLE).substitute(foot=f"Figures {justification.fingerprint()}")
    return _PAGE.substitute(title=esc(justification.title), style=style, body="\n".join(parts)).encode()


def _ward(case: WardCase, number: int) -> str:
    curve = drawing(case, f"curve{number}", "curve")
    months = drawing(case, f"months{number}", "months")
    table = case.table()
    caption = (
        f"{case.words[2]}, as a share over the year, at each number of staffed beds. "
        f"The ward's own line ({wording.LINES[case.model]}) is the thick one; the thin ones are "
        "the share who find no free bed by other formulas."
    )
    parts = [
        f"<h2>{html.escape(case.ward.name)}</h2>",
        f'<p class="answer">{html.escape(case.sentence())}</p>',
        f"<figure>{curve}<figcaption>{caption}</figcaption></figure>",
        f'<p class="lead">{case.words[2]}:</p>',
        _table(tuple(table[0]), [tuple(row.values()) for row in table], WHOLE),
        f"<figure>{months}<figcaption>{case.words[2]}, as a share, month by month.</figcaption></figure>",
        "<h3>Every bed count near the decision</h3>",
        _curve_table(case),
        "<h3>What this rests on</h3>",
        _table(("Assumption", "Value", "From"), case.assumptions, WIDE),
        _table(("Set by the planner", "Value"), case.settings, WHOLE),
        _list(case.notes()),
        *_check(case, number),
    ]
    return "\n".join(parts)


def _check(case: WardCase, number: int) -> list[str]:
    """Return the check on last year: its verdict, its figures, and how each width of band kept its promise."""
    parts = ["<h3>Check on last year</h3>", _paragraphs([case.checked])]
    if case.check is None:
        return parts
    figure = f"<figure>{drawing(case, f'kept{number}', 'kept')}<figcaption>A dot a band: the days it held.</figcaption></figure>"
    rows = [tuple(map(wording.percent, (one.promised, one.held, one.low, one.high))) for one in case.check.kept]
    heading = ("Band", "Days it held", "Allowing for chance, from", "to")
    return [
        *parts,
        _table(("What was checked", "Last year", "Held against"), case.check.figures, WIDE),
        f'<p class="lead">{html.escape(case.check.promise)}</p>',
        f'<div class="side">{figure}{_table(heading, rows)}</div>',
        _list(case.check.notes),
    ]


def curve_rows(case: WardCase) -> tuple[tuple[str, ...], list[tuple[float, ...]]]:
    """Return the heading and rows near the decision, as numbers: beds, the watched figure, who finds no bed by model.

    Checked by: tests/export/test_html.py
    """
    counts = [count for count in case.marked().values() if count is not None]
    beds = [int(count) for count in case.curve.beds if min(counts) - 3 <= count <= max(counts) + 3]
    heading = ("Staffed beds", case.words[2], *(f"no free bed: {wording.LINES[name]}" for name in case.compared))
    return heading, [
        (count, case.share_at(count), *(case.curves[name].at(count).turn_away_probability for name in case.compared))
        for count in beds
    ]


def _curve_table(case: WardCase) -> str:
    heading, rows = curve_rows(case)
    return _table(heading, [(str(row[0]), *(wording.percent(share) for share in row[1:])) for row in rows])


def _source(justification: Justification) -> str:
    source = justification.source
    rows = [
        (reason, count_or_withheld(count), "*" if 0 < count < SMALLEST_COUNT_SHOWN else f"{bed_days:,.0f}")
        for reason, count, bed_days in source.reasons
    ]
    withheld = "<p>* counts of 1 to 7 are withheld.</p>" if source.withholds else ""
    table = _table(("What was done, and why", "Rows", "Bed-days"), rows) if rows else ""
    checks = _table(("Does it add up?", "Figures", "Verdict"), source.checks, WIDE)
    return f"<h2>Where the data came from</h2>{_paragraphs(source.sentences())}{table}{checks}{withheld}"


def _decisions(justification: Justification) -> str:
    return "".join(
        f'<p class="ask">{html.escape(ask)}</p><p>{html.escape(check)}</p>' for ask, check in justification.decisions()
    )


def _paragraphs(sentences: Iterable[str]) -> str:
    return "".join(f"<p>{html.escape(sentence)}</p>" for sentence in sentences)


def _list(sentences: Iterable[str]) -> str:
    return "<ul>" + "".join(f"<li>{html.escape(sentence)}</li>" for sentence in sentences) + "</ul>"


def _table(heading: Sequence[str], rows: Iterable[Sequence[str]], kind: str = "") -> str:
    head = "".join(f'<th scope="col">{html.escape(name)}</th>' for name in heading)
    body = "".join("<tr>" + "".join(f"<td>{html.escape(cell)}</td>" for cell in row) + "</tr>" for row in rows)
    return f"<table{kind}><thead><tr>{head}</tr></thead><tbody>{body}</tbody></table>" if body else ""


def drawing(case: WardCase, prefix: str, kind: str) -> str:
    """Return one of a ward's charts as an SVG element whose ids are its own.

    Checked by: tests/export/test_html.py
    """
    width = PAGE_WIDTH
    if kind == "kept" and case.check is not None:
        data, spec = charts.calibration_data(case.check.kept), charts.CALIBRATION
        title, width = f"{case.ward.name}: {case.check.promise}", spec["width"]
    elif kind == "curve":
        data = charts.curve_data(case.curves, (case.model, case.over_year), case.marked(), case.limit())
        spec, title = charts.CURVE, f"{case.ward.name}: share of patients at each number of staffed beds"
    else:
        data = charts.months_data(case.months(), case.limit())
        spec, title = charts.MONTHS, f"{case.ward.name}: share of patients month by month"
    drawn = vl_convert.vegalite_to_svg(
        charts.printed(spec, data, width=width), vl_version=VEGA_LITE, allowed_base_urls=[]
    )
    numbers: dict[str, int] = {}  # the engine numbers its ids on from drawing to drawing
    drawn = _IDENTIFIER.sub(lambda found: f"{prefix}-{numbers.setdefault(found.group(0), len(numbers))}", drawn)
    drawn = re.sub(r'(<svg [^>]*?)width="[\d.]+" height="[\d.]+"', r"\1", drawn, count=1)
    return drawn.replace("<svg ", f'<svg role="img" aria-label="{html.escape(title)}" ', 1)
