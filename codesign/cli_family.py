"""The command ``cnr family``."""

from __future__ import annotations

from enum import StrEnum
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from codesign.cli_terminal import page_width, put

if TYPE_CHECKING:
    from codesign.family import Family
    from codesign.family.batch import OwnRigs
    from codesign.family.engine import Engine

#: Exit codes: a variant without a recipe, and an interrupt.
SOME_FAILED, INTERRUPTED = 1, 130


class Goal(StrEnum):
    """What a shared rig is for, as typed."""

    WORST = "worst"
    COUNT = "count"
    COST = "cost"


def family(
    file: Annotated[str, typer.Argument(metavar="FILE", help="Family file, or the name of a demo family.")],
    json: Annotated[bool, typer.Option("--json", help="Machine-readable result on standard output.")] = False,
    csv: Annotated[Path | None, typer.Option(metavar="FILE", help="Write the recipes here, a row per variant.")] = None,
    figure: Annotated[Path | None, typer.Option(metavar="FILE", help="Draw it: .svg, .png or .pdf.")] = None,
    only: Annotated[
        list[str] | None, typer.Option(metavar="VARIANT", help="Only this variant; may be repeated.")
    ] = None,
    gap: Annotated[
        float | None, typer.Option(metavar="G", help="Prove the best to this share of its CNR, 1e-8 to 0.5.")
    ] = None,
    processes: Annotated[
        int | None, typer.Option(metavar="N", help="Local processes; as many as cores by default.")
    ] = None,
    scheduler: Annotated[
        str | None, typer.Option(metavar="ADDRESS", help="Use the workers of this Dask scheduler instead.")
    ] = None,
    store: Annotated[
        Path | None, typer.Option(metavar="FILE", help="Where results are kept; by default named after the family.")
    ] = None,
    fresh: Annotated[bool, typer.Option("--fresh", help="Forget the results kept there.")] = False,
) -> None:
    """Solve all variants of a product: a recipe for each, kept as it is found.

    What is done already is taken from the store, so an interrupted run goes on where it was. The exit code is 1 when a
    variant has no recipe.

    \b
    Example: cnr family labels-200 --csv recipes.csv
    """
    from codesign.family import load_family
    from codesign.report.family_files import check_targets, save, show

    check_targets(csv, figure)
    loaded = load_family(file)
    loaded = loaded if only is None else loaded.only(only)
    place = store if store is not None else Path(f"{Path(loaded.where).stem}.results.sqlite")
    engine = _engine(processes, scheduler, len(loaded.variants))
    found = _own_rigs(loaded, place, engine, gap=gap, fresh=fresh)
    save(found, csv, figure)
    put(show(found, json=json, width=page_width()))
    if found.failed:
        raise typer.Exit(SOME_FAILED)


def _engine(processes: int | None, scheduler: str | None, variants: int) -> Engine:
    from codesign.errors import CodesignError
    from codesign.family.engine import local_engine

    if scheduler is None:
        return local_engine(processes, variants)
    if processes is not None:
        raise CodesignError("--processes is for local processes, --scheduler names others; leave one out")
    import logging

    from codesign.family.cluster import ClusterEngine

    engine = ClusterEngine(scheduler)
    for name in ("distributed", "distributed.client"):  # what matters is told in one line
        logging.getLogger(name).setLevel(logging.CRITICAL + 1)
    return engine


def _own_rigs(loaded: Family, place: Path, engine: Engine, *, gap: float | None, fresh: bool) -> OwnRigs:
    from contextlib import closing

    from codesign.family.batch import Interrupted, own_rigs
    from codesign.family.store import Store
    from codesign.report.family_progress import FamilyProgress
    from codesign.report.output import plain

    with closing(engine), Store(place, fresh=fresh) as store, FamilyProgress() as progress:
        try:
            return own_rigs(loaded, store, engine, gap=gap, progress=progress)
        except Interrupted as stop:
            progress.close()
            again = "the same command" + (" without --fresh" if fresh else "")
            kept = f"{stop.done} of {stop.total} variants are kept in {place}, {again} goes on from there"
            typer.echo(plain(f"cnr: interrupted; {kept}"), err=True)
            raise typer.Exit(INTERRUPTED) from None
