"""Several pairs at once: the certified worst CNR against brute force, and its proofs against tampering."""

from __future__ import annotations

import itertools
from dataclasses import replace

import numpy as np
import pytest
from random_programs import random_points, random_program, shrunk
from scipy.optimize import minimize

from codesign.certificate_pairs import (
    Leaf,
    PairProof,
    Split,
    check_pair_point,
    pair_bound,
    pair_contrasts,
    worst_contrast,
)
from codesign.errors import CertificateError
from codesign.program import Program, contrast_to_noise, violation
from codesign.search.frontier import certify
from codesign.search.pairs import certify_pairs, polish_pairs

pytestmark = pytest.mark.oracle


def random_pairs(seed: int, pairs: int = 3, leds: int = 2) -> list[Program]:
    """Pairs that share a random program's limits; each LED's signal differs from pair to pair, sometimes in sign."""
    rng = np.random.default_rng(seed)
    base = random_program(
        rng, leds=leds, segments=2, contrast=0.3, clutter=int(rng.integers(3)), power_while_on=bool(rng.integers(2))
    )
    found = []
    for _ in range(pairs):
        tint = rng.lognormal(0.0, 0.8, leds)[base.led] * np.where(rng.uniform(size=leds) < 0.2, -1.0, 1.0)[base.led]
        tint, bright = np.append(tint, 1.0), np.append(rng.lognormal(0.0, 0.5, leds)[base.led], 1.0)
        signal = np.abs(base.signal) * tint
        found.append(
            replace(
                base, signal=signal, shot=np.maximum(base.shot * bright, np.abs(signal) / 2),
                noise_rows=base.noise_rows * bright, floor=base.floor * rng.lognormal(0.0, 0.5, 1),
            )
        )  # fmt: skip
    return found


def brute_force(programs: list[Program], seed: int = 0) -> float:
    """Best worst CNR of a fine grid of drives and exposures, the best ten polished."""
    rng, first = np.random.default_rng(seed), programs[0]
    n = first.segments
    steps = {1: 400, 2: 60, 3: 18, 4: 9}[n]
    share = np.stack(np.meshgrid(*[np.linspace(0, 1, steps)] * n, indexing="ij"), axis=-1).reshape(-1, n)
    times = np.linspace(first.time_low[0], first.time_high[0], 7)
    grid = [shrunk(first, np.hstack([share * first.width * t, np.full((len(share), 1), t)])) for t in times]
    points = np.concatenate([*grid, random_points(rng, first, 500)])
    worst = np.min([contrast_to_noise(_repeat(p, len(points)), points) for p in programs], axis=0)
    best = [polished(programs, points[i]) for i in np.argsort(-worst)[:10]]
    return max(float(worst.max()), *best)


def _repeat(program: Program, count: int) -> Program:
    return program.take(np.zeros(count, dtype=int))


def polished(programs: list[Program], y: np.ndarray) -> float:
    """Local ascent of the worst CNR in unit scale; the result is pulled inside the limits."""
    first = programs[0]
    column = np.append(first.width, 1.0) * first.time_high[0]

    def reached(u):
        return pair_contrasts(programs, u[:-1] * column)

    capped = np.flatnonzero(np.isfinite(first.heat_cap))
    heat = [np.append(np.where(first.led == led, first.heat, 0.0), 0.0) / first.heat_cap[led] for led in capped]
    size = np.maximum(np.abs(first.rows[0] * column).max(axis=1), 1e-300)

    def inside(u):
        y = u[:-1] * column
        return np.concatenate(
            [
                (first.bounds[0] - first.rows[0] @ y) / size,
                u[-2] - u[:-2],
                [1 - row @ y for row in heat],
                reached(u) - u[-1],
            ]
        )

    start = np.append(y / column, worst_contrast(programs, y))
    low = first.time_low[0] / first.time_high[0]
    box = [(0, 1)] * first.segments + [(low, 1), (None, None)]
    with np.errstate(all="ignore"):
        end = minimize(lambda u: -u[-1], start, constraints={"type": "ineq", "fun": inside}, bounds=box, method="SLSQP")
    y = shrunk(first, (np.nan_to_num(np.clip(end.x[:-1], 0, 1)) * column)[None])[0]
    y[-1] = np.clip(y[-1], first.time_low[0], first.time_high[0])
    return worst_contrast(programs, y) if violation(first, y[None])[0] <= 1e-9 else -np.inf


@pytest.mark.parametrize("seed", range(14))
def test_certified_worst_contrast_equals_brute_force(seed):
    programs = random_pairs(seed, pairs=2 + seed % 3, leds=1 + seed % 2)
    result = certify_pairs(programs, 1e-3)
    best = brute_force(programs)
    assert check_pair_point(programs, result.point, result.value) == pytest.approx(result.value)
    assert best <= result.bound * (1 + 1e-9) + 1e-12
    assert result.value >= best * (1 - 1.1e-3)
    assert result.gap <= 1e-3


@pytest.mark.parametrize("seed", range(0, 40, 4))
def test_larger_programs_close_to_the_gap_asked_for(seed):
    programs = random_pairs(seed, pairs=4, leds=8)
    result = certify_pairs(programs, 1e-3)
    assert result.gap <= 1e-3
    if isinstance(result.proof, PairProof):
        assert pair_bound(programs, result.proof) == result.bound


@pytest.mark.parametrize("seed", range(6))
def test_worst_contrast_is_no_more_than_that_of_any_pair_alone(seed):
    programs = random_pairs(seed, pairs=3, leds=3)
    result = certify_pairs(programs, 1e-3)
    alone = [certify(program, 1e-3).bound for program in programs]
    assert result.value <= min(alone) * (1 + 1e-9)


@pytest.mark.parametrize("seed", range(6))
def test_one_more_pair_never_raises_the_value(seed):
    programs = random_pairs(seed, pairs=4, leds=3)
    bounds = [certify_pairs(programs[:count], 1e-3) for count in (1, 2, 3, 4)]
    for fewer, more in itertools.pairwise(bounds):
        assert more.value <= fewer.bound * (1 + 1e-9)


def test_one_pair_takes_the_path_of_a_single_pair():
    program = random_pairs(3, pairs=1, leds=3)[0]
    single, result = certify(program, 1e-3), certify_pairs([program], 1e-3)
    assert (result.value, result.bound) == (single.value, single.bound)
    assert np.array_equal(result.point, single.point)


def test_the_same_pair_twice_changes_nothing():
    program = random_pairs(5, pairs=1, leds=3)[0]
    single, twice = certify(program, 1e-3), certify_pairs([program, program], 1e-3)
    assert twice.value == pytest.approx(single.value, rel=1e-3)


def test_order_of_the_pairs_changes_nothing_beyond_the_gap():
    programs = random_pairs(7, pairs=4, leds=4)
    one, other = certify_pairs(programs, 1e-3), certify_pairs(programs[::-1], 1e-3)
    assert one.value == pytest.approx(other.value, rel=1.1e-3)


def test_pairs_of_opposite_sign_have_no_common_recipe():
    program = random_pairs(2, pairs=1, leds=2)[0]
    result = certify_pairs([program, replace(program, signal=-program.signal)], 1e-3)
    assert result.value <= 0
    assert result.bound <= 1e-6 * certify(program).bound


def test_a_target_already_reached_ends_the_search_early():
    programs = random_pairs(0, pairs=4, leds=8)
    full = certify_pairs(programs, 1e-4)
    early = certify_pairs(programs, 1e-4, target=2 * full.value)
    assert early.cells <= full.cells
    assert full.value <= early.bound <= 2 * full.value * (1 + 1e-4)


def test_polishing_never_lowers_the_value():
    programs = random_pairs(4, pairs=3, leds=5)
    rough = certify_pairs(programs, 5e-2)
    fine = polish_pairs(programs, rough)
    assert rough.value <= fine.value <= rough.bound * (1 + 1e-9)
    assert check_pair_point(programs, fine.point, fine.value) == pytest.approx(fine.value)


@pytest.fixture(scope="module")
def tree_case():
    """Programs whose proof is a tree, and that proof."""
    for seed in range(40):
        programs = random_pairs(seed, pairs=3, leds=4)
        result = certify_pairs(programs, 1e-3)
        if isinstance(result.proof, PairProof):
            return programs, result
    raise AssertionError("no random case needs a tree")


def first_leaf(tree: Leaf | Split) -> Leaf:
    while isinstance(tree, Split):
        tree = tree.below
    return tree


def with_leaf(tree: Leaf | Split, leaf: Leaf) -> Leaf | Split:
    """The tree with another leaf in place of its first."""
    return replace(tree, below=with_leaf(tree.below, leaf)) if isinstance(tree, Split) else leaf


@pytest.mark.parametrize(
    "change",
    [
        lambda leaf: replace(leaf, level=0.5 * leaf.level),
        lambda leaf: replace(leaf, limit=-leaf.limit - 1e-3),
        lambda leaf: replace(leaf, weight=-leaf.weight),
        lambda leaf: replace(leaf, weight=leaf.weight * np.nan),
        lambda leaf: replace(leaf, limit=0.5 * leaf.limit, heat=0.5 * leaf.heat),
        lambda leaf: replace(leaf, share=3.0 * leaf.share, level=0.9 * leaf.level),
        lambda leaf: replace(leaf, level=float("nan")),
        lambda leaf: replace(leaf, above=leaf.above - 1.0),
    ],
    ids=[
        "level",
        "negative price",
        "negative weight",
        "not a number",
        "half the prices",
        "too long",
        "no level",
        "side",
    ],
)
def test_tampered_leaf_is_rejected(tree_case, change):
    programs, result = tree_case
    broken = PairProof(tree=with_leaf(result.proof.tree, change(first_leaf(result.proof.tree))))
    with pytest.raises(CertificateError):
        pair_bound(programs, broken)


def test_proof_of_other_programs_is_rejected(tree_case):
    programs, result = tree_case
    brighter = [replace(p, signal=1.3 * p.signal) for p in programs]
    with pytest.raises(CertificateError):
        pair_bound(brighter, result.proof)
    looser = [replace(p, bounds=1.5 * p.bounds, heat_cap=1.5 * p.heat_cap) for p in programs]
    with pytest.raises(CertificateError):
        pair_bound(looser, result.proof)


def test_cells_that_do_not_fit_together_are_rejected(tree_case):
    programs, result = tree_case
    tree = result.proof.tree
    with pytest.raises(CertificateError):
        pair_bound(programs, PairProof(tree=replace(tree, below=tree.above)))
    with pytest.raises(CertificateError, match="outside itself"):
        pair_bound(programs, PairProof(tree=replace(tree, at=-1.0)))


def test_pairs_with_other_limits_are_rejected(tree_case):
    programs, result = tree_case
    with pytest.raises(CertificateError, match="share their limits"):
        pair_bound([programs[0], *(replace(p, bounds=2 * p.bounds) for p in programs[1:])], result.proof)


def test_point_of_another_value_or_beyond_a_limit_is_rejected(tree_case):
    programs, result = tree_case
    with pytest.raises(CertificateError, match="worst CNR"):
        check_pair_point(programs, result.point, 1.01 * result.value)
    with pytest.raises(CertificateError, match="exceeds"):
        check_pair_point(programs, 1.5 * result.point, result.value)
