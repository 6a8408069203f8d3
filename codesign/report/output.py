"""Getting text out: whole files or none, and terminals that cannot show every character."""

from __future__ import annotations

import codecs
import json
import math
import os
import re
import tempfile
import unicodedata
from functools import cache
from pathlib import Path
from typing import TYPE_CHECKING, Any

from codesign.errors import CodesignError
from codesign.report.layout import LABEL, visible
from codesign.report.progress import PointProgress, Progress

if TYPE_CHECKING:
    import pandas as pd

__all__ = ["PointProgress", "Progress", "as_ascii", "plain", "shown", "write_file"]

#: How the characters of reports read where they cannot be shown, as wide as they are where that can be.
ASCII = {
    "µ": "u", "°": "", "²": "2", "³": "3", "×": "x", "±": "+/-", "−": "-", "–": "-", "—": "-", "≤": "<=", "≥": ">=",
    "·": ".", "█": "#", "▌": "#", "░": ".", "─": "-", "►": ">", "…": "~", "σ": "s", "⁻": "-", "λ": "l", "√": "sqrt",
    "→": "->", "◄": "<", "≈": "~", "¼": "(1/4)", "¾": "(3/4)",
}  # fmt: skip

#: What makes a spreadsheet take a cell for a formula.
FORMULA_STARTS = ("=", "+", "-", "@")


def as_ascii(text: str) -> str:
    """Return the text in plain ASCII; what has no likeness becomes ``?``."""
    return shown(text, "ascii")


def shown(text: str, encoding: str | None) -> str:
    """Return the text as it is where the encoding can show it, else with likenesses of what it cannot show.

    Whatever a name holds, nothing but characters that show and line ends reaches a terminal: no control characters.
    Columns of tables stay in line. JSON, which is UTF-8 by its standard (RFC 8259), becomes ASCII with its own escapes
    in any other encoding.
    """
    text = "\n".join(map(visible, text.split("\n")))
    try:
        encoding = codecs.lookup(encoding or "ascii").name
    except LookupError:
        encoding = "ascii"
    if encoding == "utf-8" or text.isascii():
        return text
    if text[:1] in ("{", "["):  # reports begin with a space or a word
        return "".join(c if c.isascii() else json.dumps(c)[1:-1] for c in text)
    return "\n".join(_line(line, encoding) for line in text.split("\n"))


def _line(line: str, encoding: str) -> str:
    """Replace what cannot be shown; the space before a cell takes up what its likeness is wider or narrower."""
    found = ""
    for character in line:
        if _can(character, encoding):
            found += character
            continue
        likeness = _likeness(character, encoding)
        found = _widened(found, 1 - len(likeness)) + likeness
    return found


def _widened(line: str, by: int) -> str:
    """Return a beginning of a line with more or less space before its last cell; words after a label stay in place."""
    gaps = [gap for gap in re.finditer("  +", line) if gap.end() > LABEL + 1] if by else []
    if not gaps:
        return line
    start, end = gaps[-1].span()
    return line[:start] + " " * max(end - start + by, 1) + line[end:]


@cache
def _can(character: str, encoding: str) -> bool:
    try:
        character.encode(encoding)
    except UnicodeEncodeError:
        return False
    return True


def _likeness(character: str, encoding: str) -> str:
    """Return what a character is replaced by: our own choice, its letter without marks, or a question mark."""
    if character in ASCII:
        return ASCII[character]
    letters = "".join(c for c in unicodedata.normalize("NFKD", character) if _can(c, encoding))
    return letters if letters.strip() else "" if unicodedata.combining(character) else "?"


def plain(text: str) -> str:
    """Return words typed by someone else on one line, without control or direction characters."""
    return " ".join(visible(text).split())


def csv_text(table: pd.DataFrame) -> str:
    """Return a table as CSV text that a spreadsheet shows and never computes.

    A cell or column name in words that starts with one of `FORMULA_STARTS` gets an apostrophe in front; numbers stay as
    they are, with all digits. Words are on one line, without control or direction characters.
    """
    return table.rename(columns=lambda name: _cell(str(name))).map(_cell).to_csv(index=False, lineterminator="\n")


def _cell(value: Any) -> Any:
    """What stands in a cell; how arrays print is a setting that any library may change, so numbers print themselves."""
    if isinstance(value, float):
        return value if math.isnan(value) else repr(float(value))
    if not isinstance(value, str):
        return value
    text = plain(value)
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
