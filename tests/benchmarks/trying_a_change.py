"""How long trying a change takes: from the key that moves a control to the repainted picture.

Run by hand on a quiet machine, ``python tests/benchmarks/trying_a_change.py [MOVES]``. Bed stands against a
stock app of the screen library in one run, move by move in turn: default settings, the same imports, one
slider, one chart, nothing computed. Time is taken inside the page, from keydown to the frame after the change
is in the document; on Bed both the picture and the expected row must have changed. Only the ratio carries to
another machine. No move on Bed repeats an earlier one, so nothing is answered from memory.
"""

import os
import shutil
import socket
import subprocess
import sys
import tempfile
import time
import urllib.request
from collections.abc import Iterator
from contextlib import ExitStack, contextmanager
from pathlib import Path
from statistics import median, quantiles

from playwright.sync_api import Browser, Page, sync_playwright

ROOT = Path(__file__).parents[2]
FLAGS = ["--no-sandbox", "--disable-gpu", "--disable-quic", "--disable-background-networking"]
FIRST_LOOK_MS, MOVE_MS = 240_000, 30_000
WARM_UP = 3
REST_MS = (
    400  # after a page comes to the front, and after its script has ended: messages, paint and collector
)

STOCK = """
import numpy as np
import plotly.graph_objects as go
import streamlit as st

import dashboard.views.bed  # for the same imports

rate = st.slider("Rate", 6, 120, 12)
t = np.linspace(0, 6, 1000)
wave = go.Scatter(x=t, y=np.sin(rate * t / 10))
st.plotly_chart(go.Figure(wave, layout={"title": {"text": f"rate={rate}"}}), key="wave")
"""

# What changes on each screen; every part of it has to become another.
STOCK_SIGNS = "[[...document.querySelectorAll('.gtitle')].map(e => e.textContent).join()]"
BED_SIGNS = (
    "[document.querySelector('.fb-live').dataset.drawn, document.querySelector('.fb-forecast').textContent]"
)
PROBE = """() => {
  const signs = () => SIGNS;
  addEventListener('keydown', () => {
    const from = performance.now(), before = signs();
    window.took = null;
    const look = () => signs().every((sign, n) => sign !== before[n])
      ? requestAnimationFrame(() => { window.took = performance.now() - from; })
      : requestAnimationFrame(look);
    requestAnimationFrame(look);
  }, true);
}"""


@contextmanager
def served(script: Path, *options: str) -> Iterator[str]:
    """The app as a user starts it, from its own folder, on a free port; gives its address."""
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    command = [sys.executable, "-m", "streamlit", "run", str(script), f"--server.port={port}", *options]
    where = ROOT if ROOT in script.parents else script.parent
    process = subprocess.Popen(command, cwd=where, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
    try:
        address = f"http://127.0.0.1:{port}"
        wait_until_healthy(f"{address}/_stcore/health")
        yield address
    finally:
        process.terminate()
        process.wait(timeout=30)


def wait_until_healthy(address: str, seconds: int = 120) -> None:
    for _ in range(seconds * 5):
        try:
            with urllib.request.urlopen(address, timeout=2) as reply:
                if reply.status == 200:
                    return
        except OSError:
            time.sleep(0.2)
    sys.exit(f"no answer from {address}")


def opened(browser: Browser, address: str, ready: str, signs: str) -> Page:
    page = browser.new_context(viewport={"width": 1280, "height": 800}, reduced_motion="reduce").new_page()
    page.goto(address)
    page.wait_for_selector(ready, timeout=FIRST_LOOK_MS)
    rest(page)
    page.evaluate(PROBE.replace("SIGNS", signs))
    return page


def rest(page: Page) -> None:
    page.wait_for_selector(".stApp[data-test-script-state='notRunning']", timeout=FIRST_LOOK_MS)
    page.wait_for_timeout(REST_MS)


def move(page: Page, control: str, key: str) -> float:
    """One press of a key on a control; ms until the picture is repainted."""
    page.bring_to_front()
    page.get_by_role("slider" if control == "Rate" else "button", name=control).focus()
    page.wait_for_timeout(REST_MS)
    page.keyboard.press(key)
    end = time.monotonic() + MOVE_MS / 1000
    while (took := page.evaluate("window.took")) is None:
        if time.monotonic() > end:
            sys.exit(f"{control}: no change on the screen after {MOVE_MS} ms")
        page.wait_for_timeout(20)
    rest(page)
    return float(took)


def said(name: str, times_ms: list[float]) -> str:
    low, _, high = quantiles(times_ms, n=4)
    return (
        f"{name:<6} median {median(times_ms):5.0f} ms, middle half {low:.0f} to {high:.0f}, n {len(times_ms)}"
    )


def main(moves: int = 25) -> None:
    chromium = shutil.which("chromium") or sys.exit("no chromium on this machine")
    bed_ms: list[float] = []
    stock_ms: list[float] = []
    with ExitStack() as held:
        stock_script = Path(held.enter_context(tempfile.TemporaryDirectory())) / "stock.py"
        stock_script.write_text(STOCK, encoding="utf-8")
        quiet = ("--server.headless=true", "--server.address=127.0.0.1", "--browser.gatherUsageStats=false")
        stock_at = held.enter_context(served(stock_script, *quiet))
        bed_at = held.enter_context(served(ROOT / "dashboard" / "app.py"))
        browser = held.enter_context(sync_playwright()).chromium.launch(executable_path=chromium, args=FLAGS)
        stock = opened(browser, stock_at, ".gtitle", STOCK_SIGNS)
        bed = opened(browser, bed_at, ".fb-live[data-drawn] .main-svg", BED_SIGNS)
        for _ in range(WARM_UP + moves):
            stock_ms.append(move(stock, "Rate", "ArrowRight"))
            bed_ms.append(move(bed, "Set rate: more", "Enter"))
        browser.close()
    stock_ms, bed_ms = stock_ms[WARM_UP:], bed_ms[WARM_UP:]
    print(said("stock", stock_ms), said("Bed", bed_ms), sep="\n")
    print(f"ratio  {median(bed_ms) / median(stock_ms):.2f} (load of the machine {os.getloadavg()[0]:.1f})")


if __name__ == "__main__":
    main(*map(int, sys.argv[1:]))
