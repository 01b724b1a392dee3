"""The program as people use it: a server of its own and a real browser that may not leave this machine."""

from __future__ import annotations

import contextlib
import shutil
import socket
import subprocess
import sys
import time
import urllib.request
from typing import TYPE_CHECKING

import pytest

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

    from playwright.sync_api import BrowserContext, Page, Route

SECONDS_TO_START = 60
FLAGS = (
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
)
# Asked for below a page's own address before the right one is found; the server answers that there is no such thing.
PROBES = ("/_stcore/health", "/_stcore/host-config")


def free_port() -> int:
    """Return a port that nobody listens on."""
    with socket.socket() as one:
        one.bind(("127.0.0.1", 0))
        return one.getsockname()[1]


def is_ready(url: str) -> bool:
    """Whether the server answers."""
    with contextlib.suppress(OSError), urllib.request.urlopen(f"{url}/_stcore/health", timeout=1) as answer:  # noqa: S310  http on this machine
        return answer.read() == b"ok"
    return False


@pytest.fixture(scope="session")
def server(root: Path, tmp_path_factory: pytest.TempPathFactory) -> Iterator[str]:
    """Start the program's server, return its address, and see at the end that nothing went wrong in it."""
    log = tmp_path_factory.mktemp("server") / "server.log"
    url = f"http://127.0.0.1:{free_port()}"
    command = [sys.executable, "-m", "streamlit", "run", "app.py", "--server.headless", "true"]
    with log.open("w") as written:
        port = ["--server.port", url.rsplit(":", 1)[1]]
        process = subprocess.Popen([*command, *port], cwd=root, stdout=written, stderr=subprocess.STDOUT)
        try:
            end = time.monotonic() + SECONDS_TO_START
            while not is_ready(url):
                assert process.poll() is None, log.read_text()
                assert time.monotonic() < end, log.read_text()
                time.sleep(0.1)
            yield url
        finally:
            process.terminate()
            process.wait(20)
    assert "Traceback" not in log.read_text(), log.read_text()


@pytest.fixture(scope="session")
def browser(tmp_path_factory: pytest.TempPathFactory) -> Iterator[BrowserContext]:
    """Open a real browser without a window."""
    playwright = pytest.importorskip("playwright.sync_api", reason="playwright is not installed: no browser to drive")
    program = shutil.which("chromium")
    if program is None:
        pytest.skip("no program called chromium on this machine: apt-get install chromium")
    with playwright.sync_playwright() as driver:
        context = driver.chromium.launch_persistent_context(
            str(tmp_path_factory.mktemp("profile")),
            executable_path=program,
            headless=True,
            args=list(FLAGS),
            viewport={"width": 1400, "height": 1000},
            accept_downloads=True,
            locale="en-GB",
        )
        yield context
        context.close()


@pytest.fixture
def page(browser: BrowserContext, server: str) -> Iterator[Page]:
    """Open an empty page; see at the end that it logged no error and asked nothing of any other machine."""
    page, complaints, elsewhere = browser.new_page(), [], []

    def guard(route: Route) -> None:
        if route.request.url.startswith((server, "data:", "blob:")):
            route.continue_()
        else:
            elsewhere.append(route.request.url)
            route.abort()

    page.on("pageerror", lambda error: complaints.append(str(error)))
    page.on(
        "console",
        lambda said: (
            complaints.append(said.text)
            if said.type == "error" and not said.location.get("url", "").endswith(PROBES)
            else None
        ),
    )
    page.route("**/*", guard)
    yield page
    page.close()
    assert complaints == []
    assert elsewhere == []
