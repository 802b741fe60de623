"""A real headless browser, driven over its own debugging pipe with nothing but the library."""

from __future__ import annotations

import base64
import json
import os
import select
import shutil
import subprocess
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

NAMES = ("chromium", "chromium-browser")
_PATIENCE = 60.0


def find_browser() -> str:
    """Find the browser; the tests cannot do without."""
    found = next((path for name in NAMES if (path := shutil.which(name))), None)
    assert found, "these tests need chromium: apt-get install chromium (.ci/run does)"
    return found


@dataclass
class Browser:
    """One window of a running browser."""

    reading: int
    writing: int
    session: str = ""
    events: list[dict[str, Any]] = field(default_factory=list)
    _count: int = 0
    _rest: bytes = b""

    def call(self, method: str, **params: Any) -> dict[str, Any]:
        """Ask for something, keep what happens meanwhile, and give the answer."""
        self._count += 1
        message = {"id": self._count, "method": method, "params": params}
        if self.session:
            message["sessionId"] = self.session
        os.write(self.writing, json.dumps(message).encode() + b"\0")
        while True:
            found = self._receive()
            if found.get("id") == self._count:
                assert "error" not in found, (method, found["error"])
                result: dict[str, Any] = found["result"]
                return result
            self.events.append(found)

    def wait_for(self, method: str) -> None:
        """Wait until something happened."""
        while not any(event.get("method") == method for event in self.events):
            self.events.append(self._receive())

    def open(self, path: Path, *, width: int, media: str = "") -> None:
        """Load a file into a window of some width [px], for the screen or as on paper."""
        self.events.clear()
        self.call("Emulation.setDeviceMetricsOverride", width=width, height=900,
                  deviceScaleFactor=1, mobile=False)  # fmt: skip
        self.call("Emulation.setEmulatedMedia", media=media)
        self.call("Page.navigate", url=path.as_uri())
        self.wait_for("Page.loadEventFired")

    def evaluate(self, expression: str) -> Any:
        """Compute something in the page."""
        found = self.call("Runtime.evaluate", expression=expression, returnByValue=True)
        assert "exceptionDetails" not in found, found
        return found["result"].get("value")

    def print_pdf(self) -> bytes:
        """Print the page."""
        return base64.b64decode(self.call("Page.printToPDF", preferCSSPageSize=True)["data"])

    def list_events(self, *methods: str) -> list[dict[str, Any]]:
        """What happened since the page was opened."""
        return [one["params"] for one in self.events if one.get("method") in methods]

    def _receive(self) -> dict[str, Any]:
        end = time.monotonic() + _PATIENCE
        while b"\0" not in self._rest:
            left = end - time.monotonic()
            ready = select.select([self.reading], [], [], max(left, 0.0))[0]
            assert ready, f"the browser said nothing for {_PATIENCE:g} s"
            piece = os.read(self.reading, 1 << 16)
            assert piece, "the browser went away"
            self._rest += piece
        text, self._rest = self._rest.split(b"\0", 1)
        found: dict[str, Any] = json.loads(text)
        return found


@contextmanager
def run_browser(profile: Path) -> Iterator[Browser]:
    """Start the browser with a fresh profile, and end it."""
    to_child, writing = os.pipe()
    reading, from_child = os.pipe()
    # it reads descriptor 3 and writes descriptor 4
    shell = 'exec 3<&"$0" 4>&"$1"; shift; exec "$@"'
    words = [find_browser(), "--headless", "--remote-debugging-pipe", "--disable-gpu",
             "--hide-scrollbars", "--no-first-run", f"--user-data-dir={profile}"]  # fmt: skip
    if os.geteuid() == 0:
        words.append("--no-sandbox")
    process = subprocess.Popen(
        ["bash", "-c", shell, str(to_child), str(from_child), *words],
        pass_fds=(to_child, from_child), stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL,
    )  # fmt: skip
    os.close(to_child)
    os.close(from_child)
    try:
        browser = Browser(reading, writing)
        target = browser.call("Target.createTarget", url="about:blank")["targetId"]
        session = browser.call("Target.attachToTarget", targetId=target, flatten=True)
        browser.session = session["sessionId"]
        for domain in ("Page", "Runtime", "Log", "Network"):
            browser.call(f"{domain}.enable")
        yield browser
    finally:
        process.terminate()
        process.wait(timeout=_PATIENCE)
        os.close(reading)
        os.close(writing)
