"""Getting text out: whole files or none, and terminals that cannot show every character."""

from __future__ import annotations

import os
import sys
import tempfile
import time
from pathlib import Path
from typing import TYPE_CHECKING, TextIO

from codesign.errors import CodesignError
from codesign.report.layout import visible

if TYPE_CHECKING:
    import pandas as pd

#: How special characters of a report read where only ASCII can be shown.
ASCII = str.maketrans(
    {
        "µ": "u", "°": "", "²": "2", "×": "x", "±": "+/-", "−": "-", "–": "-", "—": "-", "≤": "<=", "≥": ">=",
        "·": ".", "█": "#", "▌": "#", "░": ".", "─": "-", "►": ">", "…": "...", "σ": "sigma", "⁻": "-", "λ": "lambda",
        "√": "sqrt", "¼": "(1/4)", "¾": "(3/4)", "³": "3",
    }
)  # fmt: skip

#: What makes a spreadsheet take a cell for a formula.
FORMULA_STARTS = ("=", "+", "-", "@")

#: A search shorter than this shows no progress. [s]
QUIET_SECONDS = 0.5


def as_ascii(text: str) -> str:
    """Return the text in plain ASCII; what has no likeness becomes ``?``."""
    return text.translate(ASCII).encode("ascii", "replace").decode("ascii")


def shown(text: str, encoding: str | None) -> str:
    """Return the text as it is where the encoding can show it, else in ASCII; never with control characters.

    Whatever a name holds, nothing but characters that show and line ends reaches a terminal.
    """
    text = "\n".join(map(visible, text.split("\n")))
    try:
        text.encode(encoding or "ascii")
    except (UnicodeEncodeError, LookupError):
        return as_ascii(text)
    return text


def plain(text: str) -> str:
    """Return words typed by someone else on one line, without control or direction characters."""
    return " ".join(visible(text).split())


def csv_text(table: pd.DataFrame) -> str:
    """Return a table as CSV text that a spreadsheet shows and never computes.

    A cell or column name in words that starts with one of `FORMULA_STARTS` gets an apostrophe in front; numbers stay as
    they are. Words are on one line, without control or direction characters.
    """
    words = table.rename(columns=lambda name: _cell(str(name))).map(lambda v: _cell(v) if isinstance(v, str) else v)
    return words.to_csv(index=False, lineterminator="\n")


def _cell(text: str) -> str:
    text = plain(text)
    return f"'{text}" if text.startswith(FORMULA_STARTS) else text


def write_file(path: str | Path, content: str | bytes, *, overwrite: bool = True) -> None:
    """Write a whole file or nothing: an interrupted run never leaves half of one.

    Parameters
    ----------
    path : path
        Its folder must exist.
    content : str or bytes
        Text is written as UTF-8.
    overwrite : bool
        Whether an existing file may be replaced.

    Raises
    ------
    CodesignError
        When the folder does not exist, the path is a folder, or the file exists and must not be replaced.
    """
    path = Path(path)
    data = content.encode("utf-8") if isinstance(content, str) else content
    try:
        _require_place(path, overwrite)
        _write_anew(path.resolve(), data)
    except OSError as error:
        raise CodesignError(f"{path}: cannot be written, {error.strerror}; choose another place") from None


def _require_place(path: Path, overwrite: bool) -> None:
    if path.is_dir():
        raise CodesignError(f"{path}: is a folder; name a file in it")
    if not path.parent.is_dir():
        raise CodesignError(f"{path}: folder {str(path.parent)!r} does not exist; create it first")
    if path.exists() and not overwrite:
        raise CodesignError(f"{path}: exists already; choose another name, or --force to replace it")


def _write_anew(path: Path, data: bytes) -> None:
    if path.exists() and not path.is_file():  # a pipe or a device has nothing to protect
        path.write_bytes(data)
        return
    handle, name = tempfile.mkstemp(dir=path.parent, prefix=f".{path.name[:40]}.")
    try:
        with os.fdopen(handle, "wb") as file:
            file.write(data)
        os.chmod(name, path.stat().st_mode & 0o777 if path.exists() else 0o666 & ~_umask())
        os.replace(name, path)
    except BaseException:
        Path(name).unlink(missing_ok=True)
        raise


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask


class Progress:
    """One line on a terminal that tells how far a search is; silent when nobody watches."""

    def __init__(self, stream: TextIO | None = None) -> None:
        self.stream = sys.stderr if stream is None else stream
        self.watched = self.stream.isatty()
        self.started = time.monotonic()
        self.width = 0
        self.best = 0.0

    def __call__(self, best: float, bound: float) -> None:
        """Show the best CNR so far and the bound on what is left."""
        seconds = time.monotonic() - self.started
        self.best = max(self.best, best)
        if not self.watched or seconds < QUIET_SECONDS:
            return
        # A search among fewer parts starts from nothing again: it is after runners-up.
        doing = f"none above {bound:.4g}" if best >= self.best else "looking for runners-up"
        line = f"searching {seconds:.0f} s: best CNR {self.best:.4g}, {doing}"
        self.stream.write("\r" + line.ljust(self.width))
        self.stream.flush()
        self.width = len(line)

    def clear(self) -> None:
        """Wipe the line."""
        if self.width:
            self.stream.write("\r" + " " * self.width + "\r")
            self.stream.flush()
            self.width = 0

    close = clear


class PointProgress(Progress):
    """The same for a study of many points."""

    def __call__(self, done: int, total: int) -> None:
        """Show how many points are solved."""
        seconds = time.monotonic() - self.started
        if not self.watched or seconds < QUIET_SECONDS:
            return
        line = f"{done} of {total} points, {seconds:.0f} s"
        self.stream.write("\r" + line.ljust(self.width))
        self.stream.flush()
        self.width = len(line)
