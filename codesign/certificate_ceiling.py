"""What the full well and the shot noise alone allow, whatever the light: a bound that needs no LED, filter or exposure.

Light of any mixture leaves ``N_t`` and ``N_b`` electrons on two surfaces, the brighter one at most the usable well
``W``. With shot noise ``k`` per electron alone,

    CNR² = 2 (N_t − N_b)² / (k (N_t + N_b)) ≤ (2 W / k) (1 − c)² / (1 + c),

since it grows with the electrons of the brighter surface and falls with the ratio of the darker one to it, and no
mixture has a smaller ratio than the least ``c`` of its wavelengths. All other noise lowers it.
"""

from __future__ import annotations

import numpy as np

from codesign.certificate import FEASIBILITY_TOLERANCE
from codesign.limits import Setting, well_bound
from codesign.noise import Sensor, noise_model
from codesign.problem import Problem
from codesign.program import Array
from codesign.radiometry import reflectances


def shot_noise_ceilings(problem: Problem, settings: tuple[Setting, ...]) -> Array:
    """Bound on the CNR of every setting behind any filter: target brighter, target darker. (settings, 2)"""
    factor = _contrast_factors(problem)
    wells = []
    for setting in settings:
        per_electron = min(noise_model(Sensor.of(setting.camera, setting.gain), problem.spec.averaging).linear[:2])
        wells.append(2 * max(well_bound(problem, setting), 0.0) * (1 + FEASIBILITY_TOLERANCE) / per_electron)
    return np.sqrt(np.array(wells))[:, None] * factor * (1 + FEASIBILITY_TOLERANCE)


def _contrast_factors(problem: Problem) -> Array:
    """``(1 − c)/sqrt(1 + c)`` of the worst pair for either sign. (2,)"""
    scene = reflectances(problem)
    gloss = sorted({0.0, *(channel.specular_weight for channel in problem.channels)})
    mean = np.concatenate([scene.mean + weight * scene.specular[:, None] for weight in gloss], axis=1)
    found = []
    for first, second in ((0, 1), (1, 0)):
        ratios = [_least_ratio(mean[pair[second]], mean[pair[first]]) for pair in problem.pairs]
        found.append(min(max(1 - c, 0.0) / np.sqrt(1 + c) for c in ratios))
    return np.array(found)


def _least_ratio(darker: Array, brighter: Array) -> float:
    """Least ratio over wavelengths at which any light comes back, at most 1."""
    ratio = np.divide(darker, brighter, out=np.ones_like(brighter), where=brighter > 0)
    return float(np.clip(ratio, 0.0, 1.0).min(initial=1.0))
