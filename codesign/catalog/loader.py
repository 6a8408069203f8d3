"""Read a catalogue folder: ``catalog.toml``, any other TOML files, and one CSV table per kind."""

from __future__ import annotations

import csv
import json
import tomllib
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

from codesign.catalog.camera import Camera
from codesign.catalog.common import Part
from codesign.catalog.filter import Filter
from codesign.catalog.led import Led
from codesign.catalog.surface import Surface
from codesign.errors import CatalogError, nearest

PART_TYPES: Mapping[str, type[Part]] = {"led": Led, "filter": Filter, "camera": Camera, "surface": Surface}
CATALOG_FILE = "catalog.toml"

Parts = dict[str, dict[str, Part]]


@dataclass(frozen=True, slots=True)
class Catalog:
    """Parts by kind and id, with where the whole collection comes from."""

    name: str
    source: str
    leds: Mapping[str, Led] = field(default_factory=dict, repr=False)
    filters: Mapping[str, Filter] = field(default_factory=dict, repr=False)
    cameras: Mapping[str, Camera] = field(default_factory=dict, repr=False)
    surfaces: Mapping[str, Surface] = field(default_factory=dict, repr=False)
    folder: Path = Path()

    def parts(self, kind: str) -> Mapping[str, Any]:
        """Return all parts of a kind: "led", "filter", "camera" or "surface"."""
        if kind not in PART_TYPES:
            raise CatalogError(f"no parts of kind {kind!r}, {nearest(kind, PART_TYPES)}")
        return getattr(self, f"{kind}s")

    def part(self, kind: str, name: str) -> Any:
        """Return one part by kind and id."""
        parts = self.parts(kind)
        if name not in parts:
            raise CatalogError(f"catalog {self.name!r}: no {kind} {name!r}, {nearest(name, parts)}")
        return parts[name]

    def with_parts(self, parts: Parts) -> Catalog:
        """Return the catalogue with further parts, as a problem file adds them; ids must be new."""
        merged = {kind: dict(self.parts(kind)) for kind in PART_TYPES}
        for kind, added in parts.items():
            for part in added.values():
                _add(merged[kind], part)
        for part in merged["filter"].values():
            part.check_stack(merged["filter"])
        return replace(self, **{f"{kind}s": found for kind, found in merged.items()})

    def check(self) -> None:
        """Read and check every curve file now."""
        for kind in PART_TYPES:
            for part in self.parts(kind).values():
                part.check()


def demo_catalog_path() -> Path:
    """Return the folder of the invented demo catalogue, installed or in a checkout."""
    return _embedded("demo")


def load_catalog(folder: str | Path = "demo", *, check: bool = False) -> Catalog:
    """Load a catalogue.

    Parameters
    ----------
    folder : path
        Folder with ``catalog.toml``; the bare name "demo" is the embedded invented catalogue.
    check : bool
        Read every curve file now rather than on first use.

    Returns
    -------
    Catalog

    Raises
    ------
    CatalogError
        One line naming file, part, key and value of the first thing wrong.

    Examples
    --------
    >>> load_catalog("demo").name
    'demo'
    """
    root = _embedded(folder) if folder == "demo" else Path(folder)
    if not (root / CATALOG_FILE).is_file():
        raise CatalogError(f"{root}: no {CATALOG_FILE} in this folder; name a catalogue folder, or 'demo'")
    head = _read_toml(root / CATALOG_FILE)
    catalog = Catalog(name=_text(head, "name"), source=_text(head, "source"), folder=root).with_parts(
        _folder_parts(root, head)
    )
    if check:
        catalog.check()
    return catalog


def parse_parts(tables: Mapping[str, Any], base_dir: str | Path, where: str = "") -> Parts:
    """Build parts from tables keyed by kind, as TOML gives them.

    Parameters
    ----------
    tables : mapping
        ``{"led": [...], "filter": [...], "camera": [...], "surface": [...]}``, each optional.
    base_dir : path
        Folder to which curve files are relative.
    where : str
        File named in messages.

    Returns
    -------
    dict
        kind → id → part, all four kinds present.
    """
    parts: Parts = {kind: {} for kind in PART_TYPES}
    for kind, rows in tables.items():
        if kind not in PART_TYPES:
            raise CatalogError(f"{where}: unknown table {kind!r}, {nearest(kind, PART_TYPES)}")
        if not isinstance(rows, list) or not all(isinstance(row, Mapping) for row in rows):
            raise CatalogError(f"{where}: {kind} must be a list of tables; write [[{kind}]] above each part")
        for row in rows:
            _add(parts[kind], PART_TYPES[kind].from_table(row, base_dir=base_dir, where=where))
    return parts


def _add(parts: dict[str, Any], part: Part) -> None:
    if part.id in parts:
        other = parts[part.id].where or "the catalogue"
        raise part.error(f"id is taken already in {other}; ids must be unique, rename one")
    parts[part.id] = part


def _folder_parts(root: Path, head: dict[str, Any]) -> Parts:
    merged: Parts = {kind: {} for kind in PART_TYPES}
    for found in _read_all(root, head):
        for kind, parts in found.items():
            for part in parts.values():
                _add(merged[kind], part)
    return merged


def _read_all(root: Path, head: dict[str, Any]) -> Iterable[Parts]:
    known = {"name", "source", "description"}
    yield parse_parts({key: rows for key, rows in head.items() if key not in known}, root, CATALOG_FILE)
    for path in sorted(root.glob("*.toml")):
        if path.name != CATALOG_FILE:
            yield parse_parts(_read_toml(path), root, path.name)
    for path in sorted(root.glob("*.csv")):
        kind = path.stem.removesuffix("s")
        if kind not in PART_TYPES:
            names = ", ".join(f"{known_kind}s.csv" for known_kind in PART_TYPES)
            raise CatalogError(f"{path.name}: not a table of parts, must be one of {names}; put curves in curves/")
        yield _read_csv_parts(path, kind, root)


def _read_toml(path: Path) -> dict[str, Any]:
    try:
        return tomllib.loads(path.read_text(encoding="utf-8-sig"))
    except tomllib.TOMLDecodeError as error:
        raise CatalogError(f"{path.name}: not valid TOML, {error}; check quotes and brackets there") from None
    except UnicodeDecodeError as error:
        raise CatalogError(f"{path.name}: byte {error.start} is not UTF-8 text; save the file as UTF-8") from None


def _read_csv_parts(path: Path, kind: str, root: Path) -> Parts:
    """Read a table with one part per row; empty cells are left out, lists are written as JSON."""
    text = path.read_text(encoding="utf-8-sig")
    lines = [line for line in text.splitlines() if line.strip() and not line.lstrip().startswith("#")]
    reader = csv.DictReader(lines, skipinitialspace=True)
    columns = list(reader.fieldnames or ())
    repeated = next((column for column in columns if columns.count(column) > 1), None)
    if repeated is not None:
        raise CatalogError(f"{path.name}: column {repeated!r} appears twice; remove one")
    rows = []
    for row in reader:
        name = row.get("id") or "?"
        if None in row or None in row.values():
            raise CatalogError(
                f"{path.name}: {kind} {name!r}: row and header differ in length; quote cells with commas"
            )
        cells = {key.strip(): cell.strip() for key, cell in row.items() if cell.strip()}
        rows.append({key: _cell(cell, f"{path.name}: {kind} {name!r}: {key}") for key, cell in cells.items()})
    return parse_parts({kind: rows}, root, path.name)


def _cell(cell: str, where: str) -> Any:
    if not cell.startswith(("[", "{")):
        return cell
    try:
        return json.loads(cell)
    except json.JSONDecodeError as error:
        raise CatalogError(f"{where} is {cell!r}, not valid JSON: {error}; write e.g. [[100, 0.5], [350, 1]]") from None


def _text(head: Mapping[str, Any], key: str) -> str:
    value = head.get(key)
    if not isinstance(value, str) or not value.strip():
        raise CatalogError(
            f"{CATALOG_FILE}: {key} is {value!r}, must be text; say what this catalogue is or where from"
        )
    return value


def _embedded(name: str) -> Path:
    package = Path(__file__).resolve().parents[1]
    # Installed packages carry the catalogues inside; a checkout has them beside the package.
    for folder in (package / "_catalogs" / name, package.parent / "catalogs" / name):
        if folder.is_dir():
            return folder
    raise CatalogError(f"embedded catalogue {name!r} is not installed; reinstall the package")
