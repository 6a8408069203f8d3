"""Three targets against four backgrounds of the demo catalogue: solved, proven, checked again."""

from __future__ import annotations

from dataclasses import replace

import pytest

from codesign import build_problem, solve, verify
from codesign.certificate_pairs import Leaf, PairProof
from codesign.errors import CertificateError

pytestmark = pytest.mark.oracle

TARGETS = ("ink-a", "ink-b", "cap-red")
BACKGROUNDS = ("web-paper", "card-white", "paper-coated", "tile-white")


def problem(targets=TARGETS, backgrounds=BACKGROUNDS):
    return build_problem(
        {
            "title": "pairs",
            "scene": {
                "target": list(targets), "background": list(backgrounds),
                "ambient": [{"illuminant": "E", "irradiance_w_per_m2": 0.5}],
            },
            "candidates": {
                "leds": "380 < peak_nm < 640", "cameras": ["deep-2mp", "mono-5mp"], "filters": ["bp-450-30"],
                "gains_db": [0],
            },
            "optics": {"f_numbers": [2.8, 4], "magnification": 0.1},
            "lighting": {"mode": "continuous", "emitters_per_channel": 4, "distance_mm": 300, "board_k_per_w": 6.0},
            "motion": {"speed_mm_per_s": 200.0, "max_blur_px": 1.0},
            "temperature": {"air_c": 25, "sensor_c": 40},
            "limits": {"rig_heat_w": 20.0},
        }
    )  # fmt: skip


@pytest.fixture(scope="module")
def solution():
    return solve(problem(), alternatives=1)


def test_twelve_pairs_are_proven_to_the_usual_gap_and_verified(solution):
    assert solution.certificate.gap <= solution.problem.spec.solver.gap
    assert any(isinstance(item.proof, PairProof) for item in solution.evidence)
    assert verify(solution).value == pytest.approx(solution.certificate.value)


def test_recipe_states_its_worst_pair(solution):
    assert len(solution.recipe.pairs) == 12
    assert solution.recipe.cnr == min(pair.cnr for pair in solution.recipe.pairs)
    assert solution.recipe.feasible


def test_runner_up_is_no_better(solution):
    assert all(other.cnr <= solution.certificate.bound for other in solution.alternatives)


def test_fewer_backgrounds_are_never_worse(solution):
    fewer = solve(problem(backgrounds=BACKGROUNDS[:2]), alternatives=0)
    assert fewer.certificate.bound >= solution.certificate.value


def test_pair_proof_with_a_lower_level_is_rejected(solution):
    item = next(item for item in solution.evidence if isinstance(item.proof, PairProof))
    tree = lowered(item.proof.tree)
    others = [other for other in solution.evidence if other is not item]
    with pytest.raises(CertificateError):
        verify(replace(solution, evidence=(*others, replace(item, proof=PairProof(tree=tree)))))


def lowered(tree):
    """The tree with every level a tenth lower."""
    if isinstance(tree, Leaf):
        return replace(tree, level=0.9 * tree.level)
    return replace(tree, below=lowered(tree.below), above=lowered(tree.above))
