"""Parts removed, added, or a whole catalogue swapped; the scene stays what it is."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

from codesign.catalog import Catalog, load_catalog, parse_parts
from codesign.errors import ProblemError, nearest
from codesign.problem import Problem, read_toml
from codesign.study.fields import varied

#: Kinds of parts that are bought, and the candidates key of each.
KINDS: Mapping[str, str] = {"led": "leds", "filter": "filters", "camera": "cameras"}

PartName = tuple[str, str]


def parse_part_name(text: str) -> PartName:
    """Read ``kind:id``, e.g. ``led:nir-850-a``."""
    kind, colon, name = text.partition(":")
    kind, name = kind.strip(), name.strip()
    if not colon or not name:
        raise ProblemError(f"{text!r} is not a part; write its kind and id, e.g. led:nir-850-a")
    if kind not in KINDS:
        raise ProblemError(f"{text!r}: no parts of kind {kind!r} to leave out, {nearest(kind, KINDS)}")
    return kind, name


def restocked(
    problem: Problem,
    *,
    catalog: str | Path | None = None,
    added: Iterable[str | Path] = (),
    removed: Iterable[PartName] = (),
) -> Problem:
    """Return a problem with other parts to choose from.

    Parameters
    ----------
    problem : Problem
    catalog : path, optional
        Catalogue folder to choose LEDs, filters and cameras from instead; the surfaces stay.
    added : paths
        TOML files with ``[[led]]``, ``[[filter]]``, ``[[camera]]`` tables; these parts become candidates too.
    removed : (kind, id) pairs
        Parts not in stock.
    """
    stock, changes = problem.catalog, {}
    if catalog is not None:
        stock = _swapped(stock, load_catalog(catalog))
        changes["catalog"] = str(catalog)
    for file in added:
        stock, more = _with_file(stock, Path(file), {**_choices(problem), **changes})
        changes |= more
    unwanted = list(problem.spec.build.must_not)
    for kind, name in removed:
        if name not in stock.parts(kind):
            raise ProblemError(f"{kind}:{name}: no such {kind}; {nearest(name, stock.parts(kind))}")
        unwanted.append(name)
    if len(unwanted) > len(problem.spec.build.must_not):
        changes["build.must_not"] = list(dict.fromkeys(unwanted))
    return varied(problem, changes, catalog=stock) if changes else problem


def _choices(problem: Problem) -> dict[str, Any]:
    return {f"candidates.{key}": getattr(problem.spec.candidates, key) for key in KINDS.values()}


def _swapped(old: Catalog, new: Catalog) -> Catalog:
    """Parts of the new catalogue, surfaces of both: what is looked at does not change with the supplier."""
    return replace(new, surfaces={**new.surfaces, **old.surfaces})


def _with_file(stock: Catalog, path: Path, choices: Mapping[str, Any]) -> tuple[Catalog, dict[str, Any]]:
    """A catalogue with the parts of a file, and the candidates that then include them."""
    tables = read_toml(path, "check the path")
    parts = parse_parts(tables, path.parent, path.name)
    if not any(parts.values()):
        raise ProblemError(f"{path}: holds no parts; write [[led]], [[filter]] or [[camera]] above each")
    changes = {}
    for kind, key in KINDS.items():
        if parts[kind]:
            changes[f"candidates.{key}"] = extended(choices[f"candidates.{key}"], list(parts[kind]))
    return stock.with_parts(parts), changes


def extended(choice: Any, names: list[str]) -> Any:
    """A choice of candidates that takes further ids in.

    Examples
    --------
    >>> extended("price < 4", ["nir-900-x"])
    "(price < 4) or id in ['nir-900-x']"
    >>> extended(("nir-850-a",), ["nir-900-x"])
    ['nir-850-a', 'nir-900-x']
    """
    if choice in ("all", "*"):
        return choice
    if choice in ("none", ()):
        return names
    if isinstance(choice, str):
        return f"({choice}) or id in {names}" if any(c in choice for c in " <>=!(") else [choice, *names]
    return [*choice, *names]
