"""Tolerances: yields over many rigs, and robust recipes next to nominal ones."""

from __future__ import annotations

from pathlib import Path

from bench_registry import Figure, benchmark, timed

from codesign import load_problem, solve
from codesign.study.robust import robust
from codesign.study.tolerance import tolerance

#: The bars hold for this many draws.
FULL_DRAWS = 10_000


@benchmark(
    tiny={"demos": ("yellow-stain",), "draws": 200},
    full={"demos": ("yellow-stain", "bruise", "two-inks", "thin-film", "moisture", "fast-web"), "draws": FULL_DRAWS},
)
def tolerances(folder: Path, *, demos: tuple[str, ...], draws: int) -> list[Figure]:
    """Time of a yield with its limits and variance shares, recipe fixed and exposure set anew on each rig."""
    figures = []
    for name in demos:
        problem = load_problem(name)
        design = solve(problem, alternatives=0).recipe.design
        for retune, bar, what in ((False, 5.0, "recipe fixed"), (True, 20.0, "exposure set anew")):
            _, seconds = timed(tolerance, problem, design, draws=draws, retune=retune)
            at_most = bar if draws >= FULL_DRAWS else None
            figures.append(Figure(what=f"{name}, {draws} rigs, {what}", value=seconds, unit="s", at_most=at_most))
    return figures


@benchmark(
    tiny={"demos": ("yellow-stain",), "scenarios": 4},
    full={"demos": ("yellow-stain", "bruise", "two-inks", "thin-film", "fast-web"), "scenarios": 20},
)
def robust_recipes(folder: Path, *, demos: tuple[str, ...], scenarios: int) -> list[Figure]:
    """Worst case of the robust recipe against the nominal one, and how far the bound is above it."""
    figures = []
    for name in demos:
        found, seconds = timed(robust, load_problem(name), scenarios=scenarios)
        worse = found.nominal.level() - found.value
        figures += [
            Figure(what=f"{name}, {scenarios} scenarios", value=seconds, unit="s"),
            Figure(what=f"{name}, gap", value=found.gap, unit="1", at_most=0.02),
            Figure(what=f"{name}, nominal - robust worst CNR", value=worse, unit="1", at_most=0.0),
            Figure(what=f"{name}, price of robustness", value=found.price, unit="1"),
        ]
    return figures
