"""Families of invented label inks of any size: the generator of the demo ``labels-200``, and small ones for tests.

An ink is a film of one to three dyes (absorption bands) and maybe carbon black over white paper; light crosses the film
twice (Beer and Lambert). The fault is a film that is too thin. Samples differ in film and paper as prints do.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np

SEED = 20
WAVELENGTHS = np.arange(400.0, 901.0, 10.0)
#: Deviations of film and paper of the samples: good print, then thin print. [1]
GOOD = ((0.012, 0.0025), (-0.012, 0.0025), (0.0, -0.005))
THIN = ((0.008, 0.003), (-0.008, -0.003))
#: Reflectance of the surface itself, beside the film. [1]
GLOSS = 0.02
WEB_SPEEDS = (800, 1200, 1600)


@dataclass(frozen=True)
class Ink:
    """One ink: absorption of its film at each wavelength, and how much film the fault lacks. [1]"""

    name: str
    absorption: np.ndarray
    lack: float

    def reflectance(self, film: float, paper: float) -> np.ndarray:
        """Reflectance of a film of relative thickness ``film`` on paper of relative reflectance ``paper``."""
        white = 0.86 - 0.12 * np.exp(-(WAVELENGTHS - 380.0) / 40.0)
        return GLOSS + (1 - GLOSS) * paper * white * np.exp(-2 * film * self.absorption)


def inks(count: int, seed: int = SEED) -> list[Ink]:
    """Return invented inks; the first ones do not depend on the number."""
    return [_ink(index, np.random.default_rng([seed, index])) for index in range(1, count + 1)]


def _ink(index: int, rng: np.random.Generator) -> Ink:
    absorption = np.full(WAVELENGTHS.size, 0.01)
    for _ in range(rng.integers(1, 4)):
        centre, width = rng.uniform(430, 700), rng.uniform(28, 60)
        absorption += rng.uniform(0.25, 1.3) * np.exp(-0.5 * ((WAVELENGTHS - centre) / width) ** 2)
    if rng.random() < 0.2:
        absorption += rng.uniform(0.1, 0.5)
    ink = Ink(f"{index:03d}", absorption, rng.uniform(0.07, 0.14))
    return Ink(f"{index:03d}-{_colour(ink.reflectance(1.0, 1.0))}", absorption, ink.lack)


def _colour(reflectance: np.ndarray) -> str:
    """Rough name of a colour from its reflectance in the blue, green and red."""
    blue, green, red = (
        float(reflectance[(lo <= WAVELENGTHS) & (hi > WAVELENGTHS)].mean())
        for lo, hi in ((400, 490), (490, 580), (580, 700))
    )
    top, low = max(blue, green, red), min(blue, green, red)
    shade = "dark-" if top < 0.25 else "pale-" if low > 0.45 else ""
    if top - low < 0.12 * top + 0.03:
        return shade + "grey"
    middle = sorted((blue, green, red))[1]
    mixed = middle > 0.5 * (top + low)
    if top == red:
        return shade + ("orange" if mixed and middle == green else "violet" if mixed else "red")
    if top == green:
        return shade + ("olive" if mixed and middle == red else "turquoise" if mixed else "green")
    return shade + ("violet" if mixed and middle == red else "cyan" if mixed else "blue")


def spectra_csv(family: list[Ink]) -> str:
    """The wide table of reflectance: samples of good and thin prints of each ink, in fractions."""
    columns = {}
    for ink in family:
        number = ink.name[:3]
        for place, (film, paper) in enumerate(GOOD, 1):
            columns[f"ink-{number}.{place}"] = ink.reflectance(1 + film, 1 + paper)
        for place, (film, paper) in enumerate(THIN, 1):
            columns[f"thin-{number}.{place}"] = ink.reflectance((1 - ink.lack) * (1 + film), 1 + paper)
    rows = [
        f"{nm:.0f}," + ",".join(f"{value:.4f}".removeprefix("0") for value in values)
        for nm, values in zip(WAVELENGTHS, np.array(list(columns.values())).T, strict=True)
    ]
    head = [
        "# Invented for demonstration: reflectance factor of printed label inks, good (ink) and too thin (thin).",
        "# Not measured, no real product; made by tests/ink_family.py with a fixed seed.",
        "wavelength_nm," + ",".join(columns),
    ]
    return "\n".join([*head, *rows, ""])


def variants_csv(family: list[Ink], seed: int = SEED) -> str:
    """The table of variants: surfaces, web speed, and the CNR needed."""
    rng = np.random.default_rng([seed, 0])
    lines = ["variant,scene.target,scene.background,motion.speed_mm_per_s,required_cnr"]
    for ink in family:
        number, strict = ink.name[:3], rng.random() < 0.15
        lines.append(f"{ink.name},thin-{number},ink-{number},{rng.choice(WEB_SPEEDS)},{10 if strict else ''}")
    return "\n".join([*lines, ""])


#: What is the same for all inks, as written in the family file of the demo.
HEAD = """\
# Too thin a film of ink on printed labels: 200 inks on one line, one recipe each.
# Invented scenario: the web runs at a speed of its own for each label, lamps of the hall shine in.

title = "Too thin a film on {count} label inks"
notes = "Invented scenario and spectra with the embedded demo catalogue; made by tests/ink_family.py."
variants = "{name}.csv"

[[spectra]]
file = "{name}-spectra.csv"
unit = "fraction"
source = "invented for demonstration, not a product"
invented = true

[shared]
max_led_channels = 4
goal = "worst"

"""
PROBLEM = """\
[problem]                          # the base problem; rows of the table change fields of it
title = "Too thin a film of ink"
notes = "Invented scenario with the embedded demo catalogue."
required_cnr = 7.0

[problem.scene]
target = "thin-001"                # of the first ink; every row names its own
background = "ink-001"
guards = ["paper-coated"]          # unprinted margin
ambient = [{ illuminant = "fluorescent", illuminance_lx = 300 }]

[problem.optics]
f_numbers = [4, 5.6]
magnification = 0.08
lens_transmittance = 0.9           # fraction
filter_position = "front"
field_angle_deg = 7                # [deg]

[problem.lighting]
mode = "strobe"
emitters_per_channel = 16
distance_mm = 200                  # [mm]
incidence_deg = 40                 # gloss misses the lens [deg]
board_k_per_w = 10                 # [K/W]
drive_step_ma = 5                  # [mA]
driver_max_ma = 2000               # [mA]

[problem.motion]
speed_mm_per_s = 800               # [mm/s]
max_blur_px = 2                    # [pixel]

[problem.timing]
frame_rate_hz = 12                 # [Hz]

[problem.temperature]
air_c = 35                         # [deg C]
sensor_c = 45                      # [deg C]

[problem.limits]
well_headroom = 0.9

[problem.averaging]
pixels = 4                         # 2 by 2 pixels of a solid area
"""


def write_family(folder: Path, count: int, *, name: str = "labels", problem: str = PROBLEM) -> Path:
    """Write a family of ``count`` inks to a folder and return its file."""
    family = inks(count)
    (folder / f"{name}.csv").write_text(variants_csv(family), encoding="utf-8")
    (folder / f"{name}-spectra.csv").write_text(spectra_csv(family), encoding="utf-8")
    path = folder / f"{name}.toml"
    path.write_text(HEAD.format(count=count, name=name) + problem, encoding="utf-8")
    return path


if __name__ == "__main__":
    write_family(Path(__file__).resolve().parents[1] / "problems" / "families", 200, name="labels-200")
