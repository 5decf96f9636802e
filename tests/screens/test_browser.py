"""Bed in a real browser at 1280 x 800: it follows a change, keeps its zoom, asks no other machine.

Screenshots go to the folder named by FOREBREATH_SCREENSHOTS, else to a temporary one.
"""

import os
import re
import shutil
import socket
import subprocess
import sys
import time
import urllib.request
from dataclasses import dataclass, field
from pathlib import Path
from urllib.parse import urlparse

import pytest

from dashboard.wording import PALETTES

pytestmark = pytest.mark.browser

ROOT = Path(__file__).parents[2]
CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser") or shutil.which("google-chrome")
FLAGS = [
    "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run", "--disable-background-networking",
    "--disable-component-update", "--disable-sync",
]  # fmt: skip
VIEW = {"width": 1280, "height": 800}
FIRST_LOOK_MS = 240_000  # the fit of a whole stay, on a busy machine
SOON_MS = 60_000
START_S = 120
FOOT_PX = 30  # the safety line


@dataclass
class Screen:
    """One browser page and everything it asked for and complained of."""

    page: object
    requests: list = field(default_factory=list)
    complaints: list = field(default_factory=list)

    @property
    def node(self):
        return self.page.locator(".fb-live")

    def picture(self, words):
        """A value read off the live picture; ``node`` is its element."""
        return self.page.evaluate(
            f"() => {{ const node = document.querySelector('.fb-live'); return {words}; }}"
        )

    def expected(self):
        """Where the hollow mark stands: PaO2, PaCO2 (mmHg)."""
        return self.picture("(t => [t.x[0], t.y[0]])(node.data.find(t => t.name === 'expected'))")

    def ranges(self):
        return self.picture("[[...node.layout.xaxis.range], [...node.layout.yaxis.range]]")

    def wait_for(self, words):
        self.page.get_by_text(words).first.wait_for(timeout=SOON_MS)
        self.until("document.querySelector('.stApp').dataset.testScriptState", "notRunning")

    def until(self, words, sought=True):
        """Wait until a value read off the page is the one sought; its policy forbids polling inside it."""
        end = time.monotonic() + SOON_MS / 1000
        while (found := self.picture(words)) != sought:
            assert time.monotonic() < end, f"{words} is still {found}"
            self.page.wait_for_timeout(100)

    def shoot(self, folder, name):
        self.page.screenshot(path=str(folder / f"{name}.png"), animations="disabled")


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    named = os.environ.get("FOREBREATH_SCREENSHOTS")
    path = Path(named) if named else tmp_path_factory.mktemp("screenshots")
    path.mkdir(parents=True, exist_ok=True)
    return path


@pytest.fixture(scope="module")
def server(tmp_path_factory):
    """The dashboard as a user starts it, on a free port; gives its address and its log."""
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    log = tmp_path_factory.mktemp("server") / "log.txt"
    command = [sys.executable, "-m", "streamlit", "run", "dashboard/app.py", f"--server.port={port}"]
    with log.open("w") as out:
        process = subprocess.Popen(command, cwd=ROOT, stdout=out, stderr=subprocess.STDOUT)
    address = f"http://127.0.0.1:{port}"
    try:
        for _ in range(START_S):
            if answers(f"{address}/_stcore/health"):
                break
            time.sleep(1)
        else:
            pytest.fail(f"the server did not start: {log.read_text()}")
        yield address, log
    finally:
        process.terminate()
        process.wait(timeout=30)


def answers(address):
    try:
        with urllib.request.urlopen(address, timeout=2) as reply:
            return reply.status == 200
    except OSError:
        return False


@pytest.fixture(scope="module")
def browser():
    if CHROMIUM is None:
        message = "no chromium on this machine: install Debian's chromium to run the browser tests"
        pytest.fail(message) if os.environ.get("CI") else pytest.skip(message)
    from playwright.sync_api import sync_playwright

    with sync_playwright() as playwright:
        running = playwright.chromium.launch(executable_path=CHROMIUM, args=FLAGS)
        yield running
        running.close()


def opened(browser, server, scheme):
    context = browser.new_context(viewport=VIEW, reduced_motion="reduce", color_scheme=scheme)
    screen = Screen(context.new_page())
    screen.page.on("request", lambda request: screen.requests.append(request.url))
    screen.page.on("websocket", lambda socket: screen.requests.append(socket.url))
    screen.page.on(
        "console", lambda said: screen.complaints.append(said.text) if said.type == "error" else None
    )
    screen.page.on("pageerror", lambda error: screen.complaints.append(str(error)))
    screen.page.goto(server[0])
    screen.page.wait_for_selector(".fb-expected", timeout=FIRST_LOOK_MS)
    screen.until("!!node?.data?.some(t => t.name === 'expected')")
    return screen


@pytest.fixture(scope="module")
def day(browser, server):
    screen = opened(browser, server, "light")
    yield screen
    screen.page.context.close()


@pytest.fixture(scope="module")
def night(browser, server):
    screen = opened(browser, server, "dark")
    yield screen
    screen.page.context.close()


def test_what_decides_stands_on_one_screen(day, folder):
    day.shoot(folder, "bed-before-light")
    for selector in (
        ".fb-who",
        ".fb-expected",
        ".fb-tried",
        ".fb-nearest",
        ".fb-recheck",
        ".fb-cautions",
        ".fb-live",
    ):
        box = day.page.locator(selector).first.bounding_box()
        assert box["x"] >= 0 and box["x"] + box["width"] <= VIEW["width"], selector
        assert box["y"] >= 0 and box["y"] + box["height"] <= VIEW["height"] - FOOT_PX, selector
    assert "Not for emergencies" in day.page.locator(".fb-safety").inner_text()


def test_text_and_picture_follow_a_typed_change(day, folder):
    before, was = day.expected(), day.page.locator(".fb-forecast").inner_text()
    fio2 = day.page.get_by_role("textbox", name=re.compile("FiO₂"))
    charted = float(fio2.input_value())
    fio2.fill(f"{charted - 12.5:g}".replace(".", ","))
    fio2.press("Enter")
    day.wait_for(f"→ {charted - 12.5:g} %")
    assert day.page.locator(".fb-forecast").inner_text() != was
    day.until(f"node.data.find(t => t.name === 'expected').x[0] < {before[0]}")
    shown = float(day.page.locator(".fb-forecast td b").nth(2).inner_text())
    assert round(day.expected()[0]) == shown
    day.shoot(folder, "bed-after-light")


def test_zoom_and_the_node_itself_survive_a_change(day):
    whole = day.ranges()
    day.picture("node.mark = 'the same node'")
    (x0, x1), (y0, y1) = whole
    zoom = [[x0 + (x1 - x0) / 4, x1 - (x1 - x0) / 4], [y0 + (y1 - y0) / 4, y1 - (y1 - y0) / 4]]
    day.page.evaluate(
        "([x, y]) => Plotly.relayout(document.querySelector('.fb-live'), {'xaxis.range[0]': x[0],"
        " 'xaxis.range[1]': x[1], 'yaxis.range[0]': y[0], 'yaxis.range[1]': y[1]})",
        zoom,
    )
    drawn = int(day.node.get_attribute("data-drawn"))
    day.page.get_by_role("button", name="Set rate: more").click()
    day.wait_for("Set rate")
    day.until(f"Number(node.dataset.drawn) > {drawn}")
    assert day.ranges() == zoom
    assert day.picture("node.mark") == "the same node"
    day.node.hover()
    day.page.locator(
        "[data-title='Show the whole picture'], [aria-label='Show the whole picture']"
    ).first.click()
    day.until(f"node.layout.xaxis.range[0] !== {zoom[0][0]}")
    assert day.ranges()[0][0] < zoom[0][0]


def test_undo_by_hand(day):
    day.page.get_by_role("button", name="As charted").click()
    day.wait_for("nothing; all as charted")
    day.page.get_by_role("button", name="Undo").click()
    day.wait_for(re.compile("FiO₂ .* → "))


def test_night_colours_reach_page_and_picture(night, folder):
    night.shoot(folder, "bed-before-dark")
    assert colour_of(night, ".stApp", "backgroundColor") == PALETTES["dark"]["paper"]
    assert night.picture("node.layout.paper_bgcolor") == PALETTES["dark"]["paper"]
    night.page.get_by_role("button", name="PEEP: more").click()
    night.wait_for("PaO₂ not forecast")
    night.shoot(folder, "bed-after-dark")


def test_picture_follows_when_the_page_turns_from_night_to_day(night):
    night.page.emulate_media(color_scheme="light")
    night.until("node.layout.paper_bgcolor", PALETTES["light"]["paper"])
    assert colour_of(night, ".stApp", "backgroundColor") == PALETTES["light"]["paper"]


def colour_of(screen, selector, which):
    said = screen.page.evaluate(f"getComputedStyle(document.querySelector('{selector}')).{which}")
    return "#" + "".join(f"{int(part):02x}" for part in re.findall(r"\d+", said)[:3])


def test_a_bad_file_is_said_and_changes_nothing(day, folder):
    before = day.page.locator(".fb-who").inner_text().split()[:2]
    day.page.get_by_role("button", name="File").click()
    day.page.locator("input[type=file]").set_input_files(
        {"name": "bed.json", "mimeType": "application/json", "buffer": b'{"format": "forebreath-case-1"'}
    )
    day.wait_for("File not opened, nothing changed.")
    day.page.keyboard.press("Escape")
    assert day.page.locator(".fb-who").inner_text().split()[:2] == before
    day.shoot(folder, "bed-bad-file")


def test_every_request_went_to_this_machine_and_named_no_patient(day, night):
    requests = day.requests + night.requests
    assert len(requests) > 20 and any("plotly" in url for url in requests)
    own = [url for url in requests if urlparse(url).scheme in ("http", "https", "ws", "wss")]
    assert {urlparse(url).hostname for url in own} == {"127.0.0.1"}
    assert {urlparse(url).scheme for url in requests} <= {"http", "ws", "data", "blob"}
    assert not [url for url in own if re.search(r"Bed|bed\.json|fio2|164", url)]
    assert urlparse(day.page.url).query == ""


def test_nothing_was_complained_of(day, night):
    assert day.complaints == [] and night.complaints == []


def test_the_server_answers_with_its_policy_and_logs_no_patient(server, day):
    address, log = server
    with urllib.request.urlopen(address, timeout=10) as reply:
        assert "default-src 'self'" in reply.headers["Content-Security-Policy"]
    said = log.read_text()
    assert "Traceback" not in said and "Bed" not in said and "mmhg" not in said
