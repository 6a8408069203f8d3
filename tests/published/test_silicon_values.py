"""Published values: Fresnel reflection, coatings, silicon absorption, cut-off, quantum-efficiency model."""

from __future__ import annotations

import numpy as np
import pytest

from codesign.physics import silicon

pytestmark = pytest.mark.published


@pytest.mark.parametrize(
    ("n", "percent"),
    [
        (1.5, "4.000"),  # Fresnel, e.g. Born & Wolf
        (1.5168, "4.2165"),  # Fresnel
        (3.5, "30.8642"),  # Fresnel: 30.9 % for a silicon-like index
        (4.0, "36.000"),  # Fresnel
    ],
)
def test_bare_surface(n, percent, printed):
    assert 100.0 * silicon.fresnel_reflectance(n) == printed(percent)


@pytest.mark.parametrize(
    ("n_layer", "n_substrate", "percent"),
    [
        (1.46, 3.5, "5.90422"),  # quarter wave, ((n1²-ns)/(n1²+ns))², Macleod
        (3.5**0.5, 3.5, "0.00000"),  # same: perfect match
        (2.0, 3.5, ".44444"),  # same
        (1.38, 1.52, "1.26008"),  # MgF2 on crown glass, same
    ],
)
def test_quarter_wave_coating(n_layer, n_substrate, percent, printed):
    assert 100.0 * silicon.quarter_wave_reflectance(n_layer, n_substrate) == printed(percent)
    thin_film = silicon.single_layer_reflectance(550.0, n_layer, 550.0 / (4.0 * n_layer), n_substrate)
    assert 100.0 * thin_film == printed(percent)


@pytest.mark.parametrize(
    ("gap_ev", "nm"),
    [
        (1.12, "1107.00"),  # silicon, hc/Eg
        (1.1242, "1102.87"),  # silicon, hc/Eg
        (0.74, "1675"),  # InGaAs on InP, upper end of the quoted gaps, hc/Eg
        (0.75, "1653"),  # InGaAs on InP, hc/Eg
        (0.7327, "1692"),  # InGaAs on InP at 300 K, Vurgaftman 2001
        (1.4225, "871.6"),  # GaAs, Vurgaftman 2001
        (0.354, "3502"),  # InAs, Vurgaftman 2001
        (0.661, "1876"),  # Ge, from memory
    ],
)
def test_band_gap_cutoff(gap_ev, nm, printed):
    assert silicon.band_gap_cutoff_nm(gap_ev) == printed(nm)


@pytest.mark.parametrize(
    ("wavelength_nm", "n", "alpha", "reflectance"),
    [
        (
            400.0,
            5.613,
            "92990",
            ".4876",
        ),  # Green 2008, Sol. Energ. Mat. Sol. Cells 92, 1305; rows below the same
        (450.0, 4.691, "24100", ".4208"),  # Green 2008
        (500.0, 4.294, "11100", ".3872"),  # Green 2008
        (550.0, 4.077, "6390", ".3673"),  # Green 2008
        (600.0, 3.940, "4175", ".3542"),  # Green 2008
        (650.0, 3.844, "2790", ".3447"),  # Green 2008
        (700.0, 3.772, "1890", ".3374"),  # Green 2008
        (800.0, 3.675, "850", ".3274"),  # Green 2008
        (850.0, 3.641, "534", ".3238"),  # Green 2008
        (900.0, 3.614, "303", ".3210"),  # Green 2008
        (940.0, 3.595, "183", ".3189"),  # Green 2008
        (1000.0, 3.572, "64", ".3165"),  # Green 2008
        (1050.0, 3.556, "16.3", ".3147"),  # Green 2008
        (1100.0, 3.542, "3.5", ".3132"),  # Green 2008
    ],
)
def test_silicon_table(wavelength_nm, n, alpha, reflectance, printed):
    assert silicon.silicon_index(wavelength_nm).real == pytest.approx(n, abs=5e-4)
    assert silicon.silicon_absorption_per_cm(wavelength_nm) == printed(alpha)
    index = silicon.silicon_index(wavelength_nm)
    assert silicon.fresnel_reflectance(index.real, index.imag) == printed(reflectance)


@pytest.mark.parametrize(
    ("wavelength_nm", "alpha", "tolerance"),
    [
        (
            450.0,
            26630.0,
            0.11,
        ),  # Schinke 2015, AIP Adv. 5, 67168 (295 K): independent, within 2-11 % of Green
        (550.0, 6406.0, 0.11),  # Schinke 2015
        (650.0, 2793.0, 0.11),  # Schinke 2015
        (850.0, 511.6, 0.11),  # Schinke 2015
        (940.0, 174.6, 0.11),  # Schinke 2015
        (1000.0, 61.6, 0.11),  # Schinke 2015
    ],
)
def test_silicon_table_agrees_with_an_independent_one(wavelength_nm, alpha, tolerance):
    assert silicon.silicon_absorption_per_cm(wavelength_nm) == pytest.approx(alpha, rel=tolerance)


NODES = [400, 450, 500, 550, 600, 650, 700, 750, 800, 850, 900, 940, 1000, 1050, 1100]


@pytest.mark.parametrize(
    ("depth_um", "wavelengths", "expected"),
    [
        # Beer-Lambert model over Green 2008, dead layer .05 µm, collection depth 5 µm
        (
            5.0,
            NODES,
            ".6282 .8865 .9423 .9289 .8579 .7417 .6056 .4774 .3448 .2337 .1404 .0874 .0315 .0081 .0017",
        ),
        # same, 3 µm
        (
            3.0,
            NODES,
            ".6282 .8858 .9122 .8261 .6995 .5591 .4287 .3229 .2241 .1476 .0868 .0534 .0190 .0049 .0010",
        ),
        # same, 10 µm
        (10.0, [850, 940], ".4126 .1671"),
    ],
)
def test_internal_quantum_efficiency(depth_um, wavelengths, expected):
    alpha = silicon.silicon_absorption_per_cm(np.array(wavelengths, dtype=float))
    values = silicon.internal_quantum_efficiency(alpha, 0.05, depth_um)
    assert values == pytest.approx(np.array(expected.split(), dtype=float), abs=5.1e-5)
