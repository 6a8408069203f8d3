"""What every part has in common, and the translation of a failed check into one line.

Parts are frozen records as data sheets state them, with the unit in each field name. A part knows the
file that names it, so that curve paths are relative to that file and messages can say where.
"""

from __future__ import annotations

from collections.abc import Mapping
from functools import lru_cache
from pathlib import Path
from typing import Annotated, Any, ClassVar, Self, get_args, get_origin

from pydantic import (
    BaseModel,
    ConfigDict,
    Field,
    PrivateAttr,
    ValidationError,
    ValidationInfo,
    field_validator,
)
from pydantic_core import ErrorDetails, PydanticCustomError

from codesign.errors import CatalogError, nearest
from codesign.spectra import Table, read_table

ABSOLUTE_ZERO_C = -273.15


class Record(BaseModel):
    """Base of parts and of the records nested in them: frozen, finite, no unknown keys."""

    model_config = ConfigDict(frozen=True, extra="forbid", allow_inf_nan=False, str_strip_whitespace=True)

    @field_validator("*", mode="before")
    @classmethod
    def _refuse_truth_as_number(cls, value: Any, info: ValidationInfo) -> Any:
        """``true`` typed for a number is a slip, not a 1."""
        if _holds_truth(value) and info.field_name not in _truth_fields(cls):
            raise PydanticCustomError("truth_as_number", "must not be true or false")
        return value


def _holds_truth(value: Any) -> bool:
    """Whether a value, or anything in a list or a table of plain values, is true or false."""
    if isinstance(value, list | tuple):
        return any(_holds_truth(inner) for inner in value if not isinstance(inner, Mapping))
    if isinstance(value, Mapping):
        return any(isinstance(inner, bool) for inner in value.values())
    return isinstance(value, bool)


@lru_cache(maxsize=64)
def _truth_fields(model: type[BaseModel]) -> frozenset[str]:
    """Fields that may hold true or false: those declared so, and records, which look for themselves."""
    return frozenset(
        name
        for name, field in model.model_fields.items()
        if field.annotation is bool
        or bool in get_args(field.annotation)
        or _nested_model(model, name)
        or "Any" in repr(field.annotation)
    )


class Part(Record):
    """A catalogue part; subclasses add what its data sheet states."""

    table_name: ClassVar[str] = "part"

    id: str = Field(
        pattern=r"^[a-z0-9]+(-[a-z0-9]+)*$",
        description="name in lowercase letters, digits and single hyphens, e.g. 'nir-850-a'",
    )
    description: str = Field(default="", description="what it is, in words")
    source: str = Field(min_length=1, description="provenance: data sheet, page and revision, or who measured it")
    price: float | None = Field(default=None, ge=0, description="price per piece, any one currency")
    invented: bool = Field(default=False, description="true for made-up parts")

    _base_dir: Path = PrivateAttr(default=Path())
    _where: str = PrivateAttr(default="")
    _tables: Mapping[str, Table] = PrivateAttr(default_factory=dict)  # curve files it carries with it

    @classmethod
    def from_table(
        cls,
        table: Mapping[str, Any],
        *,
        base_dir: str | Path = ".",
        where: str = "",
        tables: Mapping[str, Table] | None = None,
    ) -> Self:
        """Build the part from a TOML table or a CSV row.

        Parameters
        ----------
        table : mapping
            Field names and values as typed by a person.
        base_dir : path
            Folder to which curve paths are relative.
        where : str
            File named in messages.
        tables : mapping, optional
            Curve files by name, as read already; those not in it are read from their files.

        Raises
        ------
        CatalogError
            One line naming file, part, key, value and what is allowed.
        """
        name = f"{cls.table_name} {table['id']!r}" if "id" in table else f"{cls.table_name} without id"
        label = f"{where}: {name}" if where else name
        try:
            part = cls.model_validate(dict(table))
        except ValidationError as error:
            raise CatalogError(explain(error, label, cls)) from None
        part._base_dir, part._where, part._tables = Path(base_dir), where, dict(tables or {})
        curves = part.curve_files()
        for key, file in curves.items():
            if file not in part._tables and not (part._base_dir / file).is_file():
                raise part.error(f"{key} is {file!r}, no such file; paths are relative to {where or 'the folder'}")
        return part

    def replaced(self, **changes: Any) -> Self:
        """Return the part with some fields changed, validated anew; ``None`` removes a field."""
        table = {**self.model_dump(exclude_unset=True), **changes}
        kept = {key: value for key, value in table.items() if value is not None}
        return type(self).from_table(kept, base_dir=self._base_dir, where=self._where, tables=self._tables)

    def model_copy(self, *, update: Mapping[str, Any] | None = None, deep: bool = False) -> Self:
        """Copy; changes are validated, so that nothing computed from the old values survives."""
        return self.replaced(**update) if update else super().model_copy(deep=deep)

    @property
    def where(self) -> str:
        """File that names the part, empty when built in a program."""
        return self._where

    @property
    def label(self) -> str:
        """File and name of the part, as messages open."""
        name = f"{self.table_name} {self.id!r}"
        return f"{self._where}: {name}" if self._where else name

    def error(self, text: str) -> CatalogError:
        """Return an error about this part."""
        return CatalogError(f"{self.label}: {text}")

    def curve_files(self) -> dict[str, str]:
        """Return key → curve file of all files the part names."""
        file = getattr(self, "curve", None)
        return {"curve": file} if file else {}

    def check(self) -> None:
        """Read and check all curve files of the part now instead of on first use."""

    def sealed(self) -> Self:
        """Return the part with its curve files read and carried along: it works where the files are not."""
        columns = getattr(self, "columns", None)
        tables = {file: self.read_curve(file) for file in self.curve_files().values()}
        part = self.model_copy()
        part._tables = {file: table.keep(columns) if columns else table for file, table in tables.items()}
        return part

    def selectable(self) -> dict[str, Any]:
        """Return what a selection expression may ask of the part; subclasses add derived values."""
        return {name: getattr(self, name) for name in type(self).model_fields}

    def read_curve(self, file: str, column: str | None = None) -> Table:
        """Read a curve file of the part, keeping one named column or, without a name, all."""
        if file in self._tables:
            return self._tables[file] if column is None else self._tables[file].keep((column,))
        path = (self._base_dir / file).resolve()
        try:
            status = path.stat()
        except OSError:
            raise self.error(f"curve is {file!r}, no such file") from None
        columns = None if column is None else (column,)
        return _cached_table(path, status.st_mtime_ns, columns, f"{self.label}: {file}")

    def read_single_curve(self, file: str, column: str | None) -> Table:
        """Read the one column meant: the named one, or the only one of the file."""
        table = self.read_curve(file, column)
        if len(table.names) > 1:
            raise self.error(f"{file} has columns {', '.join(table.names)}; say which with column = '...'")
        return table


@lru_cache(maxsize=512)
def _cached_table(path: Path, changed_ns: int, columns: tuple[str, ...] | None, label: str) -> Table:
    """Read a curve once; the time of change is part of the key so that an edited file is read again."""
    return read_table(path, columns, label=label)


def check_share(table: Table, unit: str, *, top: float = 1.0) -> None:
    """Check a table of transmittances, reflectances or efficiencies against its stated unit.

    ``top`` is the largest fraction allowed: 1 for what cannot exceed what arrives, more for reflectance
    factors, which fluorescence or gloss may lift above a white diffuser.
    """
    values = table.spectrum.values
    table.require(values >= 0, "must be >= 0; subtract the dark reading or clip measured noise")
    calibrate = "measure against a calibrated reference"
    if unit == "fraction":
        advice = 'looks like percent, then state unit = "percent"' if values.max() > 1.5 else calibrate
        table.require(values <= top, f"must be <= {top:g} as a fraction; {advice}")
        return
    table.require(values <= 100 * top, f"must be <= {100 * top:g} percent; {calibrate}")
    if 0 < values.max() <= 1:
        raise CatalogError(
            f"{table.label}: largest value is {values.max():g} percent; "
            'looks like a fraction, then state unit = "fraction"'
        )


def percent_factor(unit: str) -> float:
    """Return the factor from the stated unit to a fraction."""
    return 0.01 if unit == "percent" else 1.0


def explain(error: ValidationError, label: str, model: type[BaseModel]) -> str:
    """Turn a pydantic error into one line: where, key, value, what is allowed, advice."""
    # An unknown key first: it explains the missing ones.
    details = sorted(error.errors(include_url=False), key=lambda detail: detail["type"] != "extra_forbidden")
    line = f"{label}: {_sentence(details[0], model)}"
    key = _resolve(details[0]["loc"], model)[0]
    others = {_resolve(detail["loc"], model)[0] for detail in details if detail is not details[0]}
    more = [other for other in others if not (key and other.startswith(key))]
    return f"{line} (and {len(more)} more)" if more else line


def _sentence(detail: ErrorDetails, model: type[BaseModel]) -> str:
    key, field_model, field_name = _resolve(detail["loc"], model)
    context = detail.get("ctx", {})
    if detail["type"] == "value_error":
        text = str(context["error"])
        return f"{key}: {text}" if key else text
    if detail["type"] == "extra_forbidden":
        return f"unknown key {key!r}, {nearest(field_name, field_model.model_fields)}"
    field = field_model.model_fields.get(field_name)
    advice = f"; {field.description}" if field is not None and field.description else ""
    if detail["type"] == "missing":
        return f"{key} is missing{advice}"
    either = field is not None and _takes_text_or_list(field.annotation) and detail["type"] == "string_type"
    allowed = "must be text or a list of text" if either else _allowed(detail["type"], context, detail["msg"])
    return f"{key} is {_shown(detail['input'])}, {allowed}{advice}"


def _resolve(loc: tuple[int | str, ...], model: type[BaseModel]) -> tuple[str, type[BaseModel], str]:
    """Return the dotted key, and the model and field that hold it."""
    key, holder, name = "", model, ""
    for step in loc:
        if isinstance(step, int):
            key += f"[{step}]"
            continue
        field = holder.model_fields.get(name)
        if field is not None and _takes_text_or_list(field.annotation):
            continue  # names the alternative that was tried, not a key
        if name:
            holder = _nested_model(holder, name) or holder
        key, name = (f"{key}.{step}" if key else step), step
    return key, holder, name


def _takes_text_or_list(annotation: Any) -> bool:
    """Whether a field takes either text or a list of text."""
    kinds = [get_origin(kind) or kind for kind in get_args(annotation)]
    return str in kinds and any(kind in (tuple, Annotated) for kind in kinds)


def _nested_model(model: type[BaseModel], name: str) -> type[BaseModel] | None:
    """Return the record type inside a field such as ``tuple[Pulse, ...] | None``."""
    field = model.model_fields.get(name)
    pending: list[Any] = [field.annotation] if field is not None else []
    while pending:
        kind = pending.pop()
        if isinstance(kind, type) and issubclass(kind, BaseModel):
            return kind
        pending.extend(getattr(kind, "__args__", ()))
    return None


def _shown(value: Any) -> str:
    text = repr(value).lower() if isinstance(value, bool) else repr(value)  # as TOML writes it
    text = value.isoformat() if hasattr(value, "isoformat") else text
    return text if len(text) <= 60 else text[:57] + "..."


def _allowed(kind: str, context: dict[str, Any], message: str) -> str:
    """Say what is allowed, in the same words for all fields."""
    bounds = {"greater_than": (">", "gt"), "greater_than_equal": (">=", "ge")}
    bounds |= {"less_than": ("<", "lt"), "less_than_equal": ("<=", "le")}
    if kind in bounds:
        sign, name = bounds[kind]
        return f"must be {sign} {context[name]:g}"
    if kind == "literal_error":
        return f"must be {context['expected']}"
    words = {
        "finite_number": "must be finite",
        "string_too_short": "must not be empty",
        "too_short": "must not be empty",
        "string_pattern_mismatch": "is not allowed",
    }
    if kind in words:
        return words[kind]
    for start, noun in (("float", "a number"), ("int", "a whole number"), ("bool", "true or false")):
        if kind.startswith(start):
            return f"must be {noun}"
    if kind.startswith("string"):
        return "must be text"
    if kind.startswith(("tuple", "list")):
        return "must be a list"
    if kind.startswith(("model", "dict")):
        return "must be a table"
    return message[0].lower() + message[1:]
