"""A headless Chromium at the other end of two pipes, by its own protocol.

Commands and answers are JSON, each ended by a zero byte, on the browser's descriptors 3 and 4
(``--remote-debugging-pipe``, from memory; the tests hold it to that).
"""

from __future__ import annotations

import fcntl
import json
import os
import selectors
import shutil
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any

_SECONDS = 60.0
_FLAGS = (
    "--headless",
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--disable-dev-shm-usage",
    "--remote-debugging-pipe",
)
_MOVE = """
import os, sys
os.dup2(int(sys.argv[1]), 3)
os.dup2(int(sys.argv[2]), 4)
os.execv(sys.argv[3], sys.argv[3:])
"""
NAMES = ("chromium", "chromium-browser", "google-chrome")


def find_browser() -> str | None:
    """The path of a Chromium, if one is installed."""
    return next((path for name in NAMES if (path := shutil.which(name))), None)


class Page:
    """One tab; ``events`` keeps everything the browser said about it."""

    def __init__(self, commands: int, answers: int) -> None:
        self._commands, self._answers = commands, answers
        self._waiting = b""
        self._number = 0
        self._session = ""
        self.events: list[dict[str, Any]] = []
        target = self.call("Target.createTarget", url="about:blank")["targetId"]
        attached = self.call("Target.attachToTarget", targetId=target, flatten=True)
        self._session = attached["sessionId"]
        for domain in ("Page", "Runtime", "Log", "Network"):
            self.call(f"{domain}.enable")

    def call(self, method: str, **parameters: object) -> dict[str, Any]:
        """Send a command and wait for its answer."""
        self._number += 1
        message: dict[str, Any] = {"id": self._number, "method": method, "params": parameters}
        if self._session:
            message["sessionId"] = self._session
        os.write(self._commands, json.dumps(message).encode() + b"\0")
        while True:
            answer = self._next()
            if answer.get("id") == self._number:
                assert "error" not in answer, (method, answer["error"])
                return dict(answer["result"])
            self.events.append(answer)

    def evaluate(self, script: str) -> Any:
        """The value of a JavaScript expression in the page."""
        answer = self.call("Runtime.evaluate", expression=script, returnByValue=True)
        assert "exceptionDetails" not in answer, answer["exceptionDetails"]
        return answer["result"].get("value")

    def show(self, address: str, width: int, dark: bool = False, paper: bool = False) -> None:
        """Open an address at a width, and wait until it has been loaded."""
        self.call(
            "Emulation.setDeviceMetricsOverride",
            width=width,
            height=900,
            deviceScaleFactor=1,
            mobile=False,
        )
        scheme = {"name": "prefers-color-scheme", "value": "dark" if dark else "light"}
        self.call(
            "Emulation.setEmulatedMedia", media="print" if paper else "screen", features=[scheme]
        )
        self.events.clear()
        self.call("Page.navigate", url=address)
        while not any(event.get("method") == "Page.loadEventFired" for event in self.events):
            self.events.append(self._next())

    def _next(self) -> dict[str, Any]:
        deadline = time.monotonic() + _SECONDS
        with selectors.DefaultSelector() as selector:
            selector.register(self._answers, selectors.EVENT_READ)
            while b"\0" not in self._waiting:
                assert selector.select(deadline - time.monotonic()), "the browser is silent"
                piece = os.read(self._answers, 1 << 16)
                assert piece, "the browser has gone"
                self._waiting += piece
        message, _, self._waiting = self._waiting.partition(b"\0")
        return dict(json.loads(message))


@contextmanager
def browser(path: str) -> Iterator[Page]:
    """Start a browser with a profile of its own, and end it and what it started."""
    ours, theirs = os.pipe(), os.pipe()
    # Out of the way of 3 and 4 first, so that moving one cannot close the other.
    ends = [fcntl.fcntl(end, fcntl.F_DUPFD, 10) for end in (ours[0], theirs[1])]
    os.close(ours[0])
    os.close(theirs[1])
    with tempfile.TemporaryDirectory(ignore_cleanup_errors=True) as profile:
        process = subprocess.Popen(
            [
                sys.executable,
                "-c",
                _MOVE,
                *map(str, ends),
                path,
                *_FLAGS,
                f"--user-data-dir={profile}",
            ],
            pass_fds=ends,
            stdin=subprocess.DEVNULL,
            stdout=subprocess.DEVNULL,
            stderr=subprocess.DEVNULL,
        )
        for end in ends:
            os.close(end)
        try:
            page = Page(ours[1], theirs[0])
            yield page
            page._session = ""
            page.call("Browser.close")
        finally:
            os.close(ours[1])
            os.close(theirs[0])
            try:
                process.wait(20)
            except subprocess.TimeoutExpired:
                process.kill()
                process.wait()
