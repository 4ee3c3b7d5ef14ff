"""A headless browser on a pipe, spoken to in the DevTools protocol: no driver and no socket needed.

File descriptors 3 and 4 carry JSON messages that end in a null byte.
"""

from __future__ import annotations

import base64
import json
import os
import shutil
import subprocess
import tempfile
from pathlib import Path
from types import TracebackType
from typing import Any

NAMES = ("chromium", "chromium-browser")
FLAGS = (
    "--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run",
    "--disable-background-networking", "--disable-component-update", "--disable-sync",
    "--hide-scrollbars", "--remote-debugging-pipe",
)  # fmt: skip


def executable() -> str | None:
    """The browser's path, None where there is none."""
    return next((path for name in NAMES if (path := shutil.which(name))), None)


class Browser:
    """One page in one browser; collects console messages, failures and requests."""

    def __init__(self) -> None:
        path = executable()
        assert path is not None
        self.folder = tempfile.TemporaryDirectory(ignore_cleanup_errors=True)
        read_commands, self._commands = os.pipe()
        self._answers, write_answers = os.pipe()

        def wire() -> None:
            # The two ends may themselves be 3 or 4, so both are moved out of the way first.
            high = os.dup(read_commands), os.dup(write_answers)
            os.dup2(high[0], 3)
            os.dup2(high[1], 4)

        self.process = subprocess.Popen(
            [path, *FLAGS, f"--user-data-dir={self.folder.name}", "about:blank"],
            stdout=subprocess.DEVNULL,
            stderr=subprocess.DEVNULL,
            preexec_fn=wire,
            close_fds=False,
        )
        os.close(read_commands)
        os.close(write_answers)
        self._buffer = b""
        self._number = 0
        self._session: str | None = None
        self.events: list[dict[str, Any]] = []
        target = self.call("Target.createTarget", url="about:blank")["targetId"]
        self._session = self.call("Target.attachToTarget", targetId=target, flatten=True)["sessionId"]
        for domain in ("Page", "Runtime", "Log", "Network"):
            self.call(f"{domain}.enable")

    def __enter__(self) -> Browser:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        os.close(self._commands)
        os.close(self._answers)
        self.process.terminate()
        self.process.wait(20)
        self.folder.cleanup()

    def _receive(self) -> dict[str, Any]:
        while b"\0" not in self._buffer:
            part = os.read(self._answers, 1 << 20)
            assert part, "the browser went away"
            self._buffer += part
        message, _, self._buffer = self._buffer.partition(b"\0")
        answer: dict[str, Any] = json.loads(message)
        return answer

    def call(self, method: str, **parameters: object) -> dict[str, Any]:
        """Send a command and wait for its answer."""
        self._number += 1
        message: dict[str, object] = {"id": self._number, "method": method, "params": parameters}
        if self._session is not None:
            message["sessionId"] = self._session
        os.write(self._commands, json.dumps(message).encode() + b"\0")
        while True:
            answer = self._receive()
            if answer.get("id") == self._number:
                assert "error" not in answer, answer
                result: dict[str, Any] = answer["result"]
                return result
            self.events.append(answer)

    def open(self, page: Path, width: int) -> None:
        """Load a page in a window so wide, and wait until it is there."""
        self.events.clear()
        self.call(
            "Emulation.setDeviceMetricsOverride", width=width, height=900, deviceScaleFactor=1, mobile=width < 600
        )
        self.call("Page.navigate", url=page.as_uri())
        while not any(event.get("method") == "Page.loadEventFired" for event in self.events):
            self.events.append(self._receive())

    def evaluate(self, expression: str) -> Any:
        """The value of an expression in the page."""
        return self.call("Runtime.evaluate", expression=expression, returnByValue=True)["result"].get("value")

    def complaints(self) -> list[str]:
        """What the console or the log said, and what failed to load."""
        loud = {"Runtime.consoleAPICalled", "Runtime.exceptionThrown", "Log.entryAdded", "Network.loadingFailed"}
        return [json.dumps(event) for event in self.events if event.get("method") in loud]

    def requests(self) -> list[str]:
        """Every address that the page asked for."""
        asked = [event for event in self.events if event.get("method") == "Network.requestWillBeSent"]
        return [event["params"]["request"]["url"] for event in asked]

    def picture(self) -> bytes:
        """The whole page as PNG."""
        shot = self.call("Page.captureScreenshot", format="png", captureBeyondViewport=True)
        return base64.b64decode(shot["data"])

    def pdf(self, width: float, height: float) -> bytes:
        """The page printed on paper of that size in inches."""
        printed = self.call("Page.printToPDF", paperWidth=width, paperHeight=height, preferCSSPageSize=False)
        return base64.b64decode(printed["data"])
