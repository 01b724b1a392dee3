"""From a file of ward stays to a printed justification, in a real browser that may not leave this machine."""

from __future__ import annotations

import hashlib
import io
import json
import re
from html import unescape
from typing import TYPE_CHECKING
from urllib.parse import parse_qs, urlsplit

import pytest

if TYPE_CHECKING:
    from pathlib import Path

    from playwright.sync_api import BrowserContext, Page

A4_POINTS = (595, 842)  # 210 × 297 mm; Source: ISO 216
MOST_VALUES, LONGEST_VALUE = 12, 40


def turn_to(page: Page, title: str) -> None:
    """Turn to a page by its link at the top."""
    page.get_by_role("link", name=title, exact=True).first.click()


def sentence(page: Page) -> str:
    """Return the answer on the page One ward."""
    return page.get_by_role("heading", name=re.compile(r"(has \d+|'s) staffed")).inner_text()


def settle(page: Page) -> None:
    """Wait until the page has caught up with the last key."""
    page.wait_for_timeout(500)
    page.locator('[data-testid="stApp"][data-test-script-state="notRunning"]').wait_for()


def download(page: Page, button: str) -> bytes:
    """Press a download button and return the file."""
    with page.expect_download() as waiting:
        page.get_by_role("button", name=re.compile(button)).click()
    return waiting.value.path().read_bytes()


def load_file(page: Page, content: bytes) -> None:
    """Give the page Records a file of ward stays and wait until it is taken in."""
    turn_to(page, "Records")
    chooser = page.locator(".st-key-stays_file input[type=file]")
    chooser.set_input_files({"name": "our stays.csv", "mimeType": "text/csv", "buffer": content})
    page.get_by_role("heading", name="our stays.csv: what became of every row").wait_for()


def assert_stands_alone(html: str) -> None:
    """Nothing in the document points to another machine or runs."""
    assert "<script" not in html
    links = re.findall(r"https?://[^\s\"'<>)]+", html)
    assert {link for link in links if not link.startswith("http://www.w3.org/")} == set()  # names of SVG's own words
    assert re.findall(r"(?:src|href)=[\"'](?!#|data:)", html) == []


def pages_of(pdf: bytes) -> list[tuple[float, float]]:
    """Return the width and height of each page of a PDF, in points."""
    assert pdf.startswith(b"%PDF-")
    count = len(re.findall(rb"/Type\s*/Page\b", pdf))
    boxes = re.findall(rb"/MediaBox\s*\[\s*0\s+0\s+([\d.]+)\s+([\d.]+)\s*\]", pdf)
    assert len(boxes) >= 1
    assert count >= len(boxes)
    return [(float(width), float(height)) for width, height in boxes]


def test_from_a_file_to_paper(
    page: Page, server: str, browser: BrowserContext, tmp_path: Path, stays_csv: bytes
) -> None:
    """A file is loaded, a slider moved by the keyboard, both documents are taken, and the page's address stays bare."""
    openpyxl = pytest.importorskip("openpyxl", reason="openpyxl is not installed: the workbook can't be read back")
    content = stays_csv
    page.goto(server)
    page.get_by_role("heading", name=re.compile("Kestrel has")).wait_for()
    load_file(page, content)

    turn_to(page, "One ward")
    page.get_by_role("heading", name=re.compile("East's staffed beds today are not known")).wait_for()
    before = sentence(page)
    slider = page.locator(".st-key-demand input[type=range]")
    slider.focus()
    for _ in range(25):
        page.keyboard.press("ArrowRight")
    page.wait_for_function(
        "said => ![...document.querySelectorAll('h1, h2, h3')].some(one => one.innerText === said)", arg=before
    )
    page.wait_for_url(re.compile(r"demand=25"))
    page.get_by_text(re.compile(r"\+25 %")).first.wait_for()
    settle(page)
    assert_address_is_bare(page, content)
    said = sentence(page)
    assert said != before

    turn_to(page, "Justification")
    page.get_by_text(re.compile("approve")).first.wait_for()
    assert page.get_by_text(said).count() >= 1
    html, workbook = download(page, r"\(HTML\)"), download(page, r"\(Excel\)")
    assert_stands_alone(html.decode())
    assert said in unescape(html.decode())
    sheets = openpyxl.load_workbook(io.BytesIO(workbook), read_only=True).sheetnames
    assert len(sheets) >= 2
    turn_to(page, "Records")
    plan = download(page, "Save this plan").decode()
    assert json.loads(plan)["settings"]["East"]["demand"] == 25
    assert "2024-" not in plan  # no stay of the file, all of which are of that year
    turn_to(page, "One ward")
    page.get_by_role("heading", name=re.compile("East's staffed beds today are not known")).wait_for()
    page.wait_for_url(re.compile(r"demand=25"))
    assert sentence(page) == said
    assert_prints(browser, html, tmp_path, said)


def assert_address_is_bare(page: Page, content: bytes) -> None:
    """The address holds a few short settings and the file's fingerprint."""
    address = parse_qs(urlsplit(page.url).query)
    assert address["records"] == [hashlib.sha256(content).hexdigest()[:12]]
    assert len(address) <= MOST_VALUES
    assert all(len(value) <= LONGEST_VALUE for values in address.values() for value in values)
    assert "our stays" not in page.url


def assert_prints(browser: BrowserContext, html: bytes, folder: Path, said: str) -> None:
    """The document opens without a network, asks for nothing, and prints on A4."""
    path = folder / "justification.html"
    path.write_bytes(html)
    paper, complaints, asked = browser.new_page(), [], []
    paper.on("console", lambda one: complaints.append(one.text) if one.type in ("error", "warning") else None)
    paper.on("request", lambda one: asked.append(one.url))
    browser.set_offline(True)
    try:
        paper.goto(path.as_uri())
        assert paper.get_by_text(said).is_visible()
        assert paper.locator("svg").count() >= 2
        sizes = pages_of(paper.pdf(prefer_css_page_size=True, print_background=True))
    finally:
        browser.set_offline(False)
        paper.close()
    assert len(sizes) >= 2
    assert all(size == pytest.approx(A4_POINTS, abs=2) for size in sizes)
    assert complaints == []
    assert asked == [path.as_uri()]


def test_after_a_reload(page: Page, server: str, stays_csv: bytes) -> None:
    """After a reload the address still holds the settings, and the page says that the records must be loaded again."""
    page.goto(server)
    load_file(page, stays_csv)
    turn_to(page, "One ward")
    page.get_by_role("heading", name=re.compile("East's staffed beds today are not known")).wait_for()
    page.locator(".st-key-stay input[type=range]").focus()
    page.keyboard.press("ArrowRight")
    page.wait_for_url(re.compile(r"stay=1(&|$)"))
    page.reload()
    page.get_by_text("which are not loaded").wait_for()
    page.get_by_text(re.compile(r"\+1 %")).first.wait_for()

    load_file(page, stays_csv)
    turn_to(page, "One ward")
    page.get_by_role("heading", name=re.compile("East's staffed beds today are not known")).wait_for()
    assert page.get_by_text("which are not loaded").count() == 0


def test_a_reload_on_another_page(page: Page, server: str) -> None:
    """Settings stand in the address of other pages too: reloaded there, One ward still shows them."""
    page.goto(server)
    page.get_by_role("heading", name=re.compile("Kestrel has")).wait_for()
    slider = page.locator(".st-key-demand input[type=range]")
    slider.focus()
    page.keyboard.press("ArrowRight")
    page.get_by_text("go elsewhere", exact=True).click()
    page.wait_for_url(re.compile(r"full=leaves"))
    turn_to(page, "Compare wards")
    page.get_by_role("heading", name=re.compile("The next bed")).wait_for()
    page.wait_for_url(re.compile(r"compare\?.*demand=1"))
    page.reload()
    page.get_by_role("heading", name=re.compile("The next bed")).wait_for()
    turn_to(page, "One ward")
    page.get_by_role("heading", name=re.compile("Kestrel has .* turned away")).wait_for()
    page.wait_for_url(re.compile(r"demand=1(&|$)"))
    assert slider.input_value() == "1"


def test_the_back_button_keeps_what_is_set(page: Page, server: str) -> None:
    """Back on One ward the inputs stand as they were left, and so does the answer."""
    page.goto(server)
    page.get_by_role("heading", name=re.compile("Kestrel has")).wait_for()
    slider = page.locator(".st-key-demand input[type=range]")
    slider.focus()
    page.keyboard.press("ArrowRight")
    page.wait_for_url(re.compile(r"demand=1(&|$)"))
    settle(page)
    said = sentence(page)
    turn_to(page, "Compare wards")
    page.wait_for_url(re.compile(r"compare\?.*demand=1"))
    for _ in range(2):  # the first leads to the same page, as the server makes two addresses of it
        page.go_back()
        settle(page)
    page.get_by_role("heading", name=re.compile("Kestrel has")).wait_for()
    assert sentence(page) == said
    assert slider.input_value() == "1"
    assert "demand=1" in page.url


def choose(page: Page, key: str, ward: str) -> None:
    """Choose a ward from a list."""
    page.locator(f".st-key-{key} input").click()
    page.get_by_role("option", name=ward).click()


def test_the_ward_in_hand(page: Page, server: str) -> None:
    """A ward chosen on one page is the ward on the others, with its own beds, and the one that is justified first."""
    page.goto(server)
    page.get_by_role("heading", name=re.compile("Kestrel has 28 staffed")).wait_for()
    choose(page, "ward", "Merlin")
    page.get_by_role("heading", name=re.compile("Merlin has 8 staffed")).wait_for()
    turn_to(page, "What happened")
    page.get_by_role("heading", name=re.compile("Merlin")).first.wait_for()
    choose(page, "ward_looked_at", "Teal")
    page.get_by_role("heading", name=re.compile("Teal")).first.wait_for()
    turn_to(page, "One ward")
    page.get_by_role("heading", name=re.compile("Teal has 12 staffed")).wait_for()
    turn_to(page, "Justification")
    page.get_by_role("heading", name=re.compile(r"Teal: approve \d+ staffed beds")).wait_for()
    assert "Kestrel" not in page.get_by_role("heading", name=re.compile("approve")).inner_text()


def test_a_ward_only_looked_at(page: Page, server: str) -> None:
    """The justification starts with the ward that was looked at, also where nothing was touched on the way."""
    page.goto(server)
    page.get_by_role("heading", name=re.compile("Kestrel has")).wait_for()
    turn_to(page, "Justification")
    page.get_by_text("approve").first.wait_for()
    assert page.get_by_role("heading", name=re.compile(r"Kestrel: approve \d+ staffed beds")).count() == 1
