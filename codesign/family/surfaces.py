"""Many surfaces from one wide table of spectra, as a spectrometer exports it."""

from __future__ import annotations

from pathlib import Path

from codesign.catalog import Surface
from codesign.errors import CatalogError, ProblemError
from codesign.family.schema import SpectraFile
from codesign.spectra import Table, read_table


def tabled_surfaces(spectra: SpectraFile, folder: Path, where: str) -> dict[str, Surface]:
    """Return the surfaces of a wide table by id.

    The table is read once; each surface carries its own columns. Their values are checked when the surface is first
    used: a bad curve is then a matter of the variants that use it.

    Parameters
    ----------
    spectra : SpectraFile
    folder : path
        Folder to which its file is relative.
    where : str
        File named in messages.

    Returns
    -------
    dict
        In the order of the columns.

    Raises
    ------
    ProblemError
        When the table cannot be read at all, or a column does not name a surface.
    """
    where = f"{where}: spectra"
    try:
        table = read_table(folder / spectra.file, label=spectra.file)
    except CatalogError as error:
        raise ProblemError(f"{where}: {error}") from None
    columns: dict[str, list[str]] = {}
    for name in table.names:
        columns.setdefault(name.partition(".")[0], []).append(name)
    for name, own in columns.items():
        if name in own and len(own) > 1:
            other = next(each for each in own if each != name)
            raise ProblemError(
                f"{where}: {spectra.file}: columns {name!r} and {other!r} are both there; "
                f"name the samples of a surface alike, {name}.1, {name}.2 .."
            )
    return {name: _surface(name, own, table, spectra, folder, where) for name, own in columns.items()}


def _surface(name: str, columns: list[str], table: Table, spectra: SpectraFile, folder: Path, where: str) -> Surface:
    fields = {
        "id": name,
        "curve": spectra.file,
        "unit": spectra.unit,
        "columns": columns,
        "source": spectra.source or f"measured spectra, {spectra.file}",
        "invented": spectra.invented,
        "hold_edges_nm": spectra.hold_edges_nm,
        "specular_reflectance": spectra.specular_reflectance,
    }
    own = {spectra.file: table.keep(columns)}
    try:
        return Surface.from_table(fields, base_dir=folder, where=where, tables=own)
    except CatalogError as error:
        raise ProblemError(str(error)) from None
