"""Where problem files are found, and TOML files read with clear messages."""

from __future__ import annotations

import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from codesign.errors import ProblemError, nearest


@dataclass(frozen=True, slots=True, kw_only=True)
class DemoProblem:
    """An embedded demo problem: its name for `load_problem`, title and notes."""

    name: str
    title: str
    notes: str


def _demo_folders() -> tuple[Path, ...]:
    package = Path(__file__).resolve().parents[1]
    # Installed packages carry the problems inside; a checkout has them beside the package.
    return (package / "_problems", package.parent / "problems")


def demo_problems() -> tuple[DemoProblem, ...]:
    """Return the embedded demo problems by name."""
    files = {path.stem: path for folder in _demo_folders() for path in sorted(folder.glob("*.toml"))}
    tables = {name: read_toml(path) for name, path in sorted(files.items())}
    return tuple(
        DemoProblem(name=name, title=table.get("title", ""), notes=table.get("notes", ""))
        for name, table in tables.items()
    )


def problem_path(name: str | Path) -> Path:
    """Return the file meant by a path or by the bare name of an embedded demo problem."""
    path = Path(name)
    if path.is_file() or path.suffix or path.parent != Path("."):
        return path
    for folder in _demo_folders():
        if (folder / f"{name}.toml").is_file():
            return folder / f"{name}.toml"
    return path


def read_toml(path: Path, advice: str = "") -> dict[str, Any]:
    """Parse a TOML file. Raises ProblemError with the file and what is wrong; ``advice`` for a missing one."""
    try:
        return tomllib.loads(path.read_text(encoding="utf-8-sig"))
    except FileNotFoundError:
        raise ProblemError(f"{path}: no such file; {advice or 'check the path'}") from None
    except OSError as error:
        raise ProblemError(f"{path}: cannot be read, {error.strerror}; give a TOML file") from None
    except UnicodeDecodeError as error:
        raise ProblemError(f"{path}: byte {error.start} is not UTF-8 text; save the file as UTF-8") from None
    except tomllib.TOMLDecodeError as error:
        raise ProblemError(f"{path}: not valid TOML, {error}; check quotes and brackets there") from None


def missing_advice(path: Path) -> str:
    """Say what to do about a problem file that is not there."""
    if path.suffix:
        return f"'cnr new {path}' writes one to start from"
    return f"among the demo problems, {nearest(path.name, [demo.name for demo in demo_problems()])}"
