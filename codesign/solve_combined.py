"""The solution of a problem whose readings are combined by weights, its settable recipe and its check."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import replace

import numpy as np

from codesign.assemble import Assembly
from codesign.assemble_conflicts import no_step_fits, nothing_seen, require_usable_leds
from codesign.certificate import check_point
from codesign.design import Design, Performance, Shot, evaluate
from codesign.errors import CertificateError, ProblemError
from codesign.problem import Problem
from codesign.program import Array
from codesign.recipe import DIMMINGS, design_at, settable
from codesign.search import never
from codesign.search.combined import combined_bounds, turned
from codesign.search.combined_walk import CombinedWalk, Recipe
from codesign.search.readings import shot_points, single
from codesign.solve import Certificate, Solution
from codesign.solve_rounds import LARGEST_NUMBER_OF_ROUNDS
from codesign.solve_settle import JUNCTION_TOLERANCE_K

#: Gap unless the problem states one: proofs over weights are dear.
COMBINED_GAP = 2e-2


def solve_combined(problem: Problem, gap: float | None = None, stop: Callable[[], bool] = never) -> Solution:
    """As `codesign.solve` for combined readings, without runners-up; the gap may stay above the one asked for."""
    started = time.perf_counter()
    _refuse_build_limits(problem)
    require_usable_leds(problem)
    stated = problem.spec.solver.gap if "gap" in problem.spec.solver.model_fields_set else COMBINED_GAP
    gap = stated if gap is None else gap
    junction = np.full(len(problem.channels), problem.spec.temperature.air_c)
    walk = CombinedWalk(Assembly(problem, junction), gap)
    best = walk.scout()
    if best is None:
        raise nothing_seen(walk.assembly)
    for _ in range(2):
        junction = _settled(walk, best, junction)
        walk = CombinedWalk(Assembly(problem, junction), gap, stop, walk.found)
        walk.scout()
        first, best = best, walk.best()
        if best == first or best is None or stop():
            break
    if best is None:
        raise nothing_seen(walk.assembly)
    return _solution(walk, best, gap, started)


def _refuse_build_limits(problem: Problem) -> None:
    from codesign.build import choosing

    if choosing(problem):
        raise ProblemError(
            f"{problem.where}: [build] limits and [detection] combined readings do not go together yet; leave one out"
        )


def _settled(walk: CombinedWalk, index: int, junction: Array) -> Array:
    """Junction temperatures that the recipe of one configuration leads to, worked out until they agree."""
    problem, recipe = walk.assembly.problem, walk.found[index]
    for _ in range(LARGEST_NUMBER_OF_ROUNDS):
        recipe = walk.polish(index, replace(recipe, value=0.0))
        reached = evaluate(problem, design_of(walk, index, recipe)).junctions(problem, junction)
        residual = float(np.max(np.abs(reached - junction)))
        junction = reached
        if residual <= 0.1 * JUNCTION_TOLERANCE_K:
            break
        walk = CombinedWalk.blank(Assembly(problem, junction), walk.gap)
    return junction


def design_of(walk: CombinedWalk, index: int, recipe: Recipe) -> Design:
    """Translate a recipe into currents and exposures, with its weights left to be worked out anew."""
    setting, filter_index = walk.configuration(index)
    if recipe.exposures is None:
        return design_at(walk.assembly, setting, filter_index, recipe.point)
    one = single(walk.assembly, setting, filter_index)
    parts = [
        design_at(walk.assembly, setting, filter_index, point)
        for point in shot_points(one, recipe.exposures, recipe.point)
    ]
    shots = tuple(
        Shot(exposure_us=float(p.exposure_us), drive_ma={k: float(v) for k, v in p.drive_ma.items()}) for p in parts
    )
    return replace(parts[0], exposure_us=sum(s.exposure_us for s in shots), drive_ma={}, shots=shots)


def _solution(walk: CombinedWalk, best: int, gap: float, started: float) -> Solution:
    problem = walk.assembly.problem
    recipe = walk.polish(best, walk.found[best])
    design = design_of(walk, best, recipe)
    optimum = evaluate(problem, design)
    rounded = settable_shots(problem, design) if design.shots else settable(problem, design)
    if rounded is None:
        raise no_step_fits(problem)
    certificate = _certificate(walk, best, recipe, design, optimum)
    return Solution(
        problem=problem,
        optimum=optimum,
        recipe=rounded[1],
        certificate=certificate,
        alternatives=(),
        seconds=time.perf_counter() - started,
        status="proven" if certificate.gap <= gap else "stopped",
        winner=best,
        point=recipe.point,
        units=None,
        evidence=tuple(walk.evidence),
    )


def _certificate(walk: CombinedWalk, best: int, recipe: Recipe, design: Design, optimum: Performance) -> Certificate:
    problem = walk.assembly.problem
    assumed = {c.id: float(t) for c, t in zip(problem.channels, walk.assembly.junction_c, strict=True)}
    same = evaluate(problem, design, junction_c=assumed)
    value = check_combined_point(walk, best, recipe.exposures, recipe.point, same, recipe.value)
    return Certificate(
        value=value,
        bound=max(float(walk.upper.max()), value),
        configurations=walk.upper.size,
        refined=len(walk.found),
        certified=len(walk.evidence),
        junction_c=assumed,
        junction_residual_k=max((abs(s.junction_c - assumed[s.id]) for s in optimum.leds), default=0.0),
        cnr_residual=abs(optimum.cnr / value - 1),
        forward_residual=abs(same.cnr / value - 1),
    )


def check_combined_point(
    walk: CombinedWalk, index: int, exposures: Array | None, point: Array, forward: Performance, claimed: float
) -> float:
    """Confirm feasibility and CNR of a joint recipe under the weights the forward model gives; return the CNR."""
    readings = walk.readings(index, exposures)
    weights = np.array(list(forward.weights.values()))
    sign = 1.0 if weights @ readings.signal @ point > 0 else -1.0
    return check_point(turned(readings, sign).weighted(weights), point, claimed)


def bounds_again(walk: CombinedWalk, evidence: tuple) -> Array:
    """Bound of every configuration from its proof or, without one, from the closed form. (N,)"""
    bounds = np.concatenate([walk.first_bounds(setting) for setting in walk.assembly.settings])
    for item in evidence:
        shown = combined_bounds(walk.readings(item.index), item.proof, exchangeable=walk.shots > 1)
        bounds[item.index] = min(bounds[item.index], shown)
    return bounds


def verify_combined(solution: Solution) -> tuple[Array, float]:
    """Re-derive the bounds of all configurations and the winner's CNR. Raises CertificateError."""
    certificate, problem = solution.certificate, solution.problem
    junction = np.array([certificate.junction_c[channel.id] for channel in problem.channels])
    walk = CombinedWalk(Assembly(problem, junction), 0.0)
    if walk.upper.size != certificate.configurations:
        raise CertificateError(
            f"certificate: {certificate.configurations} configurations were searched, the problem has {walk.upper.size}"
        )
    bounds = bounds_again(walk, solution.evidence)
    if not np.max(bounds) <= certificate.bound * (1 + 1e-9):
        raise CertificateError(
            f"certificate: configuration {int(np.argmax(bounds))} is bounded by {np.max(bounds):.10g} only, "
            f"above the claimed {certificate.bound:.10g}"
        )
    design = solution.optimum.design
    same = evaluate(problem, design, junction_c=certificate.junction_c)
    exposures = np.array([shot.exposure_us * 1e-6 for shot in design.shots]) if design.shots else None
    value = check_combined_point(walk, solution.winner, exposures, solution.point, same, certificate.value)
    if not abs(same.cnr / value - 1) <= 1e-9:
        raise CertificateError(f"certificate: the forward model gives {same.cnr:.12g}, the arrays {value:.12g}")
    again = evaluate(problem, solution.recipe.design)
    if not again.feasible or abs(again.cnr - solution.recipe.cnr) > 1e-9 * again.cnr:
        raise CertificateError("certificate: the settable recipe is not feasible, or its CNR is not what is claimed")
    return bounds, value


def settable_shots(problem: Problem, design: Design) -> tuple[Design, Performance] | None:
    """Round every shot down to whole steps, dimmed as far as the limits ask for. None when no step fits."""
    step_ma, step_us = problem.spec.lighting.drive_step_ma, problem.camera(design.camera).exposure_step_us
    for dimming in DIMMINGS:
        shots = tuple(
            Shot(
                exposure_us=max(round(float(np.floor(shot.exposure_us / step_us + 1e-6)) * step_us, 9), step_us),
                drive_ma={
                    led: round(float(np.floor(ma * dimming / step_ma + 1e-6)) * step_ma, 9)
                    for led, ma in shot.drive_ma.items()
                    if ma * dimming >= step_ma
                },
            )
            for shot in design.shots
        )
        trial = replace(design, shots=shots, exposure_us=sum(shot.exposure_us for shot in shots))
        result = evaluate(problem, trial)
        if result.feasible:
            return trial, result
    return None
