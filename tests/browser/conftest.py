"""The running app and a real browser: started for these tests alone. Without CURVEBANK_BROWSER there is nothing to collect."""

import math
import os
import socket
import subprocess
import sys
import time
import urllib.request
from pathlib import Path

import pytest

BROWSER = os.environ.get("CURVEBANK_BROWSER")
collect_ignore_glob = [] if BROWSER else ["test_*.py"]

ROOT = Path(__file__).resolve().parents[2]
FLAGS = [
    *(["--no-sandbox"] if hasattr(os, "geteuid") and os.geteuid() == 0 else []),  # Chromium refuses to start as root with its sandbox
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
]


class Server:
    """The app in a process of its own, on one port, so that it can be killed and started again."""

    def __init__(self, bank: Path) -> None:
        self.bank = bank
        with socket.socket() as door:
            door.bind(("127.0.0.1", 0))
            self.port = door.getsockname()[1]
        self.address = f"http://127.0.0.1:{self.port}"
        self.process: subprocess.Popen[bytes] | None = None
        self.log = bank.with_suffix(".log")

    def start(self) -> None:
        env = {**os.environ, "PYTHONPATH": os.pathsep.join([str(ROOT), str(ROOT / "web")]), "OMP_NUM_THREADS": "1"}
        command = [sys.executable, "-m", "curvebank_web.server", "--bank", str(self.bank), "--port", str(self.port)]
        with self.log.open("ab") as log:
            self.process = subprocess.Popen(command, env=env, stdout=log, stderr=log, cwd=self.bank.parent)
        until = time.monotonic() + 60
        while time.monotonic() < until:
            if self.process.poll() is not None:
                raise RuntimeError(self.log.read_text())
            try:
                with urllib.request.urlopen(f"{self.address}/healthz", timeout=2):
                    return
            except OSError:
                time.sleep(0.1)
        raise RuntimeError(f"The server did not answer.\n{self.log.read_text()}")

    def kill(self) -> None:
        """As a power cut would: no clean-up."""
        assert self.process is not None
        self.process.kill()
        self.process.wait()

    def stop(self) -> None:
        if self.process is not None and self.process.poll() is None:
            self.process.terminate()
            try:
                self.process.wait(15)
            except subprocess.TimeoutExpired:
                self.kill()


@pytest.fixture
def server(tmp_path):
    """A fresh bank, served."""
    made = Server(tmp_path / "station.db")
    made.start()
    yield made
    made.stop()


@pytest.fixture(scope="session")
def chromium():
    """One browser for all tests."""
    from playwright.sync_api import sync_playwright

    with sync_playwright() as tool:
        browser = tool.chromium.launch(executable_path=BROWSER, args=FLAGS)
        yield browser
        browser.close()


@pytest.fixture
def context(chromium):
    """A browser profile of its own, 1440 x 900, that notes what went wrong."""
    made = chromium.new_context(viewport={"width": 1440, "height": 900}, reduced_motion="reduce", accept_downloads=True)
    made.set_default_timeout(20_000)
    yield made
    made.close()


class Watch:
    """Everything a page complains about: console errors, uncaught errors, policy violations."""

    def __init__(self) -> None:
        self.complaints: list[str] = []
        self.server_may_be_away = False

    def follow(self, page) -> None:
        policy = "e => console.error('policy: ' + e.violatedDirective + ' ' + e.blockedURI)"
        page.add_init_script(f"addEventListener('securitypolicyviolation', {policy})")
        page.on("pageerror", lambda error: self.complaints.append(f"error: {error}"))
        page.on("console", self._console)

    def _console(self, message) -> None:
        if message.type not in ("error", "warning"):
            return
        if self.server_may_be_away and "net::ERR_" in message.text:
            return
        self.complaints.append(f"{message.type}: {message.text}")


class Desk:
    """A person at the desk: moves the mouse to places of the sheet, types into blanks."""

    def __init__(self, page, address: str) -> None:
        self.page, self.address = page, address

    def upload(self, name: str, data: bytes) -> None:
        page = self.page
        page.goto(self.address)
        page.set_input_files("#file", files=[{"name": name, "mimeType": "image/png", "buffer": data}])
        page.wait_for_url("**/desk/**")
        page.wait_for_selector("#paper[data-view]")

    def screen(self, place) -> tuple[float, float]:
        """Where a sheet pixel lies in the window."""
        box = self.page.locator("#paper").bounding_box()
        scale, turn, x, y = (float(v) for v in self.page.get_attribute("#paper", "data-view").split())
        c, s = math.cos(turn) * scale, math.sin(turn) * scale
        return box["x"] + c * place[0] - s * place[1] + x, box["y"] + s * place[0] + c * place[1] + y

    def click(self, place) -> None:
        self.page.mouse.move(*self.screen(place))
        self.page.mouse.click(*self.screen(place))

    def step(self, name: str) -> None:
        self.page.click(f'[data-step="{name}"]')
        self.page.wait_for_selector(f'[data-step="{name}"][aria-current="step"]')

    def fill(self, name: str, value: object) -> None:
        self.page.fill(f'#slip [name="{name}"]', str(value))

    def enter(self) -> None:
        self.page.keyboard.press("Enter")

    def draw_panel(self, first, second) -> None:
        page, (x0, y0), (x1, y1) = self.page, self.screen(first), self.screen(second)
        page.mouse.move(x0, y0)
        page.mouse.down()
        page.mouse.move((x0 + x1) / 2, (y0 + y1) / 2)
        page.mouse.move(x1, y1)
        page.mouse.up()
        page.wait_for_selector("#slip [name=which]")

    def mark(self, place, **values: float) -> None:
        """Click a crossing and type what it says on each scale."""
        self.click(place)
        for axis, value in values.items():
            self.fill(f"mark-{axis}", value)
        self.enter()
        self.page.wait_for_selector('#slip [name^="mark-"]', state="detached")

    def kept(self) -> None:
        """Wait until every step is in the file."""
        self.page.wait_for_function("() => /^Kept \\d\\d:\\d\\d, step \\d+$/.test(document.getElementById('kept').textContent)")

    def text(self, selector: str) -> str:
        return self.page.inner_text(selector)


@pytest.fixture
def watch():
    """What the pages of a test complained about; looked at when it ends."""
    made = Watch()
    yield made
    assert made.complaints == []


@pytest.fixture
def open_page(context, watch):
    """Open another window."""

    def make():
        page = context.new_page()
        watch.follow(page)
        return page

    return make


@pytest.fixture
def desk(open_page, server):
    """A window with the front page."""
    return Desk(open_page(), server.address)


@pytest.fixture
def desk_of(server):
    """A person at a given window."""
    return lambda page: Desk(page, server.address)
