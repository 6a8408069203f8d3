"""Published values: photons, responsivity, LED spectra, photometry, LED temperature."""

from __future__ import annotations

import numpy as np
import pytest

from codesign.physics import light

pytestmark = pytest.mark.published

VISIBLE = np.arange(360.0, 830.5, 0.5)


def test_hc_is_the_exact_si_product(printed):
    # SI 2019 (CODATA): hc/e = 1239.8419843 eV nm, hc = 1.986445857e-25 J m
    assert printed("1239.8419843") == light.HC_EV_NM
    assert printed("1.986445857e-25") == light.HC


def test_photon_energy_at_550_nm(printed):
    assert light.photon_energy(550.0) == printed("3.611720e-19")  # E = hc/λ, CODATA/SI 2019
    assert light.photon_energy(550.0) / light.ELEMENTARY_CHARGE == printed("2.25426")  # same, in eV
    assert light.photons_per_joule(550.0) == printed("2.768764e18")  # λ/(hc), CODATA/SI 2019


@pytest.mark.parametrize(
    ("wavelength_nm", "expected"),
    [
        (365.0, "1.837453e18"),  # λ/(hc), CODATA/SI 2019; so are the rows below
        (405.0, "2.038817e18"),  # SI 2019
        (450.0, "2.265352e18"),  # SI 2019
        (525.0, "2.642911e18"),  # SI 2019
        (630.0, "3.171493e18"),  # SI 2019
        (850.0, "4.278999e18"),  # SI 2019
        (940.0, "4.732070e18"),  # SI 2019
        (1050.0, "5.285822e18"),  # SI 2019
    ],
)
def test_photons_per_joule(wavelength_nm, expected, printed):
    assert light.photons_per_joule(wavelength_nm) == printed(expected)


@pytest.mark.parametrize(
    ("wavelength_nm", "efficiency", "expected"),
    [
        (365.0, 1.0, ".294392"),  # ideal detector, R[A/W] = η λ[µm] / 1.23984
        (450.0, 1.0, ".362949"),  # same law
        (550.0, 1.0, ".443605"),  # same law
        (630.0, 1.0, ".508129"),  # same law
        (850.0, 1.0, ".685571"),  # same law
        (940.0, 1.0, ".758161"),  # same law
        (1050.0, 1.0, ".846882"),  # same law
        (450.0, 0.5, ".18147474"),  # pvlib 0.16.1 qe_to_sr
        (550.0, 0.6, ".26616295"),  # pvlib 0.16.1 qe_to_sr
        (850.0, 0.4, ".27422849"),  # pvlib 0.16.1 qe_to_sr
    ],
)
def test_responsivity_and_back(wavelength_nm, efficiency, expected, printed):
    responsivity = light.responsivity_from_quantum_efficiency(efficiency, wavelength_nm)
    assert responsivity == printed(expected)
    back = light.quantum_efficiency_from_responsivity(responsivity, wavelength_nm)
    assert back == pytest.approx(efficiency, rel=1e-15)


def test_ohno_width_is_not_its_parameter(printed):
    # Ohno 2005, Opt. Eng. 44(11) 111302, derived: (g + 2 g^5)/3 = 1/2 at g = .808609, FWHM = .92182 w
    assert np.exp(-((light.OHNO_FWHM_FACTOR / 2) ** 2)) == pytest.approx(0.808609, abs=1e-6)
    assert printed(".92182") == light.OHNO_FWHM_FACTOR


def test_ohno_area(printed):
    # Ohno 2005, integral derived: w sqrt(pi) (1 + 2/sqrt 5)/3 = 27.98154 nm for w = 25 nm
    axis = np.arange(300.0, 700.0, 0.25)
    assert light.integrate(light.ohno_led(axis, 500.0, 25.0 * light.OHNO_FWHM_FACTOR), axis) == printed(
        "27.98154"
    )


@pytest.mark.parametrize(
    ("wavelength_nm", "expected"),
    [
        (450.0, "25.954"),  # CIE 018, V(450) = .038, times 683 lm/W
        (470.0, "62.139"),  # CIE 018
        (505.0, "278.186"),  # CIE 018
        (525.0, "541.756"),  # CIE 018
        (555.0, "683.000"),  # CIE 018, peak
        (590.0, "517.031"),  # CIE 018
        (625.0, "219.243"),  # CIE 018
        (660.0, "41.663"),  # CIE 018
    ],
)
def test_luminous_efficacy_of_monochromatic_light(wavelength_nm, expected, printed):
    value = light.MAX_LUMINOUS_EFFICACY * light.luminous_efficacy_function(wavelength_nm)
    assert value == printed(expected)


@pytest.mark.parametrize(
    ("peak_nm", "parameter_nm", "expected"),
    [
        (450.0, 20.0, "28.964"),  # Ohno 2005 spectrum seen through CIE 018 V(λ), derived
        (470.0, 25.0, "74.001"),  # same
        (525.0, 33.0, "499.404"),  # same
        (590.0, 15.0, "513.747"),  # same
        (625.0, 18.0, "224.630"),  # same
        (660.0, 20.0, "48.926"),  # same
    ],
)
def test_lumens_per_watt_of_an_led(peak_nm, parameter_nm, expected, printed):
    axis = np.arange(360.0, 831.0)
    spectrum = light.ohno_led(axis, peak_nm, parameter_nm * light.OHNO_FWHM_FACTOR)
    assert light.luminous_efficacy(axis, spectrum) == printed(expected)


@pytest.mark.parametrize(
    ("peak_nm", "parameter_nm", "watts"),
    [
        (525.0, 33.0, 0.200239),  # 100 lm; Ohno 2005 with CIE 018, derived
        (625.0, 18.0, 0.445177),  # 100 lm; same
        (450.0, 20.0, 3.45256),  # 100 lm; same
    ],
)
def test_watts_of_a_hundred_lumens(peak_nm, parameter_nm, watts):
    axis = np.arange(360.0, 831.0)
    spectrum = light.ohno_led(axis, peak_nm, parameter_nm * light.OHNO_FWHM_FACTOR)
    # The watts were worked out from the efficacies rounded as above: five digits hold.
    assert light.radiant_flux_from_luminous(100.0, axis, spectrum) == pytest.approx(watts, rel=2e-5)


# Varshni parameters E0 [eV], alpha [eV/K], beta [K]
GAAS = (1.519, 5.405e-4, 204.0)  # Vurgaftman et al. 2001
INP = (1.4236, 3.63e-4, 162.0)  # Vurgaftman et al. 2001
INAS = (0.417, 2.76e-4, 93.0)  # Vurgaftman et al. 2001
SILICON = (1.17, 4.73e-4, 636.0)  # Varshni parameters of Si, from memory
WURTZITE_GAN = (3.510, 9.09e-4, 830.0)  # Vurgaftman & Meyer 2003, from memory


@pytest.mark.parametrize(
    ("parameters", "expected"),
    [
        (GAAS, "1.4225"),  # GaAs at 300 K, Vurgaftman 2001
        (INAS, ".354"),  # InAs at 300 K, Vurgaftman 2001
        (SILICON, "1.1245"),  # Si at 300 K; parameters from memory
    ],
)
def test_band_gap_at_300_k(parameters, expected, printed):
    assert light.varshni_gap_ev(300.0, *parameters) == printed(expected)


@pytest.mark.parametrize(
    ("parameters", "expected_mev"),
    [
        (GAAS, "-.4519"),  # Varshni 1967 with Vurgaftman 2001, derived
        (WURTZITE_GAN, "-.419"),  # parameters from memory, derived
        (INP, "-.318"),  # Vurgaftman 2001, derived
    ],
)
def test_gap_slope_at_300_k(parameters, expected_mev, printed):
    rise, fall = (light.varshni_gap_ev(300.0 + step, *parameters) for step in (0.01, -0.01))
    assert (rise - fall) / 0.02 * 1000.0 == printed(expected_mev)


def test_infrared_peak_shift_from_the_gap(printed):
    # GaAs at its own gap wavelength 872 nm, 300 K: +.277 nm/K (Varshni 1967, Vurgaftman 2001, derived)
    assert light.varshni_peak_shift_nm_per_k(300.0, *GAAS) == printed(".277")


@pytest.mark.parametrize(
    ("characteristic_k", "expected", "percent_per_k"),
    [
        (1600.0, ".9632", "-.063"),  # blue, Schubert 2006 ch. 6; from memory, typical values
        (295.0, ".8160", "-.339"),  # green, Schubert; from memory, typical
        (95.0, ".5318", "-1.05"),  # red, Schubert; from memory, typical
    ],
)
def test_flux_from_25_to_85_c(characteristic_k, expected, percent_per_k, printed):
    assert light.flux_at_temperature_exponential(85.0, characteristic_k) == printed(expected)
    slope = light.flux_at_temperature_exponential(25.005, characteristic_k) - (
        light.flux_at_temperature_exponential(24.995, characteristic_k)
    )
    assert slope / 0.01 * 100.0 == pytest.approx(float(percent_per_k), abs=0.005)


@pytest.mark.parametrize(
    ("optical_w", "expected"),
    [
        (1.2, 54.4),  # 40 °C, 8 K/W, 3 W, 40 % light; JESD51-51 real resistance (number from memory)
        (0.0, 64.0),  # no credit for the light that leaves; same
    ],
)
def test_junction_temperature(optical_w, expected):
    assert light.junction_temperature(40.0, 8.0, 3.0, optical_w) == pytest.approx(expected, abs=1e-12)


def test_pulse_train_peak(printed):
    # RC theory: R 10 K/W, tau 2 ms, 5 W, pulse .2 ms, period 10 ms -> 4.790407 K
    assert light.pulse_peak_rise(5.0, 10.0, 2e-3, 0.2e-3, 10e-3) == printed("4.790407")
