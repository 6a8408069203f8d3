"""The command line on a pseudo-terminal of any size, and what a screen would show."""

from __future__ import annotations

import fcntl
import os
import pty
import re
import signal
import struct
import subprocess
import sys
import termios
import threading
import time
from pathlib import Path

ROOT = Path(__file__).parents[1]


class Terminal:
    """A process whose output and errors go to a pseudo-terminal; what it wrote is in ``text``.

    ``separate`` sends only the errors there and keeps standard output in a pipe, as ``cnr ... | less`` does.
    """

    def __init__(self, *arguments: str, columns: int = 80, separate: bool = False, **environment: str) -> None:
        self._ours, theirs = pty.openpty()
        self.resize(columns)
        path = os.pathsep.join(filter(None, (str(ROOT), os.environ.get("PYTHONPATH"))))
        own = {k: v for k, v in os.environ.items() if k not in ("NO_COLOR", "FORCE_COLOR", "COLUMNS", "TERM")}
        self.process = subprocess.Popen(
            (sys.executable, *arguments),
            stdin=theirs,
            stdout=subprocess.PIPE if separate else theirs,
            stderr=theirs,
            env={**own, "PYTHONPATH": path, "TERM": "xterm", "PYTHONIOENCODING": "utf-8", **environment},
            preexec_fn=lambda: (os.setsid(), fcntl.ioctl(0, termios.TIOCSCTTY, 0)),
        )
        os.close(theirs)
        self.text, self._reader = "", threading.Thread(target=self._read, daemon=True)
        self._reader.start()

    def _read(self) -> None:
        found = b""
        while True:
            try:
                piece = os.read(self._ours, 65536)
            except OSError:  # the other end has closed
                return
            if not piece:
                return
            found += piece
            self.text = found.decode("utf-8", "replace").replace("\r\n", "\n")

    def resize(self, columns: int) -> None:
        """Give the terminal another width."""
        fcntl.ioctl(self._ours, termios.TIOCSWINSZ, struct.pack("HHHH", 24, columns, 0, 0))

    def wait_for(self, pattern: str, seconds: float = 30.0) -> str:
        """Return what matches once it is written."""
        end = time.monotonic() + seconds
        while time.monotonic() < end:
            if match := re.search(pattern, self.text):
                return match[0]
            if self.process.poll() is not None:
                break
            time.sleep(0.02)
        raise AssertionError(f"{pattern!r} was not written within {seconds:g} s, only {self.text!r}")

    def interrupt(self) -> None:
        """Press Ctrl-C: every process of the terminal gets it."""
        os.killpg(os.getpgid(self.process.pid), signal.SIGINT)

    def finish(self, seconds: float = 60.0) -> int:
        """Wait for the end and return the exit code."""
        self.out = self.process.communicate(timeout=seconds)[0]
        self._reader.join(5)
        os.close(self._ours)
        return self.process.returncode


def screen(text: str, columns: int = 80) -> list[str]:
    """Lines that a screen of that width shows in the end: line feed, return and overwriting, long lines wrapped."""
    lines, column = [""], 0
    for character in re.sub(r"\x1b\[[0-9;]*m", "", text):
        if character == "\n":
            lines.append("")
            column = 0
        elif character == "\r":
            column = 0
        else:
            if column == columns:
                lines.append("")
                column = 0
            row = lines[-1].ljust(column)
            lines[-1] = row[:column] + character + row[column + 1 :]
            column += 1
    return [line.rstrip() for line in lines]
