"""Drives a real Chromium over its debugging pipe: real keys, real clicks, every request seen.

The protocol is JSON between two pipes, so that no driver has to be installed. See
https://chromedevtools.github.io/devtools-protocol/ for the commands.
"""

from __future__ import annotations

import base64
import json
import os
import select
import shutil
import subprocess
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser")

_KEYS = {
    "Enter": (13, "\r"),
    "Tab": (9, ""),
    " ": (32, " "),
    "ArrowDown": (40, ""),
    "ArrowUp": (38, ""),
    "End": (35, ""),
    "Home": (36, ""),
}
_TIMEOUT_S = 60.0

# Chromium reads commands from 3 and writes answers to 4; the ends we hold have other numbers.
_HAND_OVER = """
import fcntl, os, sys
given, taken = (fcntl.fcntl(int(end), fcntl.F_DUPFD, 10) for end in sys.argv[1:3])
os.dup2(given, 3)
os.dup2(taken, 4)
os.execv(sys.argv[3], sys.argv[3:])
"""


class Browser:
    """One page in a headless Chromium.

    Attributes
    ----------
    complaints
        Console messages of level warning or error, uncaught exceptions, refused resources.
    requested
        URLs of every request, the page itself included.
    """

    def __init__(self, commands: int, answers: int) -> None:
        self._commands, self._answers = commands, answers
        self._buffer = b""
        self._number = 0
        self._loads = 0
        self.complaints: list[str] = []
        self.requested: list[str] = []
        target = self._send("Target.createTarget", {"url": "about:blank"}, on_page=False)
        attached = self._send(
            "Target.attachToTarget",
            {"targetId": target["targetId"], "flatten": True},
            on_page=False,
        )
        self._session = attached["sessionId"]
        for domain in ("Page", "Runtime", "Network", "Log"):
            self.send(f"{domain}.enable")

    def send(self, method: str, **parameters: Any) -> dict[str, Any]:
        """One command to the page; its result."""
        return self._send(method, parameters, on_page=True)

    def open(self, url: str) -> None:
        """Go to an address and wait until the page has loaded."""
        before = self._loads
        self.send("Page.navigate", url=url)
        self._wait_for_load(before)

    def evaluate(self, expression: str) -> Any:
        """The value of an expression in the page; a promise is awaited."""
        found = self.send(
            "Runtime.evaluate", expression=expression, returnByValue=True, awaitPromise=True
        )
        assert "exceptionDetails" not in found, found["exceptionDetails"]
        return found["result"].get("value")

    def press(self, key: str, *, follow: bool = False) -> None:
        """Press and release a key; with `follow`, wait for the page it leads to."""
        before = self._loads
        code, text = _KEYS.get(key, (ord(key[0].upper()), key))
        common = {"key": key, "windowsVirtualKeyCode": code}
        self.send("Input.dispatchKeyEvent", type="keyDown", text=text, **common)
        self.send("Input.dispatchKeyEvent", type="keyUp", **common)
        if follow:
            self._wait_for_load(before)

    def type(self, selector: str, text: str) -> None:
        """Focus a field, empty it and type."""
        self.evaluate(
            f"(e => {{ e.focus(); e.select(); }})(document.querySelector({json.dumps(selector)}))"
        )
        if text:
            self.send("Input.insertText", text=text)
        else:
            self.send(
                "Input.dispatchKeyEvent", type="keyDown", key="Delete", windowsVirtualKeyCode=46
            )

    def click(self, selector: str, *, follow: bool = False) -> None:
        """Press the mouse in the middle of an element."""
        before = self._loads
        x, y = self.evaluate(
            f"(e => {{ e.scrollIntoView({{block: 'center'}}); const b = e.getBoundingClientRect();"
            f" return [b.x + b.width / 2, b.y + b.height / 2]; }})"
            f"(document.querySelector({json.dumps(selector)}))"
        )
        for kind in ("mousePressed", "mouseReleased"):
            self.send("Input.dispatchMouseEvent", type=kind, x=x, y=y, button="left", clickCount=1)
        if follow:
            self._wait_for_load(before)

    def resize(self, width: int, height: int, *, dark: bool = False) -> None:
        """Size of the window in CSS pixels, and the colour scheme that is preferred."""
        self.send(
            "Emulation.setDeviceMetricsOverride",
            width=width, height=height, deviceScaleFactor=1, mobile=False,
        )  # fmt: skip
        scheme = {"name": "prefers-color-scheme", "value": "dark" if dark else "light"}
        self.send("Emulation.setEmulatedMedia", features=[scheme])

    def picture(self, path: Path) -> Path:
        """What the window shows, as PNG."""
        shot = self.send("Page.captureScreenshot", format="png")
        path.write_bytes(base64.b64decode(shot["data"]))
        return path

    def paper(self) -> bytes:
        """The page printed, as PDF."""
        return base64.b64decode(self.send("Page.printToPDF", preferCSSPageSize=True)["data"])

    def _wait_for_load(self, before: int) -> None:
        end = time.monotonic() + _TIMEOUT_S
        while self._loads == before:
            assert time.monotonic() < end, "the page did not load"
            self._take(self._next(end))

    def _send(self, method: str, parameters: dict[str, Any], *, on_page: bool) -> dict[str, Any]:
        self._number += 1
        message: dict[str, Any] = {"id": self._number, "method": method, "params": parameters}
        if on_page:
            message["sessionId"] = self._session
        data = json.dumps(message).encode() + b"\0"
        while data:
            data = data[os.write(self._commands, data) :]
        end = time.monotonic() + _TIMEOUT_S
        while True:
            answer = self._next(end)
            if answer.get("id") == self._number:
                assert "error" not in answer, (method, answer["error"])
                result: dict[str, Any] = answer["result"]
                return result
            self._take(answer)

    def _next(self, end: float) -> dict[str, Any]:
        while b"\0" not in self._buffer:
            ready, _, _ = select.select([self._answers], [], [], max(0.0, end - time.monotonic()))
            assert ready, "Chromium does not answer"
            more = os.read(self._answers, 1 << 20)
            assert more, "Chromium has gone"
            self._buffer += more
        line, _, self._buffer = self._buffer.partition(b"\0")
        message: dict[str, Any] = json.loads(line)
        return message

    def _take(self, event: dict[str, Any]) -> None:
        method, about = event.get("method"), event.get("params", {})
        if method == "Page.loadEventFired":
            self._loads += 1
        elif method == "Network.requestWillBeSent":
            self.requested.append(about["request"]["url"])
        elif method == "Runtime.exceptionThrown":
            self.complaints.append(str(about["exceptionDetails"]))
        elif method == "Runtime.consoleAPICalled" and about["type"] in (
            "error",
            "warning",
            "assert",
        ):
            self.complaints.append(str(about["args"]))
        elif method == "Log.entryAdded" and about["entry"]["level"] in ("error", "warning"):
            self.complaints.append(about["entry"]["text"])


@contextmanager
def browser(profile: Path) -> Iterator[Browser]:
    """A Chromium of its own with an empty profile; ended when the block ends."""
    assert CHROMIUM is not None
    commands_out, commands_in = os.pipe()
    answers_out, answers_in = os.pipe()

    process = subprocess.Popen(
        [
            *(sys.executable, "-c", _HAND_OVER, str(commands_out), str(answers_in), CHROMIUM),
            *("--headless", "--no-sandbox", "--disable-gpu", "--disable-background-networking"),
            *("--no-first-run", "--disable-component-update", "--disable-sync"),
            *("--remote-debugging-pipe", f"--user-data-dir={profile}"),
        ],
        pass_fds=(commands_out, answers_in),
        stderr=subprocess.DEVNULL,
    )
    os.close(commands_out)
    os.close(answers_in)
    try:
        yield Browser(commands_in, answers_out)
    finally:
        os.close(commands_in)  # Chromium ends when its pipe does
        try:
            process.wait(timeout=10)
        except subprocess.TimeoutExpired:
            process.kill()
            process.wait()
        os.close(answers_out)
