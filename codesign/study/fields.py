"""Fields of a problem and of its parts by dotted names, as a what-if sets or sweeps them.

``limits.rig_heat_w``, ``scene.ambient[0].illuminance_lx``, ``lighting.led.nir-850-a.emitters`` name what the problem
file holds; ``led.nir-850-a.radiant_flux_mw``, ``camera.mono-5mp.gains[1].read_noise_e`` what a part's data sheet
states. A varied problem is resolved anew, so that every rule of the file holds for it too.
"""

from __future__ import annotations

import itertools
import re
import tomllib
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from typing import Annotated, Any, get_args, get_origin

import numpy as np
from pydantic import BaseModel, ValidationError

from codesign.catalog import Catalog
from codesign.catalog.common import Part, explain
from codesign.catalog.loader import PART_TYPES
from codesign.errors import ProblemError, nearest
from codesign.problem import Problem, ProblemSpec, build_problem

#: Values of one axis at most.
LARGEST_AXIS = 1000
#: What a unit at the end of a field name reads like.
UNITS: Mapping[str, str] = {
    "k_per_w": "K/W", "w_per_m2": "W/m²", "per_m2": "1/m²", "mm_per_s": "mm/s", "e_per_s": "e⁻/s", "per_k": "1/K",
    "na_per_cm2": "nA/cm²", "dn_per_e": "DN/e⁻", "nm_per_k": "nm/K",
    "mm2": "mm²", "nm": "nm", "um": "µm", "mm": "mm", "us": "µs", "ms": "ms", "hz": "Hz", "ma": "mA", "mw": "mW",
    "lm": "lm", "lx": "lx", "deg": "deg", "percent": "%", "px": "pixel", "db": "dB", "dn": "DN", "v": "V", "w": "W",
    "c": "°C", "k": "K", "e": "e⁻",
}  # fmt: skip
#: Fields that say the same in another way: setting one takes the others away.
ALTERNATIVES = (
    ("radiant_flux_mw", "radiant_flux_w", "luminous_flux_lm"),
    ("dark_current_e_per_s", "dark_current_na_per_cm2"),
    ("distance_mm", "delivery_per_m2"),
    ("delivery_per_m2", "measured_irradiance_w_per_m2"),
    ("illuminance_lx", "irradiance_w_per_m2"),
    ("illuminant", "curve"),
)
#: Sections on which neither the choice of parts nor their light depends.
RIG_SECTIONS = ("motion", "timing", "temperature", "limits", "averaging", "solver", "required_cnr")
#: What in a part changes a value to "not given".
NOT_GIVEN = "none"


@dataclass(frozen=True, slots=True)
class Axis:
    """A field and the values it takes in turn; ``log`` spaces a figure by ratios."""

    key: str
    values: tuple[Any, ...]
    log: bool = False

    @property
    def label(self) -> str:
        """Name and unit for people."""
        return field_label(self.key)

    @property
    def numeric(self) -> bool:
        """Whether all values are numbers."""
        return all(isinstance(value, int | float) and not isinstance(value, bool) for value in self.values)


def field_label(key: str) -> str:
    """Return a field's name in words with its unit in brackets.

    Examples
    --------
    >>> field_label("limits.rig_heat_w")
    'rig heat [W]'
    >>> field_label("camera.mono-5mp.read_noise_e")
    'mono-5mp read noise [e⁻]'
    """
    *path, name = re.sub(r"\[\d+\]", "", key).split(".")
    place = 2 if path[:2] == ["lighting", "led"] else 1 if path and path[0] in PART_TYPES else len(path)
    owner = "".join(f"{part} " for part in path[place : place + 1])
    for suffix, unit in UNITS.items():
        if name.endswith(f"_{suffix}"):
            return f"{owner}{name.removesuffix(f'_{suffix}').replace('_', ' ')} [{unit}]"
    return owner + name.replace("_", " ")


def parse_setting(text: str) -> tuple[str, Any]:
    """Read ``field=value``; the value as in a problem file, text also without quotes, ``none`` for not given."""
    key, equals, value = text.partition("=")
    if not equals or not key.strip() or not value.strip():
        raise ProblemError(f"{text!r} is not a field and its value; write e.g. limits.rig_heat_w=10")
    return key.strip(), _value(value.strip())


def parse_axis(text: str) -> Axis:
    """Read ``field=first:last:count``, with ``:log`` at the end for equal ratios, or ``field=a,b,c``."""
    key, equals, values = text.partition("=")
    key, values = key.strip(), values.strip()
    if not equals or not key or not values:
        raise ProblemError(f"{text!r} is not a field and its values; write e.g. timing.frame_rate_hz=10:100:10")
    if ":" in values and not values.startswith(("[", '"', "'")):
        return _range(key, values)
    listed = tuple(_value(part.strip()) for part in _split(values))
    if len(listed) > LARGEST_AXIS:
        raise ProblemError(f"{key}: {len(listed)} values, must be {LARGEST_AXIS} at most")
    return Axis(key, listed)


def _range(key: str, text: str) -> Axis:
    first, *rest = text.split(":")
    log = len(rest) == 3 and rest[2].strip() == "log"
    try:
        low, high, count = float(first), float(rest[0]), int(rest[1])
        whole = all(part.strip().lstrip("+-").isdigit() for part in (first, rest[0]))
    except (ValueError, IndexError):
        count = 0
    if count == 0 or (len(rest) > 2 and not log) or not (np.isfinite(low) and np.isfinite(high)):
        raise ProblemError(f"{key}: {text!r} is not a range; write first:last:count, e.g. 10:100:10, or 1:1000:7:log")
    if not 2 <= count <= LARGEST_AXIS:
        raise ProblemError(f"{key}: number of values is {count}, must be 2 to {LARGEST_AXIS}")
    if log and min(low, high) <= 0:
        raise ProblemError(f"{key}: {text!r}: equal ratios need ends > 0; leave out :log")
    values = (np.geomspace if log else np.linspace)(low, high, count)
    values = [float(f"{value:.12g}") for value in values]
    if whole and all(value.is_integer() for value in values):
        values = [int(value) for value in values]
    return Axis(key, tuple(values), log)


def _split(text: str) -> list[str]:
    """Split at commas that are outside brackets and quotes."""
    parts = re.findall(r"""(?:\[[^\]]*\]|"[^"]*"|'[^']*'|[^,])+""", text)
    return [part for part in parts if part.strip()]


def _value(text: str) -> Any:
    if text == NOT_GIVEN:
        return None
    try:
        return tomllib.loads(f"value = {text}")["value"]
    except tomllib.TOMLDecodeError:
        return text


def varied(problem: Problem, changes: Mapping[str, Any], *, catalog: Catalog | None = None) -> Problem:
    """Return a problem with some fields changed, resolved anew.

    Parameters
    ----------
    problem : Problem
        As loaded or built from a table.
    changes : mapping
        Dotted field name to value; None for "not given".
    catalog : Catalog, optional
        Parts to choose from instead.

    Raises
    ------
    ProblemError, CatalogError
        One line with the field, what is allowed and the nearest name.
    """
    if catalog is None and all(key.split(".")[0] in RIG_SECTIONS for key in changes):
        return _with_spec(problem, changes)
    catalog = problem.catalog if catalog is None else catalog
    table = problem.spec.model_dump(exclude_unset=True, exclude=set(PART_TYPES))
    for key, value in changes.items():
        steps = list(_steps(key))
        if steps[0] in PART_TYPES:
            catalog = _with_changed_part(catalog, key, steps, value)
        else:
            _check_path(ProblemSpec, key, steps, whole=value is None)
            _assign(table, key, steps, _wrapped(ProblemSpec, steps, value))
    return build_problem(table, folder=problem.folder, where=problem.where, catalog=catalog)


def check_field(key: str, catalog: Catalog) -> None:
    """Raise ProblemError unless a dotted name is a field of a problem or of a part; names the nearest."""
    steps = list(_steps(key))
    if steps[0] not in PART_TYPES:
        _check_path(ProblemSpec, key, steps)
        return
    part = _part_of(catalog, key, steps)
    _check_path(type(part), key, steps[2:], f"{steps[0]}.{steps[1]}.")


def parse_value(text: str) -> Any:
    """Read a value as in a problem file; text also without quotes, ``none`` (None) for not given."""
    return _value(text)


def _with_spec(problem: Problem, changes: Mapping[str, Any]) -> Problem:
    """The same parts, grid and light under another specification."""
    table = problem.spec.model_dump(exclude_unset=True)
    for key, value in changes.items():
        steps = list(_steps(key))
        _check_path(ProblemSpec, key, steps, whole=value is None)
        _assign(table, key, steps, _wrapped(ProblemSpec, steps, value))
    try:
        return replace(problem, spec=ProblemSpec.model_validate(table))
    except ValidationError as error:
        raise ProblemError(explain(error, problem.where, ProblemSpec)) from None


def _steps(key: str) -> Iterator[str | int]:
    """``scene.ambient[0].illuminance_lx`` as its steps."""
    for piece in key.split("."):
        found = re.fullmatch(r"([^\[\]]+)((?:\[\d+\])*)", piece)
        if found is None:
            raise ProblemError(
                f"{key!r} is not a field; write e.g. limits.rig_heat_w or scene.ambient[0].illuminance_lx"
            )
        yield found[1]
        yield from (int(number) for number in re.findall(r"\d+", found[2]))


def _part_of(catalog: Catalog, key: str, steps: list[str | int]) -> Part:
    """The part a dotted name leads into."""
    kind, *rest = steps
    parts = catalog.parts(str(kind))
    name = str(rest[0]) if rest else ""
    if name not in parts:
        raise ProblemError(f"{key}: no {kind} {name!r}, {nearest(name, parts)}")
    if len(rest) == 1:
        raise ProblemError(f"{key}: name a field of the part too, e.g. {key}.price")
    return parts[name]


def _with_changed_part(catalog: Catalog, key: str, steps: list[str | int], value: Any) -> Catalog:
    part = _part_of(catalog, key, steps)
    kind, name, *path = steps
    parts = catalog.parts(str(kind))
    _check_path(type(part), key, path, f"{kind}.{name}.")
    table = part.model_dump(exclude_unset=True)
    _assign(table, key, path, _wrapped(type(part), path, value))
    changed = part.replaced(**{each: table.get(each) for each in {*part.model_fields_set, path[0]}})
    if changed.id != name:
        raise ProblemError(f"{key}: the id of a part is its name; add a part instead")
    return replace(catalog, **{f"{kind}s": {**parts, name: changed}})


def _check_path(
    model: type[BaseModel], key: str, steps: list[str | int], prefix: str = "", *, whole: bool = False
) -> None:
    """Raise ProblemError unless the steps lead to a field (``whole``: or a section); names the nearest."""
    holder, free = model, False
    for place, step in enumerate(steps):
        if isinstance(step, int):
            continue
        if free or holder is None:
            free = False
            continue
        before = prefix + ".".join(str(each) for each in steps[:place])
        before = before + "." if before and not before.endswith(".") else before
        if step not in holder.model_fields:
            advice = nearest(str(step), holder.model_fields) if place else _nearest_anywhere(holder, str(step))
            raise ProblemError(
                f"{key}: {before or 'the problem'} has no field {step!r}; {advice}".replace(". has", " has")
            )
        annotation = holder.model_fields[step].annotation
        holder, free = _record_in(annotation), get_origin(annotation) is dict
    if holder is not None and holder is not model and not whole and not isinstance(steps[-1], int):
        raise ProblemError(f"{key}: is a whole section; name a field in it, {nearest('', holder.model_fields)}")


def _nearest_anywhere(model: type[BaseModel], name: str) -> str:
    """Advice for a first step that is no section: maybe the section was left out."""
    for section, field in model.model_fields.items():
        inner = _record_in(field.annotation)
        if inner is not None and name in inner.model_fields:
            return f"did you mean '{section}.{name}'?"
    return nearest(name, [*model.model_fields, *PART_TYPES])


def _record_in(annotation: Any) -> type[BaseModel] | None:
    """The record type inside an annotation such as ``tuple[Ambient, ...]`` or ``Motion | None``."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    inner = (_record_in(kind) for kind in get_args(annotation))
    return next((kind for kind in inner if kind is not None), None)


def _wrapped(model: type[BaseModel], steps: list[str | int], value: Any) -> Any:
    """One number for a list of numbers stands for the list of that one."""
    holder: type[BaseModel] | None = model
    for step in steps[:-1]:
        if isinstance(step, str) and holder is not None and step in holder.model_fields:
            holder = _record_in(holder.model_fields[step].annotation)
    last = steps[-1]
    if holder is None or not isinstance(last, str) or last not in holder.model_fields:
        return value
    annotation = holder.model_fields[last].annotation
    kinds = get_args(annotation) if get_origin(annotation) not in (tuple, Annotated) else (annotation,)
    lists = any(get_origin(kind) is tuple for kind in kinds)
    return [value] if lists and isinstance(value, int | float) and not isinstance(value, bool) else value


def _assign(table: dict[str, Any], key: str, steps: list[str | int], value: Any) -> None:
    """Put a value at the end of a path, through tables and lists."""
    here: Any = table
    for step, following in itertools.pairwise(steps):
        if isinstance(step, str):
            inner = here.get(step)
            here[step] = list(inner) if isinstance(inner, list | tuple) else dict(inner or {})
        else:
            _require_entry(here, key, step)
            here[step] = dict(here[step]) if isinstance(here[step], Mapping) else list(here[step])
        here = here[step]
        if isinstance(following, int) != isinstance(here, list):
            word = "is a list; say which entry, e.g. [0]" if isinstance(here, list) else "is not a list"
            raise ProblemError(f"{key}: {step} {word}")
    last = steps[-1]
    if isinstance(last, int):
        _require_entry(here, key, last)
        here[last] = value
    elif value is None:
        here.pop(last, None)
    else:
        for group in ALTERNATIVES:
            for other in group if last in group else ():
                here.pop(other, None)
        here[last] = value


def _require_entry(here: list[Any], key: str, place: int) -> None:
    if place >= len(here):
        raise ProblemError(f"{key}: entry [{place}] does not exist, there are {len(here)}, counted from [0]")
