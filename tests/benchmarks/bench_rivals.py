"""What a user would do otherwise: local ascent per configuration, evolution over everything, a global solver.

Times of the loops are extrapolated from a random sample of configurations. No rival may reach a higher CNR.
"""

from __future__ import annotations

import importlib.util
import statistics
from pathlib import Path

import numpy as np
from bench_problems import bare_product, catalogue_problem, one_program, random_configurations, warm_assembly
from bench_registry import Figure, benchmark, timed
from rivals import evolution, global_solver, local_ascent

from codesign.search.frontier import certify
from codesign.search.walk import Walk

#: The sample is compared configuration by configuration with optima certified to this gap.
CLOSE = 1e-6


class Contest:
    """The whole catalogue searched by us, at fixed junction temperatures, and the sample the rivals get."""

    def __init__(self, folder: Path, sample: int, **size: int) -> None:
        self.problem = catalogue_problem(folder, **size)
        self.assembly = warm_assembly(self.problem)
        (walk, best), self.seconds = timed(self._search)
        self.count, self.value = walk.upper.size, walk.polish(best, 1e-5).value
        winner = walk.configuration(best)
        drawn = random_configurations(self.assembly, sample, seed=11)
        self.sample = [(winner.setting, winner.filter, winner.sign), *drawn]
        self.programs = [one_program(self.assembly, *one) for one in self.sample]

    def _search(self) -> tuple[Walk, int]:
        walk = Walk(warm_assembly(self.problem), 1e-3)
        return walk, walk.best()

    def loop(self, rival, name: str, bar: float | None = None) -> list[Figure]:
        """Let a rival loop over the sample; the winner is in it, but does not count for the time."""
        results = [timed(rival, program) for program in self.programs]
        for (reached, _), program in zip(results, self.programs, strict=True):
            own = certify(program, CLOSE)
            require(own.bound * (1 + CLOSE) >= reached and own.value * (1 + 2 * CLOSE) >= reached - 1e-9, name)
        top = max(reached for reached, _ in results)
        require(self.value * (1 + 1e-5) >= top, name)
        times = [seconds for _, seconds in results[1:]]
        total = statistics.mean(times) * self.count
        return [
            Figure(what=f"{name}: median time of one configuration", value=statistics.median(times), unit="s"),
            Figure(what=f"{name}: all configurations, extrapolated", value=total, unit="s"),
            Figure(what=f"{name}: that / our search", value=total / self.seconds, unit="x", at_least=bar),
            Figure(what=f"{name}: CNR at the winner / ours", value=results[0][0] / self.value, unit="1"),
        ]


def require(better: bool, name: str) -> None:
    """Stop when a rival reached more than we proved to be possible."""
    if not better:
        raise AssertionError(f"{name} reached a higher CNR than the certified optimum")


TINY = {"leds": 6, "filters": 8, "cameras": 2, "samples": 4, "sample": 3}
FULL = {"leds": 60, "filters": 1000, "cameras": 20, "samples": 6}


@benchmark(tiny={**TINY, "starts": 2}, full={**FULL, "sample": 40, "starts": 5})
def local_ascent_in_a_loop(folder: Path, *, sample, starts, **size) -> list[Figure]:
    """SLSQP of scipy with exact gradients and several starts."""
    contest = Contest(folder, sample, **size)
    rng = np.random.default_rng(5)
    return contest.loop(lambda program: local_ascent(program, starts, rng), f"SLSQP, {starts} starts")


@benchmark(
    tiny={**TINY, "generations": 3, "population": 2}, full={**FULL, "sample": 1, "generations": 100, "population": 5}
)
def evolution_over_everything(folder: Path, *, sample, generations, population, **size) -> list[Figure]:
    """Differential evolution of scipy with discrete choices as integer genes: one run, nothing proven."""
    contest = Contest(folder, 1, **size)
    reached, seconds = timed(evolution, contest.assembly, generations, population, 5)
    require(contest.value * (1 + 1e-5) >= reached, "differential evolution")
    return [
        Figure(what="one run", value=seconds, unit="s"),
        Figure(what="that / our search", value=seconds / contest.seconds, unit="x"),
        Figure(what="its CNR / ours", value=reached / contest.value, unit="1"),
    ]


@benchmark(tiny={**TINY, "limit_s": 10.0, "bar": None}, full={**FULL, "sample": 200, "limit_s": 30.0, "bar": 500.0})
def global_solver_in_a_loop(folder: Path, *, sample, limit_s, bar, **size) -> list[Figure]:
    """SCIP to the same gap of 1e-3; runs that hit their time limit count with the limit, which favours the rival."""
    if importlib.util.find_spec("pyscipopt") is None:
        return [Figure(what="not installed, skipped: pip install pyscipopt", value=0.0, unit="1")]
    contest = Contest(folder, sample, **size)
    solver, proven = global_solver(1e-3, limit_s), []

    def rival(program) -> float:
        reached, done = solver(program)
        proven.append(done)
        return reached

    figures = contest.loop(rival, "SCIP", bar)
    return [*figures, Figure(what="SCIP: share proven within its limit", value=float(np.mean(proven)), unit="1")]


@benchmark(tiny=TINY, full={**FULL, "sample": 1})
def rungs_of_the_search(folder: Path, *, sample, **size) -> list[Figure]:
    """Where the time goes: closed form of everything, then the rest of the walk."""
    problem = catalogue_problem(folder, **size)
    bare_product(problem)()
    walk, closed = timed(lambda: Walk(warm_assembly(problem), 1e-3))
    _, rest = timed(walk.best)
    return [
        Figure(what="closed form, rates included", value=closed, unit="s"),
        Figure(what="tightening and certifying", value=rest, unit="s"),
        Figure(what="configurations tightened", value=walk.tally.refined, unit="1"),
        Figure(what="configurations certified", value=walk.tally.certified, unit="1"),
    ]
