"""Where family files are found."""

from __future__ import annotations

from pathlib import Path

from codesign.problem import DemoProblem, read_toml


def _folders() -> tuple[Path, ...]:
    package = Path(__file__).resolve().parents[1]
    # Installed packages carry the families inside; a checkout has them beside the package.
    return (package / "_problems" / "families", package.parent / "problems" / "families")


def demo_families() -> tuple[DemoProblem, ...]:
    """Return the embedded demo families by name."""
    files = {path.stem: path for folder in _folders() for path in sorted(folder.glob("*.toml"))}
    tables = {name: read_toml(path) for name, path in sorted(files.items())}
    return tuple(
        DemoProblem(name=name, title=table.get("title", ""), notes=table.get("notes", ""))
        for name, table in tables.items()
    )


def family_path(name: str | Path) -> Path:
    """Return the file meant by a path or by the bare name of an embedded demo family."""
    path = Path(name)
    if path.is_file() or path.suffix or path.parent != Path("."):
        return path
    return next((folder / f"{name}.toml" for folder in _folders() if (folder / f"{name}.toml").is_file()), path)
