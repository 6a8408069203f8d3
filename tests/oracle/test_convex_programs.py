"""The fast convex programs of the search against the same ones in a modelling language, and against each other."""

import numpy as np
import pytest
from random_programs import any_program, random_points, random_program, repeated

from codesign.certificate import intercept, signal_ceiling
from codesign.program import Program, contrast_to_noise, variance, violation
from codesign.search.interior import relax
from codesign.search.reference import fixed_signal, largest_signal, line
from codesign.search.relaxation import ConvexSlice

pytestmark = pytest.mark.oracle


def visible(seed: int, **kind) -> Program:
    """Random program in which light of the wanted sign can be had."""
    rng = np.random.default_rng(seed)
    while True:
        program = any_program(rng, **kind)
        if (program.signal[:, :-1].max(axis=1) > 0).all():
            return program


@pytest.mark.parametrize("seed", range(20))
def test_lines_and_ceilings_equal_the_modelling_language(seed):
    program = visible(seed)
    every = np.arange(program.segments)
    ceiling, brightest = ConvexSlice(program, every).solve(None)
    top = largest_signal(program).value
    scale = max(abs(top), 1e-6 * float(np.abs(program.signal[0]) @ brightest))
    assert signal_ceiling(program, ceiling)[0] == pytest.approx(top, abs=1e-6 * scale)
    for factor in (0.5, 1.0, 4.0):
        theta = factor * float(variance(program, brightest[None])[0]) / max(abs(top), 1e-300)
        reference = line(program, theta)
        found, point = ConvexSlice(program, every).solve(theta)
        noise = float(variance(program, point[None])[0])
        assert violation(program, point[None])[0] <= 1e-9
        assert intercept(program, found)[0] == pytest.approx(
            reference.value, abs=1e-6 * max(noise, abs(reference.value))
        )


@pytest.mark.parametrize("seed", range(30, 36))
def test_frontier_is_convex_and_lies_above_its_lines(seed):
    """``H(v)`` solved at fixed signals against lines at other slopes: never below, and touching where they should."""
    program = visible(seed)
    top = largest_signal(program).value
    spread = float(variance(program, largest_signal(program).point[None])[0])
    every = np.arange(program.segments)
    low = max(float(program.signal[0, -1] * program.time_low[0]), 0.0)
    signals = low + (top - low) * np.array([0.2, 0.5, 0.8, 0.95])
    height = np.array([fixed_signal(program, v).value for v in signals])
    chord = np.diff(height) / np.diff(signals)
    assert (np.diff(chord) >= -1e-5 * abs(chord).max()).all()
    for factor in (0.1, 0.5, 1.0, 2.0):
        theta = factor * spread / top
        found, point = ConvexSlice(program, every).solve(theta)
        below = theta * signals + intercept(program, found)[0]
        assert (height >= below - 1e-6 * spread).all()
        touch = float(program.signal[0] @ point)
        if low < touch < top * (1 - 1e-6):
            assert fixed_signal(program, touch).value == pytest.approx(
                theta * touch + intercept(program, found)[0], abs=2e-5 * spread
            )


def test_batched_interior_point_gives_multipliers_as_good_as_the_accurate_solver():
    """2,000 random programs of every kind: always finite, never above, 95 % within 1 %, the median within 1e-5."""
    rng = np.random.default_rng(2024)
    ceilings, lines = [], []
    for _ in range(100):
        leds = int(rng.integers(1, 6)) if rng.uniform() < 0.8 else int(rng.integers(6, 25))
        block = any_program(rng, programs=20, leds=leds)
        brightest = relax(block, None)
        top = signal_ceiling(block, brightest.line)
        own = np.maximum(contrast_to_noise(block, brightest.point), 1e-6)
        theta = 2 * np.maximum(top, 1e-300) / own**2 * 10.0 ** rng.uniform(-2.0, 0.5, block.size)
        height = intercept(block, relax(block, theta).line)
        assert np.isfinite(top).all() and np.isfinite(height).all()
        for i in range(block.size):
            program = block.take(i)
            exact = ConvexSlice(program, np.arange(block.segments))
            best, _ = exact.solve(None)
            best_top = signal_ceiling(program, best)[0]
            reach = float(np.abs(program.signal[0]) @ np.append(program.width, 1.0) * program.time_high[0])
            touching, point = exact.solve(float(theta[i]))
            best_height = intercept(program, touching)[0]
            noise = max(float(variance(program, point[None])[0]), abs(best_height))
            if best_top > 1e-6 * reach:  # otherwise zero is the answer and nothing is left to compare with
                ceilings.append((top[i] - best_top) / best_top)
                lines.append((best_height - height[i]) / noise)
    for excess in (np.array(ceilings), np.array(lines)):
        assert excess.size > 1500
        assert excess.min() > -1e-6
        assert np.median(excess) < 1e-5
        assert np.mean(excess < 0.01) >= 0.95


@pytest.mark.property
@pytest.mark.parametrize("seed", range(50, 54))
def test_interior_points_are_feasible_but_for_their_last_digits(seed):
    block = random_program(np.random.default_rng(seed), programs=30, leds=12, segments=2, heat_cap=False)
    for theta in (None, np.full(block.size, 1.0)):
        assert violation(block, relax(block, theta).point).max() < 1e-4


@pytest.mark.property
@pytest.mark.parametrize("seed", range(60, 90))
def test_random_points_used_as_witnesses_are_feasible(seed):
    """The tests' own generator: what it calls feasible must be so."""
    rng = np.random.default_rng(seed)
    program = any_program(rng)
    points = random_points(rng, program, 200)
    assert violation(repeated(program, 200), points).max() <= 1e-12
