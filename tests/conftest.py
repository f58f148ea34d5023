"""A running service on the demo data, and a real browser that looks at its page."""

from __future__ import annotations

import contextlib
import os
import shutil
import socket
import subprocess
import sys
import time
import urllib.error
import urllib.request
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import pytest

ROOT = Path(__file__).resolve().parent.parent
START_PATIENCE_S = 400.0  # the first start on a machine compiles the solver
BROWSER_ARGUMENTS = [
    "--no-sandbox",
    "--disable-gpu",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--no-first-run",
]
WIDE, NARROW = (1280, 800), (390, 844)  # a laptop and a phone [px]
MIDDLE = (960, 640)  # where the size does not matter: quicker to draw [px]


def free_port() -> int:
    """Return a port of the loopback interface that nobody uses."""
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return int(probe.getsockname()[1])


def wait_until_up(url: str, process: subprocess.Popen[bytes], log: Path) -> None:
    """Wait for `/health`; a service that ends or never answers is a failure with its own words."""
    limit = time.monotonic() + START_PATIENCE_S
    while time.monotonic() < limit:
        if process.poll() is not None:
            pytest.fail(f"the service ended at start: {log.read_text()[-2000:]}")
        with (
            contextlib.suppress(urllib.error.URLError, ConnectionError, TimeoutError),
            urllib.request.urlopen(f"{url}/health", timeout=2) as answer,
        ):
            if answer.status == 200:
                return
        time.sleep(0.2)
    pytest.fail(f"the service did not answer: {log.read_text()[-2000:]}")


@pytest.fixture(scope="session")
def server_url(tmp_path_factory: pytest.TempPathFactory) -> Iterator[str]:
    """Start the service as a process of its own on the demo data; yield its address."""
    folder = tmp_path_factory.mktemp("service")
    log = folder / "log.txt"
    port = free_port()
    command = [sys.executable, "-m", "service", "serve", "--port", str(port)]
    command += ["--data", str(ROOT / "demo_data"), "--work", str(folder / "work")]
    environment = {
        name: value
        for name, value in os.environ.items()
        if name not in {"NUMBA_DISABLE_JIT", "NUMBA_BOUNDSCHECK"}  # for kernels, not for pages
    }
    with log.open("wb") as out:
        process = subprocess.Popen(command, cwd=ROOT, stdout=out, stderr=out, env=environment)
        try:
            wait_until_up(f"http://127.0.0.1:{port}", process, log)
            yield f"http://127.0.0.1:{port}"
        finally:
            process.terminate()
            try:
                process.wait(15)
            except subprocess.TimeoutExpired:
                process.kill()
                process.wait(15)


def browser_path() -> str:
    """Return the path of chromium; without one the test is skipped, or fails where all must run."""
    path = os.environ.get("ENGINEOUT_CHROMIUM") or shutil.which("chromium")
    if path:
        return path
    words = "There is no chromium here: install it, or name it in ENGINEOUT_CHROMIUM."
    if os.environ.get("ENGINEOUT_REQUIRE_ALL") == "1":
        pytest.fail(words)
    pytest.skip(words)


@pytest.fixture(scope="module")  # while it is open, its event loop keeps others from running
def browser() -> Iterator[Any]:
    """Yield a headless chromium."""
    path = browser_path()
    from playwright.sync_api import sync_playwright

    with sync_playwright() as playwright:
        chromium = playwright.chromium.launch(executable_path=path, args=BROWSER_ARGUMENTS)
        yield chromium
        chromium.close()


@dataclass
class Watch:
    """What a page said and asked for while it was looked at."""

    errors: list[str] = field(default_factory=list)
    requests: list[str] = field(default_factory=list)

    def follow(self, page: Any) -> None:
        """Listen to a page from now on."""
        page.on("console", self._heard)
        page.on("pageerror", lambda error: self.errors.append(str(error)))
        page.on("request", lambda request: self.requests.append(request.url))

    def _heard(self, message: Any) -> None:
        if message.type in {"error", "warning"}:
            self.errors.append(message.text)

    def foreign(self, home: str) -> list[str]:
        """Return the addresses asked for that are not the service's own."""
        return [url for url in self.requests if not url.startswith((home, "data:", "blob:"))]


@dataclass
class Opened:
    """A page and what was heard of it."""

    page: Any
    watch: Watch


Opener = Callable[..., Opened]


@contextlib.contextmanager
def opening(browser: Any, server_url: str) -> Iterator[Opener]:
    """Yield a function that opens the page; at the end no error and no foreign request was seen.

    ``opened(address="", size=MIDDLE, expected="", prepare=None)``: `expected` is a piece of the
    console errors that belong to the test, `prepare` is called with the page before it loads.
    """
    contexts: list[Any] = []
    seen: list[tuple[Watch, str]] = []

    def opened(
        address: str = "",
        size: tuple[int, int] = MIDDLE,
        expected: str = "",
        prepare: Callable[[Any], None] | None = None,
    ) -> Opened:
        context = browser.new_context(
            viewport={"width": size[0], "height": size[1]}, reduced_motion="reduce"
        )
        context.set_default_timeout(30_000)
        contexts.append(context)
        page = context.new_page()
        watch = Watch()
        watch.follow(page)
        seen.append((watch, expected))
        if prepare:
            prepare(page)
        page.goto(address if address.startswith("http") else f"{server_url}/{address}")
        page.wait_for_selector("#chart[data-detail=fine]:not(.stale)")
        return Opened(page, watch)

    yield opened
    for context in contexts:
        context.close()
    for watch, expected in seen:
        unexpected = [text for text in watch.errors if not expected or expected not in text]
        assert unexpected == []
        assert watch.foreign(server_url) == []


@pytest.fixture
def open_page(browser: Any, server_url: str) -> Iterator[Opener]:
    """Yield a function that opens the page in a fresh profile; see `opening`."""
    with opening(browser, server_url) as opened:
        yield opened
