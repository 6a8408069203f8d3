"""A calibration as plain text and as a dictionary for JSON.

``calibration_dict`` (schema ``codesign.calibration/1``; conventions as in `codesign.report.machine`)

======================== ===========================================================================================
problem                  {"title", "file"}
leds                     [{"id", "factor": delivery relative to the one stated, "standard_error", "low", "high": 95 %
                         interval, "delivery_per_m2": of one emitter, "trouble": why not or hardly determined}]
correlation              of the factors, in their order; None for those not determined
black_level              [{"camera": with gain, "offset_dn": added to the black level stated, "standard_error"}]
gain                     None or {"factor": of the conversion gain stated, "standard_error", "trouble"}
chi_square, degrees_of_freedom, probability: that noise alone gives more
residuals                [{"where": file and line, "surface", "measured_dn", "fitted_dn", "error_dn", "pull"}]
suspects                 [{"kind", "text", "probability": that noise alone looks so, "leds"}], most likely first
dropped                  [text: values not used]
======================== ===========================================================================================
"""

from __future__ import annotations

import math
from dataclasses import asdict
from typing import Any

from codesign.report.layout import NARROWEST, bullet, heading, labelled, number, table
from codesign.report.output import plain
from codesign.study.calibrate import Calibration, Estimate

CALIBRATION_SCHEMA = "codesign.calibration/1"
#: Below this probability a fit is called poor.
POOR = 0.01
#: Largest residuals shown.
SHOWN = 5


def calibration_text(found: Calibration, width: int = 80) -> str:
    """Return a calibration as plain text.

    Parameters
    ----------
    found : Calibration
    width : int
        Page width, at least 60. [characters]
    """
    width = max(width, NARROWEST)
    blocks = [_factors(found, width), _extras(found, width), _fit(found, width), _suspects(found, width)]
    return "\n\n".join("\n".join(line.rstrip() for line in block) for block in blocks if block) + "\n"


def calibration_dict(found: Calibration) -> dict[str, Any]:
    """Return a calibration as a dictionary of plain values; the module says what each key holds."""
    spec = found.problem.spec
    gain = found.gain
    return {
        "schema": CALIBRATION_SCHEMA,
        "problem": {"title": spec.title, "file": found.problem.where},
        "leds": [
            {
                "id": f.name,
                "factor": _finite(f.value),
                "standard_error": _finite(f.error),
                "low": _finite(f.interval[0]),
                "high": _finite(f.interval[1]),
                "delivery_per_m2": found.delivery_per_m2.get(f.name),
                "trouble": f.trouble,
            }
            for f in found.factors
        ],
        "correlation": [[_finite(value) for value in row] for row in found.correlation],
        "black_level": [
            {"camera": o.name, "offset_dn": _finite(o.value), "standard_error": _finite(o.error)} for o in found.offsets
        ],
        "gain": gain
        and {"factor": _finite(gain.value), "standard_error": _finite(gain.error), "trouble": gain.trouble},
        "chi_square": found.chi_square,
        "degrees_of_freedom": found.degrees_of_freedom,
        "probability": _finite(found.probability),
        "residuals": [asdict(residual) for residual in found.residuals],
        "suspects": [{**asdict(suspect), "leds": list(suspect.leds)} for suspect in found.suspects],
        "dropped": list(found.dropped),
    }


def _finite(value: float) -> float | None:
    return float(value) if math.isfinite(value) else None


def _factors(found: Calibration, width: int) -> list[str]:
    lines = [heading(plain(found.problem.spec.title), width)]
    told = [f for f in found.factors if f.determined]
    rows = [(f.name, *_numbers(f), number(found.delivery_per_m2[f.name])) for f in told]
    if rows:
        lines += table(("LED", "factor", "± 95 %", "delivery, 1/m²"), rows, width)
    for estimate in found.factors:
        if estimate.trouble:
            lines += bullet(f"{estimate.name}: {estimate.trouble}", width)
    return [*lines, *bullet("factor: light on the object relative to the delivery that the problem states", width)]


def _numbers(estimate: Estimate) -> tuple[str, str]:
    half = estimate.interval[1] - estimate.value
    digits = max(0, min(6, 1 - math.floor(math.log10(half)))) if half > 0 else 6
    return f"{estimate.value:.{digits}f}", f"{half:.{digits}f}"


def _extras(found: Calibration, width: int) -> list[str]:
    lines: list[str] = []
    for estimate in (*found.offsets, *([found.gain] if found.gain else [])):
        unit = "" if estimate is found.gain else " DN"
        label = "gain" if estimate is found.gain else "black level"
        where = "of the value stated" if estimate is found.gain else f"from the value stated, {estimate.name}"
        if estimate.determined:
            value, half = _numbers(estimate)
            sign = "" if estimate is found.gain or value.startswith("-") else "+"
            lines += labelled(label, f"{sign}{value} ± {half}{unit} {where} (95 %)", width)
        else:
            lines += labelled(label, estimate.trouble, width)
    if lines:
        lines += labelled("", "a camera's record holds these, not the problem file: change them there", width)
    return [heading("camera", width), *lines] if lines else []


def _fit(found: Calibration, width: int) -> list[str]:
    lines = [heading("how well it fits", width)]
    freedom = found.degrees_of_freedom
    if freedom > 0:
        poor = "; poor: the uncertainties do not hold" if found.probability < POOR else ""
        text = f"{found.chi_square:.4g} for {freedom} degrees of freedom, probability {found.probability:.2g}{poor}"
        lines += labelled("chi-square", text, width)
    else:
        lines += labelled("chi-square", "as many unknowns as readings: nothing is left to check the fit with", width)
    worst = sorted(found.residuals, key=lambda r: -abs(r.pull))[:SHOWN]
    rows = [(r.where, r.surface, f"{r.measured_dn:.2f}", f"{r.fitted_dn:.2f}", f"{r.pull:+.1f}") for r in worst]
    lines += table(("largest residuals", "surface", "measured", "fitted, DN", "in σ"), rows, width, left=(0, 1))
    for text in found.dropped[:SHOWN]:
        lines += bullet(f"not used: {text}", width)
    return lines


def _suspects(found: Calibration, width: int) -> list[str]:
    lines = [heading("suspects", width)]
    if not found.suspects:
        return [*lines, *bullet("none", width)]
    for suspect in found.suspects:
        lines += bullet(f"{suspect.kind}: {suspect.text}", width)
    return lines
