"""Several readings combined by weights: channels of one exposure and shots of one frame."""

from __future__ import annotations

import itertools
from dataclasses import replace
from types import SimpleNamespace

import numpy as np
import pytest
from test_photon_simulation import estimate_cnr, estimate_mean, estimate_variance, light_on

from codesign import Design, build_problem, evaluate, load_recipe, solve, verify
from codesign.assemble import Assembly
from codesign.certificate_combined import CombinedProof, combined_bound, faces
from codesign.design import Shot
from codesign.errors import CertificateError, ProblemError
from codesign.report.recipe_file import recipe_toml
from codesign.report.text import performance_text
from codesign.search.combined import SIGNS, best_alternation, certify_combined, turned
from codesign.search.combined_walk import CombinedWalk
from codesign.search.frontier import certify

DECISIONS = 100_000

CHANNELS = {
    "title": "channels together",
    "scene": {
        "target": "cap-blue", "background": "cap-green", "ambient": [{"illuminant": "A", "illuminance_lx": 20}],
    },
    "candidates": {
        "leds": ["white-4000k-a", "blue-470-a", "green-525-a"], "filters": "none", "cameras": "colour-5mp",
        "channels": ["green", "blue"], "gains_db": [0],
    },
    "optics": {"f_numbers": [4], "magnification": 0.02},
    "lighting": {"mode": "continuous", "emitters_per_channel": 2, "distance_mm": 300, "board_k_per_w": 20},
    "timing": {"exposure_max_us": 20000},
    "temperature": {"air_c": 25, "sensor_c": 40},
    "limits": {"supply_w": 1.5},
    "detection": {"combine_channels": True},
    "solver": {"gap": 0.03},
}  # fmt: skip
SHOTS = {
    "title": "shots of one frame",
    "scene": {
        "target": "apple-bruise", "background": "apple-sound", "ambient": [{"illuminant": "A", "illuminance_lx": 50}],
    },
    "candidates": {
        "leds": ["far-red-730-a", "nir-850-a", "nir-940-a"], "filters": "none", "cameras": "nir-2mp", "gains_db": [0],
    },
    "optics": {"f_numbers": [4], "magnification": 0.025},
    "lighting": {"mode": "strobe", "emitters_per_channel": 6, "distance_mm": 450, "board_k_per_w": 8},
    "timing": {"frame_rate_hz": 12, "exposure_max_us": 2000},
    "temperature": {"air_c": 25, "sensor_c": 42},
    "limits": {"rig_heat_w": 8},
    "detection": {"shots": 2},
    "solver": {"gap": 0.05},
}  # fmt: skip


def changed(table: dict, **sections) -> dict:
    """A problem table with some sections replaced (None: left out)."""
    return {k: v for k, v in {**table, **sections}.items() if v is not None}


@pytest.fixture(scope="module")
def channels():
    return solve(build_problem(CHANNELS))


@pytest.fixture(scope="module")
def shots():
    return solve(build_problem(SHOTS))


@pytest.fixture(params=["channels", "shots"])
def solution(request):
    return request.getfixturevalue(request.param)


# --- forward model -----------------------------------------------------------------------------------------------


def test_weight_on_one_channel_alone_gives_that_channel(channels):
    problem, design = channels.problem, channels.recipe.design
    for name in ("green", "blue"):
        alone = evaluate(problem, replace(design, channel=name))
        joint = evaluate(problem, replace(design, weights={name: 2.0}))
        assert joint.cnr == pytest.approx(alone.cnr, rel=1e-12)


def test_no_other_weights_do_better(solution):
    problem, design = solution.problem, solution.recipe.design
    best = evaluate(problem, design)
    rng = np.random.default_rng(1)
    for _ in range(30):
        other = dict(zip(best.weights, rng.normal(size=len(best.weights)), strict=True))
        assert evaluate(problem, replace(design, weights=other)).cnr <= best.cnr * (1 + 1e-12)
    again = evaluate(problem, replace(design, weights=best.weights))
    assert again.cnr == pytest.approx(best.cnr, rel=1e-12)


def test_one_shot_is_the_plain_forward_model():
    problem = build_problem(SHOTS)
    base = Design(camera="nir-2mp", channel="mono", gain_db=0, filter="none", f_number=4, exposure_us=700)
    plain = replace(base, drive_ma={"nir-850-a": 400})
    shot = replace(plain, drive_ma={}, shots=(Shot(exposure_us=700, drive_ma={"nir-850-a": 400}),))
    one, other = evaluate(problem, plain), evaluate(problem, shot)
    assert other.cnr == pytest.approx(one.cnr, rel=1e-12)
    assert other.leds[0].junction_c == pytest.approx(one.leds[0].junction_c, rel=1e-12)
    assert other.leds[0].optical_w == pytest.approx(one.leds[0].optical_w, rel=1e-12)


def test_shots_share_heat_and_frame_time(shots):
    problem = shots.problem
    shot = Shot(exposure_us=800, drive_ma={"nir-850-a": 300})
    base = Design(camera="nir-2mp", channel="mono", gain_db=0, filter="none", f_number=4, exposure_us=800)
    one, two = (
        {limit.name: limit for limit in evaluate(problem, replace(base, shots=(shot,) * n, exposure_us=800 * n)).limits}
        for n in (1, 2)
    )
    assert two["rig heat"].value == pytest.approx(2 * one["rig heat"].value, rel=0.02)
    assert two["frame period"].value == pytest.approx(2 * one["frame period"].value)
    air = problem.spec.temperature.air_c
    name = "junction, nir-850-a"
    assert two[name].value - air == pytest.approx(2 * (one[name].value - air), rel=0.02)


@pytest.mark.oracle
def test_simulated_decisions_agree_with_the_forward_model(solution):
    """Grey values of 100,000 spots, weighted: both readings of a spot see the same sample of the surface.

    Shots are taken by the same pixels, whose response and dark offset stay (EMVA 1288: spatial nonuniformity is what
    is left when temporal noise is averaged out); channels have pixels of their own.
    """
    problem, recipe = solution.problem, solution.recipe
    rng = np.random.default_rng(5)
    sides = [weighted_grey(problem, recipe, surface, rng) for surface in (problem.target, problem.background)]
    assert estimate_cnr(*sides).agrees(recipe.cnr)
    camera = problem.camera(recipe.design.camera)
    gain = next(g for g in camera.gain_settings() if g.gain_db == recipe.design.gain_db).conversion_gain_dn_per_e
    difference, own = estimate_mean(sides[0]).value - estimate_mean(sides[1]).value, gain * recipe.signal_e
    assert abs(difference - own) <= 4 * np.hypot(estimate_mean(sides[0]).error, estimate_mean(sides[1]).error)
    for index, side in enumerate(sides):
        assert estimate_variance(side).agrees(sum(pair[index] for pair in recipe.noise.values()) * gain**2)


def weighted_grey(problem, recipe, surface, rng):
    """Weighted sum of the grey values of all readings of `DECISIONS` spots. [DN]"""
    camera, design = problem.camera(recipe.design.camera), recipe.design
    gain = next(g for g in camera.gain_settings() if g.gain_db == design.gain_db)
    total, deviates, response = np.zeros(DECISIONS), None, None
    for part, weight in zip(parts(recipe), recipe.weights.values(), strict=True):
        light = light_on(SimpleNamespace(problem=problem, recipe=part), surface)
        if deviates is None:
            deviates = rng.standard_normal((DECISIONS, light.samples.size))
        spot = light.photo + deviates @ light.samples / np.sqrt(max(light.samples.size - 1, 1))
        if response is None or not design.shots:
            response, offset = rng.standard_normal((2, DECISIONS))
        photo = spot * (1 + camera.prnu_percent / 100 * response)
        electrons = rng.poisson(photo) + rng.poisson(light.dark, DECISIONS)
        noise = gain.read_noise_e * rng.standard_normal(DECISIONS) + camera.dsnu_e * offset
        grey = np.rint(camera.black_level_dn + gain.conversion_gain_dn_per_e * (electrons + noise))
        total += weight * np.clip(grey, 0, 2**camera.bits - 1)
    return total


def parts(recipe):
    """Each reading as a recipe of its own."""
    design = recipe.design
    if not design.shots:
        for channel in design.channel.split("+"):
            yield SimpleNamespace(design=replace(design, channel=channel), leds=recipe.leds)
    for shot in design.shots:
        leds = [replace(s, drive_ma=shot.drive_ma.get(s.id, 0.0)) for s in recipe.leds]
        yield SimpleNamespace(design=replace(design, exposure_us=shot.exposure_us), leds=leds)


# --- search and proof --------------------------------------------------------------------------------------------


def test_solution_is_proven_feasible_and_verified(solution):
    assert solution.recipe.feasible
    assert solution.certificate.gap <= solution.problem.spec.solver.gap
    assert solution.certificate.forward_residual < 1e-9
    assert verify(solution).largest_bound <= solution.certificate.bound * (1 + 1e-9)


def test_combining_channels_beats_each_channel(channels):
    table = changed(CHANNELS, detection=None)
    for name in ("green", "blue"):
        only = {**table, "candidates": {**table["candidates"], "channels": [name]}}
        alone = solve(build_problem(only), alternatives=0)
        assert channels.certificate.bound >= alone.certificate.value
        assert channels.certificate.value >= alone.certificate.value * (1 - 1e-3)


def test_two_shots_beat_one(shots):
    plain = solve(build_problem(changed(SHOTS, detection=None)), alternatives=0)
    assert shots.certificate.value >= plain.certificate.value


@pytest.fixture(scope="module")
def readings():
    """Readings of the two channels at fixed junction temperatures."""
    problem = build_problem(CHANNELS)
    return CombinedWalk(Assembly(problem, np.full(len(problem.channels), 40.0)), 0.03).readings(0)


def test_bound_holds_for_weights_all_around(readings):
    result = certify_combined(readings, 0.03)
    best = 0.0
    for angle in np.linspace(0, np.pi, 90, endpoint=False):
        w = np.array([np.cos(angle), np.sin(angle)])
        best = max(best, *(certify(turned(readings, sign).weighted(w), 1e-3).value for sign in SIGNS))
    assert best <= result.bound * (1 + 1e-9)
    assert result.value >= best * (1 - 1e-3)
    assert result.gap <= 0.03


def test_alternation_reaches_the_hotelling_value_at_its_recipe(readings):
    point, weights, value = best_alternation(readings, 1e-3)
    delta, covariance = readings.moments(point)
    assert value == pytest.approx(float(np.sqrt(delta @ np.linalg.solve(covariance, delta))), rel=1e-9)
    program = readings.weighted(weights)
    assert abs(delta @ weights) / np.sqrt(weights @ covariance @ weights) == pytest.approx(value, rel=1e-9)
    assert program.size == 1


def test_proof_that_leaves_weights_out_is_rejected(readings):
    result = certify_combined(readings, 0.1)
    proof = max(result.proof, key=lambda p: len(p.boxes))
    sign = SIGNS[result.proof.index(proof)]
    assert combined_bound(turned(readings, sign), proof) <= result.bound * (1 + 1e-9)
    for missing in range(len(proof.boxes)):
        boxes = proof.boxes[:missing] + proof.boxes[missing + 1 :]
        with pytest.raises(CertificateError, match="in no box"):
            combined_bound(turned(readings, sign), CombinedProof(boxes=boxes, corners=proof.corners))


def test_proof_without_a_corner_is_rejected(readings):
    result = certify_combined(readings, 0.1)
    proof = result.proof[0]
    corners = dict(itertools.islice(proof.corners.items(), 1, None))
    with pytest.raises(CertificateError, match="no proof"):
        combined_bound(turned(readings, SIGNS[0]), CombinedProof(boxes=proof.boxes, corners=corners))


def test_tampered_solution_is_rejected(channels):
    lower = replace(channels.certificate, bound=channels.certificate.value * 0.99)
    with pytest.raises(CertificateError):
        verify(replace(channels, certificate=lower))
    with pytest.raises(CertificateError):
        verify(replace(channels, point=channels.point * 1.5))


# --- files and messages ------------------------------------------------------------------------------------------


def test_recipe_file_keeps_shots_and_weights(solution, tmp_path):
    design = replace(solution.recipe.design, weights=solution.recipe.weights)
    path = tmp_path / "recipe.toml"
    path.write_text(recipe_toml(design), encoding="utf-8")
    again = load_recipe(path)
    assert again == design
    assert evaluate(solution.problem, again).cnr == pytest.approx(solution.recipe.cnr, rel=1e-12)


def test_report_shows_the_weights(solution):
    text = performance_text(solution.problem, solution.recipe)
    assert "weights" in text
    for name in solution.recipe.weights:
        assert name in text


@pytest.mark.parametrize(
    ("table", "message"),
    [
        (changed(CHANNELS, detection={"combine_channels": True, "shots": 2}), "choose one"),
        (changed(SHOTS, lighting={**SHOTS["lighting"], "mode": "continuous"}), "strobe"),
        (changed(CHANNELS, scene={"target": ["cap-blue", "cap-red"], "background": "cap-green"}), "one target"),
        (changed(SHOTS, detection={"shots": 4}), "shots"),
    ],
)
def test_detection_that_makes_no_sense_is_refused(table, message):
    with pytest.raises(ProblemError, match=message):
        build_problem(table)


def test_weights_of_an_unknown_reading_are_refused(channels):
    with pytest.raises(ProblemError, match="no such reading"):
        evaluate(channels.problem, replace(channels.recipe.design, weights={"gren": 1.0}))


def test_recipe_with_shots_and_an_exposure_is_refused(shots, tmp_path):
    path = tmp_path / "recipe.toml"
    path.write_text(recipe_toml(shots.recipe.design).replace("[[shot]]", "[drive_ma]\n\n[[shot]]", 1), encoding="utf-8")
    with pytest.raises(ProblemError, match="do not go together"):
        load_recipe(path)


# --- shots: whole boxes of weights -------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def difference_images():
    """Two shots where averaging leaves mostly surface clutter: the best weights have opposite signs."""
    return solve(build_problem(changed(SHOTS, averaging={"pixels": 400})))


def test_difference_images_cancel_clutter(difference_images):
    weights = list(difference_images.recipe.weights.values())
    assert weights[0] * weights[1] < 0
    plain = solve(build_problem(changed(SHOTS, averaging={"pixels": 400}, detection=None)), alternatives=0)
    assert difference_images.recipe.cnr > 1.2 * plain.certificate.bound
    assert difference_images.certificate.gap <= 0.05
    verify(difference_images)


def test_box_bound_holds_for_weights_and_exposures_all_around(difference_images):
    problem, certificate = difference_images.problem, difference_images.certificate
    junction = np.array([certificate.junction_c[c.id] for c in problem.channels])
    walk = CombinedWalk(Assembly(problem, junction), 0.05)
    for exposures in ([2e-3, 2e-3], [2e-3, 5e-4]):
        readings = walk.readings(difference_images.winner, np.array(exposures))
        for angle in np.linspace(0, 2 * np.pi, 24, endpoint=False):
            value = certify(readings.weighted(np.array([np.cos(angle), np.sin(angle)])), 1e-2).value
            assert value <= certificate.bound * (1 + 1e-9)


def test_whole_boxes_need_separate_readings(readings, difference_images):
    proof = difference_images.evidence[0].proof[0]
    assert proof.whole
    with pytest.raises(CertificateError, match="share columns"):
        combined_bound(readings, replace(proof, boxes=tuple(faces(2, False))))
