"""House colours as colour-blind readers and grey printers see them, worked out with an independent colour library.

Colour blindness after G. M. Machado, M. M. Oliveira, L. A. F. Fernandes, "A Physiologically-based Model for Simulation
of Color Vision Deficiency", IEEE Trans. Vis. Comput. Graph. 15 (2009), as tabulated in colour-science. Differences are
CIE DE2000 (CIE 142-2001); about 2 is just noticed side by side (common practice, no source).
Contrast after the formula of WCAG 2.2, success criterion 1.4.3: text at least 4.5 to 1; 1.4.11: graphics 3 to 1.
"""

import itertools

import colour
import numpy as np
import pytest

from codesign.report import house

#: What stands beside each other in figures: target and background with the story's parts, series.
TOGETHER = {
    "surfaces and parts": (house.TARGET, house.BACKGROUND, house.FILTER, house.AMBIENT, house.SENSOR),
    "series": house.SERIES[:6],
}
#: Least difference of any two that stand together: several times what is just noticed. Dashes and markers differ too.
LEAST_DIFFERENCE = 8.0


def seen(code: str, deficiency: str | None, severity: float) -> np.ndarray:
    """CIE L*a*b* of a colour as seen with a colour vision deficiency."""
    linear = colour.cctf_decoding(colour.notation.HEX_to_RGB(code))
    if deficiency is not None:
        linear = np.clip(colour.blindness.matrix_cvd_Machado2009(deficiency, severity) @ linear, 0, 1)
    return colour.XYZ_to_Lab(colour.RGB_to_XYZ(linear, "sRGB"))


def luminance(code: str) -> float:
    return float(colour.cctf_decoding(colour.notation.HEX_to_RGB(code)) @ (0.2126, 0.7152, 0.0722))


def contrast(one: str, other: str) -> float:
    low, high = sorted((luminance(one), luminance(other)))
    return (high + 0.05) / (low + 0.05)


@pytest.mark.oracle
@pytest.mark.filterwarnings("ignore:.*simulation of tritanomaly is based on the shift paradigm")
@pytest.mark.parametrize("deficiency", [None, "Protanomaly", "Deuteranomaly", "Tritanomaly"])
@pytest.mark.parametrize("kind", ["surfaces and parts", "series"])
def test_colours_that_stand_together_differ_for_every_reader(kind, deficiency):
    for one, other in itertools.combinations(TOGETHER[kind], 2):
        difference = colour.delta_E(seen(one, deficiency, 1.0), seen(other, deficiency, 1.0), method="CIE 2000")
        assert difference >= LEAST_DIFFERENCE, f"{one} and {other} differ by {difference:.1f} with {deficiency}"


@pytest.mark.oracle
def test_target_and_background_differ_in_grey_print():
    """The two that matter most are also told apart by lightness, besides full against dashed lines."""
    lightness = [seen(code, None, 0.0)[0] for code in (house.TARGET, house.BACKGROUND)]
    assert abs(lightness[0] - lightness[1]) >= 10.0


@pytest.mark.oracle
@pytest.mark.parametrize("name", ["INK", "MUTED", "MET", "NEAR", "MISSED", "TARGET", "BACKGROUND"])
def test_words_in_house_colours_can_be_read(name):
    for ground in (house.CARD, house.PAPER):
        assert contrast(getattr(house, name), ground) >= 4.5


@pytest.mark.oracle
@pytest.mark.parametrize("name", ["FILTER", "SENSOR"])
def test_lines_in_house_colours_can_be_seen(name):
    assert contrast(getattr(house, name), house.CARD) >= 3.0


def test_every_series_has_its_own_line_and_marker():
    assert len(set(house.DASHES[: len(house.SERIES)])) == len(house.SERIES)
    assert len(set(house.MARKERS[: len(house.SERIES)])) == len(house.SERIES)
