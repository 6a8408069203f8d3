"""The certified optimum of small programs against every vertex, or against searching everywhere."""

from dataclasses import replace

import numpy as np
import pytest
from exhaustive import best_by_search, best_vertex
from random_programs import any_program, rescaled, without_contrast

from codesign.certificate import check_bound, check_point
from codesign.program import Program
from codesign.search.frontier import certify
from codesign.search.reference import best_by_scan

pytestmark = pytest.mark.oracle


def small(seed: int, quiet: bool) -> Program:
    """Random program with 2 to 4 LEDs and at most 6 segments, some signal within reach."""
    rng = np.random.default_rng(seed)
    while True:
        program = any_program(rng, leds=int(rng.integers(2, 5)), quiet=quiet)
        if program.segments <= 6 and program.signal.max() > 0 and certify(program).value > 0:
            return program


def assert_certified(program: Program, reference: float, gap: float) -> None:
    found = certify(program, gap)
    check_point(program, found.point, found.value)
    check_bound(program, found.proof, found.bound)
    assert found.gap <= gap
    assert found.bound >= reference * (1 - 1e-9)  # never below what can be reached
    assert found.value == pytest.approx(reference, rel=1e-3)


@pytest.mark.parametrize("seed", range(25))
def test_without_signal_dependent_noise_the_best_vertex_is_certified(seed):
    program = small(seed, quiet=True)
    reference = best_vertex(program)
    for gap in (1e-3, 1e-6):
        assert_certified(program, reference, gap)
    assert certify(program, 1e-6).value == pytest.approx(reference, rel=1.1e-6)


@pytest.mark.parametrize("seed", range(100, 120))
def test_with_signal_dependent_noise_searching_everywhere_finds_no_more(seed):
    program = small(seed, quiet=False)
    reference = best_by_search(program, np.random.default_rng(seed))
    for gap in (1e-3, 1e-6):
        assert_certified(program, reference, gap)


@pytest.mark.parametrize("seed", range(200, 203))
def test_scan_of_the_noise_frontier_in_a_modelling_language_agrees(seed):
    program = small(seed, quiet=False)
    scan = best_by_scan(program, 60)
    found = certify(program, 1e-6)
    assert scan.value <= found.bound * (1 + 1e-6)
    assert found.value == pytest.approx(scan.value, rel=2e-3)  # a scan of 60 points is that fine


@pytest.mark.property
@pytest.mark.parametrize("seed", range(300, 320))
def test_units_of_electrons_current_and_time_change_nothing(seed):
    rng = np.random.default_rng(seed)
    program = any_program(rng)
    twin = rescaled(program, *10.0 ** rng.uniform(-3.0, 3.0, 3))
    a, b = certify(program, 1e-6), certify(twin, 1e-6)
    assert b.value == pytest.approx(a.value, rel=3e-6, abs=1e-9)
    assert b.bound == pytest.approx(a.bound, rel=3e-6, abs=1e-9)


@pytest.mark.property
def test_program_without_any_contrast_is_certified_at_zero():
    program = any_program(np.random.default_rng(7), leds=1)
    for column in range(program.segments + 1):
        program = without_contrast(program, column)
    found = certify(program)
    assert found.value == 0 and found.bound == 0 and found.gap == 0


@pytest.mark.property
@pytest.mark.parametrize("seed", range(400, 440))
def test_light_against_the_wanted_sign_is_certified_at_zero(seed):
    """Every column dims the target: the best is no light at all, and the bound says so exactly."""
    program = any_program(np.random.default_rng(seed))
    program = replace(program, signal=-np.abs(program.signal))
    found = certify(program)
    assert found.value <= 0 and found.bound == 0
    check_point(program, found.point, found.value)
