"""The command ``cnr family``."""

from __future__ import annotations

from enum import StrEnum
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from codesign.cli_terminal import page_width, put
from codesign.errors import CodesignError

if TYPE_CHECKING:
    from codesign.family import Family
    from codesign.family.batch import OwnRigs
    from codesign.family.engine import Engine
    from codesign.family.shared import SharedFamily

#: Exit codes: a variant without a recipe, and an interrupt.
SOME_FAILED, INTERRUPTED = 1, 130


class Goal(StrEnum):
    """What a rig in common is for, as typed."""

    WORST = "worst"
    COUNT = "count"
    COST = "cost"


#: What is sought for each goal, for the progress line.
SOUGHT = {Goal.WORST: "worst CNR", Goal.COUNT: "variants served", Goal.COST: "price"}


def family(
    file: Annotated[str, typer.Argument(metavar="FILE", help="Family file, or the name of a demo family.")],
    json: Annotated[bool, typer.Option("--json", help="Machine-readable result on standard output.")] = False,
    csv: Annotated[
        Path | None, typer.Option(metavar="FILE", help="Write the recipes to this file, a row per variant.")
    ] = None,
    figure: Annotated[Path | None, typer.Option(metavar="FILE", help="Draw it: .svg, .png or .pdf.")] = None,
    only: Annotated[list[str] | None, typer.Option(metavar="VARIANT", help="Only this variant; repeat it.")] = None,
    shared: Annotated[bool, typer.Option("--shared", help="One rig for all variants instead of one each.")] = False,
    rigs: Annotated[bool, typer.Option("--rigs", help="The fewest rigs that serve all variants.")] = False,
    wheel: Annotated[bool, typer.Option("--wheel", help="One rig with the fewest filters on a wheel.")] = False,
    goal: Annotated[
        Goal | None,
        typer.Option(metavar="WHAT", help="For --shared: worst CNR, count of variants at --cnr, or cost of that."),
    ] = None,
    max_leds: Annotated[
        int | None, typer.Option(metavar="K", min=1, help="LED channels of a rig in common at most.")
    ] = None,
    cnr: Annotated[
        float | None, typer.Option(metavar="X", min=0, help="CNR that is enough on a rig in common.")
    ] = None,
    time_limit: Annotated[
        float | None, typer.Option(metavar="SECONDS", min=0, help="Stop the search for a rig in common then.")
    ] = None,
    gap: Annotated[float | None, typer.Option(metavar="G", help="Prove to this share of the CNR, 1e-8 to 0.5.")] = None,
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
    """Solve all variants of a product: a recipe for each on its own best rig, or one rig for all.

    What is done already is taken from the store, so an interrupted run goes on where it was. The exit code is 1 when a
    variant has no recipe.

    Example: cnr family labels-200 --csv recipes.csv
    """
    from codesign.family import load_family
    from codesign.report.family_files import check_targets, save, show

    check_targets(csv, figure)
    wishes = {"goal": goal, "max_led_channels": max_leds, "required_cnr": cnr, "time_limit": time_limit}
    kind = _kind({"--shared": shared, "--rigs": rigs, "--wheel": wheel}, wishes)
    loaded = load_family(file)
    loaded = loaded if only is None else loaded.only(only)
    place = store if store is not None else Path(f"{Path(loaded.where).stem}.results.sqlite")
    engine = _engine(processes, scheduler, len(loaded.variants))
    own = _own_rigs(loaded, place, engine, gap=gap, fresh=fresh)
    found = _shared(kind, loaded, own, wishes | {"gap": gap}) if kind and own.solved else own
    save(found, csv, figure)
    put(show(found, json=json, width=page_width()))
    if own.failed:
        raise typer.Exit(SOME_FAILED)


def _kind(kinds: dict[str, bool], wishes: dict[str, Any]) -> str:
    """Which kind of rigs in common is asked for, empty for none; what is said of one needs one."""
    asked = [option for option, wanted in kinds.items() if wanted]
    if len(asked) > 1:
        raise CodesignError(f"{asked[0]} and {asked[1]} are different questions; ask one at a time")
    options = {
        "goal": "--goal",
        "max_led_channels": "--max-leds",
        "required_cnr": "--cnr",
        "time_limit": "--time-limit",
    }
    for name, option in options.items():
        if wishes[name] is not None and not asked:
            raise CodesignError(f"{option} is for rigs in common; add --shared, --rigs or --wheel, or leave it out")
    if wishes["goal"] is not None and asked != ["--shared"]:
        raise CodesignError(f"--goal is for --shared; {asked[0]} serves all variants at the CNR they need")
    return asked[0] if asked else ""


def _engine(processes: int | None, scheduler: str | None, variants: int) -> Engine:
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


def _shared(kind: str, loaded: Family, own: OwnRigs, wishes: dict[str, Any]) -> SharedFamily:
    from codesign.family.shared import filter_wheel_family, rig_set_family, shared_family
    from codesign.report.family_progress import CommonProgress

    find = {"--shared": shared_family, "--rigs": rig_set_family, "--wheel": filter_wheel_family}[kind]
    goal = wishes["goal"] or loaded.spec.shared.goal
    sought = {"--rigs": "rigs", "--wheel": "filters"}.get(kind) or SOUGHT[Goal(goal)]
    named = wishes if kind == "--shared" else {n: v for n, v in wishes.items() if n not in ("goal", "gap")}
    with CommonProgress(sought) as progress:
        return find(loaded, own, progress=progress, **named)
