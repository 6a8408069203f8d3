"""Rigs in common of a family: what is shared and what is not, limits of the build, input that cannot be used."""

from dataclasses import replace
from functools import cache

import numpy as np
import pytest

from codesign import evaluate, load_problem
from codesign.errors import InfeasibleError, ProblemError
from codesign.problem import Problem
from codesign.study.common import resolve
from codesign.study.fields import varied
from codesign.study.rig_sets import smallest_filter_wheel, smallest_rig_set
from codesign.study.rig_sets_verify import verify_filter_wheel, verify_rig_set
from codesign.study.shared_rig import SharedRig, shared_rig, verify_shared

SCENES = {
    "stain": ("cloth-stain-yellow", "cloth-white"),
    "red cap": ("cap-red", "cap-yellow"),
    "green cap": ("cap-green", "cap-blue"),
    "ink": ("ink-a", "ink-b"),
}


@cache
def family() -> dict[str, Problem]:
    """Four scenes before the parts of the smallest demo; LEDs that are on all the time get warm."""
    base = load_problem("yellow-stain")
    return {
        name: varied(base, {"scene.target": target, "scene.background": background, "required_cnr": 2.0})
        for name, (target, background) in SCENES.items()
    }


def all_with(**changes) -> dict[str, Problem]:
    """The family with fields changed alike; double underscores stand for dots."""
    named = {key.replace("__", "."): value for key, value in changes.items()}
    return {name: varied(problem, named) for name, problem in family().items()}


@cache
def worst() -> SharedRig:
    return shared_rig(family(), max_led_channels=2)


def test_only_electronic_settings_differ_between_variants():
    found = worst()
    designs = [outcome.recipe.design for outcome in found.outcomes.values()]
    assert {(d.camera, d.filter, d.f_number) for d in designs} == {(found.camera, found.filter, found.f_number)}
    assert all(set(d.drive_ma) <= set(found.leds) for d in designs) and len(found.leds) <= 2
    assert len({(tuple(d.drive_ma.items()), d.exposure_us) for d in designs}) > 1


def test_value_bound_limiting_variant_and_recipes_agree_with_the_forward_model():
    found = worst()
    optima = {name: outcome.optimum.cnr for name, outcome in found.outcomes.items()}
    assert found.limiting == min(optima, key=lambda name: optima[name])
    assert found.value == pytest.approx(min(optima.values()), rel=1e-4)
    assert found.value <= found.bound <= found.value * 1.02 and found.status == "proven"
    for name, outcome in found.outcomes.items():
        said = evaluate(family()[name], outcome.recipe.design)
        assert said.feasible and said.cnr == pytest.approx(outcome.cnr, rel=1e-12)
    assert verify_shared(found).value == pytest.approx(found.value, rel=1e-12)


def test_temperatures_of_the_proof_are_those_the_recipes_lead_to():
    found = worst()
    warmest = max(led.junction_c for outcome in found.outcomes.values() for led in outcome.optimum.leds)
    assert warmest > 35  # lit all the time in air of 30 degrees
    assert found.residual_k < 0.01
    for name, outcome in found.outcomes.items():
        stated = dict(zip([c.id for c in family()[name].channels], found.evidence.junction_c[name], strict=True))
        for led in outcome.optimum.leds:
            assert stated[led.id] == pytest.approx(led.junction_c, abs=0.01)


def test_regret_is_against_the_best_rig_of_the_variant_alone():
    for name, outcome in worst().outcomes.items():
        own = resolve(family()[name])
        assert outcome.own_cnr == pytest.approx(own.cnr, rel=2e-3)
        assert outcome.regret == pytest.approx(max(1 - outcome.optimum.cnr / outcome.own_cnr, 0.0))
    assert max(outcome.regret for outcome in worst().outcomes.values()) > 0.01


def test_changes_that_help_hold_when_made():
    found = worst()
    assert found.helps and [one.helped for one in found.helps] == sorted((h.helped for h in found.helps), reverse=True)
    averaged = next(one for one in found.helps if one.change.startswith("frames"))
    twice = shared_rig(all_with(averaging__frames=2), max_led_channels=2, own={}, helps=False)
    assert averaged.worst_cnr <= twice.bound * (1 + 1e-3)
    assert averaged.worst_gain == pytest.approx(averaged.worst_cnr / found.value - 1, abs=1e-3)
    more = next(one for one in found.helps if one.change.startswith("one more LED channel"))
    third = shared_rig(family(), max_led_channels=3, own={}, helps=False)
    assert more.worst_cnr <= third.bound * (1 + 1e-3)


def test_more_channels_never_make_the_worst_variant_worse():
    values = [shared_rig(family(), max_led_channels=k, own={}, helps=False, gap=1e-3).value for k in (1, 2, 5)]
    assert values[0] <= values[1] * (1 + 2e-3) and values[1] <= values[2] * (1 + 2e-3)
    assert values[0] < worst().bound


def test_leds_that_no_variant_lights_are_not_built_in():
    found = shared_rig(family(), own={}, helps=False)  # any number of channels
    lit = {led for outcome in found.outcomes.values() for led in outcome.optimum.design.drive_ma}
    assert set(found.leds) == lit


def test_count_and_price_agree_with_each_other():
    least = min(outcome.optimum.cnr for outcome in worst().outcomes.values())
    cheap = shared_rig(family(), max_led_channels=2, goal="cost", required_cnr=0.9 * least, own={}, helps=False)
    assert cheap.served == len(SCENES) and cheap.bound <= cheap.value <= cheap.bound * 1.02
    problem = next(iter(family().values()))
    leds = {channel.id: channel.led.price * channel.emitters for channel in problem.channels}
    parts = problem.camera(cheap.camera).price + (problem.filter(cheap.filter).price or 0.0)
    assert cheap.value == pytest.approx(parts + sum(leds[name] for name in cheap.leds))
    assert verify_shared(cheap).value == pytest.approx(cheap.value)
    hard = shared_rig(
        family(), max_led_channels=2, goal="count", required_cnr=worst().bound * 1.01, own={}, helps=False
    )
    assert hard.value < len(SCENES) and hard.served == hard.value == hard.bound
    assert verify_shared(hard).value == hard.value


def test_build_limits_of_the_problems_hold_for_the_rig():
    needed = shared_rig(all_with(build__must_have=["green-525-a"]), max_led_channels=1, own={}, helps=False)
    assert needed.leds == ("green-525-a",)
    own = shared_rig(all_with(build__max_led_channels=1), own={}, helps=False)
    assert len(own.leds) == 1 and verify_shared(own).value == pytest.approx(own.value)
    free = shared_rig(family(), max_led_channels=2, own={}, helps=False)
    spent = _price(free)
    budget = shared_rig(all_with(build__price_budget=0.5 * spent), max_led_channels=2, own={}, helps=False)
    assert _price(budget) <= 0.5 * spent and budget.value < free.bound
    assert verify_shared(budget).value == pytest.approx(budget.value)


def _price(found: SharedRig) -> float:
    problem = next(iter(family().values()))
    leds = sum(c.led.price * c.emitters for c in problem.channels if c.id in found.leds)
    return problem.camera(found.camera).price + (problem.filter(found.filter).price or 0.0) + leds


def test_two_targets_against_one_background_count_by_the_worse():
    scenes = {"caps": (["cap-blue", "cap-black"], "cap-white"), "inks": (["ink-a", "ink-b"], "tile-white")}
    both = {
        name: varied(family()["stain"], {"scene.target": target, "scene.background": background})
        for name, (target, background) in scenes.items()
    }
    found = shared_rig(both, max_led_channels=1, own={}, helps=False)
    first = {name: varied(problem, {"scene.target": scenes[name][0][0]}) for name, problem in both.items()}
    alone = shared_rig(first, max_led_channels=1, own={}, helps=False)
    assert 0 < found.value <= alone.bound
    assert verify_shared(found).value == pytest.approx(found.value)
    for outcome in found.outcomes.values():
        assert outcome.recipe.cnr == min(pair.cnr for pair in outcome.recipe.pairs)


def test_parts_that_not_all_variants_have_are_left_out_and_said():
    some = dict(family())
    some["ink"] = varied(some["ink"], {"candidates.filters": ["bp-450-30"], "optics.f_numbers": [4, 5.6]})
    found = shared_rig(some, max_led_channels=2, own={}, helps=False)
    assert found.filter in ("bp-450-30", "none") and found.f_number in (4.0, 5.6)
    assert "filter bp-405-35" in found.left_out and "f-number 2.8" in found.left_out


def test_time_limit_keeps_the_best_so_far_with_an_honest_bound():
    found = shared_rig(family(), max_led_channels=2, own={}, helps=False, gap=1e-6, time_limit=0.0)
    assert found.value > 0 and found.bound >= worst().value * (1 - 1e-3)
    assert verify_shared(found).value == pytest.approx(found.value)


@pytest.mark.parametrize(
    ("spoil", "message"),
    [
        ({"detection.shots": 2, "lighting.mode": "strobe", "timing.frame_rate_hz": 10}, r"'ink' combines readings"),
        ({"build.emitters": "free"}, r"'ink' leaves the number of emitters free"),
        ({"build.board_slots": 30}, r"'stain' and 'ink' differ in \[build\]"),
        ({"led.blue-450-a.price": 99.0}, r"different parts by LED 'blue-450-a'"),
        ({"lighting.emitters_per_channel": 3}, r"LED 'violet-405-a' has 12 emitters in variant 'stain' and 3 in 'ink'"),
        ({"candidates.cameras": ["deep-2mp"]}, r"no camera in common"),
        ({"required_cnr": None}, r"variant 'ink': required_cnr is None"),
    ],
)
def test_families_that_cannot_share_a_rig_say_why_in_one_line(spoil, message):
    spoilt = {**family(), "ink": varied(family()["ink"], spoil)}
    with pytest.raises((ProblemError, InfeasibleError), match=message) as caught:
        shared_rig(spoilt, max_led_channels=2, goal="count", own={}, helps=False)
    assert "\n" not in str(caught.value)


def test_other_wrong_input_is_named():
    with pytest.raises(ProblemError, match="goal is 'best', must be one of worst, count, cost"):
        shared_rig(family(), goal="best")
    with pytest.raises(ProblemError, match="max_led_channels is 0"):
        shared_rig(family(), max_led_channels=0)
    with pytest.raises(ProblemError, match="no variants"):
        shared_rig({})
    with pytest.raises(ProblemError, match="price_budget; remove it for a wheel"):
        smallest_filter_wheel(all_with(build__price_budget=5000.0))


def test_a_variant_that_cannot_be_served_is_named():
    blind = {**family(), "ink": varied(family()["ink"], {"timing.exposure_max_us": 10000, "motion.max_blur_px": 0.01,
                                                         "motion.speed_mm_per_s": 1000})}  # fmt: skip
    with pytest.raises(InfeasibleError, match="variant 'ink'"):
        shared_rig(blind, max_led_channels=2, own={})
    with pytest.raises(InfeasibleError, match=r"'\w+( \w+)?' has a CNR of .* at most, 500 is required"):
        shared_rig(family(), goal="cost", required_cnr=500.0, max_led_channels=2, own={})
    with pytest.raises(InfeasibleError, match="500 is required"):
        smallest_rig_set(family(), required_cnr=500.0, max_led_channels=2)


def test_sets_of_rigs_and_wheels_serve_every_variant():
    required = {name: replace_required(problem, 0.97 * resolve(problem).cnr) for name, problem in family().items()}
    rigs = smallest_rig_set(required, max_led_channels=1)
    assert 1 < rigs.number <= len(SCENES) and rigs.bound <= rigs.number
    assert all(outcome.met for outcome in rigs.outcomes.values())
    assert verify_rig_set(rigs).value == rigs.number
    for name, outcome in rigs.outcomes.items():
        design, rig = outcome.recipe.design, rigs.rigs[rigs.rig_of[name]]
        assert (design.camera, design.filter, design.f_number) == (rig.camera, rig.filter, rig.f_number)
        assert name in rig.variants and set(design.drive_ma) <= set(rig.leds)
    wheel = smallest_filter_wheel({n: replace_required(p, 1.0) for n, p in family().items()}, max_led_channels=2)
    assert wheel.status == "proven" and verify_filter_wheel(wheel).value == wheel.number == wheel.bound
    assert {o.recipe.design.filter for o in wheel.outcomes.values()} == set(wheel.filters)


def replace_required(problem: Problem, cnr: float) -> Problem:
    return replace(problem, spec=problem.spec.model_copy(update={"required_cnr": float(np.round(cnr, 6))}))
