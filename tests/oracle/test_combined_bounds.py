"""Bounds over weights and recipes against random weights and recipes, and shots against a grid of all of both."""

import itertools
from dataclasses import replace

import numpy as np
import pytest
from random_programs import any_program, random_points
from test_detection_combined import SHOTS, changed

from codesign import Design, build_problem, evaluate, solve, verify
from codesign.certificate_combined import Box, Readings, spread, widening
from codesign.design import Shot, electrons, led_state, setting_of
from codesign.noise import NOISE_TERMS, Sensor
from codesign.problem.nudge import nudged
from codesign.program import Program, contrast_to_noise
from codesign.search.combined_first import first_bounds

pytestmark = pytest.mark.oracle

SEEDS = range(60)


def as_channels(rng: np.random.Generator, count: int) -> Readings:
    """Readings that share their columns, with noise of their own, noise in common and a common offset."""
    program = any_program(rng, leds=2)
    size = program.signal.shape[1]
    factor = rng.uniform(0.2, 2.0, (count, size))
    split = int(rng.integers(program.noise_rows.shape[1] + 1))
    rows = program.noise_rows[0] * factor[:, None]
    return Readings(
        limits=program,
        signal=program.signal[0] * factor * rng.choice([-1.0, 1.0], (count, 1)),
        shot=program.shot[0] * factor,
        pattern=rows[:, :split],
        common=rows[:, split:] * rng.choice([-1.0, 1.0], (count, 1, 1)),
        floor=program.floor[0] * rng.uniform(0.5, 2.0, count),
        offset=np.sqrt(program.floor[0]) * rng.uniform(0.0, 3.0, count) * rng.integers(2),
    )


def apart(readings: Readings) -> Readings:
    """The same with columns of their own for each reading, none of the common time."""
    count, size = readings.signal.shape
    limits, n = readings.limits, size - 1

    def each(values):
        out = np.zeros((*values.shape[:-1], count * n + 1))
        for m in range(count):
            out[m, ..., m * n : (m + 1) * n] = values[m, ..., :-1]
        return out

    rows = np.concatenate([np.tile(limits.rows[:, :, :-1], count), limits.rows[:, :, -1:] * 0], axis=2)
    heat_cap = np.full(limits.heat_cap.size * count, np.inf)
    leds = np.concatenate([limits.led + m * limits.heat_cap.size for m in range(count)])
    own = replace(
        limits, rows=rows, width=np.tile(limits.width, count), led=leds, heat=np.tile(limits.heat, count),
        heat_cap=heat_cap, time_low=limits.time_high,
    )  # fmt: skip
    return replace(
        readings, limits=own, signal=each(readings.signal), shot=each(readings.shot), pattern=each(readings.pattern),
        common=each(readings.common),
    )  # fmt: skip


def variance(readings: Readings, w, y) -> float:
    """Noise of the weighted sum, term by term. [e⁻²]"""
    own = readings.floor + readings.shot @ y + np.sum((readings.pattern @ y) ** 2, axis=1)
    return w**2 @ own + np.sum((w @ (readings.common @ y)) ** 2) + (w @ readings.offset) ** 2


def random_box(rng: np.random.Generator, count: int, one_sign: bool) -> Box:
    ends = np.sort(rng.uniform(-1.0, 1.0, (2, count)), axis=0)
    if one_sign:
        ends = np.sort(np.abs(ends), axis=0)
        turn = rng.uniform(size=count) < 0.5
        ends = np.where(turn, -ends[::-1], ends)
    ends[:, 0] = 1.0
    return Box(face=0, low=tuple(ends[0]), high=tuple(ends[1]))


def inside(rng: np.random.Generator, box: Box):
    low, high = np.array(box.low), np.array(box.high)
    return low + (high - low) * rng.choice([0.0, 1.0, rng.uniform()], low.size)


@pytest.mark.parametrize("seed", SEEDS)
def test_weighted_program_and_moments_hold_all_noise(seed):
    rng = np.random.default_rng(seed)
    readings = as_channels(rng, 3)
    for y in random_points(rng, readings.limits, 5):
        w = rng.normal(size=3)
        program, (delta, covariance) = readings.weighted(w), readings.moments(y)
        expected = w @ (readings.signal @ y) / np.sqrt(variance(readings, w, y))
        assert contrast_to_noise(program, y[None])[0] == pytest.approx(expected, rel=1e-9)
        assert w @ delta / np.sqrt(w @ covariance @ w) == pytest.approx(expected, rel=1e-7)


@pytest.mark.parametrize("seed", SEEDS)
def test_no_weights_of_a_box_beat_its_corners_by_more_than_stated(seed):
    """σ over the corners, drawn so that they average to the weights, exceeds σ at the weights by κ at most."""
    rng = np.random.default_rng(seed)
    count = int(rng.integers(2, 4))
    readings = as_channels(rng, count)
    box = random_box(rng, count, one_sign=bool(rng.integers(2)))
    wide = widening(box, spread(readings))
    low, high = np.array(box.low), np.array(box.high)
    for y in random_points(rng, readings.limits, 20):
        w = inside(rng, box)
        up = np.divide(w - low, high - low, out=np.ones(count), where=high > low)
        total = 0.0
        for pick in itertools.product((0, 1), repeat=count):
            chance = np.prod(np.where(pick, up, 1 - up))
            total += chance * variance(readings, np.where(pick, high, low), y)
        assert total <= wide**2 * variance(readings, w, y) * (1 + 1e-9)


@pytest.mark.parametrize("seed", SEEDS)
def test_program_of_a_box_is_never_worse_than_any_weights_in_it(seed):
    """The recipe with the light that the box's far end asks for: as much signal, no more noise."""
    rng = np.random.default_rng(seed)
    count = int(rng.integers(2, 4))
    shared = as_channels(rng, count)
    readings, n = apart(shared), shared.signal.shape[1] - 1
    assert readings.separate()
    box = random_box(rng, count, one_sign=True)
    low, high = np.array(box.low), np.array(box.high)
    far = np.maximum(np.abs(low), np.abs(high))
    program = readings.boxed(low, high)
    for _ in range(10):
        points = random_points(rng, shared.limits, count)[:, :-1]
        w = inside(rng, box)
        y = np.append(points.ravel(), readings.limits.time_high[0])
        less = y * np.append(np.repeat(np.abs(w) / far, n), 1.0)
        signal, noise = w @ (readings.signal @ y), variance(readings, w, y)
        assert program.signal[0] @ less == pytest.approx(signal, rel=1e-9)
        rows = program.noise_rows[0] @ less
        assert program.floor[0] + program.shot[0] @ less + rows @ rows <= noise * (1 + 1e-9)


@pytest.mark.parametrize("seed", SEEDS)
def test_first_bound_holds_for_all_recipes_and_weights(seed):
    """Shots (every reading a recipe of its own) and channels (one recipe for all), at the best weights."""
    rng = np.random.default_rng(seed)
    for shots in (False, True):
        count = int(rng.integers(2, 4))
        if shots:
            program = any_program(rng)
            programs, own, repeats = [program], 0, count
        else:
            shared = as_channels(rng, count)
            programs, own, repeats = [as_block(shared, m) for m in range(count)], shared.pattern.shape[1], 1
        top = float(first_bounds(programs, own, repeats)[0])
        alone = [replace(p, noise_rows=p.noise_rows[:, :own]) for p in programs]
        assert top <= first_bounds(alone, own, repeats)[0] * (1 + 1e-12)
        for _ in range(20):
            found = best_at(programs, own, random_points(rng, programs[0], count), shots)
            assert found <= top * (1 + 1e-9)


def as_block(readings: Readings, m: int) -> Program:
    """One reading as a program whose rows in common come after its own."""
    return replace(
        readings.limits,
        signal=readings.signal[m][None],
        shot=readings.shot[m][None],
        noise_rows=np.concatenate([readings.pattern[m], readings.common[m]])[None],
        floor=readings.floor[m][None],
    )


def best_at(programs: list[Program], own: int, points, shots: bool) -> float:
    """CNR at the best weights of the readings at their recipes."""
    blocks = programs * len(points) if shots else programs
    points = points if shots else [points[0]] * len(blocks)
    delta = np.array([p.signal[0] @ y for p, y in zip(blocks, points, strict=True)])
    rows = [p.noise_rows[0] @ y for p, y in zip(blocks, points, strict=True)]
    common = np.stack([row[own:] for row in rows])
    alone = [p.floor[0] + p.shot[0] @ y + row[:own] @ row[:own] for p, y, row in zip(blocks, points, rows, strict=True)]
    return float(np.sqrt(delta @ np.linalg.solve(np.diag(alone) + common @ common.T, delta)))


def test_shots_over_many_filters_are_proven():
    """The first bound alone comes close: contrast of a bruise looks much like the spread of the fruit."""
    wanted = {**SHOTS["candidates"], "filters": "all", "cameras": ["nir-2mp", "mono-5mp"]}
    solution = solve(build_problem(changed(SHOTS, candidates=wanted)))
    assert solution.certificate.configurations >= 200
    assert solution.certificate.gap <= 0.05
    verify(solution)


# --- two shots against a grid -------------------------------------------------------------------------------------


@pytest.mark.parametrize(("pixels", "more_prnu"), [(1, 0.0), (64, 3.0)])
def test_shots_reach_the_best_of_a_grid_of_recipes_and_weights(pixels, more_prnu):
    """Every pair of two shots from a grid of currents, at its own best weights, worked out without the search."""
    problem = nudged(build_problem(changed(SHOTS, averaging={"pixels": pixels}, limits=None)), "PRNU", more_prnu)
    solution = solve(problem)
    verify(solution)
    best, design = best_of_grid(problem, solution)
    forward = evaluate(problem, design, junction_c=solution.certificate.junction_c)
    assert forward.feasible and forward.cnr == pytest.approx(best, rel=1e-9)
    assert best <= solution.certificate.bound * (1 + 1e-9)
    assert solution.certificate.value >= best * (1 - 1e-3)
    assert solution.certificate.gap <= 0.05


def best_of_grid(problem, solution, steps: int = 6) -> tuple[float, Design]:
    """Best CNR of two shots at the exposures of the solution, over a grid of the currents of all LEDs."""
    design, junction = solution.optimum.design, solution.certificate.junction_c
    setting, averaging = setting_of(problem, design), problem.spec.averaging
    sensor, t = Sensor.of(setting.camera, setting.gain), design.shots[0].exposure_us * 1e-6
    grid = itertools.product(*(np.linspace(0.0, 1300.0, steps) for c in problem.channels))
    drives = [{c.id: float(ma) for c, ma in zip(problem.channels, currents, strict=True)} for currents in grid]
    lights, shots = [], []
    for shot in (Shot(exposure_us=design.shots[0].exposure_us, drive_ma=drive) for drive in drives):
        if not evaluate(problem, replace(design, shots=(shot,), weights={})).feasible:
            continue
        drive = shot.drive_ma
        lit = [led_state(problem, c, drive[c.id], problem.duty(t)) for c in problem.channels if drive[c.id] > 0]
        lit = tuple(replace(s, junction_c=junction[s.id]) for s in lit)
        lights.append(electrons(problem, setting, design, lit, t))
        shots.append(shot)
    values = _pairs([_split(sensor, averaging, light) for light in lights])
    for place in np.argsort(-values, axis=None):
        pair = np.unravel_index(place, values.shape)
        found = replace(design, shots=tuple(shots[k] for k in pair), exposure_us=2 * shots[0].exposure_us)
        if evaluate(problem, found).feasible:
            return float(values[pair]), found
    raise AssertionError("no pair of shots of the grid is feasible")


def _split(sensor, averaging, light):
    """Difference, own variance and amplitudes in common of one shot, mean of both surfaces."""
    own = sum(
        term.variance(sensor, light.electrons[s], light.clutter[s], averaging)
        for term in NOISE_TERMS
        for s in (0, 1)
        if term.averages == "samples"
    )
    # After EMVA 1288, spatial terms: PRNU times photo-electrons and DSNU, of the same pixels in every shot.
    pattern = [
        np.array([sensor.prnu * light.electrons[s, :2].sum(), sensor.dsnu_e]) / np.sqrt(averaging.pixels)
        for s in (0, 1)
    ]
    common = np.concatenate([pattern[0], light.clutter[0], pattern[1], light.clutter[1]])
    return light.electrons[0].sum() - light.electrons[1].sum(), own / 2, common / np.sqrt(2)


def _pairs(split):
    """CNR of every pair of shots at the best weights, by the inverse of the 2 × 2 covariance."""
    d = np.array([item[0] for item in split])
    own = np.array([item[1] for item in split])
    common = np.stack([item[2] for item in split])
    cross = common @ common.T
    a = (own + np.diag(cross))[:, None]
    b = (own + np.diag(cross))[None, :]
    square = (b * d[:, None] ** 2 - 2 * cross * d[:, None] * d[None, :] + a * d[None, :] ** 2) / (a * b - cross**2)
    return np.sqrt(np.maximum(square, 0.0))
