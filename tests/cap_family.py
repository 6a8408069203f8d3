"""The demo family ``caps-24``: invented reflectance of 24 moulded caps and of the liner compound in them.

A cap is an opaque layer of resin, white pigment and dyes (Kubelka and Munk's two-flux model, with Saunderson's
correction for its surface); ``natural`` is a hazy layer above a dark chuck. The liner is the same compound, dosed a
little weaker, so a missing liner hardly shows. Absorption bands are made up. Write it with
``python tests/cap_family.py``.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np

SEED = 24
SAMPLES = 5
NM = np.concatenate([np.arange(340, 800, 5.0), np.arange(800, 1751, 25.0)])
#: Reflectance at the surface from outside and from inside. [1]
OUTSIDE, INSIDE = 0.04, 0.50


def bands(*parts: tuple[float, float, float]) -> np.ndarray:
    """Sum of bell-shaped absorption bands (height, centre [nm], width [nm])."""
    return sum(height * np.exp(-0.5 * ((NM - centre) / width) ** 2) for height, centre, width in parts)


def edge(centre: float, width: float) -> np.ndarray:
    """Absorption that ends at a wavelength. [nm]"""
    return 1 / (1 + np.exp((NM - centre) / width))


DYES = {
    "yellow": bands((1.0, 430, 38), (0.7, 375, 40)),
    "orange": bands((0.9, 455, 45), (0.8, 505, 30), (0.6, 370, 60)),
    "red": bands((1.0, 540, 35), (0.8, 495, 40), (0.45, 420, 60)),
    "magenta": bands((1.0, 530, 30), (0.75, 565, 22), (0.25, 370, 50)),
    "violet": bands((1.0, 570, 38), (0.6, 612, 22), (0.25, 370, 45)),
    "blue": bands((1.0, 612, 30), (0.95, 690, 40), (0.6, 345, 35)),
    "green": bands((1.0, 640, 40), (0.65, 740, 35), (0.7, 435, 35), (0.3, 360, 40)),
    "oxide": edge(545, 20) + bands((0.10, 870, 70)),
    "black": (550 / NM) ** 0.25,
}
RESIN = 0.020 * np.exp(-(NM - 360) / 45) + 0.0004 + bands((0.05, 1210, 16), (0.09, 1400, 28), (0.9, 1730, 22))
SCATTER = (550 / NM) ** 0.9
#: White pigment (None: hazy), dyes, and how much weaker the liner is dosed. [1]
CAPS: dict[str, tuple[float | None, dict[str, float], float]] = {
    "white": (1.0, {}, 0.25),
    "ivory": (0.8, {"yellow": 0.035, "oxide": 0.010}, 0.10),
    "cream": (0.8, {"yellow": 0.07, "orange": 0.02}, 0.08),
    "lemon": (0.5, {"yellow": 0.55}, 0.07),
    "yellow": (0.5, {"yellow": 1.0, "orange": 0.10}, 0.07),
    "gold": (0.3, {"yellow": 0.6, "oxide": 0.35}, 0.07),
    "orange": (0.25, {"orange": 1.3, "red": 0.10}, 0.07),
    "coral": (0.5, {"red": 0.30, "orange": 0.25}, 0.06),
    "red": (0.15, {"red": 1.8}, 0.08),
    "burgundy": (0.12, {"red": 1.6, "violet": 0.35, "black": 0.10}, 0.09),
    "pink": (0.8, {"magenta": 0.18}, 0.06),
    "magenta": (0.3, {"magenta": 1.2}, 0.07),
    "violet": (0.25, {"violet": 1.0, "magenta": 0.15}, 0.07),
    "lavender": (0.8, {"violet": 0.16}, 0.07),
    "navy": (0.12, {"blue": 1.4, "violet": 0.5, "black": 0.12}, 0.10),
    "blue": (0.25, {"blue": 1.2}, 0.07),
    "sky": (0.8, {"blue": 0.20}, 0.06),
    "turquoise": (0.5, {"blue": 0.4, "green": 0.35}, 0.06),
    "green": (0.25, {"green": 1.3}, 0.07),
    "lime": (0.5, {"green": 0.22, "yellow": 0.5}, 0.06),
    "olive": (0.25, {"green": 0.4, "oxide": 0.5, "black": 0.06}, 0.08),
    "brown": (0.15, {"oxide": 1.1, "black": 0.10}, 0.08),
    "black": (0.0, {"black": 2.2}, 0.13),
    "natural": (None, {}, 0.14),
}


def reflectance(
    white: float | None, dyes: dict[str, float], *, dose: float, spread: float, thickness: float
) -> np.ndarray:
    """Reflectance factor of a moulded piece. (n,)"""
    absorption, scatter = RESIN.copy(), 0.05 * SCATTER
    if white is not None:
        tint = dose if not dyes else 1.0  # a piece without dye is dosed with its white pigment
        scatter = scatter + white * SCATTER * spread * tint
        absorption += white * 0.9 * edge(396, 6.5) * tint
    for name, share in dyes.items():
        absorption += share * dose * 0.35 * DYES[name]
    a = 1 + absorption / scatter
    b = np.sqrt(a * a - 1)
    inner = a - b
    if white is None:  # above a dark chuck of 5 %
        coth = 1 / np.tanh(np.maximum(b * 22.0 * thickness * scatter * dose, 1e-9))
        inner = (1 - 0.05 * (a - b * coth)) / (a - 0.05 + b * coth)
    return (1 - OUTSIDE) * (1 - INSIDE) * inner / (1 - INSIDE * inner)


def samples() -> dict[str, np.ndarray]:
    """All samples by column name; dosing, scatter, thickness and sheen vary independently of one another."""
    rng, found = np.random.default_rng(SEED), {}
    for name, (white, dyes, weaker) in CAPS.items():
        for part, factor, scatter in (("cap", 1.0, 1.0), ("liner", 1.0 - weaker, 0.985)):
            spread = np.column_stack([np.ones(SAMPLES), rng.standard_normal((SAMPLES, 4))])
            stray = np.linalg.qr(spread)[0][:, 1:] * 2.0
            for k, (dose, haze, thickness, sheen) in enumerate(stray, 1):
                piece = reflectance(
                    white,
                    dyes,
                    dose=factor * (1 + 0.008 * dose),
                    spread=scatter * (1 + 0.005 * haze),
                    thickness=1 + 0.010 * thickness,
                )
                found[f"{name}-{part}.{k}"] = piece + 0.004 + 0.0007 * sheen
    return found


def write_tables(folder: Path) -> None:
    """Write the table of variants and that of spectra."""
    found = samples()
    lines = [
        "# Invented for demonstration: reflectance factor of 24 moulded caps and of the liner compound in them.",
        "# Not measured, no real product; made by tests/cap_family.py with a fixed seed.",
        ",".join(["wavelength_nm", *found]),
        *(",".join([f"{nm:g}", *(f"{curve[i]:.5f}" for curve in found.values())]) for i, nm in enumerate(NM)),
    ]
    (folder / "caps-24-spectra.csv").write_text("\n".join(lines) + "\n", encoding="utf-8")
    rows = ["variant,title,scene.target,scene.background"]
    rows += [f"{name},Liner missing in a cap: {name},{name}-cap,{name}-liner" for name in CAPS]
    (folder / "caps-24.csv").write_text("\n".join(rows) + "\n", encoding="utf-8")


if __name__ == "__main__":
    write_tables(Path(__file__).resolve().parents[1] / "problems" / "families")
