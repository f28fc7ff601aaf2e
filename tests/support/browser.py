"""A page in headless Chromium (a Debian package), spoken to in its DevTools protocol over a pair of pipes."""

from __future__ import annotations

import base64
import json
import os
import shutil
import subprocess
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import pytest

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser") or shutil.which("google-chrome")
needs_browser = pytest.mark.skipif(CHROMIUM is None, reason="needs the Debian package chromium")

FLAGS = ("--headless=new", "--no-sandbox", "--disable-gpu", "--disable-dev-shm-usage", "--remote-debugging-pipe")
KEYS = {"Tab": 9, "Enter": 13, " ": 32, "End": 35, "Home": 36, "ArrowLeft": 37, "ArrowRight": 39}


class Page:
    """One tab. `events` holds everything the browser has reported, as pairs of method and parameters."""

    def __init__(self, send: int, receive: int) -> None:
        self._send, self._receive = send, os.fdopen(receive, "rb")
        self._number, self._left, self._session = 0, b"", ""
        self.events: list[tuple[str, dict[str, Any]]] = []
        target = self.call("Target.createTarget", url="about:blank")["targetId"]
        self._session = self.call("Target.attachToTarget", targetId=target, flatten=True)["sessionId"]
        for domain in ("Page", "Runtime", "Log", "Network"):
            self.call(f"{domain}.enable")

    def call(self, method: str, **parameters: Any) -> Any:
        """The answer to a command; events that come first are kept."""
        self._number += 1
        message = {"id": self._number, "method": method, "params": parameters}
        message |= {"sessionId": self._session} if self._session else {}
        os.write(self._send, json.dumps(message).encode() + b"\0")
        while True:
            found = self._next()
            if found.get("id") == self._number:
                assert "error" not in found, found
                return found["result"]

    def open(self, path: Path, width: int, height: int = 900, scheme: str = "light") -> None:
        """Load a file at a width in CSS pixels and wait until it is there."""
        self.call("Emulation.setDeviceMetricsOverride", width=width, height=height, deviceScaleFactor=1, mobile=False)
        self.call("Emulation.setScrollbarsHidden", hidden=True)
        self.call("Emulation.setEmulatedMedia", features=[{"name": "prefers-color-scheme", "value": scheme}])
        self.events.clear()
        self.call("Page.navigate", url=path.as_uri())
        while not any(name == "Page.loadEventFired" for name, _ in self.events):
            self._next()

    def evaluate(self, script: str) -> Any:
        """The value of a JavaScript expression."""
        answer = self.call("Runtime.evaluate", expression=script, returnByValue=True)
        assert "exceptionDetails" not in answer, answer
        return answer["result"].get("value")

    def press(self, key: str) -> None:
        """Press and release a key."""
        text = {"text": "\r"} if key == "Enter" else {"text": " "} if key == " " else {}
        for kind in ("keyDown", "keyUp"):
            self.call("Input.dispatchKeyEvent", type=kind, key=key, code=key, windowsVirtualKeyCode=KEYS[key], **text)

    def screenshot(self, path: Path) -> None:
        """The whole page as a PNG file."""
        size = self.call("Page.getLayoutMetrics")["cssContentSize"]
        clip = {"x": 0, "y": 0, "width": size["width"], "height": size["height"], "scale": 1}
        data = self.call("Page.captureScreenshot", clip=clip, captureBeyondViewport=True)["data"]
        path.write_bytes(base64.b64decode(data))

    def _next(self) -> dict[str, Any]:
        while b"\0" not in self._left:
            more = self._receive.read1(1 << 20)  # type: ignore[attr-defined]
            assert more, "the browser has gone away"
            self._left += more
        text, self._left = self._left.split(b"\0", 1)
        message: dict[str, Any] = json.loads(text)
        if "method" in message:
            self.events.append((message["method"], message["params"]))
        return message


@contextmanager
def browser(profile: Path) -> Iterator[Page]:
    """A page in a browser of its own, which is ended with it."""
    assert CHROMIUM is not None
    to_read, send = os.pipe()
    receive, to_write = os.pipe()

    def connect() -> None:
        ends = os.dup(to_read), os.dup(to_write)
        os.dup2(ends[0], 3)
        os.dup2(ends[1], 4)

    command = [CHROMIUM, *FLAGS, f"--user-data-dir={profile}", "about:blank"]
    process = subprocess.Popen(
        command, pass_fds=(3, 4), preexec_fn=connect, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL
    )
    os.close(to_read)
    os.close(to_write)
    try:
        yield Page(send, receive)
    finally:
        process.terminate()
        process.wait(10)
        os.close(send)
