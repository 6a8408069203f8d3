"""Read a family file: its base problem and variants, each turned into a problem when it is asked for."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from codesign.catalog import Catalog, Surface, load_catalog
from codesign.catalog.common import explain
from codesign.errors import CatalogError, CodesignError, ProblemError, nearest
from codesign.family.files import demo_families, family_path
from codesign.family.schema import FamilySpec
from codesign.family.surfaces import tabled_surfaces
from codesign.family.variants import Variant, variants_of_folder, variants_of_table
from codesign.problem import Problem, build_problem, problem_path, read_toml
from codesign.study.fields import varied


@dataclass(frozen=True, slots=True, kw_only=True)
class Family:
    """A base problem and its variants.

    Attributes
    ----------
    spec : FamilySpec
        The file's content.
    where : str
        File named in messages.
    folder : Path
        Folder to which its paths are relative.
    base : Problem or None
        The base problem; None for a folder of problem files.
    variants : tuple of Variant
        In the order of the table, or by file name.
    surfaces : mapping
        Surfaces of the spectra files, by id.
    """

    spec: FamilySpec
    where: str
    folder: Path
    base: Problem | None = field(repr=False)
    variants: tuple[Variant, ...] = field(repr=False)
    surfaces: dict[str, Surface] = field(repr=False)
    _catalogs: dict[Path | str, Catalog] = field(default_factory=dict, repr=False)

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the variants."""
        return tuple(variant.name for variant in self.variants)

    def variant(self, name: str) -> Variant:
        """Return a variant by name."""
        found = next((variant for variant in self.variants if variant.name == name), None)
        if found is None:
            raise ProblemError(f"{self.where}: no variant {name!r}; {nearest(name, self.names)}")
        return found

    def only(self, names: Iterable[str]) -> Family:
        """Return the family with these variants alone. Raises ProblemError for a name that is none of them."""
        wanted = {self.variant(name).name for name in names}
        return replace(self, variants=tuple(variant for variant in self.variants if variant.name in wanted))

    def problem(self, variant: Variant | str) -> Problem:
        """Build the problem of one variant.

        Raises
        ------
        CodesignError
            One line that names file, row, field and value.
        """
        variant = self.variant(variant) if isinstance(variant, str) else variant
        if variant.error:
            raise ProblemError(f"{variant.where}: variant {variant.name!r} {variant.error}")
        try:
            if variant.file is not None:
                return _problem_of_file(variant.file, self)
            assert self.base is not None
            return varied(replace(self.base, where=f"variant {variant.name!r}"), variant.changes)
        except CodesignError as error:
            raise type(error)(_at_row(variant, str(error))) from None

    def problems(self) -> Iterator[tuple[Variant, Problem | CodesignError]]:
        """Build the problems of all variants one after another; a variant that cannot be built comes with its error."""
        for variant in self.variants:
            try:
                yield variant, self.problem(variant)
            except CodesignError as error:
                yield variant, error


def _at_row(variant: Variant, text: str) -> str:
    """A message with the row and the name of its variant; those of a folder name their file."""
    if variant.file is not None:
        return text
    name = f"variant {variant.name!r}"
    return f"{variant.where}: {text}" if text.startswith(name) else f"{variant.where}: {name}: {text}"


def load_family(source: str | Path) -> Family:
    """Load a family file, or an embedded demo family by its bare name.

    Parameters
    ----------
    source : path
        TOML file; its paths are relative to its folder.

    Returns
    -------
    Family

    Raises
    ------
    ProblemError, CatalogError
        One line when the family as a whole cannot be used; a variant that cannot be used raises when it is built.

    Examples
    --------
    >>> family = load_family("labels-200")
    >>> len(family.names)
    200
    """
    path = family_path(source)
    table = read_toml(path, _advice(path))
    where, folder = path.name, path.parent
    try:
        spec = FamilySpec.model_validate(table)
    except ValidationError as error:
        raise ProblemError(explain(error, where, FamilySpec)) from None
    surfaces = _surfaces(spec, folder, where)
    place = folder / spec.variants
    head = {"spec": spec, "where": where, "folder": folder, "surfaces": surfaces}
    if place.is_dir():
        if spec.base is not None or spec.problem is not None:
            raise ProblemError(f"{where}: variants is a folder of whole problem files, which needs no base; remove it")
        return Family(base=None, variants=variants_of_folder(place, where), **head)
    family = Family(base=None, variants=(), **head)
    base = _base(family)
    return replace(family, base=base, variants=variants_of_table(place, base.catalog, where))


def _advice(path: Path) -> str:
    if path.suffix:
        return "check the path; 'cnr demos' lists families to copy from"
    return f"among the demo families, {nearest(path.name, [demo.name for demo in demo_families()])}"


def _surfaces(spec: FamilySpec, folder: Path, where: str) -> dict[str, Surface]:
    found: dict[str, Surface] = {}
    for spectra in spec.spectra:
        for name, surface in tabled_surfaces(spectra, folder, where).items():
            if name in found:
                raise ProblemError(f"{where}: spectra: surface {name!r} is in {found[name].curve} and {spectra.file}")
            found[name] = surface
    return found


def _base(family: Family) -> Problem:
    """The base problem, which must make sense by itself."""
    spec = family.spec
    if spec.problem is not None:
        return _problem(spec.problem, family.folder, f"{family.where}: problem", family)
    if spec.base is None:
        raise ProblemError(
            f"{family.where}: base is missing; name a problem file or a demo, or write it under [problem]"
        )
    path = family.folder / spec.base
    if not path.is_file():
        demo = problem_path(spec.base)
        if Path(spec.base).suffix or not demo.is_file():
            raise ProblemError(
                f"{family.where}: base is {spec.base!r}, no such file in the folder of this one, nor a demo problem; "
                "'cnr demos' lists these"
            )
        path = demo
    return _problem_of_file(path, family)


def _problem_of_file(path: Path, family: Family) -> Problem:
    return _problem(read_toml(path), path.parent, path.name, family)


def _problem(table: dict[str, Any], folder: Path, where: str, family: Family) -> Problem:
    """Build a problem with the catalogue, loaded once for all, and the spectra of the family."""
    name = table.get("catalog", "demo")
    if not isinstance(name, str):
        return build_problem(table, folder=folder, where=where)  # says what is wrong
    place = name if name == "demo" else (folder / name).resolve()
    if place not in family._catalogs:
        try:
            catalog = load_catalog(place)
        except CatalogError as error:
            raise CatalogError(f"{where}: catalog is {name!r}: {error}") from None
        family._catalogs[place] = catalog.with_parts({"surface": family.surfaces})
    return build_problem(table, folder=folder, where=where, catalog=family._catalogs[place])
