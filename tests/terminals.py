"""Pseudo terminals for tests: what a program shows to a person, at a width of the test's choice."""

from __future__ import annotations

import os
import pty
import re
import subprocess
import sys
import termios
import threading
from contextlib import contextmanager

COLOUR = re.compile(r"\x1b\[[0-9;]*m")
OTHERS = ("NO_COLOR", "FORCE_COLOR", "COLUMNS", "LINES")  # variables that would change what is shown
COMMAND = (sys.executable, "-c", "import sys; from driftline.cli import main; sys.exit(main())")


class Screen:
    """What has been written to a terminal; complete once the terminal is closed."""

    def __init__(self, columns):
        self.master, self.slave = pty.openpty()
        termios.tcsetwinsize(self.slave, (50, columns))
        self.raw = b""
        self.reader = threading.Thread(target=self._read)
        self.reader.start()  # at once, since a terminal that nobody reads makes its writer wait

    def _read(self):
        while True:
            try:
                got = os.read(self.master, 65536)
            except OSError:  # Linux says so when the last writer is gone
                return
            if not got:
                return
            self.raw += got

    def close(self):
        """Wait for the last character."""
        os.close(self.slave)
        self.reader.join()
        os.close(self.master)

    @property
    def text(self):
        """Everything with its escape codes, lines ending as in a file."""
        return self.raw.decode("utf-8").replace("\r\n", "\n")

    @property
    def plain(self):
        """The same without colours."""
        return COLOUR.sub("", self.text)


@contextmanager
def watched(monkeypatch, columns=80, *, streams=("stdout",), **environment):
    """Standard output (or the `streams` named) of this process on a terminal."""
    screen = Screen(columns)
    environment = {**dict.fromkeys(OTHERS), "TERM": "xterm-256color", **environment}
    with monkeypatch.context() as patch, os.fdopen(os.dup(screen.slave), "w", encoding="utf-8") as stream:
        for name, value in environment.items():
            patch.delenv(name, raising=False) if value is None else patch.setenv(name, value)
        for name in streams:
            patch.setattr(sys, name, stream)
        yield screen
    screen.close()


def run_on_terminal(*arguments, columns=80, piped=(), cwd=None, **environment):
    """The real command in a process of its own; `piped` streams are not on the terminal and come back as text."""
    screen = Screen(columns)
    given = {name: value for name, value in os.environ.items() if name not in OTHERS}
    streams = {name: subprocess.PIPE if name in piped else screen.slave for name in ("stdout", "stderr")}
    result = subprocess.run(
        [*COMMAND, *map(str, arguments)], stdin=subprocess.DEVNULL, **streams, text=True, check=False, timeout=120,
        cwd=cwd, env={**given, "TERM": "xterm-256color", **environment},
    )  # fmt: skip
    screen.close()
    return result, screen
