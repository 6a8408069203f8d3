"""What a search takes over stays a bound: multipliers lent, those of other temperatures, fewer columns, kept rates."""

import numpy as np
import pytest
from parametric_catalog import parametric_catalog, parametric_problem
from random_programs import any_program

from codesign.assemble import Assembly
from codesign.certificate import Line, Proof, bound, intercept, signal_ceiling
from codesign.radiometry import RateTable
from codesign.search import lend
from codesign.search.carry import carry
from codesign.search.columns import promising
from codesign.search.frontier import certify
from codesign.search.interior import relax
from codesign.search.tighten import ROUGH, Tightening
from codesign.search.walk import Walk

pytestmark = pytest.mark.oracle

COUNT = 24


@pytest.fixture(scope="module", params=[(1, 1), (2, 4)], ids=["one sample", "clutter"])
def problem(request, tmp_path_factory):
    folder = tmp_path_factory.mktemp("catalog")
    seed, samples = request.param
    catalog = parametric_catalog(folder, leds=COUNT, filters=30, cameras=2, samples=samples, seed=seed)
    return parametric_problem(catalog, folder)


@pytest.fixture(scope="module")
def optima(problem):
    """CNR of every configuration at 40 deg C and at the temperatures of `warmer`, each certified on its own."""

    def values(junction):
        walk = Walk.blank(Assembly(problem, junction))
        return np.array(
            [certify(walk.programs(np.array([i]), coarse=False), 1e-3).value for i in range(walk.upper.size)]
        )

    return values(np.full(COUNT, 40.0)), values(warmer())


def warmer():
    return np.full(COUNT, 40.0) + np.where(np.arange(COUNT) % 3 == 0, 25.0, 0.0)


def test_bounds_of_a_walk_that_lends_are_never_below_the_optimum(problem, optima, monkeypatch):
    monkeypatch.setattr("codesign.search.walk.FIRST_CHUNKS", (4, 3))
    monkeypatch.setattr("codesign.search.walk.MANY", 4)
    walk = Walk(Assembly(problem, np.full(COUNT, 40.0)), 1e-3)
    best = walk.best()
    assert (walk.upper >= optima[0] * (1 - 1e-9)).all()
    assert walk.found[best].value >= optima[0].max() * (1 - 1e-3)
    assert walk.lent.any() and walk.lenders
    dropped = (walk.lent > 0) & (walk.refined == 0) & (walk.upper <= walk.found[best].value * (1 + 1e-3))
    assert dropped.any()


def test_bounds_carried_to_other_temperatures_are_never_below_the_optimum_there(problem, optima):
    before = Walk(Assembly(problem, np.full(COUNT, 40.0)), 1e-3)
    known = before.configuration(before.best())
    walk = Walk(Assembly(problem, warmer()), 1e-3)
    walk.seed(known, before.found[before.number(known)])
    closed_form = walk.upper.copy()
    carry(walk, before, walk.aim)
    assert (walk.upper >= optima[1] * (1 - 1e-9)).all()
    assert (walk.upper < closed_form).sum() > 1
    best = walk.best()
    assert walk.found[best].value >= optima[1].max() * (1 - 1e-3)
    assert (walk.upper >= optima[1] * (1 - 1e-9)).all()


def test_rates_handed_over_equal_those_worked_out_anew(problem):
    rng = np.random.default_rng(5)
    junction = np.full(COUNT, 30.0)
    table, camera = RateTable(problem, junction), problem.cameras[0]
    for _ in range(4):
        for part in (slice(0, 20), slice(20, 30)):
            table.rates(camera, "mono", 4.0, part, True)
        junction = junction + np.where(rng.uniform(size=COUNT) < 0.3, rng.uniform(1, 30, COUNT), 0.0)
        table, last = table.at(junction, hand_over=True), table
        fresh = RateTable(problem, junction)
        for part in (slice(0, 20), slice(20, 30)):
            got, expected = (t.rates(camera, "mono", 4.0, part, True) for t in (table, fresh))
            assert np.allclose(got.led, expected.led, rtol=1e-12, atol=1e-300)
            assert np.array_equal(got.ambient, expected.ambient)
        old = last.rates(camera, "mono", 4.0, slice(0, 20), True)
        assert np.allclose(
            old.led, RateTable(problem, last.junction_c).rates(camera, "mono", 4.0, slice(0, 20), True).led
        )


def test_fewer_columns_give_bounds_that_are_nearly_as_tight_and_never_wrong():
    rng = np.random.default_rng(11)
    worse = []
    for _ in range(12):
        block = any_program(rng, programs=15, leds=40)
        target = 0.0
        full = Tightening.start(block, target)
        for theta in (None, full.lines[0].theta):
            few, every = (relax(block, theta, **{**ROUGH, "columns": columns}) for columns in (24, None))
            value = signal_ceiling if theta is None else intercept
            scale = np.abs(value(block, every.line)) + 1e-300
            sign = 1.0 if theta is None else -1.0
            worse += (sign * (value(block, few.line) - value(block, every.line)) / scale).tolist()
    assert np.quantile(worse, 0.95) < 1e-2
    assert np.median(np.abs(worse)) < 1e-4


def test_promising_columns_hold_the_brightest_and_the_least_noisy():
    rng = np.random.default_rng(3)
    block = any_program(rng, programs=10, leds=40)
    signal = np.maximum(block.signal[:, :-1], 0.0)
    chosen = promising(block, np.ones(10), 12)
    assert chosen.shape == (10, 12)
    assert (np.diff(chosen, axis=1) > 0).all()
    shot = np.where(signal > 1e-6 * signal.max(axis=1, keepdims=True), signal / block.shot[:, :-1], 0.0)
    for row in np.flatnonzero(signal.max(axis=1) > 0):
        assert int(np.argmax(shot[row])) in chosen[row]


def some_proof(rng, count: int, lines: int) -> Proof:
    def line() -> Line:
        return Line(
            theta=rng.uniform(size=count),
            limit=rng.uniform(size=(count, 2)),
            heat=np.zeros((count, 3)),
            noise=rng.uniform(size=(count, 1)),
            anchor=rng.uniform(1, 2, count),
        )

    return Proof(ceiling=line(), lines=tuple(line() for _ in range(lines)))


def test_joined_proofs_keep_each_programs_own_multipliers():
    rng = np.random.default_rng(0)
    proofs = [some_proof(rng, 4, 1), some_proof(rng, 3, 3)]
    own, place = np.array([0, 1, 1, 0]), np.array([3, 0, 2, 1])
    found = lend.joined(proofs, own, place)
    assert len(found.lines) == 3
    for k, (which, at) in enumerate(zip(own, place, strict=True)):
        last = len(proofs[which].lines) - 1
        for number, line in enumerate(found.lines):
            assert line.theta[k] == proofs[which].lines[min(number, last)].theta[at]
            assert line.limit[k].tolist() == proofs[which].lines[min(number, last)].limit[at].tolist()
        assert found.ceiling.theta[k] == proofs[which].ceiling.theta[at]


def test_lender_most_like_a_program_is_chosen():
    rng = np.random.default_rng(4)
    block = any_program(rng, programs=6, leds=5)
    lenders = lend.Lenders()
    state = Tightening.start(block, 0.0)
    assert lenders.lend(block) is None
    lenders.add(block, state.proof())
    lent = lenders.lend(block)
    assert np.allclose(bound(block, lent), bound(block, state.proof()))
    fewer = any_program(rng, programs=2, leds=3)
    assert lenders.lend(fewer) is None
