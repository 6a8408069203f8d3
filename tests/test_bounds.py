"""The closed-form bounds in array form against the multipliers that prove them."""

import numpy as np
import pytest
from demo_names import DEMOS
from parametric_catalog import parametric_catalog, parametric_problem

from codesign import load_problem
from codesign.assemble import Assembly, flipped
from codesign.certificate import bound
from codesign.search.bounds import both_bounds, simple_proof

STROBE = {
    "lighting": {"mode": "strobe", "emitters_per_channel": 2, "distance_mm": 300.0, "board_k_per_w": 60.0},
    "timing": {"frame_rate_hz": 30.0},
}


def proven(program):
    """Bounds of both signs as the checker re-derives them."""
    return np.stack([bound(side, simple_proof(side)[0]) for side in (program, flipped(program))], axis=1)


def require_same(program):
    quick, slow = both_bounds(program), proven(program)
    assert (quick >= slow).all()
    full = np.abs(program.signal[:, :-1]) @ program.width * program.time_high / np.sqrt(program.floor)
    assert np.allclose(quick, slow, rtol=1e-6, atol=1e-12 * full.max())


@pytest.mark.parametrize("samples", [1, 5])
@pytest.mark.parametrize("sections", [{}, STROBE], ids=["steady", "strobe with heat caps"])
def test_both_bounds_equal_the_proof_and_are_never_below_it(tmp_path, samples, sections):
    catalog = parametric_catalog(tmp_path, leds=30, filters=60, cameras=3, samples=samples)
    problem = parametric_problem(catalog, tmp_path, **sections)
    assembly = Assembly(problem, np.full(30, 40.0))
    for setting in assembly.settings:
        for coarse in (True, False):
            program = assembly.program(setting, coarse=coarse)
            if sections:
                assert np.isfinite(program.heat_cap).all()
            require_same(program)


@pytest.mark.parametrize("name", DEMOS)
def test_both_bounds_equal_the_proof_on_the_demo_problems(name):
    problem = load_problem(name)
    assembly = Assembly(problem, np.full(len(problem.channels), 40.0))
    for setting in assembly.settings[:6]:
        require_same(assembly.program(setting, coarse=True))
