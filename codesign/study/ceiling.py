"""The CNR that no rig can pass with this full well and these surfaces, however it is lit.

Light of one wavelength leaves ``n = W ρ/ρ_max`` electrons on each of two surfaces when the brighter one fills the
usable well ``W``. With reflectances ``ρ_t``, ``ρ_b``, their sample spreads ``σ_t``, ``σ_b``, PRNU ``p``, ``N`` samples
(pixels × frames) and ``P`` pixels averaged, and nothing else disturbing,

    CNR = |ρ_t − ρ_b| / sqrt( ρ_max (ρ_t + ρ_b)/(2 N W) + p² (ρ_t² + ρ_b²)/(2 P) + (σ_t² + σ_b²)/2 ).

With shot noise alone (p = σ = 0) and ``c = ρ_min/ρ_max`` this is ``sqrt(2 N W) (1 − c)/sqrt(1 + c)``. It falls with the
electrons of the darker surface at a given well, and those are linear in the light: no mixture of wavelengths beats the
best single one. With clutter a mixture may, since the spreads of two wavelengths can cancel; that optimum over all
mixtures is a program like any other (`codesign.program`) and comes with a proven bound.

Noise after EMVA Standard 1288, Release 4.0 Linear; all terms as in `codesign.noise`.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike

from codesign.assemble import Assembly
from codesign.limits import Setting, well_bound
from codesign.noise import NoiseModel, Sensor, noise_model
from codesign.problem import Problem
from codesign.program import Array, Program
from codesign.radiometry import reflectances
from codesign.search.frontier import certify

#: Relative gap of the bound over all mixtures.
GAP = 1e-5
#: Variance without light that keeps programs well posed; far below one photon. [e⁻²]
_NO_FLOOR = 1e-6


@dataclass(frozen=True, slots=True, kw_only=True)
class Ceiling:
    """What one camera at one gain cannot pass, whatever the rig.

    Attributes
    ----------
    camera : str
    gain_db : float
    well_e : float
        Electrons that a surface may fill. [e⁻]
    shot_only : float
        Largest CNR with photon shot noise alone.
    shot_only_nm : float
        Wavelength of it. [nm]
    one_wavelength : float
        The same with PRNU and the spread of the surfaces, at the best single wavelength.
    one_wavelength_nm : float
        Wavelength of it. [nm]
    any_light : float
        Proven bound with PRNU and spread over all mixtures of wavelengths, guards inside the well too.
    """

    camera: str
    gain_db: float
    well_e: float
    shot_only: float
    shot_only_nm: float
    one_wavelength: float
    one_wavelength_nm: float
    any_light: float


def contrast_limited_cnr(
    target: ArrayLike,
    background: ArrayLike,
    well_e: float,
    *,
    samples: float = 1.0,
    pixels: float = 1.0,
    prnu: float = 0.0,
    target_spread: ArrayLike = 0.0,
    background_spread: ArrayLike = 0.0,
) -> Array:
    """CNR with the brighter of two surfaces at the full well: the closed form of this module.

    Parameters
    ----------
    target, background : array
        Reflectances. [1]
    well_e : float
        Usable well W. [e⁻]
    samples, pixels : float
        Pixels times frames, and pixels, averaged.
    prnu : float
        Photo-response non-uniformity, as a share. [1]
    target_spread, background_spread : array
        Standard deviation of the reflectance over samples. [1]

    Returns
    -------
    array
        CNR; 0 where both surfaces are black.

    Examples
    --------
    >>> black_on_white = contrast_limited_cnr(0.0, 0.8, 10000.0)
    >>> round(float(black_on_white), 3)  # sqrt(2 W)
    141.421
    """
    t, b = np.asarray(target, dtype=float), np.asarray(background, dtype=float)
    variance = np.maximum(t, b) * (t + b) / (2 * samples * well_e) + prnu**2 * (t**2 + b**2) / (2 * pixels)
    variance = variance + (np.square(target_spread) + np.square(background_spread)) / 2
    return np.abs(t - b) / np.sqrt(np.where(variance > 0, variance, np.inf))


def ceilings(problem: Problem) -> tuple[Ceiling, ...]:
    """Ceiling of each candidate camera at its best gain, highest first.

    Several targets or backgrounds: the worst pair, all with the same sign. Empty where several readings are combined
    by weights, which no such formula bounds. Raises as `codesign.solve`.
    """
    if problem.combined:
        return ()
    settings = Assembly(problem, np.full(len(problem.channels), problem.spec.temperature.air_c)).settings
    found = {}
    for setting in settings:
        best = found.get(setting.camera.id)
        if best is None or well_bound(problem, setting) > well_bound(problem, best):
            found[setting.camera.id] = setting
    every = [_of_camera(problem, best, [s for s in settings if s.camera is best.camera]) for best in found.values()]
    return tuple(sorted(every, key=lambda ceiling: -ceiling.any_light))


@dataclass(frozen=True, slots=True)
class _Light:
    """Kinds of light, each one wavelength with or without gloss: surfaces (S, k), clutter rows (C, k)."""

    nm: Array
    mean: Array
    clutter: Array
    rows_of: tuple[slice, ...]


def _of_camera(problem: Problem, setting: Setting, all_settings: list[Setting]) -> Ceiling:
    light = _seen(problem, setting, all_settings)
    model = noise_model(Sensor.of(setting.camera, setting.gain), problem.spec.averaging)
    well = well_bound(problem, setting)
    quiet = replace(model, relative=0.0, clutter_share=0.0)
    shot, with_spread = (_one_wavelength(problem, light, each, well) for each in (quiet, model))
    any_light = max(
        min(_any_mixture(problem, light, model, well, pair, sign) for pair in problem.pairs) for sign in (1, -1)
    )
    return Ceiling(
        camera=setting.camera.id,
        gain_db=setting.gain.gain_db,
        well_e=well,
        shot_only=shot[0],
        shot_only_nm=shot[1],
        one_wavelength=with_spread[0],
        one_wavelength_nm=with_spread[1],
        any_light=any_light,
    )


def _seen(problem: Problem, setting: Setting, all_settings: list[Setting]) -> _Light:
    """Wavelengths that any allowed channel of the camera responds to, with every share of gloss an LED may have."""
    scene = reflectances(problem)
    channels = {each.channel for each in all_settings}
    response = sum(setting.camera.quantum_efficiency(name, problem.grid) for name in channels)
    kept = np.flatnonzero(response > 0)
    weights = sorted({0.0, *(channel.specular_weight for channel in problem.channels)})
    if not scene.specular.any():
        weights = [0.0]
    return _Light(
        nm=np.tile(problem.grid[kept], len(weights)),
        mean=np.concatenate([scene.mean[:, kept] + w * scene.specular[:, None] for w in weights], axis=1),
        clutter=np.tile(scene.clutter[:, kept], len(weights)),
        rows_of=scene.rows_of,
    )


def _one_wavelength(problem: Problem, light: _Light, model: NoiseModel, well: float) -> tuple[float, float]:
    """Best CNR at one wavelength, and where: worst pair of each sign by its own best wavelength."""
    best = (0.0, float(light.nm[0]))
    for sign in (1, -1):
        worst = min((_peak(light, model, well, pair, sign) for pair in problem.pairs), key=lambda found: found[0])
        best = max(best, worst, key=lambda found: found[0])
    return best


def _peak(light: _Light, model: NoiseModel, well: float, pair: tuple[int, int], sign: int) -> tuple[float, float]:
    target, background = light.mean[list(pair)]
    spread = [np.sqrt(model.clutter_share * np.sum(light.clutter[light.rows_of[i]] ** 2, axis=0)) for i in pair]
    cnr = contrast_limited_cnr(
        target,
        background,
        well,
        samples=1 / model.linear[0],
        prnu=model.relative,
        target_spread=spread[0],
        background_spread=spread[1],
    )
    cnr = np.where(sign * (target - background) > 0, cnr, 0.0)
    at = int(np.argmax(cnr))
    return float(cnr[at]), float(light.nm[at])


def _any_mixture(
    problem: Problem, light: _Light, model: NoiseModel, well: float, pair: tuple[int, int], sign: int
) -> float:
    """Proven bound on one pair over all mixtures of light that keep every surface inside the well."""
    count = light.nm.size
    timeless = lambda rows: np.concatenate([rows, np.zeros((*rows.shape[:-1], 1))], axis=-1)[None]  # noqa: E731
    target, background = light.mean[list(pair)]
    spread = np.concatenate([light.clutter[light.rows_of[i]] for i in pair]) * np.sqrt(model.clutter_share / 2)
    brightest = light.mean.max(axis=0)
    program = Program(
        signal=timeless(sign * (target - background)),
        shot=timeless((target + background) / 2 * model.linear[0]),
        noise_rows=timeless(np.concatenate([light.mean[list(pair)] * (model.relative / np.sqrt(2)), spread])),
        floor=np.array([_NO_FLOOR]),
        rows=timeless(light.mean),
        bounds=np.full((1, len(light.mean)), well),
        row_names=tuple(f"well, {surface.id}" for surface in problem.surfaces),
        width=well / np.maximum(brightest, 1e-6 * brightest.max()),
        led=np.arange(count),
        heat=np.zeros(count),
        heat_cap=np.full(count, np.inf),
        time_low=np.ones(1),
        time_high=np.ones(1),
    )
    return max(float(certify(program, GAP).bound), 0.0)
