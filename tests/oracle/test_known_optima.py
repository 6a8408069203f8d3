"""Programs whose optimum is known in closed form or from the literature."""

from itertools import product

import numpy as np
import pytest
from scipy.optimize import nnls

from codesign.program import Program, contrast_to_noise
from codesign.search.bounds import simple_proof
from codesign.search.frontier import certify
from codesign.search.reference import best_by_scan

pytestmark = [pytest.mark.oracle, pytest.mark.published]


def program_of(signal, shot, noise_rows, floor, *, rows=None, bounds=None, low=1.0, high=1.0) -> Program:
    """One program with one segment of 1 A per LED and no heat limits; the last column is time."""
    d = np.array(signal, dtype=float)
    n = d.size - 1
    rows = np.zeros((0, n + 1)) if rows is None else np.array(rows, dtype=float)
    return Program(
        signal=d[None],
        shot=np.array(shot, dtype=float)[None],
        noise_rows=np.array(noise_rows, dtype=float).reshape(1, -1, n + 1),
        floor=np.array([float(floor)]),
        rows=rows[None],
        bounds=np.array([] if bounds is None else bounds, dtype=float)[None],
        row_names=tuple(f"row {k}" for k in range(len(rows))),
        width=np.ones(n),
        led=np.arange(n),
        heat=np.zeros(n),
        heat_cap=np.full(n, np.inf),
        time_low=np.array([low]),
        time_high=np.array([high]),
    )


def test_one_led_fills_the_well_and_reaches_its_closed_form_cnr():
    # Rates 800 and 1000 e-/s, dark 50 e-/s, read noise 5 e-, well 10 000 e-: t* = FW/(a_b + i) = 9.523810 s and a
    # pooled CNR of 19.997438 (signal over root mean variance, Green and Swets 1966); CNR 5 after 0.6189926 s, the
    # root of (200 t)^2 = 25 (25 + 950 t).
    program = program_of([200, 0], [900, 50], [], 25, rows=[[1000, 50]], bounds=[10_000], low=1e-3, high=100.0)
    found = certify(program, 1e-6)
    assert found.point == pytest.approx([9.523810, 9.523810], rel=1e-6)
    assert found.value == pytest.approx(19.997438, rel=1e-7)
    assert found.bound == pytest.approx(19.997438, rel=1e-6)
    assert contrast_to_noise(program, np.full((1, 2), 0.6189926))[0] == pytest.approx(5.0, rel=1e-7)


@pytest.mark.parametrize("seed", range(8))
def test_box_and_affine_variance_are_solved_by_a_prefix_in_order_of_signal_per_noise(seed):
    # The squared CNR is convex (quadratic over linear: Boyd and Vandenberghe 2004, example 3.4), so a corner of the box
    # is best; of all corners one that takes the LEDs in order of signal per noise.
    rng = np.random.default_rng(seed)
    d, s, floor = rng.uniform(0.1, 2.0, 8), rng.uniform(0.1, 2.0, 8), rng.uniform(0.1, 5.0)
    program = program_of([*d, 0], [*s, 0], [], floor)
    order = np.argsort(-d / s)
    prefix = np.cumsum(d[order]) / np.sqrt(floor + np.cumsum(s[order]))
    corners = np.array(list(product((0.0, 1.0), repeat=8)))
    assert ((corners @ d) / np.sqrt(floor + corners @ s)).max() == pytest.approx(prefix.max(), rel=1e-12)
    assert certify(program, 1e-6).value == pytest.approx(prefix.max(), rel=1e-6)
    assert simple_proof(program)[1][0] >= prefix.max() * (1 - 1e-9)


COVARIANCE = np.array([[2.0, 0.5, 0.1], [0.5, 1.0, 0.2], [0.1, 0.2, 0.5]])
DIFFERENCE = np.array([1.0, 0.4, -0.3])


def clutter_program(signs: np.ndarray) -> Program:
    """Clutter of covariance C alone, weights of the given signs up to 1e4 times the unit: floor next to nothing."""
    factor = np.linalg.cholesky(COVARIANCE).T * signs
    return program_of([*(DIFFERENCE * signs), 0], np.zeros(4), np.hstack([factor, np.zeros((3, 1))]), 1e-12)


def test_clutter_alone_gives_the_largest_eigenvalue_of_the_rayleigh_quotient():
    # Hotelling 1931, Fisher 1936: max (m·x)²/(x·C x) = m·C⁻¹m = 0.8396273 for this C and m, with
    # x/|x| = (0.456066, 0.335853, −0.824140).
    found = certify(clutter_program(np.array([1.0, 1.0, -1.0])), 1e-6)
    assert found.value**2 == pytest.approx(DIFFERENCE @ np.linalg.solve(COVARIANCE, DIFFERENCE), rel=2e-6)
    assert found.value**2 == pytest.approx(0.8396273, rel=3e-6)
    weights = found.point[:3] / np.linalg.norm(found.point[:3])
    assert weights == pytest.approx([0.456066, 0.335853, 0.824140], abs=2e-3)


def test_clutter_alone_without_negative_light_is_the_nonnegative_rayleigh_quotient():
    # Charnes-Cooper form: min x·C x with m·x = 1, x ≥ 0. Its optimality conditions are those of the nonnegative
    # least squares |F x − F⁻ᵀ m|², so max (m·x)²/(x·C x) = |F x*|² (Lawson and Hanson 1974, chapter 23).
    factor = np.linalg.cholesky(COVARIANCE).T
    x, _ = nnls(factor, np.linalg.solve(factor.T, DIFFERENCE))
    expected = float(np.sum((factor @ x) ** 2))
    assert x[2] == 0 and expected < 0.8396273
    assert certify(clutter_program(np.ones(3)), 1e-6).value ** 2 == pytest.approx(expected, rel=2e-6)


def test_exposure_does_not_matter_when_all_noise_grows_with_the_signal():
    """With PRNU alone the CNR is the contrast over PRNU times the root mean square of both levels."""
    target, background, prnu = 1000.0, 800.0, 0.01
    rows = np.array([[target, 0.0], [background, 0.0]]) * prnu / np.sqrt(2)
    program = program_of([target - background, 0], [0, 0], rows, 1e-9, low=1e-3, high=1.0)
    expected = (target - background) / (prnu * np.sqrt((target**2 + background**2) / 2))
    found = certify(program, 1e-6)
    assert found.value == pytest.approx(expected, rel=1e-6)
    assert best_by_scan(program, 10).value == pytest.approx(expected, rel=1e-5)
