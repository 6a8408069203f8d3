"""Tolerances and robust recipes as plain dictionaries for JSON; conventions as in `codesign.report.machine`.

``tolerance_dict`` (schema ``codesign.tolerance/1``)

======================== ===========================================================================================
problem                  {"title", "file", "required_cnr"}
settings                 the recipe, see `codesign.report.machine`
draws, seed, retuned     rigs drawn, seed, whether each had its own exposure
required_cnr             CNR a rig must reach, or None
yield                    {"share", "low", "high"}: reach it within all limits, exact 95 % interval; or None
reached, within_limits   the same for the CNR alone and for the limits alone
cnr                      {"nominal", "mean", "standard_deviation", "quantiles": {share: CNR}}
exposure_us              {"least", "median", "most"} over rigs
missed                   {limit: share of rigs that miss it}
causes                   [{"cause", "first_order", "first_order_interval", "total", "total_interval"}], largest total
                         first; shares of the variance of the CNR, 95 % intervals
spreads                  [{"quantity", "part", "shape", "size", "middle", "unit", "causes", "correlation"}]
======================== ===========================================================================================

``robust_dict`` (schema ``codesign.robust/1``)

======================== ===========================================================================================
problem                  as above
scenarios, seed          how many were drawn
quantile                 share of scenarios that may fall short, 0 for the worst case
nominal, cautious,       {"settings", "cnr": on the rig as stated, "value": worst case or quantile, "scenarios":
robust                   [{"cnr", "limits_met"}]}; ``cautious`` is the nominal recipe with less light, or None
value, bound, gap        of the robust recipe; what no recipe exceeds; relative distance
bound_by                 "joint search" or "single scenarios"
price                    share of the nominal CNR given up on the rig as stated
junction_residual_k      largest difference of junction temperatures assumed and reached
======================== ===========================================================================================
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from codesign.design import Design
from codesign.problem import Problem
from codesign.study.robust import Robust
from codesign.study.robust_settings import Trial
from codesign.study.tolerance import QUANTILES, Rate, Tolerance

TOLERANCE_SCHEMA = "codesign.tolerance/1"
ROBUST_SCHEMA = "codesign.robust/1"

_SETTINGS = ("camera", "channel", "gain_db", "filter", "f_number", "exposure_us")


def tolerance_dict(found: Tolerance) -> dict[str, Any]:
    """Return a tolerance study as a dictionary of plain values; the module says what each key holds."""
    cnr, exposure = found.outcome.cnr, found.outcome.exposure_s * 1e6
    return {
        "schema": TOLERANCE_SCHEMA,
        "problem": _problem(found.problem),
        "settings": _settings(found.nominal.design),
        "draws": found.draws,
        "seed": found.seed,
        "retuned": found.retuned,
        "required_cnr": found.required,
        "yield": _rate(found.passed),
        "reached": _rate(found.reached),
        "within_limits": _rate(found.within),
        "cnr": {
            "nominal": float(found.nominal.cnr),
            "mean": float(np.mean(cnr)),
            "standard_deviation": float(np.std(cnr)),
            "quantiles": {f"{q:g}": found.quantile(q) for q in QUANTILES},
        },
        "exposure_us": {
            "least": float(exposure.min()), "median": float(np.median(exposure)), "most": float(exposure.max()),
        },
        "missed": dict(found.missed),
        "causes": [
            {
                "cause": c.cause,
                "first_order": c.first_order,
                "first_order_interval": list(c.first_order_interval),
                "total": c.total,
                "total_interval": list(c.total_interval),
            }
            for c in found.causes
        ],
        "spreads": [
            {
                "quantity": s.quantity,
                "part": s.part,
                "shape": s.shape,
                "size": float(s.size),
                "middle": float(s.middle),
                "unit": s.unit,
                "causes": list(s.causes),
                "correlation": float(s.shared),
            }
            for s in found.spreads
        ],
    }  # fmt: skip


def robust_dict(found: Robust) -> dict[str, Any]:
    """Return a robust recipe and the nominal one as a dictionary of plain values."""
    return {
        "schema": ROBUST_SCHEMA,
        "problem": _problem(found.problem),
        "scenarios": found.scenarios,
        "seed": found.seed,
        "quantile": found.quantile,
        "nominal": _trial(found.nominal, found.quantile),
        "cautious": None if found.cautious is None else _trial(found.cautious, found.quantile),
        "robust": _trial(found.robust, found.quantile),
        "value": found.value,
        "bound": float(found.bound),
        "bound_by": found.bound_by,
        "gap": float(found.gap) if math.isfinite(found.gap) else None,
        "price": float(found.price),
        "junction_residual_k": float(found.junction_residual_k),
    }


def _problem(problem: Problem) -> dict[str, Any]:
    return {"title": problem.spec.title, "file": problem.where, "required_cnr": problem.spec.required_cnr}


def _settings(design: Design) -> dict[str, Any]:
    drive = {led: float(ma) for led, ma in design.drive_ma.items()}
    return {**{name: getattr(design, name) for name in _SETTINGS}, "drive_ma": drive, "emitters": dict(design.emitters)}


def _rate(rate: Rate | None) -> dict[str, float] | None:
    return None if rate is None else {"share": rate.share, "low": rate.low, "high": rate.high}


def _trial(trial: Trial, quantile: float) -> dict[str, Any]:
    rigs = zip(trial.reached.tolist(), trial.missed.tolist(), strict=True)
    return {
        "settings": _settings(trial.design),
        "cnr": float(trial.performance.cnr),
        "value": trial.level(quantile),
        "scenarios": [{"cnr": cnr, "limits_met": not missed} for cnr, missed in rigs],
    }
