"""A real browser for the tests: Chromium without a window, spoken to over a pipe in its DevTools protocol."""

from __future__ import annotations

import base64
import fcntl
import json
import os
import select
import shutil
import subprocess
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

NAMES = ("chromium", "chromium-browser", "google-chrome")
PATIENCE = 60.0  # seconds until a silent browser counts as hung


def found_browser() -> str | None:
    """Path of a Chromium, if there is one."""
    return next((path for name in NAMES if (path := shutil.which(name))), None)


class Page:
    """One page: open a file, evaluate expressions in it, press keys, take pictures; keeps every complaint."""

    def __init__(self, process: subprocess.Popen[bytes], to_browser: int, from_browser: int) -> None:
        self._process, self._out, self._in = process, to_browser, from_browser
        self._buffer, self._last, self._session = b"", 0, None
        self.complaints: list[str] = []
        self._events: list[str] = []
        target = self.call("Target.createTarget", url="about:blank")["targetId"]
        self._session = self.call("Target.attachToTarget", targetId=target, flatten=True)["sessionId"]
        for domain in ("Page", "Runtime", "Log", "Network"):
            self.call(f"{domain}.enable")

    def call(self, method: str, **parameters: Any) -> dict[str, Any]:
        """Send a command and wait for its answer."""
        self._last += 1
        message: dict[str, Any] = {"id": self._last, "method": method, "params": parameters}
        if self._session:
            message["sessionId"] = self._session
        os.write(self._out, json.dumps(message).encode() + b"\0")
        while True:
            answer = self._read()
            if answer.get("id") == self._last:
                assert "error" not in answer, f"{method}: {answer['error']}"
                return dict(answer["result"])

    def _read(self) -> dict[str, Any]:
        deadline = time.monotonic() + PATIENCE
        while b"\0" not in self._buffer:
            ready, *_ = select.select([self._in], [], [], max(0.0, deadline - time.monotonic()))
            assert ready, "the browser does not answer"
            part = os.read(self._in, 1 << 20)
            assert part, f"the browser ended with {self._process.poll()}"
            self._buffer += part
        raw, _, self._buffer = self._buffer.partition(b"\0")
        answer: dict[str, Any] = json.loads(raw)
        self._note(answer.get("method", ""), answer.get("params", {}))
        return answer

    def _note(self, event: str, told: dict[str, Any]) -> None:
        self._events.append(event)
        if event == "Runtime.exceptionThrown":
            self.complaints.append(json.dumps(told["exceptionDetails"]))
        elif event == "Runtime.consoleAPICalled" and told["type"] in ("error", "warning", "assert"):
            self.complaints.append(json.dumps(told["args"]))
        elif event == "Log.entryAdded" and told["entry"]["level"] in ("error", "warning"):
            self.complaints.append(told["entry"]["text"])
        elif event == "Network.requestWillBeSent" and not told["request"]["url"].startswith(
            ("file:", "data:")
        ):
            self.complaints.append(f"request to {told['request']['url']}")

    def open(self, path: Path, width: int = 1280, height: int = 900) -> None:
        """Show a file and wait until it is loaded and its script has run."""
        self.resize(width, height)
        self._events.clear()
        self.call("Page.navigate", url=path.resolve().as_uri())
        while "Page.loadEventFired" not in self._events:
            self._read()
        deadline = time.monotonic() + PATIENCE
        while self.value("document.documentElement.dataset.ready") != "yes":
            assert time.monotonic() < deadline and not self.complaints, self.complaints
            time.sleep(0.02)

    def resize(self, width: int, height: int) -> None:
        self.call(
            "Emulation.setDeviceMetricsOverride",
            width=width,
            height=height,
            deviceScaleFactor=1,
            mobile=False,
        )

    def media(self, kind: str = "screen", scheme: str = "light") -> None:
        """Look as on a screen or in print, light or dark."""
        features = [{"name": "prefers-color-scheme", "value": scheme}]
        self.call("Emulation.setEmulatedMedia", media=kind, features=features)

    def value(self, expression: str) -> Any:
        """Value of an expression of the page, as JSON."""
        done = self.call("Runtime.evaluate", expression=expression, returnByValue=True, awaitPromise=True)
        assert "exceptionDetails" not in done, done["exceptionDetails"]
        return done["result"].get("value")

    def press(self, key: str, text: str = "", code: int = 0) -> None:
        """Press and release a key."""
        extra = {"text": text} if text else {}
        for kind in ("keyDown", "keyUp"):
            self.call(
                "Input.dispatchKeyEvent", type=kind, key=key, code=key, windowsVirtualKeyCode=code, **extra
            )

    def screenshot(self, path: Path, whole: bool = False) -> None:
        shot = self.call("Page.captureScreenshot", captureBeyondViewport=whole)
        path.write_bytes(base64.b64decode(shot["data"]))


@contextmanager
def browser_page(profile: Path) -> Iterator[Page]:
    """A page in a browser of its own, which ends with the block."""
    path = found_browser()
    assert path is not None
    (for_browser, to_browser), (from_browser, of_browser) = os.pipe(), os.pipe()
    high = [fcntl.fcntl(end, fcntl.F_DUPFD, 40) for end in (for_browser, of_browser)]  # clear of 3 and 4
    command = [path, "--headless", "--disable-gpu", "--no-sandbox", "--disable-dev-shm-usage", "--no-first-run",
               "--hide-scrollbars", f"--user-data-dir={profile}", "--remote-debugging-pipe", "about:blank"]  # fmt: skip
    shell = f'exec "$@" 3<&{high[0]} 4>&{high[1]}'
    process = subprocess.Popen(
        ["bash", "-c", shell, "bash", *command],
        pass_fds=high,
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
    )
    for end in (*high, for_browser, of_browser):
        os.close(end)
    try:
        yield Page(process, to_browser, from_browser)
    finally:
        os.close(to_browser)
        try:
            process.wait(10)
        except subprocess.TimeoutExpired:
            process.terminate()
            process.wait(10)
        os.close(from_browser)
