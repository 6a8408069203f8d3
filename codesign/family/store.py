"""Results of a family in one SQLite file: each variant written once, whole, and found again by its content.

A rollback journal with full synchronisation keeps the file sound whenever the program is killed or the power fails, and
leaves a single file to copy. The file stays locked while a run writes to it.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager
from datetime import UTC, datetime
from pathlib import Path
from typing import Self

from codesign.errors import CodesignError
from codesign.family.outcome import Outcome

#: In place of a path: kept for as long as it is open.
IN_MEMORY = ":memory:"
#: Marks of the file: "CNRF", and the version of its layout.
APPLICATION_ID, LAYOUT = 0x434E5246, 1

_SCHEMA = f"""
CREATE TABLE results (
    variant TEXT NOT NULL,
    content TEXT NOT NULL,
    outcome TEXT NOT NULL,
    seconds REAL NOT NULL,
    written TEXT NOT NULL,
    PRIMARY KEY (variant, content)
) WITHOUT ROWID;
PRAGMA application_id = {APPLICATION_ID};
PRAGMA user_version = {LAYOUT};
"""


class Store:
    """An open store; use as a context.

    Parameters
    ----------
    path : path
        Made when it does not exist.
    fresh : bool
        Whether results in it are forgotten.

    Raises
    ------
    CodesignError
        One line: the file is something else, damaged, in use, or cannot be written.
    """

    def __init__(self, path: str | Path, *, fresh: bool = False) -> None:
        self.path = Path(path)
        if self.path.is_dir():
            raise CodesignError(f"{path}: is a folder; name a file with --store")
        if not self.path.parent.is_dir():
            raise CodesignError(f"{path}: folder {str(self.path.parent)!r} does not exist; create it first")
        self._connection: sqlite3.Connection | None = None
        try:
            with self._translated():
                self._open(fresh)
        except BaseException:
            self.close()
            raise

    def _open(self, fresh: bool) -> None:
        self._connection = sqlite3.connect(self.path, timeout=0.0, isolation_level=None)
        for pragma in ("locking_mode = EXCLUSIVE", "journal_mode = DELETE", "synchronous = FULL"):
            self._connection.execute(f"PRAGMA {pragma}")
        # Taken now and kept until it is closed, or the process ends.
        self._connection.execute("BEGIN EXCLUSIVE")
        self._require_own()
        if fresh:
            self._connection.execute("DELETE FROM results")
        self._connection.execute("COMMIT")

    def _require_own(self) -> None:
        """Lay out an empty file; raise unless another is ours."""
        read = self._connection.execute
        mark, layout = (read(f"PRAGMA {name}").fetchone()[0] for name in ("application_id", "user_version"))
        if not read("SELECT count(*) FROM sqlite_master").fetchone()[0] and not mark and not layout:
            for statement in _SCHEMA.split(";"):
                self._connection.execute(statement)
            return
        if mark != APPLICATION_ID:
            raise CodesignError(f"{self.path}: is a database of something else; name another file with --store")
        if layout != LAYOUT:
            raise CodesignError(
                f"{self.path}: layout {layout} of another version of codesign, this one writes {LAYOUT}; "
                "name another file with --store"
            )

    def get(self, variant: str, content: str) -> Outcome | None:
        """Return the outcome of a variant with this content, or None."""
        with self._translated():
            row = self._connection.execute(
                "SELECT outcome FROM results WHERE variant = ? AND content = ?", (variant, content)
            ).fetchone()
        if row is None:
            return None
        try:
            return Outcome.from_text(row[0])
        except ValueError:
            raise CodesignError(
                f"{self.path}: the row of variant {variant!r} cannot be read; start anew with --fresh"
            ) from None

    def put(self, variant: str, content: str, outcome: Outcome, seconds: float) -> None:
        """Write a variant, all of it or nothing; one that is there already stays as it is."""
        now = datetime.now(UTC).isoformat(timespec="seconds")
        with self._translated():
            self._connection.execute(
                "INSERT OR IGNORE INTO results VALUES (?, ?, ?, ?, ?)", (variant, content, outcome.text(), seconds, now)
            )

    def rows(self) -> Iterator[tuple[str, str, str]]:
        """All rows: variant, content key, outcome as text; also those whose content is no longer asked for."""
        with self._translated():
            yield from self._connection.execute(
                "SELECT variant, content, outcome FROM results ORDER BY variant, content"
            )

    def close(self) -> None:
        """Give the file back."""
        if self._connection is not None:
            self._connection.close()
            self._connection = None

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    @contextmanager
    def _translated(self) -> Iterator[None]:
        try:
            yield
        except sqlite3.Error as error:
            raise CodesignError(f"{self.path}: {_advice(error)}") from None


def _advice(error: sqlite3.Error) -> str:
    """What went wrong and what to do, by SQLite's own names of errors."""
    name = getattr(error, "sqlite_errorname", "") or ""
    kept = "what is done is kept, the same command goes on from there"
    known = {
        "SQLITE_BUSY": "another run is writing to it; wait for that, or name another file with --store",
        "SQLITE_LOCKED": "another run is writing to it; wait for that, or name another file with --store",
        "SQLITE_NOTADB": "is not a store of results; name another file with --store",
        "SQLITE_CORRUPT": "is damaged; move it away, or name another file with --store",
        "SQLITE_FULL": f"the disk is full; make room, {kept}",
        "SQLITE_READONLY": "cannot be written to; change its permissions, or name another file with --store",
        "SQLITE_CANTOPEN": "cannot be opened for writing; check folder and permissions, or name another with --store",
        "SQLITE_IOERR": f"cannot be written ({error}); check the disk, {kept}",
    }
    found = next((text for key, text in known.items() if name.startswith(key)), None)
    return found or f"cannot be used as a store ({error}); name another file with --store"
