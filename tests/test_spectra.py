"""Curves: integrity, resampling, integration weights and value semantics."""

import numpy as np
import pytest

from codesign.errors import CatalogError, CoverageError, ProblemError
from codesign.spectra import Spectrum, read_table, trapezoid_weights, wavelength_grid


@pytest.fixture
def ramp():
    return Spectrum([400, 500, 700], [0.0, 1.0, 3.0], "ramp.csv")


def test_resample_interpolates_linearly(ramp):
    assert ramp.resample([400, 450, 600, 700]) == pytest.approx([0, 0.5, 2, 3])


def test_resample_agrees_with_numpy_on_random_curves():
    rng = np.random.default_rng(7)
    x = np.sort(rng.uniform(300, 1700, 60))
    curves = rng.random((5, 60))
    grid = np.linspace(x[0], x[-1], 911)
    result = Spectrum(x, curves).resample(grid)
    assert result.shape == (5, 911)
    for row, curve in zip(result, curves, strict=True):
        np.testing.assert_allclose(row, np.interp(grid, x, curve), rtol=1e-12, atol=1e-14)


def test_resample_hits_stored_points_exactly(ramp):
    assert ramp.resample(ramp.wavelength_nm).tolist() == ramp.values.tolist()


def test_resample_outside_is_an_error_that_names_both_ranges(ramp):
    with pytest.raises(CoverageError, match=r"ramp\.csv: curve runs 400 to 700 nm, but 380 to 720 nm"):
        ramp.resample([380, 720])


@pytest.mark.parametrize(("outside", "expected"), [("zero", 0.0), ("edge", 3.0), (0.25, 0.25)])
def test_resample_fills_outside_only_as_stated(ramp, outside, expected):
    result = ramp.resample([500, 700, 800], outside=outside)
    assert result.tolist() == [1.0, 3.0, expected]


def test_resample_forgives_rounding_of_printed_wavelengths(ramp):
    assert ramp.resample([400 - 1e-9, 700 + 1e-9]) == pytest.approx([0, 3])


@pytest.mark.parametrize(
    ("lo", "hi", "expected"), [(400, 700, True), (450, 460, True), (399, 500, False), (500, 701, False)]
)
def test_covers_compares_both_ends(ramp, lo, hi, expected):
    assert ramp.covers(lo, hi) is expected


def test_arrays_cannot_be_changed(ramp):
    with pytest.raises(ValueError, match="read-only"):
        ramp.values[0] = 1
    with pytest.raises(AttributeError):
        ramp.label = "other"


def test_spectrum_does_not_share_the_callers_array():
    values = np.array([1.0, 2.0])
    spectrum = Spectrum([400, 500], values)
    values[0] = 9
    assert spectrum.values[0] == 1


def test_equal_curves_are_equal_and_hash_alike(ramp):
    twin = Spectrum([400, 500, 700], [0, 1, 3], "another file")
    assert ramp == twin and hash(ramp) == hash(twin)
    assert ramp != Spectrum([400, 500, 700], [0, 1, 2])
    assert ramp != "ramp"


@pytest.mark.parametrize(
    ("wavelength", "values", "words"),
    [
        ([400], [1], "2 or more"),
        ([400, 400], [1, 1], "400 nm follows 400 nm"),
        ([500, 400], [1, 1], "strictly increasing"),
        ([400, np.nan], [1, 1], "strictly increasing"),
        ([400, 500], [1, np.inf], "500 nm is not finite"),
        ([400, 500], [1, 2, 3], "one value per wavelength"),
        ([400, 500], [[[1, 2]]], "one value per wavelength"),
    ],
)
def test_unusable_curves_are_refused(wavelength, values, words):
    with pytest.raises(CatalogError, match=words):
        Spectrum(wavelength, values, "x")


@pytest.mark.parametrize(
    ("lo", "hi", "step", "count"), [(400, 700, 5, 61), (400, 700, 7, 44), (400, 401, 5, 2)]
)
def test_grid_holds_both_ends_and_never_steps_wider(lo, hi, step, count):
    grid = wavelength_grid(lo, hi, step)
    assert grid[0] == lo and grid[-1] == hi and grid.size == count
    assert np.diff(grid).max() <= step * (1 + 1e-12)
    assert np.ptp(np.diff(grid)) < 1e-9


@pytest.mark.parametrize(("lo", "hi", "step"), [(700, 400, 5), (400, 400, 5), (400, 700, 0), (-1, 5, 1)])
def test_grid_refuses_impossible_ranges(lo, hi, step):
    with pytest.raises(ProblemError, match="0 < from < to and step > 0"):
        wavelength_grid(lo, hi, step)


def test_trapezoid_weights_give_the_trapezoid_integral_on_uneven_grids():
    rng = np.random.default_rng(3)
    grid = np.sort(rng.uniform(400, 1000, 40))
    values = rng.random((3, 40))
    np.testing.assert_allclose(values @ trapezoid_weights(grid), np.trapezoid(values, grid), rtol=1e-12)


def test_table_reads_comments_bom_blank_lines_and_crlf(tmp_path):
    path = tmp_path / "t.csv"
    path.write_bytes(
        "\ufeff# measured today\r\nwavelength_nm, a ,b\r\n\r\n400,1,2\r\n# gap\r\n500,3,4\r\n".encode()
    )
    table = read_table(path)
    assert table.names == ("a", "b")
    assert table.lines == (4, 6)
    assert table.column("b").values.tolist() == [2, 4]
    assert table.spectrum.values.shape == (2, 2)


def test_table_keeps_named_columns_in_the_order_asked(tmp_path):
    path = tmp_path / "t.csv"
    path.write_text("wavelength_nm,a,b,c\n400,1,2,3\n500,4,5,6\n", encoding="utf-8")
    assert read_table(path, ["c", "a"]).spectrum.values.tolist() == [[3, 6], [1, 4]]
    with pytest.raises(CatalogError, match="no column 'd'"):
        read_table(path, ["d"])


def test_require_names_file_line_column_and_value(tmp_path):
    path = tmp_path / "t.csv"
    path.write_text("# head\nwavelength_nm,a\n400,1\n500,-4\n", encoding="utf-8")
    table = read_table(path, label="t.csv")
    with pytest.raises(CatalogError, match=r"^t\.csv:4: a is -4, must be >= 0$"):
        table.require(table.spectrum.values >= 0, "must be >= 0")
