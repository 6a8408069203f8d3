"""Catalogue parts as narrow tables, as one part in full, and as plain dictionaries."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from typing import Any

from codesign.catalog import Camera, Catalog, Filter, Led, Part, Surface, select
from codesign.errors import CatalogError, nearest
from codesign.report.layout import NARROWEST, bullet, labelled, number, table, wrap
from codesign.report.machine import as_json
from codesign.report.output import plain

#: Kinds as people type them → kinds as the catalogue names them.
KINDS = {"leds": "led", "filters": "filter", "cameras": "camera", "surfaces": "surface"}
#: Curves are looked up in files, not listed.
_BLANK = "-"
#: Columns of words, flush left.
_WORDS = frozenset({"kind", "what", "tags", "channels"})
#: Width of the key column of one part.
KEY = 34


def listing(
    catalog: Catalog, kind: str | None, expression: str, name: str | None, *, json: bool, width: int = 80
) -> str:
    """Return what ``cnr parts`` prints: the catalogue's counts, a table of chosen parts, or one part in full.

    Parameters
    ----------
    catalog : Catalog
    kind : str or None
        A key of `KINDS`.
    expression : str
        Which parts of the kind.
    name : str or None
        Id of the one part to show, of the kind or of any.
    json : bool
        JSON instead of text.
    width : int
        Page width, at least 60. [characters]
    """
    width = max(width, NARROWEST)
    if name is not None:
        part = _find(catalog, kind, name)
        return as_json(part_dict(part)) if json else part_text(part, width)
    if kind is None:
        return as_json(catalog_dict(catalog)) if json else catalog_text(catalog, width)
    chosen = select(catalog.parts(KINDS[kind]), expression)
    return as_json([part_dict(part) for part in chosen]) if json else parts_text(chosen, width)


def _find(catalog: Catalog, kind: str | None, name: str) -> Part:
    if kind is not None:
        return catalog.part(KINDS[kind], name)
    everything = {part.id: part for each in KINDS.values() for part in catalog.parts(each).values()}
    if name not in everything:
        raise CatalogError(f"catalogue {catalog.name!r}: no part {name!r}, {nearest(name, everything)}")
    return everything[name]


def catalog_dict(catalog: Catalog) -> dict[str, Any]:
    """Return name, source and the ids of each kind."""
    return {"name": catalog.name, "source": catalog.source} | {
        name: list(catalog.parts(kind)) for name, kind in KINDS.items()
    }


def catalog_text(catalog: Catalog, width: int = 80) -> str:
    """Return what a catalogue holds."""
    lines = labelled("catalogue", plain(catalog.name), width) + labelled("source", plain(catalog.source), width)
    for name, kind in KINDS.items():
        lines += labelled(name, str(len(catalog.parts(kind))), width)
    lines += labelled("next", "'cnr parts leds' lists the LEDs, 'cnr parts --id ID' shows all of one part", width)
    return "\n".join(lines) + "\n"


def parts_text(parts: Iterable[Part], width: int = 80) -> str:
    """Return parts of one kind as a table, one line each."""
    parts = tuple(parts)
    columns = COLUMNS[parts[0].table_name]
    rows = [[_cell(value(part)) for value in columns.values()] for part in parts]
    left = [k for k, name in enumerate(columns) if k == 0 or name in _WORDS]
    lines = table(tuple(columns), rows, max(width, NARROWEST), left=left)
    invented = sum(part.invented for part in parts)
    note = f" {len(parts)} parts" + (f", {invented} of them invented" if invented else "")
    return "\n".join([*lines, note]) + "\n"


def part_text(part: Part, width: int = 80) -> str:
    """Return all a part states, one key per line, as it would be written in a file."""
    lines = [f" {part.table_name} {part.id}"]
    for key, value in part_dict(part).items():
        lines += _key_lines(key, value, width)
    return "\n".join(lines) + "\n"


def _key_lines(key: str, value: Any, width: int) -> list[str]:
    """Return one key and its value; each record of a list takes an entry of its own."""
    if isinstance(value, list) and value and isinstance(value[0], dict):
        entries = [
            ", ".join(f"{plain(k)} = {_stated(inner)}" for k, inner in _flat(record).items()) for record in value
        ]
        return [f"   {key}", *("  " + line for entry in entries for line in bullet(entry, width - 2))]
    head = f"   {key:<{KEY}} "
    first, *rest = wrap(_stated(value), width - len(head)) or [""]
    return [head + first, *(" " * len(head) + line for line in rest)]


def _stated(value: Any) -> str:
    """A value as it would be written in a file."""
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, float):
        return f"{value:.10g}"
    if isinstance(value, list):
        return "[" + ", ".join(map(_stated, value)) + "]"
    return plain(str(value))


def _flat(record: Mapping[str, Any]) -> dict[str, Any]:
    """Return a record without nesting, keys joined by dots."""
    flat: dict[str, Any] = {}
    for key, value in record.items():
        flat |= {f"{key}.{k}": v for k, v in _flat(value).items()} if isinstance(value, dict) else {key: value}
    return flat


def part_dict(part: Part) -> dict[str, Any]:
    """Return what a part states as plain values; keys left out of its file are left out here."""
    return part.model_dump(mode="json", exclude_none=True, exclude_unset=True)


def _cell(value: Any) -> str:
    if value is None or value == "":
        return _BLANK
    return number(value) if isinstance(value, int | float) else plain(str(value))


def _filter_what(part: Filter) -> str:
    if part.kind == "bandpass":
        return f"{part.center_nm:g} nm, {part.fwhm_nm:g} nm wide"
    if part.kind in ("longpass", "shortpass"):
        return f"cuts at {part.cut_nm:g} nm"
    if part.kind == "neutral":
        return f"optical density {part.optical_density:g}"
    if part.kind == "stack":
        return " + ".join(part.parts or ())
    return part.description


def _surface_range(part: Surface) -> str:
    lo, hi = part.range()
    return f"{lo:.0f}-{hi:.0f}"


def _peak_share(part: Filter) -> float | None:
    return part.peak_transmittance


COLUMNS: Mapping[str, Mapping[str, Callable[[Any], Any]]] = {
    Led.table_name: {
        "LED": lambda p: p.id,
        "peak [nm]": Led.peak,
        "width [nm]": lambda p: p.fwhm_nm,
        "flux [mW]": lambda p: 1e3 * p.flux_w(),
        "at [mA]": lambda p: p.rated_current_ma,
        "largest [mA]": lambda p: p.largest_current_ma,
        "price": lambda p: p.price,
    },
    Filter.table_name: {
        "filter": lambda p: p.id,
        "peak": _peak_share,
        "OD": lambda p: p.blocking_od,
        "price": lambda p: p.price,
        "kind": lambda p: p.kind,
        "what": _filter_what,
    },
    Camera.table_name: {
        "camera": lambda p: p.id,
        "pixel [µm]": lambda p: p.pixel_pitch_um,
        "well [e-]": lambda p: p.full_well_e,
        "read [e-]": lambda p: p.read_noise_e,
        "bits": lambda p: p.bits,
        "price": lambda p: p.price,
        "channels": lambda p: "/".join(p.channel_names),
    },
    Surface.table_name: {
        "surface": lambda p: p.id,
        "samples": lambda p: len(p.samples.values) if p.samples.values.ndim > 1 else 1,
        "known at [nm]": _surface_range,
        "gloss": lambda p: p.specular_reflectance,
        "tags": lambda p: " ".join(p.tags),
    },
}
