"""A server of our own and a browser to visit it; left out, with the reason, where there is none."""

import os
import shutil
import signal
import socket
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import pytest
from playwright.sync_api import Browser, ConsoleMessage, Page, sync_playwright

ROOT = Path(__file__).parents[2]
HOST = "127.0.0.1"
ARGUMENTS = [
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
]
# Streamlit asks below a page's path first and then where they are
KNOWN_404 = ("/_stcore/health", "/_stcore/host-config")


def free_port() -> int:
    with socket.socket() as probe:
        probe.bind((HOST, 0))
        return int(probe.getsockname()[1])


class Dashboard:
    """`withheld dashboard` in a process of its own, with records in a folder of its own."""

    def __init__(self, records: Path) -> None:
        self.records = records
        self.port = free_port()
        self.process: subprocess.Popen[bytes] | None = None

    @property
    def address(self) -> str:
        return f"http://{HOST}:{self.port}"

    def start(self) -> None:
        command = [sys.executable, "-m", "app.command", "dashboard", "--no-browser"]
        self.process = subprocess.Popen(
            [*command, "--records", str(self.records), "--port", str(self.port)],
            cwd=ROOT,
            stdin=subprocess.DEVNULL,
            stdout=subprocess.DEVNULL,
            stderr=(self.records.parent / "server.log").open("ab"),
        )
        ends = time.monotonic() + 60
        while time.monotonic() < ends and self.process.poll() is None:
            with socket.socket() as probe:
                if probe.connect_ex((HOST, self.port)) == 0:
                    return
            time.sleep(0.05)
        pytest.fail("the dashboard did not start: " + self.log())

    def log(self) -> str:
        return (self.records.parent / "server.log").read_text("utf-8")

    def stop(self) -> None:
        """End it at once, as a power cut would."""
        if self.process is not None:
            self.process.send_signal(signal.SIGKILL if os.name != "nt" else signal.SIGTERM)
            self.process.wait()
            self.process = None


@pytest.fixture(scope="session")
def chromium() -> str:
    """The browser's place."""
    for name in ("chromium", "chromium-browser", "google-chrome"):
        found = shutil.which(name)
        if found:
            return found
    reason = "no Chromium on this machine (on Debian: apt-get install chromium)"
    if os.environ.get("CI", "").lower() == "true":
        pytest.fail(reason)
    pytest.skip(reason)


@pytest.fixture(scope="session")
def browser(chromium: str) -> Iterator[Browser]:
    with sync_playwright() as playwright:
        started = playwright.chromium.launch(executable_path=chromium, args=ARGUMENTS)
        yield started
        started.close()


@pytest.fixture
def dashboard(tmp_path: Path) -> Iterator[Dashboard]:
    (tmp_path / "records").mkdir()
    made = Dashboard(tmp_path / "records")
    made.start()
    yield made
    made.stop()


@pytest.fixture
def page(browser: Browser, dashboard: Dashboard) -> Iterator[Page]:
    """A visitor; at the end nothing may have been complained of or fetched from elsewhere."""
    context = browser.new_context(viewport={"width": 1280, "height": 1000}, accept_downloads=True)
    context.set_default_timeout(60_000)
    opened = context.new_page()
    complaints: list[str] = []
    hosts: set[str] = set()
    # while a server is stopped on purpose the browser complains of the lost connection
    expected_to_be_gone = lambda: dashboard.process is None  # noqa: E731

    def heard(message: ConsoleMessage) -> None:
        known = message.location.get("url", "").endswith(KNOWN_404) and "404" in message.text
        if message.type == "error" and not known and not expected_to_be_gone():
            complaints.append(f"{message.text} ({message.location.get('url')})")

    opened.on("console", heard)
    opened.on("pageerror", lambda error: complaints.append(str(error)))
    opened.on("request", lambda request: hosts.add(request.url.partition("//")[2].partition("/")[0].partition(":")[0]))  # fmt: skip
    opened.on("websocket", lambda opened_: hosts.add(opened_.url.partition("//")[2].partition(":")[0]))  # fmt: skip
    yield opened
    context.close()
    assert complaints == []
    # data: and blob: have no host
    assert hosts - {""} == {HOST}
    assert "Traceback" not in dashboard.log()
