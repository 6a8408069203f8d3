"""Cuts hold for every set of LEDs they cover, and the checker of rigs in common notices what is tampered with."""

from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from random_families import even_catalog, random_family
from random_problems import LEDS, random_table

from codesign import build_problem
from codesign.certificate import Line
from codesign.certificate_pairs import Leaf, PairProof, Split
from codesign.certificate_shared import Cut
from codesign.errors import CertificateError
from codesign.problem import Problem
from codesign.search.shared import Judge, Reached
from codesign.search.shared_space import RigSpace
from codesign.study.rig_sets import smallest_filter_wheel, smallest_rig_set
from codesign.study.rig_sets_verify import verify_filter_wheel, verify_rig_set
from codesign.study.shared_rig import SharedRig, shared_rig, verify_shared
from codesign.study.shared_rig_parts import common_problems
from codesign.study.shared_rig_verify import Checked

pytestmark = pytest.mark.oracle

CATALOG = even_catalog()
#: LED channels at most.
MOST = 2


def wide_problem(seed: int, *, pairs: bool) -> Problem:
    """A random problem with eight LEDs, with two targets against two backgrounds where ``pairs``."""
    rng = np.random.default_rng(seed)
    table = random_table(rng, filters=1)
    table["candidates"] |= {"leds": list(rng.choice(LEDS, 8, replace=False)), "gains_db": [0], "cameras": ["mono-5mp"]}
    if pairs:
        table["scene"] |= {"target": ["cap-red", "cap-blue"], "background": ["cap-yellow", "cap-white"]}
    else:
        table["scene"] |= {"target": "cap-green", "background": "cap-blue"}
    table["averaging"] = {"pixels": 4}
    return build_problem(table, catalog=CATALOG)


def judge_of(problem: Problem) -> tuple[Judge, RigSpace]:
    (own,) = common_problems({"one": problem}, MOST)[0].values()
    space = RigSpace(own)
    return Judge("one", own, np.full(len(own.channels), own.spec.temperature.air_c), space), space


def cuts_of(judge: Judge, space: RigSpace, share: float) -> tuple[int, list[Cut]]:
    """Cuts of the most promising rig that start from one LED each, at a share of what all LEDs reach."""
    judge.look(np.ones(len(space), dtype=bool))
    rig = int(np.argmax(judge.upper))
    best = judge.best(rig, np.ones(judge.leds, dtype=bool)).value
    found = [judge.cut(rig, np.arange(judge.leds) == led, share * best) for led in range(judge.leds)]
    assert all(one.value >= share * best * (1 - 1e-6) for one in found if isinstance(one, Reached))
    cuts = [one for one in found if isinstance(one, Cut)]
    assert all(cut.level < share * best for cut in cuts)
    return rig, cuts


@pytest.mark.parametrize(
    ("seed", "pairs", "share"),
    [
        (0, False, 0.9),
        (2, False, 0.6),
        (7, False, 0.97),
        (10, False, 0.9),
        (2, True, 0.9),
        (3, True, 0.6),
        (10, True, 0.9),
    ],
)
def test_no_set_that_a_cut_covers_exceeds_its_level(seed, pairs, share):
    judge, space = judge_of(wide_problem(seed, pairs=pairs))
    rig, cuts = cuts_of(judge, space, share)
    rng = np.random.default_rng(seed)
    assert any((~cut.inside).any() and cut.inside.sum() > 1 for cut in cuts)
    for cut in cuts[:4]:
        for _ in range(6):
            own = rng.choice(np.flatnonzero(cut.inside), min(MOST, int(cut.inside.sum())), replace=False)
            reached = judge.best(rig, np.isin(np.arange(judge.leds), own)).value
            assert reached <= cut.level * (1 + 1e-9)


def test_cuts_of_several_pairs_prove_as_much_to_the_checker():
    judge, space = judge_of(wide_problem(3, pairs=True))
    checked = Checked("one", judge.problem, judge.junction_c, space)
    rig, cuts = cuts_of(judge, space, 0.6)
    assert any(isinstance(piece.proof, PairProof) for cut in cuts for piece in cut.pieces)
    for cut in cuts:
        assert checked.level_of(rig, cut) <= cut.level * (1 + 1e-9)


def test_a_leaf_that_proves_less_is_refused_as_part_of_a_cut():
    judge, space = judge_of(wide_problem(3, pairs=True))
    rig, cuts = cuts_of(judge, space, 0.6)
    cut = next(c for c in cuts if any(isinstance(p.proof, PairProof) for p in c.pieces))

    def lowered(node: Leaf | Split) -> Leaf | Split:
        if isinstance(node, Split):
            return replace(node, below=lowered(node.below), above=lowered(node.above))
        return replace(node, level=0.1 * node.level)

    pieces = tuple(
        replace(p, proof=PairProof(tree=lowered(p.proof.tree))) for p in cut.pieces if isinstance(p.proof, PairProof)
    )
    with pytest.raises(CertificateError, match="do not prove"):
        Checked("one", judge.problem, judge.junction_c, space).level_of(rig, replace(cut, pieces=pieces))


@cache
def result() -> SharedRig:
    family = random_family(np.random.default_rng(522), CATALOG)
    found = shared_rig(family, max_led_channels=2, own={}, gap=1e-3, helps=False)
    assert found.evidence.cuts
    return found


def with_evidence(found: SharedRig, **changes) -> SharedRig:
    return replace(found, evidence=replace(found.evidence, **changes))


def all_cuts(found: SharedRig, change) -> SharedRig:
    cuts = {rig: tuple((place, change(cut)) for place, cut in own) for rig, own in found.evidence.cuts.items()}
    return with_evidence(found, cuts=cuts)


def test_the_untouched_result_passes():
    verdict = verify_shared(result())
    assert verdict.value == pytest.approx(result().value, rel=1e-9)
    assert verdict.by_cuts >= 1 and verdict.cuts >= 1


def test_a_lower_bound_is_refused():
    lower = 0.5 * (result().value + result().bound)
    assert lower > result().value * (1 + 1e-7)
    with pytest.raises(CertificateError, match="may be better"):
        verify_shared(replace(result(), bound=lower))
    with pytest.raises(CertificateError, match="wrong side"):
        verify_shared(replace(result(), bound=0.9 * result().value))


def test_cuts_that_claim_to_cover_all_leds_are_refused():
    wider = all_cuts(result(), lambda cut: replace(cut, inside=np.ones_like(cut.inside)))
    with pytest.raises(CertificateError, match="may be better"):
        verify_shared(wider)


def test_missing_cuts_are_noticed():
    with pytest.raises(CertificateError, match="may be better"):
        verify_shared(with_evidence(result(), cuts={}))


def test_negative_multipliers_are_refused():
    def spoil(line: Line) -> Line:
        return replace(line, limit=line.limit - 1e9)

    def change(cut: Cut) -> Cut:
        pieces = tuple(
            replace(p, proof=replace(p.proof, ceiling=spoil(p.proof.ceiling), lines=tuple(map(spoil, p.proof.lines))))
            for p in cut.pieces
        )
        return replace(cut, pieces=pieces)

    assert any(cut.pieces for own in result().evidence.cuts.values() for _, cut in own)
    with pytest.raises(CertificateError, match="negative multiplier"):
        verify_shared(all_cuts(result(), change))


def test_other_junction_temperatures_or_values_are_noticed():
    with pytest.raises(CertificateError, match="not the claimed"):
        verify_shared(replace(result(), value=result().value * 1.001, bound=result().bound * 1.01))


def test_more_leds_than_allowed_or_foreign_parts_are_refused():
    ids = [channel.id for channel in next(iter(result().evidence.problems.values())).channels]
    with pytest.raises(CertificateError, match="more than may be built"):
        verify_shared(replace(result(), leds=tuple(ids[:3])))
    others = tuple(name for name in ids if name not in result().leds)[:1]
    with pytest.raises(CertificateError, match="uses parts"):
        verify_shared(replace(result(), leds=others))


def test_sets_and_wheels_with_a_bound_too_high_are_refused():
    family = random_family(np.random.default_rng(503), CATALOG)
    asking = {
        name: replace(problem, spec=problem.spec.model_copy(update={"required_cnr": 1e-3}))
        for name, problem in family.items()
    }
    rigs, wheel = smallest_rig_set(asking, max_led_channels=2), smallest_filter_wheel(asking, max_led_channels=2)
    assert rigs.number == wheel.number == 1
    with pytest.raises(CertificateError, match="the prices show"):
        verify_rig_set(replace(rigs, bound=2))
    dearer = replace(rigs.evidence, prices=2 * rigs.evidence.prices)
    with pytest.raises(CertificateError, match="may serve more"):
        verify_rig_set(replace(rigs, bound=2, evidence=dearer))
    with pytest.raises(CertificateError, match="may serve all"):
        verify_filter_wheel(replace(wheel, bound=2))
    with pytest.raises(CertificateError, match="uses no rig"):
        verify_rig_set(replace(rigs, rig_of={}))
