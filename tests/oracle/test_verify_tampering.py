"""`verify` accepts the honest solution and rejects every way of cheating we could think of."""

from dataclasses import replace

import numpy as np
import pytest
from random_problems import random_problem

from codesign import Solution, evaluate, solve, verify
from codesign.assemble import Assembly
from codesign.errors import CertificateError, CodesignError, InfeasibleError
from codesign.recipe import design_at
from codesign.search.walk import Walk

pytestmark = pytest.mark.oracle


def without(solution: Solution, configuration: int) -> Solution:
    """The solution less everything it shows about one configuration."""
    return replace(solution, evidence=tuple(e for e in solution.evidence if configuration not in e.index))


def telling(solution: Solution) -> bool:
    """Whether LEDs are lit, a well is full, and the closed form alone does not prove the winner's bound."""
    wells = [limit.share for limit in solution.optimum.limits if limit.name.startswith("well")]
    if not solution.optimum.design.drive_ma or max(wells) < 0.999:
        return False
    try:
        verify(without(solution, solution.winner))
    except CertificateError:
        return True
    return False


@pytest.fixture(scope="module")
def solutions() -> list[Solution]:
    """Three solved random problems on which the tests below can bite."""
    found: list[Solution] = []
    for seed in range(100, 200):
        try:
            solution = solve(random_problem(np.random.default_rng(seed)), alternatives=0)
        except InfeasibleError:
            continue
        if telling(solution):
            found.append(solution)
        if len(found) == 3:
            break
    return found


def rejected(solution: Solution, message: str = "certificate") -> None:
    with pytest.raises(CertificateError, match=message):
        verify(solution)


def test_honest_solutions_are_accepted(solutions):
    assert len(solutions) == 3
    for solution in solutions:
        verdict = verify(solution)
        assert verdict.value == solution.certificate.value
        assert solution.certificate.value <= verdict.largest_bound <= solution.certificate.bound * (1 + 1e-9)


def test_bound_lowered_by_one_percent_is_rejected(solutions):
    for solution in solutions:
        for factor in (0.99, 1 / (1 + solution.certificate.gap) - 1e-6):
            lower = replace(solution.certificate, bound=solution.certificate.bound * factor)
            rejected(replace(solution, certificate=lower), "bounded by")


def test_value_that_the_point_does_not_reach_is_rejected(solutions):
    for solution in solutions:
        better = replace(solution.certificate, value=solution.certificate.value * (1 + 1e-4))
        rejected(replace(solution, certificate=better), "not the claimed")


def test_point_scaled_by_one_percent_is_rejected(solutions):
    for solution in solutions:
        for factor in (1.01, 0.99):
            rejected(replace(solution, point=solution.point * factor))


def test_point_of_another_configuration_is_rejected(solutions):
    for solution in solutions:
        rejected(replace(solution, winner=solution.winner ^ 1))


def test_evidence_that_is_needed_cannot_be_dropped(solutions):
    for solution in solutions:
        rejected(replace(solution, evidence=()), "bounded by")
        rejected(without(solution, solution.winner), f"configuration {solution.winner} is bounded by")


def test_evidence_about_other_configurations_proves_nothing(solutions):
    """The winner's own proof passed off as one of all configurations, or of the wrong sign."""
    for solution in solutions:
        item = next(e for e in solution.evidence if not e.coarse and solution.winner in e.index)
        turned = replace(item, index=item.index ^ 1)
        rest = without(solution, solution.winner).evidence
        rejected(replace(solution, evidence=(*rest, turned)))


def test_negative_multiplier_in_the_evidence_is_rejected(solutions):
    for solution in solutions:
        item = next(e for e in solution.evidence if not e.coarse)
        ceiling = replace(item.proof.ceiling, limit=item.proof.ceiling.limit - 1e-3)
        spoiled = replace(item, proof=replace(item.proof, ceiling=ceiling))
        rejected(replace(solution, evidence=(spoiled, *solution.evidence)), "negative multiplier")


def test_fewer_configurations_than_the_problem_has_are_rejected(solutions):
    for solution in solutions:
        fewer = replace(solution.certificate, configurations=solution.certificate.configurations - 2)
        rejected(replace(solution, certificate=fewer), "configurations were searched")


def test_other_junction_temperatures_are_rejected(solutions):
    for solution in solutions:
        cooler = {led: c - 5.0 for led, c in solution.certificate.junction_c.items()}
        rejected(replace(solution, certificate=replace(solution.certificate, junction_c=cooler)))


def test_proof_for_lamps_at_other_temperatures_than_claimed_is_rejected(solutions):
    """A complete and valid proof, but for junctions 20 K cooler than the recipe makes them."""
    for solution in solutions:
        problem, certificate = solution.problem, solution.certificate
        cooler = {led: c - 20.0 for led, c in certificate.junction_c.items()}
        walk = Walk(Assembly(problem, np.array([cooler[c.id] for c in problem.channels])), 1e-3)
        best = walk.best()
        chosen, result = walk.configuration(best), walk.found[best]
        design = design_at(walk.assembly, chosen.setting, chosen.filter, result.point)
        forged = replace(
            solution,
            winner=best,
            point=result.point,
            evidence=tuple(walk.evidence),
            optimum=evaluate(problem, design),
            certificate=replace(certificate, value=result.value, bound=float(walk.upper.max()), junction_c=cooler),
        )
        rejected(forged, "junction temperatures")


def test_embellished_optimum_is_rejected(solutions):
    for solution in solutions:
        rejected(
            replace(solution, optimum=replace(solution.optimum, cnr=solution.optimum.cnr * 1.001)), "optimum's CNR"
        )


def test_recipe_pushed_over_the_well_is_rejected(solutions):
    for solution in solutions:
        design = solution.recipe.design
        longer = evaluate(solution.problem, replace(design, exposure_us=design.exposure_us * 1.2))
        assert not longer.feasible
        rejected(replace(solution, recipe=longer), "not feasible")


def test_recipe_with_an_embellished_cnr_is_rejected(solutions):
    for solution in solutions:
        rejected(replace(solution, recipe=replace(solution.recipe, cnr=solution.recipe.cnr * 1.001)), "not what is")


def test_optimum_of_another_design_is_rejected(solutions):
    for solution in solutions:
        design = solution.optimum.design
        dimmer = replace(design, drive_ma={led: 0.9 * ma for led, ma in design.drive_ma.items()})
        rejected(replace(solution, optimum=evaluate(solution.problem, dimmer)), "forward model")


def test_random_tampering_with_multipliers_never_lowers_a_bound_below_the_winner(solutions):
    """Whatever is done to the evidence, either it is rejected or the winner's bound stays above its value."""
    rng = np.random.default_rng(1)
    for solution in solutions:
        item = next(e for e in solution.evidence if not e.coarse and solution.winner in e.index)
        for _ in range(6):
            lines = tuple(
                replace(
                    line,
                    theta=line.theta * 10.0 ** rng.normal(0.0, 1.0),
                    limit=line.limit * 10.0 ** rng.normal(0.0, 1.0, line.limit.shape),
                    noise=line.noise * rng.normal(1.0, 1.0),
                    anchor=line.anchor * 10.0 ** rng.normal(0.0, 1.0),
                )
                for line in item.proof.lines
            )
            spoiled = replace(item, proof=replace(item.proof, lines=lines))
            lower = replace(solution.certificate, bound=solution.certificate.value * (1 - 1e-6))
            with pytest.raises(CodesignError):
                verify(replace(solution, certificate=lower, evidence=(*solution.evidence, spoiled)))
