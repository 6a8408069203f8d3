"""Data flows one way: a module imports only from layers below its own."""

from __future__ import annotations

import ast
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parents[1] / "codesign"

#: Lowest first. A name covers the module or the whole sub-package.
LAYERS = (
    "errors",
    "display",
    "spectra",
    "physics",
    "catalog",
    "problem",
    "radiometry",
    "noise",
    "limits",
    "build",
    "limit_use",
    "design",
    "program",
    "assemble",
    "certificate",
    "search",
    "recipe",
    "solve",
    "least_cost",
    "verify",
    "study",
    "family",
    "report",
    "cli",
    "__main__",
)
#: Heavy libraries and the only places that may import them at module level.
LAZY = {"cvxpy": (), "pandas": (), "matplotlib": (), "distributed": ()}


def _modules() -> list[Path]:
    return sorted(path for path in PACKAGE.rglob("*.py") if path != PACKAGE / "__init__.py")


def _layer(name: str) -> int:
    first = name.removeprefix("codesign.").split(".")[0]
    for index, layer in enumerate(LAYERS):
        if first == layer or first.startswith(f"{layer}_"):
            return index
    raise AssertionError(f"module {name} has no place in LAYERS; decide where it belongs")


def _imports(path: Path) -> list[str]:
    """Package modules imported anywhere in a file, inside functions too."""
    found = []
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.ImportFrom) and node.module and node.module.startswith("codesign"):
            names = [f"codesign.{alias.name}" for alias in node.names] if node.module == "codesign" else [node.module]
            found += names
        elif isinstance(node, ast.Import):
            found += [alias.name for alias in node.names if alias.name.startswith("codesign.")]
    return found


@pytest.mark.parametrize("path", _modules(), ids=lambda p: str(p.relative_to(PACKAGE)))
def test_imports_point_down_only(path: Path) -> None:
    own = _layer(".".join(path.relative_to(PACKAGE).with_suffix("").parts))
    upward = [name for name in _imports(path) if name != "codesign.__version__" and _layer(name) > own]
    assert not upward, f"{path.name} imports upward: {upward}"


@pytest.mark.parametrize("path", _modules(), ids=lambda p: str(p.relative_to(PACKAGE)))
def test_heavy_libraries_are_imported_where_used(path: Path) -> None:
    body = ast.parse(path.read_text(encoding="utf-8")).body
    top_level = [node for node in body if isinstance(node, ast.Import | ast.ImportFrom)]
    names = {alias.name.split(".")[0] for node in top_level for alias in node.names if isinstance(node, ast.Import)}
    names |= {node.module.split(".")[0] for node in top_level if isinstance(node, ast.ImportFrom) and node.module}
    assert not names & set(LAZY), f"{path.name} imports {names & set(LAZY)} at module level"


def test_the_proof_checker_knows_no_solver() -> None:
    for name in ("certificate.py", "verify.py", "search/bounds.py"):
        text = (PACKAGE / name).read_text(encoding="utf-8")
        assert "clarabel" not in text and "cvxpy" not in text and "scipy.optimize" not in text


def test_modules_stay_small() -> None:
    long = {str(p.relative_to(PACKAGE)): n for p in _modules() if (n := len(p.read_text("utf-8").splitlines())) > 450}
    assert not long, f"split these modules: {long}"
