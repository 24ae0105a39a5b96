"""Chromium without a window, driven by the DevTools protocol over two pipes: no package and no port is needed.

Messages are JSON ended by a zero byte; Chromium reads them from descriptor 3 and answers on descriptor 4 when started
with --remote-debugging-pipe (https://chromedevtools.github.io/devtools-protocol/).
"""

from __future__ import annotations

import fcntl
import json
import os
import shutil
import subprocess
import sys
import tempfile
from pathlib import Path

FLAGS = (
    "--headless=new", "--no-sandbox", "--disable-gpu", "--disable-dev-shm-usage", "--no-first-run",
    "--no-default-browser-check", "--disable-background-networking", "--disable-component-update", "--disable-sync",
    "--disable-extensions", "--disable-quic", "--hide-scrollbars", "--force-color-profile=srgb",
)  # fmt: skip
#: Chromium wants its pipes at descriptors 3 and 4; a small program puts them there, since a fork with threads may not.
LAUNCH = """
import os, sys
reads, writes, *command = sys.argv[1:]
os.dup2(int(reads), 3)
os.dup2(int(writes), 4)
os.execvp(command[0], command)
"""


def executable() -> str:
    """Chromium's program.

    Raises
    ------
    RuntimeError
        If there is none: the tests of the page then fail and say how to install it.
    """
    for name in ("chromium", "chromium-browser", "google-chrome"):
        if found := shutil.which(name):
            return found
    raise RuntimeError(
        "the tests of report.html need the browser Chromium, which is not installed; on Debian: "
        "apt-get update && apt-get install -y chromium"
    )


class Browser:
    """One page in one browser; `events` collects what the page reports by itself."""

    def __init__(self) -> None:
        self._profile = tempfile.mkdtemp(prefix="chromium-")
        self._to, self._from, self._process = self._start()
        self._count, self._rest, self._session = 0, b"", None
        self.events: list[dict] = []
        target = self.send("Target.createTarget", url="about:blank")["targetId"]
        self._session = self.send("Target.attachToTarget", targetId=target, flatten=True)["sessionId"]
        for domain in ("Page", "Runtime", "Network", "Log", "DOM"):
            self.send(f"{domain}.enable")

    def _start(self) -> tuple[int, int, subprocess.Popen]:
        to_read, to_write = os.pipe()
        from_read, from_write = os.pipe()
        # high numbers, so that putting one in its place cannot overwrite the other
        inner = [fcntl.fcntl(end, fcntl.F_DUPFD, 20) for end in (to_read, from_write)]
        command = [executable(), *FLAGS, f"--user-data-dir={self._profile}", "--remote-debugging-pipe", "about:blank"]
        process = subprocess.Popen(
            [sys.executable, "-c", LAUNCH, *map(str, inner), *command],
            pass_fds=inner, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL,
        )  # fmt: skip
        for end in (*inner, to_read, from_write):
            os.close(end)
        return to_write, from_read, process

    def send(self, method: str, **parameters):
        """Call `method` and return its result; what comes in between goes into `events`."""
        self._count += 1
        message = {"id": self._count, "method": method, "params": parameters}
        if self._session is not None:
            message["sessionId"] = self._session
        os.write(self._to, json.dumps(message).encode() + b"\0")
        while True:
            answer = self._receive()
            if answer.get("id") == self._count:
                if "error" in answer:
                    raise RuntimeError(f"{method}: {answer['error']['message']}")
                return answer["result"]
            self.events.append(answer)

    def _receive(self) -> dict:
        while b"\0" not in self._rest:
            part = os.read(self._from, 1 << 20)
            if not part:
                raise RuntimeError("Chromium ended without an answer")
            self._rest += part
        message, _, self._rest = self._rest.partition(b"\0")
        return json.loads(message)

    def open(self, path: Path) -> None:
        """Load a file from disk and wait until it is there; earlier events are forgotten."""
        self.events.clear()
        self.send("Page.navigate", url=path.absolute().as_uri())
        while not any(event.get("method") == "Page.loadEventFired" for event in self.events):
            self.events.append(self._receive())

    def run(self, script: str):
        """Value of a JavaScript expression."""
        answer = self.send("Runtime.evaluate", expression=script, returnByValue=True, awaitPromise=True)
        if "exceptionDetails" in answer:
            raise RuntimeError(answer["exceptionDetails"]["exception"].get("description", answer))
        return answer["result"].get("value")

    def press(self, key: str, code: int = 0, *, text: str = "") -> None:
        """Press and release one key, as a hand does."""
        about = {"key": key, "code": key, "windowsVirtualKeyCode": code}
        self.send("Input.dispatchKeyEvent", type="keyDown", **about, **({"text": text} if text else {}))
        self.send("Input.dispatchKeyEvent", type="keyUp", **about)

    def resize(self, width: int, height: int = 900) -> None:
        """Give the window this size in CSS pixels."""
        self.send(
            "Emulation.setDeviceMetricsOverride", width=width, height=height, deviceScaleFactor=1, mobile=width < 600
        )

    def reported(self, *methods: str) -> list[dict]:
        """The parameters of all events of these kinds since the page was opened."""
        self.send("Runtime.evaluate", expression="0")  # whatever was on its way has arrived before the answer
        return [event["params"] for event in self.events if event.get("method") in methods]

    def close(self) -> None:
        """End the browser and take its profile away."""
        self._session = None
        try:
            self.send("Browser.close")
        except (OSError, RuntimeError):
            self._process.kill()
        self._process.wait(20)
        os.close(self._to)
        os.close(self._from)
        shutil.rmtree(self._profile, ignore_errors=True)
