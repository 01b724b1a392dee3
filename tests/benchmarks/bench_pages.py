"""How fast the pages are: python tests/benchmarks/bench_pages.py. Prints medians, 95th percentiles and ratios.

Browser and server run on this machine; whatever else runs on it is in the figures, so compare ratios, not digits.
"""

from __future__ import annotations

import contextlib
import math
import shutil
import socket
import statistics
import subprocess
import sys
import tempfile
import time
import urllib.request
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

ROOT = Path(__file__).resolve().parents[2]
sys.path.insert(0, str(ROOT))

from playwright.sync_api import Page, sync_playwright  # noqa: E402
from streamlit.proto.BackMsg_pb2 import BackMsg  # noqa: E402
from streamlit.proto.ForwardMsg_pb2 import ForwardMsg  # noqa: E402
from websockets.sync.client import connect  # noqa: E402

from bedplan.data import estimate_demand, read_records  # noqa: E402
from bedplan.decision import TurnAwayLimit, Ward, decide  # noqa: E402
from bedplan.models import MODELS  # noqa: E402

if TYPE_CHECKING:
    from collections.abc import Iterator

    from bedplan.models import Demand

MOVES = 40
WARD = "Kestrel"
SEASONAL = "seasonal_loss"
EMPTY_PAGE = """
import streamlit as st
from bedplan.pages import startup
assert startup.LOADED
"""
# Watches the picture: when was a key pressed, when did the picture last change?
WATCH = """() => {
  const marks = window.marks = {pressed: 0, drawn: 0};
  document.addEventListener('keydown', event => { marks.pressed = event.timeStamp; marks.drawn = 0; }, true);
  new MutationObserver(() => { marks.drawn = performance.now(); }).observe(
    document.querySelector('.st-key-curve'),
    {subtree: true, childList: true, characterData: true, attributes: true,
     attributeFilter: ['d', 'transform', 'x', 'y', 'x2', 'y2']});
}"""
FLAGS = (
    "--no-sandbox",
    "--disable-gpu",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
)


def free_port() -> int:
    """Return a port that nobody listens on."""
    with socket.socket() as one:
        one.bind(("127.0.0.1", 0))
        return one.getsockname()[1]


@contextlib.contextmanager
def serving(script: Path) -> Iterator[str]:
    """Serve a script and give its address without the scheme."""
    port = free_port()
    command = [sys.executable, "-m", "streamlit", "run", str(script), "--server.headless", "true"]
    with tempfile.TemporaryFile() as log:
        process = subprocess.Popen([*command, "--server.port", str(port)], cwd=ROOT, stdout=log, stderr=log)
        try:
            for _ in range(600):
                with contextlib.suppress(OSError):
                    urllib.request.urlopen(f"http://127.0.0.1:{port}/_stcore/health", timeout=1).read()
                    break
                time.sleep(0.1)
            yield f"127.0.0.1:{port}"
        finally:
            process.terminate()
            process.wait(20)


def summary(seconds: list[float]) -> str:
    """Say the median and the 95th percentile in milliseconds."""
    ordered = sorted(1000 * one for one in seconds)
    return f"median {statistics.median(ordered):.1f} ms, 95th {ordered[math.ceil(0.95 * len(ordered)) - 1]:.1f} ms"


def rerun(link: object, message: BackMsg) -> float:
    """Ask for a rerun and return the seconds until the server says that it is finished."""
    begun = time.perf_counter()
    link.send(message.SerializeToString())
    while True:
        said = ForwardMsg.FromString(link.recv(timeout=30))
        if said.WhichOneof("type") == "script_finished":
            return time.perf_counter() - begun


def empty_page() -> list[float]:
    """Return the seconds of reruns of a page with nothing on it, packages loaded, seen from the wire."""
    with tempfile.TemporaryDirectory() as folder:
        script = Path(folder) / "empty.py"
        script.write_text(f"import sys\nsys.path.insert(0, {str(ROOT)!r})\n{EMPTY_PAGE}")
        with serving(script) as address, connect(f"ws://{address}/_stcore/stream", subprotocols=["streamlit"]) as link:
            message = BackMsg()
            message.rerun_script.query_string = ""
            times = []
            for _ in range(MOVES + 10):
                times.append(rerun(link, message))
                time.sleep(0.1)
            return times[10:]


def one_ward_on_the_server() -> tuple[list[float], list[float]]:
    """Return the seconds of the page One ward seen from the wire: demand moved each time, then never again."""
    with (
        serving(ROOT / "app.py") as address,
        connect(f"ws://{address}/_stcore/stream", subprotocols=["streamlit"], max_size=None) as link,
    ):
        message = BackMsg()
        message.rerun_script.query_string = ""
        slider = slider_called("demand", link, message)
        state = message.rerun_script.widget_states.widgets.add(id=slider)
        moved, still = [], []
        for percent in range(-MOVES // 2, MOVES // 2):
            state.double_array_value.data[:] = [percent]
            moved.append(rerun(link, message))
            time.sleep(0.1)
        for _ in range(MOVES):
            still.append(rerun(link, message))
            time.sleep(0.1)
        return moved, still


def slider_called(key: str, link: object, message: BackMsg) -> str:
    """Run the page once and return the name under which the server knows a slider."""
    link.send(message.SerializeToString())
    found = ""
    while True:
        said = ForwardMsg.FromString(link.recv(timeout=60))
        if said.WhichOneof("type") == "script_finished":
            return found
        name = said.delta.new_element.slider.id
        if name.endswith(f"-{key}"):
            found = name


def moves(page: Page, key: str) -> list[float]:
    """Press a key on the demand slider many times; return the seconds from each press to the picture's last change."""
    times = []
    for _ in range(MOVES):
        page.keyboard.press(key)
        page.wait_for_function("() => marks.drawn > 0 && performance.now() - marks.drawn > 250", timeout=10_000)
        times.append(page.evaluate("() => marks.drawn - marks.pressed") / 1000)
    return times


def in_a_browser() -> tuple[list[float], list[float]]:
    """Return the seconds from key to picture when curves are worked out, and on the way back, when all are known."""
    with serving(ROOT / "app.py") as address, sync_playwright() as driver:
        browser = driver.chromium.launch(executable_path=shutil.which("chromium"), args=list(FLAGS))
        page = browser.new_page(viewport={"width": 1400, "height": 1000})
        page.goto(f"http://{address}")
        page.locator(".st-key-curve svg").first.wait_for()
        page.evaluate(WATCH)
        page.locator(".st-key-demand input[type=range]").focus()
        page.keyboard.press("ArrowRight")
        page.wait_for_timeout(1000)
        fresh = moves(page, "ArrowRight")
        known = moves(page, "ArrowLeft")
        browser.close()
        return fresh, known


def never_seen(demand: Demand) -> Iterator[Demand]:
    """Give the demand again and again, each time a hair different, so that nothing remembered can be used."""
    for count in range(1, 10_000):
        hair = 1.0 + 1e-7 * count
        yield replace(
            demand,
            arrivals_per_day=demand.arrivals_per_day * hair,
            length_of_stay=demand.length_of_stay.scaled(hair),
        )


def every_model() -> tuple[list[float], dict[str, list[float]]]:
    """Return the processor seconds of every model but the seasonal one plus the decision, and of each model alone.

    For one ward, nothing remembered; processor seconds, so that what else runs on the machine is left out.
    """
    demand = estimate_demand(read_records(ROOT / "demo_data" / "stays.csv"), WARD).demand
    beds = Ward(WARD, 28, demand).bed_counts
    demands = never_seen(demand)
    together, alone = [], {name: [] for name in MODELS}
    for _ in range(MOVES):
        fresh = next(demands)
        begun = time.process_time()
        curves = [model(fresh, beds) for name, model in MODELS.items() if name != SEASONAL]
        decide(curves[-1], TurnAwayLimit(0.05))
        together.append(time.process_time() - begun)
        for name, model in MODELS.items():
            fresh = next(demands)
            begun = time.process_time()
            model(fresh, beds)
            alone[name].append(time.process_time() - begun)
    return together, alone


def main() -> None:
    """Measure and print."""
    together, alone = every_model()
    print(f"the other models and a decision, one ward, nothing remembered (aim 60 ms): {summary(together)}")
    for name, times in alone.items():
        print(f"  {name} alone{' (aim 150 ms)' if name == SEASONAL else ''}: {summary(times)}")
    empty = empty_page()
    print(f"an empty page's rerun, seen from the wire (aim 10 ms): {summary(empty)}")
    moved, still = one_ward_on_the_server()
    print(f"One ward's rerun, seen from the wire, demand moved: {summary(moved)}")
    print(f"One ward's rerun, seen from the wire, nothing moved: {summary(still)}")
    print(f"moved ÷ nothing moved: {statistics.median(moved) / statistics.median(still):.2f}")
    fresh, known = in_a_browser()
    print(f"key to picture, curves worked out (aim 120 ms, 95th 200 ms): {summary(fresh)}")
    print(f"key to picture, curves remembered: {summary(known)}")
    print(f"worked out ÷ remembered (aim 1.5): {statistics.median(fresh) / statistics.median(known):.2f}")


if __name__ == "__main__":
    main()
