"""Behaviour of reflection and of the silicon pixel model."""

from __future__ import annotations

import numpy as np
import pytest

from codesign.errors import CoverageError, ProblemError
from codesign.physics import silicon

AXIS = np.arange(350.0, 1200.0, 5.0)
LAYERS = {"dead_layer_um": 0.05, "collection_depth_um": 5.0}


def test_no_step_in_index_reflects_nothing():
    assert silicon.fresnel_reflectance(1.5, 0.0, 1.5) == 0.0


def test_layer_of_no_thickness_reflects_like_the_bare_surface():
    index = silicon.silicon_index(AXIS[:100])
    bare = silicon.fresnel_reflectance(index.real, index.imag)
    assert silicon.single_layer_reflectance(AXIS[:100], 2.0, 0.0, index) == pytest.approx(bare, rel=1e-12)


def test_half_wave_layer_is_invisible():
    assert silicon.single_layer_reflectance(600.0, 2.0, 150.0, 3.5) == pytest.approx(
        float(silicon.fresnel_reflectance(3.5))
    )


def test_absorption_meets_its_rows_and_is_geometric_between_them():
    low, middle, high = silicon.silicon_absorption_per_cm(np.array([800.0, 805.0, 810.0]))
    assert middle == pytest.approx(np.sqrt(low * high), rel=1e-12)


@pytest.mark.parametrize("wavelength_nm", [249.0, 1451.0])
def test_absorption_outside_its_table_is_refused_with_both_ranges(wavelength_nm):
    with pytest.raises(CoverageError, match=f"250 to 1450 nm, but {wavelength_nm:g} to {wavelength_nm:g} nm"):
        silicon.silicon_absorption_per_cm(wavelength_nm)


def test_index_and_absorption_tell_the_same_k():
    index = silicon.silicon_index(AXIS)
    assert 4e7 * np.pi * index.imag / AXIS == pytest.approx(
        silicon.silicon_absorption_per_cm(AXIS), rel=1e-12
    )


def test_quantum_efficiency_stays_between_zero_and_one_minus_reflection():
    efficiency = silicon.silicon_quantum_efficiency(AXIS, **LAYERS)
    index = silicon.silicon_index(AXIS)
    assert np.all(efficiency >= 0.0)
    assert np.all(efficiency <= 1.0 - silicon.fresnel_reflectance(index.real, index.imag))


def test_quantum_efficiency_is_zero_beyond_the_cutoff():
    cutoff = silicon.band_gap_cutoff_nm(1.12)
    efficiency = silicon.silicon_quantum_efficiency(AXIS, **LAYERS)
    assert np.all(efficiency[cutoff < AXIS] == 0.0) and np.all(efficiency[cutoff > AXIS] > 0.0)


def test_far_infrared_needs_no_table():
    assert np.all(silicon.silicon_quantum_efficiency(np.array([1500.0, 1700.0]), **LAYERS) == 0.0)


def test_deeper_collection_helps_the_infrared_and_not_the_blue():
    shallow = silicon.silicon_quantum_efficiency(AXIS, **LAYERS)
    deep = silicon.silicon_quantum_efficiency(AXIS, dead_layer_um=0.05, collection_depth_um=30.0)
    gain = np.divide(deep, shallow, out=np.ones_like(deep), where=shallow > 0)
    assert gain[AXIS == 400.0] == pytest.approx(1.0, abs=1e-6)
    assert gain[AXIS == 940.0] > 4.0


def test_gate_takes_the_blue_and_leaves_the_infrared():
    diode = silicon.silicon_quantum_efficiency(AXIS, **LAYERS)
    gate = silicon.silicon_quantum_efficiency(AXIS, **LAYERS, pixel="mos", gate_layer_um=0.2)
    assert gate[AXIS == 400.0] < 0.2 * diode[AXIS == 400.0]
    assert gate[AXIS == 940.0] > 0.99 * diode[AXIS == 940.0]


def test_mos_without_gate_equals_the_photodiode():
    diode = silicon.silicon_quantum_efficiency(AXIS, **LAYERS)
    assert np.array_equal(silicon.silicon_quantum_efficiency(AXIS, **LAYERS, pixel="mos"), diode)


def test_coating_raises_the_efficiency_at_its_wavelength():
    bare = silicon.silicon_quantum_efficiency(np.array([600.0]), **LAYERS)
    coated = silicon.silicon_quantum_efficiency(
        np.array([600.0]), **LAYERS, coating_index=2.0, coating_thickness_nm=75.0
    )
    assert coated > 1.45 * bare


def test_fill_factor_scales():
    half = silicon.silicon_quantum_efficiency(AXIS, **LAYERS, fill_factor=0.5)
    assert half == pytest.approx(0.5 * silicon.silicon_quantum_efficiency(AXIS, **LAYERS))


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"pixel": "diode"}, "'photodiode' or 'mos', is 'diode'"),
        ({"gate_layer_um": 0.2}, "photodiode has no gate"),
        ({"coating_index": 2.0}, "given together"),
        ({"coating_thickness_nm": 70.0}, "given together"),
    ],
)
def test_contradicting_options_are_refused(options, message):
    with pytest.raises(ProblemError, match=message):
        silicon.silicon_quantum_efficiency(AXIS, **LAYERS, **options)


def test_below_the_table_is_refused():
    with pytest.raises(CoverageError, match="250 to 1450 nm"):
        silicon.silicon_quantum_efficiency(np.array([200.0, 500.0]), **LAYERS)
