"""Imaging: radiance of the object, irradiance on the sensor, depth of field, blur."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from codesign.physics._tables import Array


def radiance_of_diffuse(reflectance: ArrayLike, irradiance: ArrayLike) -> Array:
    """Radiance of a matt (Lambertian) surface, ``ρ E / π``.

    Parameters
    ----------
    reflectance : array
        Diffuse reflectance factor. [1]
    irradiance : array
        [W/m²] or [lx], spectral or total

    Returns
    -------
    array
        Same unit per steradian.

    References
    ----------
    .. [1] Lambert's law.
    """
    return np.asarray(reflectance, dtype=float) * np.asarray(irradiance, dtype=float) / np.pi


def working_f_number(f_number: ArrayLike, magnification: ArrayLike = 0.0, pupil_ratio: float = 1.0) -> Array:
    """Effective f-number at a finite distance, ``N (1 + m / p)``.

    Parameters
    ----------
    f_number : array
        Engraved f-number N. [1]
    magnification : array
        Image size over object size m. [1]
    pupil_ratio : float
        Exit over entrance pupil diameter p; 1 for a symmetric lens. [1]
    """
    return np.asarray(f_number, dtype=float) * (1.0 + np.asarray(magnification, dtype=float) / pupil_ratio)


def image_irradiance(
    radiance: ArrayLike,
    transmittance: ArrayLike,
    f_number: ArrayLike,
    magnification: ArrayLike = 0.0,
    pupil_ratio: float = 1.0,
) -> Array:
    """Irradiance on the sensor, camera equation ``π L τ / (4 N² (1 + m)²)``.

    On the axis of an aplanatic lens the exact form has ``1 + 4 N²`` in place of ``4 N²`` (see
    `image_irradiance_exact`); the two differ by 1.5 % at f/4.

    Parameters
    ----------
    radiance : array
        [W m⁻² sr⁻¹], spectral or total
    transmittance : array
        Lens and everything else in the path. [1]
    f_number, magnification, pupil_ratio
        As in `working_f_number`.

    Returns
    -------
    array
        [W/m²]

    References
    ----------
    .. [1] R. E. Jacobson et al., The Manual of Photography; G. C. Holst, CCD Arrays, Cameras, and Displays.
    """
    path = np.asarray(radiance, dtype=float) * np.asarray(transmittance, dtype=float)
    return np.pi * path / (4.0 * working_f_number(f_number, magnification, pupil_ratio) ** 2)


def image_irradiance_exact(
    radiance: ArrayLike,
    transmittance: ArrayLike,
    f_number: ArrayLike,
    magnification: ArrayLike = 0.0,
    pupil_ratio: float = 1.0,
) -> Array:
    """Irradiance on the sensor from a flat disc-shaped pupil, ``π L τ / (1 + 4 N_w²)``.

    The edge of the pupil is seen at ``tan θ = 1 / (2 N_w)``. EMVA Standard 1288 has this form for its light
    source in front of a bare sensor. Parameters as in `image_irradiance`.
    """
    path = np.asarray(radiance, dtype=float) * np.asarray(transmittance, dtype=float)
    return np.pi * path / (1.0 + 4.0 * working_f_number(f_number, magnification, pupil_ratio) ** 2)


def cone_half_angle_deg(f_number: ArrayLike, magnification: ArrayLike = 0.0) -> Array:
    """Half angle of the cone of light that meets the sensor, ``asin(1 / (2 N (1 + m)))``. [deg]

    Holds for a filter between lens and sensor and a lens that meets the sine condition.
    """
    return np.degrees(np.arcsin(0.5 / working_f_number(f_number, magnification)))


def depth_of_field(f_number: ArrayLike, blur_circle_m: ArrayLike, magnification: ArrayLike) -> Array:
    """Total depth of field close up, ``2 N c (1 + m) / m²``.

    Thin lens, blur circle small against the aperture.

    Parameters
    ----------
    f_number : array
        [1]
    blur_circle_m : array
        Allowed blur circle on the sensor c. [m]
    magnification : array
        [1]

    Returns
    -------
    array
        [m]

    References
    ----------
    .. [1] R. E. Jacobson et al., The Manual of Photography, depth of field at close range.
    """
    m = np.asarray(magnification, dtype=float)
    return 2.0 * np.asarray(f_number, dtype=float) * blur_circle_m * (1.0 + m) / m**2


def depth_of_field_exact(
    f_number: float, blur_circle_m: float, magnification: float, focal_length_m: float
) -> tuple[float, float]:
    """Nearest and farthest distance in focus of a thin lens focused at ``s = f (1 + 1/m)``.

    ``near = s f² / (f² + N c (s - f))``, ``far = s f² / (f² - N c (s - f))``; ``far`` is infinite
    beyond the hyperfocal distance.

    Parameters
    ----------
    f_number : float
        [1]
    blur_circle_m : float
        [m]
    magnification : float
        [1]
    focal_length_m : float
        [m]

    Returns
    -------
    near, far : float
        Distances from the lens. [m]
    """
    distance = focal_length_m * (1.0 + 1.0 / magnification)
    spread = f_number * blur_circle_m * (distance - focal_length_m)
    square = focal_length_m**2
    far = distance * square / (square - spread) if square > spread else np.inf
    return float(distance * square / (square + spread)), float(far)


def motion_blur_pixels(
    speed_m_per_s: ArrayLike, exposure_s: ArrayLike, magnification: ArrayLike, pixel_pitch_m: ArrayLike
) -> Array:
    """Length of the smear of a moving object on the sensor, ``v t m / pitch``. [pixel]"""
    travel = np.asarray(speed_m_per_s, dtype=float) * exposure_s * magnification
    return travel / np.asarray(pixel_pitch_m, dtype=float)


def blur_limited_exposure(
    blur_pixels: ArrayLike, speed_m_per_s: ArrayLike, magnification: ArrayLike, pixel_pitch_m: ArrayLike
) -> Array:
    """Longest exposure that smears a moving object by no more than ``blur_pixels``; infinite at rest. [s]"""
    speed = np.asarray(speed_m_per_s, dtype=float) * magnification
    allowed = np.asarray(blur_pixels, dtype=float) * pixel_pitch_m
    return np.divide(allowed, speed, out=np.full(np.broadcast(allowed, speed).shape, np.inf), where=speed > 0)


def airy_diameter(wavelength_nm: ArrayLike, f_number: ArrayLike, magnification: ArrayLike = 0.0) -> Array:
    """Diameter of the diffraction disc to its first dark ring, ``2.44 λ N (1 + m)``. [m]

    References
    ----------
    .. [1] G. B. Airy (1835); first zero of the Bessel function J₁ at 3.8317, 2 x 3.8317 / π = 2.439.
    """
    return 2.44e-9 * np.asarray(wavelength_nm, dtype=float) * working_f_number(f_number, magnification)


def cos4(field_angle_deg: ArrayLike) -> Array:
    """Natural fall-off of image irradiance towards the corners, ``cos⁴``. [1]"""
    return np.cos(np.radians(field_angle_deg)) ** 4
