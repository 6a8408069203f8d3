"""The variants of a family: rows of a CSV table, or the problem files of a folder."""

from __future__ import annotations

import csv
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from codesign.catalog import Catalog
from codesign.errors import ProblemError, nearest
from codesign.study.fields import check_field, parse_value

#: Variants of a family at most.
LARGEST_FAMILY = 20000
#: Column with the names.
NAME = "variant"
#: Fields that a variant cannot have of its own.
COMMON = {"catalog": "all variants choose from the parts of the base problem; a folder of problem files may differ"}


@dataclass(frozen=True, slots=True, kw_only=True)
class Variant:
    """One variant: its name, where it is written, and what is its own.

    Attributes
    ----------
    name : str
    where : str
        File, and line of a table.
    changes : mapping
        Dotted field name to value, for a row of a table.
    file : Path or None
        Problem file, for a folder.
    error : str
        What is wrong with the row as such; empty where nothing is.
    """

    name: str
    where: str
    changes: Mapping[str, Any] = field(default_factory=dict)
    file: Path | None = None
    error: str = ""


def variants_of_folder(folder: Path, where: str) -> tuple[Variant, ...]:
    """Return a variant for each problem file of a folder, by name."""
    files = sorted(folder.glob("*.toml"))
    if not files:
        raise ProblemError(f"{where}: variants: the folder {folder.name!r} holds no .toml file; 'cnr new' writes one")
    _require_not_too_many(len(files), f"{where}: variants")
    return tuple(Variant(name=file.stem, where=f"{folder.name}/{file.name}", file=file) for file in files)


def variants_of_table(path: Path, catalog: Catalog, where: str) -> tuple[Variant, ...]:
    """Return a variant for each row of a CSV table.

    A column that cannot be used concerns all variants and raises; a row that cannot be used is a variant with an error.

    Parameters
    ----------
    path : path
        Columns ``variant`` and dotted field names; empty cells leave the base problem as it is, ``#`` lines are
        comments.
    catalog : Catalog
        Parts that columns may name.
    where : str
        Family file, opens messages.

    Raises
    ------
    ProblemError
        When the table as a whole cannot be used.
    """
    rows = _rows(path, where)
    label = path.name
    if not rows:
        raise ProblemError(f"{where}: {label}: file is empty, must have a header 'variant,<field>' and rows")
    line, header, fault = rows[0]
    _check_header(header, fault, catalog, f"{where}: {label}:{line}")
    if len(rows) == 1:
        raise ProblemError(f"{where}: {label}: no rows below the header; write one per variant")
    _require_not_too_many(len(rows) - 1, f"{where}: {label}")
    found = tuple(_variant(header, cells, f"{label}:{line}", line, fault) for line, cells, fault in rows[1:])
    _check_names(found, f"{where}: {label}")
    return found


def _rows(path: Path, where: str) -> list[tuple[int, list[str], str]]:
    """Line number, cells and what is wrong of all lines that are neither empty nor comments."""
    try:
        text = path.read_text(encoding="utf-8-sig")
    except OSError as error:
        raise ProblemError(
            f"{where}: variants: {path.name!r} cannot be read, {error.strerror}; paths are relative to this file"
        ) from None
    except UnicodeDecodeError as error:
        raise ProblemError(
            f"{where}: {path.name}: byte {error.start} is not UTF-8 text; save the file as UTF-8 comma-separated text"
        ) from None
    lines = [line for line in enumerate(text.splitlines(), 1) if line[1].strip() and not line[1].startswith("#")]
    return [(number, *_cells(line)) for number, line in lines]


def _cells(line: str) -> tuple[list[str], str]:
    try:
        return [cell.strip() for cell in next(csv.reader([line], strict=True, skipinitialspace=True))], ""
    except csv.Error as error:
        return [line.split(",")[0].strip(' "')], f"is no row of comma-separated cells, {error}; check its quotes"


def _check_header(header: list[str], fault: str, catalog: Catalog, where: str) -> None:
    if fault:
        raise ProblemError(f"{where}: header {fault}")
    for mark, word in ((";", "semicolons"), ("\t", "tabs")):
        if mark in header[0]:
            raise ProblemError(
                f"{where}: header {header[0]!r} is separated by {word}; "
                "save with commas between columns and points as decimal marks"
            )
    if NAME not in header:
        raise ProblemError(f"{where}: no column {NAME!r} with the names of the variants, {nearest(NAME, header)}")
    for name in header:
        if not name:
            raise ProblemError(f"{where}: column {header.index(name) + 1} has no name; write a field, or remove it")
        if header.count(name) > 1:
            raise ProblemError(f"{where}: column {name!r} appears twice; remove one")
        if name in COMMON:
            raise ProblemError(f"{where}: column {name!r}: {COMMON[name]}")
        if name != NAME:
            try:
                check_field(name, catalog)
            except ProblemError as error:
                raise ProblemError(f"{where}: column {error}") from None


def _variant(header: list[str], cells: list[str], where: str, line: int, fault: str) -> Variant:
    if not fault and len(cells) != len(header):
        advice = "decimal commas? write decimal points" if len(cells) > len(header) else "fill the row"
        fault = f"has {len(cells)} cells, must have {len(header)}; {advice}"
    if fault:
        return Variant(name=cells[0] or f"row {line}", where=where, error=fault)
    row = dict(zip(header, cells, strict=True))
    name = row.pop(NAME)
    if not name:
        return Variant(name=f"row {line}", where=where, error=f"{NAME} is empty; name each variant")
    return Variant(name=name, where=where, changes={key: parse_value(cell) for key, cell in row.items() if cell})


def _check_names(variants: tuple[Variant, ...], where: str) -> None:
    first: dict[str, Variant] = {}
    for variant in variants:
        other = first.setdefault(variant.name, variant)
        if other is not variant:
            lines = other.where.rpartition(":")[2], variant.where.rpartition(":")[2]
            raise ProblemError(
                f"{where}: variant {variant.name!r} is in lines {lines[0]} and {lines[1]}; names must differ"
            )


def _require_not_too_many(count: int, where: str) -> None:
    if count > LARGEST_FAMILY:
        raise ProblemError(f"{where}: {count} variants, must be {LARGEST_FAMILY} at most; cut the family")
