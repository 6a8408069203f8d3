"""Try to break the proof checker: no multipliers whatever may give a bound below what a feasible recipe reaches."""

from dataclasses import replace

import numpy as np
import pytest
from exhaustive import best_vertex
from hypothesis import given, settings
from hypothesis import strategies as st
from random_programs import any_program, random_points, random_program, repeated

from codesign.certificate import (
    Curves,
    Line,
    Proof,
    bound,
    check_bound,
    check_point,
    curves,
    envelope,
    signal_ceiling,
)
from codesign.errors import CertificateError
from codesign.program import Program, contrast_to_noise, variance
from codesign.search.bounds import simple_proof
from codesign.search.frontier import Certified, certify
from codesign.search.tighten import Tightening

pytestmark = pytest.mark.oracle


def random_line(rng: np.random.Generator, program: Program, like: Line) -> Line:
    """Multipliers with no sense in them: near good ones, of any size, zero or absurd."""
    anything = 10.0 ** rng.uniform(-12.0, 12.0)
    wild = 10.0 ** rng.uniform(-3.0, 3.0, 4) if rng.uniform() < 0.7 else 10.0 ** rng.uniform(-20.0, 25.0, 4)

    def shaken(values: np.ndarray, size: float) -> np.ndarray:
        scale = np.abs(values).max(initial=0.0) + anything * (rng.uniform() < 0.2)
        noise = rng.uniform(size=values.shape) * (rng.uniform(size=values.shape) < 0.5)
        return (np.abs(values) * rng.choice([0.0, 1.0, rng.uniform()]) + scale * noise) * size

    exists = np.isfinite(program.heat_cap)
    return Line(
        theta=like.theta * rng.choice([-1.0, 0.0, 1.0, 1.0, 1.0]) * wild[0],
        limit=shaken(like.limit, wild[1] if rng.uniform() < 0.5 else wild[0]),
        heat=shaken(like.heat, wild[2]) * exists,
        noise=like.noise * rng.choice([-1.0, 0.0, 1.0, 1.0]) * wild[3] + rng.normal(0.0, 1.0, like.noise.shape),
        anchor=like.anchor * 10.0 ** rng.uniform(-4.0, 4.0) if rng.uniform() < 0.8 else like.anchor * wild[0],
    )


def witnesses(rng: np.random.Generator, program: Program, count: int = 150):
    """Feasible points, among them those at which bounds are tight; with their signal, spread and CNR."""
    best = certify(program, 1e-6)
    y = np.vstack([random_points(rng, program, count), best.point])
    many = repeated(program, len(y))
    return best, y @ program.signal[0], variance(many, y) - program.floor[0], contrast_to_noise(many, y)


@pytest.mark.parametrize("seed", range(30))
def test_no_multipliers_give_a_bound_below_a_feasible_recipe(seed):
    """30 programs, 40 proofs of 1 to 4 nonsensical lines each, against 150 feasible points each."""
    rng = np.random.default_rng(seed)
    program = any_program(rng, leds=int(rng.integers(1, 7)))
    if rng.uniform() < 0.3:
        program = replace(program, signal=-program.signal)
    best, v, spread, cnr = witnesses(rng, program)
    good = list(best.proof.lines) or [best.proof.ceiling]
    for _ in range(40):
        lines = [random_line(rng, program, good[rng.integers(len(good))]) for _ in range(rng.integers(1, 5))]
        ceiling = random_line(rng, program, best.proof.ceiling) if rng.uniform() < 0.5 else best.proof.ceiling
        if rng.uniform() < 0.5:
            lines.append(good[rng.integers(len(good))])
        assert signal_ceiling(program, ceiling)[0] >= v.max() - 1e-9 * abs(v.max())
        found = curves(program, tuple(lines))
        slack = 1e-9 * (np.abs(found.alpha) + np.abs(found.theta * v[:, None]) + spread[:, None])
        assert (spread[:, None] >= found.theta * v[:, None] + found.alpha - slack).all()
        inside = (v[:, None] >= 0) & (v[:, None] <= found.anchor)
        size = np.abs(found.k) * v[:, None] ** 2 + np.abs(found.e * v[:, None]) + spread[:, None]
        parabola = found.k * v[:, None] ** 2 + found.e * v[:, None]
        assert (~inside | (spread[:, None] >= parabola - 1e-9 * size)).all()
        proven = bound(program, Proof(ceiling=ceiling, lines=tuple(lines)))[0]
        assert proven >= cnr.max() * (1 - 1e-9)
        assert bound(program, Proof(ceiling=ceiling, lines=()))[0] >= cnr.max() * (1 - 1e-9)


@pytest.mark.parametrize("seed", range(12))
def test_no_multipliers_give_a_bound_below_the_best_vertex(seed):
    rng = np.random.default_rng(1000 + seed)
    program = random_program(rng, leds=int(rng.integers(1, 4)), segments=2, prnu=0.0, power_while_on=bool(seed % 2))
    reference = max(best_vertex(program), 0.0)
    good = certify(program).proof
    for _ in range(100):
        lines = tuple(random_line(rng, program, line) for line in (good.lines or (good.ceiling,)))
        proof = Proof(ceiling=random_line(rng, program, good.ceiling), lines=lines)
        assert bound(program, proof)[0] >= reference * (1 - 1e-9)


@pytest.mark.parametrize("seed", range(30))
def test_every_rung_of_bounds_is_above_the_certified_value(seed):
    """Closed form and side-by-side tightening, in blocks of programs with other sizes and units."""
    rng = np.random.default_rng(2000 + seed)
    block = any_program(rng, programs=4, leds=int(rng.integers(1, 20)))
    state = Tightening.start(block, target=0.0)
    values = np.array([certify(block.take(i), 1e-4).value for i in range(block.size)])
    assert (simple_proof(block)[1] >= values * (1 - 1e-9)).all()
    for _ in range(4):
        assert (state.bound >= values * (1 - 1e-9)).all()
        assert bound(block, state.proof()) == pytest.approx(state.bound, rel=1e-12)
        state.round(float(rng.choice([0.0, 1.0, values.max()])))


@settings(max_examples=300, deadline=None, derandomize=True)
@given(
    floor=st.floats(1e-3, 1e4),
    top=st.one_of(st.just(0.0), st.floats(-10.0, -1e-3), st.floats(1e-6, 1e6)),
    lines=st.lists(
        st.tuples(
            st.floats(-1e3, 1e3), st.floats(-1e6, 1e6), st.floats(-10, 10), st.floats(-1e3, 1e3), st.floats(1e-9, 1e9)
        ),
        min_size=1,
        max_size=5,
    ),
)
def test_envelope_is_the_largest_ratio_under_the_best_curve(floor, top, lines):
    """Against a dense scan of ``v²/(c + max(0, lines, parabolas))``: never below; crossings, ends and negative k, e."""
    theta, alpha, k, e, anchor = (np.array([column]) for column in zip(*lines, strict=True))
    found = Curves(theta=theta, alpha=alpha, k=k, e=e, anchor=anchor)
    value = envelope(np.array([floor]), np.array([top]), found)[0][0]
    if top <= 0:
        assert value == 0
        return
    inner = anchor[0][anchor[0] < top]
    v = np.unique(np.concatenate([np.linspace(0.0, top, 2001), np.geomspace(1e-9 * top, top, 2001), inner]))[:, None]
    height = np.maximum(0.0, (theta * v + alpha).max(axis=1))
    height = np.maximum(height, np.where(v <= anchor, k * v**2 + e * v, 0.0).max(axis=1))
    scan = (v[:, 0] / np.sqrt(floor + height)).max()
    assert value >= scan * (1 - 1e-9)
    assert value <= top / np.sqrt(floor) * (1 + 1e-12)


def test_envelope_of_one_line_and_one_parabola_is_exact():
    """By hand: c = 1, H ≥ v gives v²/(1+v), at v = 4: 16/5; H ≥ v² up to 4 gives 16/17."""
    nothing = np.array([[-1e9]])
    line = Curves(theta=np.array([[1.0]]), alpha=np.array([[0.0]]), k=nothing, e=nothing, anchor=np.array([[4.0]]))
    parabola = Curves(
        theta=np.array([[0.0]]), alpha=nothing, k=np.array([[1.0]]), e=np.array([[0.0]]), anchor=line.anchor
    )
    one, four = np.array([1.0]), np.array([4.0])
    assert envelope(one, four, line)[0][0] ** 2 == pytest.approx(16 / 5, rel=1e-12)
    assert envelope(one, four, parabola)[0][0] ** 2 == pytest.approx(16 / 17, rel=1e-12)
    # Beyond its anchor the parabola says nothing: only H ≥ 0 is left.
    assert envelope(one, np.array([5.0]), parabola)[0][0] ** 2 == pytest.approx(25.0, rel=1e-12)


@pytest.fixture(scope="module")
def case() -> tuple[Program, Certified]:
    """One program in which two LEDs have a heat cap and one has none, certified to 1e-6."""
    program = random_program(np.random.default_rng(11), leds=3, segments=2, clutter=1)
    program = replace(program, heat_cap=np.array([1e-4, 2e-4, np.inf]))
    found = certify(program, 1e-6)
    assert found.value > 0.1
    return program, found


def test_honest_proof_and_point_pass(case):
    program, found = case
    assert check_point(program, found.point, found.value) == found.value
    assert check_bound(program, found.proof, found.bound)[0] == found.bound


def test_tampered_bound_is_rejected(case):
    program, found = case
    with pytest.raises(CertificateError, match="not the claimed bound"):
        check_bound(program, found.proof, found.bound * (1 - 1e-9))


def test_tampered_cnr_is_rejected(case):
    program, found = case
    for claimed in (found.value * (1 + 1e-6), found.value * (1 - 1e-6), np.nan):
        with pytest.raises(CertificateError, match="not the claimed"):
            check_point(program, found.point, claimed)


def test_recipe_over_any_limit_is_rejected(case):
    program, found = case
    t = found.point[-1]
    worse = [found.point * 1.01, np.append(program.width * t * 1.0001, t), np.append(found.point[:-1], 0.0)]
    worse += [np.append(-1e-3 * program.width * t, t), np.append(found.point[:-1], 2 * program.time_high)]
    heated = found.point.copy()
    heated[0] = 1.001 * program.heat_cap[0] / program.heat[0]
    for y in [*worse, heated, found.point * np.nan]:
        value = float(contrast_to_noise(program, y[None])[0])
        with pytest.raises(CertificateError, match="exceeds a limit"):
            check_point(program, y, value)


@pytest.mark.parametrize("part", ["limit", "heat"])
def test_negative_multiplier_is_rejected(case, part):
    program, found = case
    spoiled = getattr(found.proof.lines[0], part).copy()
    spoiled[0, 0] = -1e-12
    line = replace(found.proof.lines[0], **{part: spoiled})
    for proof in (Proof(ceiling=line, lines=()), replace(found.proof, lines=(line,))):
        with pytest.raises(CertificateError, match="negative multiplier"):
            check_bound(program, proof, np.inf)


def test_price_on_a_heat_limit_that_does_not_exist_is_rejected(case):
    program, found = case
    line = replace(found.proof.lines[0], heat=np.array([[0.0, 0.0, 1.0]]))
    with pytest.raises(CertificateError, match="does not exist"):
        check_bound(program, replace(found.proof, lines=(line,)), np.inf)


@pytest.mark.parametrize("part", ["theta", "limit", "noise", "heat"])
@pytest.mark.parametrize("value", [np.nan, np.inf])
def test_multiplier_that_is_not_a_number_is_rejected(case, part, value):
    program, found = case
    spoiled = getattr(found.proof.lines[0], part).copy()
    spoiled.flat[0] = value
    line = replace(found.proof.lines[0], **{part: spoiled})
    with pytest.raises(CertificateError, match="not finite"):
        check_bound(program, replace(found.proof, lines=(line,)), np.inf)


@pytest.mark.parametrize("anchor", [0.0, -1.0, np.nan])
def test_anchor_that_is_not_positive_is_rejected(case, anchor):
    program, found = case
    line = replace(found.proof.lines[0], anchor=np.array([anchor]))
    with pytest.raises(CertificateError, match="anchor"):
        check_bound(program, replace(found.proof, lines=(line,)), np.inf)


@pytest.mark.parametrize("factor", [1e-300, 1e-30, 1e-3, 0.5, 2.0, 1e3, 1e30, 1e290])
def test_anchor_elsewhere_never_gives_a_bound_too_low(case, factor):
    program, found = case
    lines = tuple(replace(line, anchor=np.maximum(line.anchor * factor, 1e-320)) for line in found.proof.lines)
    assert bound(program, replace(found.proof, lines=lines))[0] >= found.value


def test_multipliers_that_overflow_prove_nothing(case):
    """A ceiling of NaN once read as a bound of zero."""
    program, found = case
    huge = replace(found.proof.ceiling, limit=np.full_like(found.proof.ceiling.limit, 1e305))
    for lines in ((), found.proof.lines, (huge,)):
        assert bound(program, Proof(ceiling=huge, lines=lines))[0] >= found.value
    with pytest.raises(CertificateError):
        check_bound(program, Proof(ceiling=huge, lines=()), found.bound)


@pytest.mark.parametrize("price", [1e5, 1e15, 1e20, 1e25])
@pytest.mark.parametrize("seed", range(5))
def test_round_off_in_a_limit_that_ambient_light_meets_exactly_is_no_proof(seed, price):
    """One single exposure and a well just filled by ambient light: huge prices once amplified the last digit."""
    rng = np.random.default_rng(seed)
    program = random_program(rng, fixed_time=True, heat_cap=False)
    bounds = program.bounds.copy()
    bounds[:, 0] = program.rows[:, 0, -1] * program.time_low * (1 + 1e-15 * rng.uniform(-2, 2))
    program = replace(program, bounds=bounds)
    dark = np.append(np.zeros(program.segments), program.time_low)
    value = float(contrast_to_noise(program, dark[None])[0])
    check_point(program, dark, value)
    found = certify(program)
    priced = found.proof.ceiling.limit.copy()
    priced[:, 0] = price
    line = replace(found.proof.ceiling, limit=priced)
    for lines in ((), (line,), (*found.proof.lines, line)):
        assert bound(program, Proof(ceiling=line, lines=lines))[0] >= value
