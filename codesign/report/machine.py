"""Results as plain dictionaries for JSON: stable keys, units in their names, plain numbers.

Every dictionary opens with ``schema``, which names its kind and version; a change that could break a reader raises
the version, new keys do not. Numbers that do not exist (a share of a limit that allows nothing) are ``None``.

``solution_dict`` (schema ``codesign.solution/1``)

======================== ===========================================================================================
schema                   "codesign.solution/1"
program                  {"name": "codesign", "version": text}
problem                  {"title": text, "file": text, "required_cnr": number or None}
recipe                   what to dial in, in whole setting steps: a performance (below)
optimum                  the same before rounding: a performance
required_cnr_met         whether the recipe reaches the required CNR; None when none is required
certificate              the proof: {"cnr": of the optimum at the junction temperatures assumed, "cnr_bound": no
                         configuration has more, "gap": cnr_bound / cnr - 1, "configurations": number bounded,
                         "refined": number that needed a convex program, "certified": number that needed the full
                         program, "junction_c": {LED id: temperature assumed}, "junction_residual_k": largest
                         difference between assumed and reached, "cnr_residual": what that changes (relative),
                         "forward_residual": forward model against the optimiser's arrays (relative)}
verified                 None, or what `codesign.verify` checked again: {"configurations": bounded anew,
                         "by_kept_multipliers": number proven by the multipliers kept, "largest_bound", "value"}
rounding_loss            1 - CNR of the recipe / cnr_bound
binding                  [names of the limits the optimum touches]
alternatives             [{"cnr": number, "settings": settings (below)}], certified runners-up with other parts, before
                         rounding, best first
left_out                 [text: candidate part that could not be used, and why]
cautions                 [text], what to beware of with these LEDs; reminders only
seconds                  time the search took [s]
======================== ===========================================================================================

``performance_dict`` (schema ``codesign.performance/1``); inside a solution without ``schema`` and ``problem``

======================== ===========================================================================================
schema                   "codesign.performance/1"
problem                  as above
settings                 {"camera": id, "channel": name, "gain_db": number, "filter": id, "f_number": number,
                         "exposure_us": number, "drive_ma": {LED id: current of each emitter}, "emitters": {LED id:
                         number in use}, empty where the problem fixes the numbers}; with several shots also
                         "shots": [{"exposure_us", "drive_ma"}], exposure_us is then their sum and drive_ma empty
weights                  {channel or "shot 1" ..: number}, only where several readings are combined
cnr                      contrast-to-noise ratio of the worst pair
sign                     "brighter" or "darker": the target against the background
signal_e                 mean electrons of the target minus the background, worst pair
error_rate               share of misses, equal to the share of false alarms, threshold midway
feasible                 whether all limits hold
violated                 [text: limit that does not hold, and by how much]
duty                     share of time the LEDs are on
pairs                    [{"target": id, "background": id, "signal_e": number, "cnr": number}]
surfaces                 [{"id", "role": "target" | "background" | "guard", "led_e", "ambient_e", "dark_e", "total_e":
                         mean electrons, "grey_dn": mean grey value, "saturation_share": of the well or top grey value}]
noise                    [{"term": name, "target_e2", "background_e2": variances, "share": of both together}]
limits                   [{"name", "unit", "value", "bound", "share": 1 at the limit, "floor": whether met from above,
                         "met"}]
leds                     [{"id", "drive_ma", "emitters", "electrical_w", "optical_w": of one emitter while on,
                         "junction_c"}]
cautions                 as above; only outside a solution
======================== ===========================================================================================
"""

from __future__ import annotations

import json
import math
import re
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

import codesign
from codesign.design import Design, Performance
from codesign.problem import Problem
from codesign.report.cautions import cautions

if TYPE_CHECKING:
    from codesign.solve import Solution
    from codesign.verify import Verdict

SOLUTION_SCHEMA = "codesign.solution/1"
PERFORMANCE_SCHEMA = "codesign.performance/1"

_BEYOND_ASCII = re.compile(r"[^\x00-\x7f]+")
_PROOF = ("gap", "configurations", "refined", "certified", "junction_residual_k", "cnr_residual", "forward_residual")


def solution_dict(solution: Solution, verdict: Verdict | None = None) -> dict[str, Any]:
    """Return a whole solution as a dictionary of plain values; the module says what each key holds.

    ``verdict`` is what `codesign.verify` returned, where it was run.
    """
    problem, proof = solution.problem, solution.certificate
    required = problem.spec.required_cnr
    best_first = sorted(solution.alternatives, key=lambda a: -a.cnr)
    return _plain(
        {
            "schema": SOLUTION_SCHEMA,
            "program": {"name": "codesign", "version": codesign.__version__},
            "problem": _problem(problem),
            "recipe": _performance(solution.recipe),
            "optimum": _performance(solution.optimum),
            "required_cnr_met": None if required is None else solution.recipe.cnr >= required,
            "certificate": {
                "cnr": proof.value,
                "cnr_bound": proof.bound,
                **{name: getattr(proof, name) for name in _PROOF},
                "junction_c": proof.junction_c,
            },
            "verified": None if verdict is None else asdict(verdict),
            "rounding_loss": solution.rounding_loss,
            "binding": solution.binding,
            "alternatives": [{"cnr": a.cnr, "settings": _settings(a.design)} for a in best_first],
            "left_out": problem.left_out,
            "cautions": cautions(problem, solution.recipe),
            "seconds": solution.seconds,
        }
    )


def performance_dict(problem: Problem, performance: Performance) -> dict[str, Any]:
    """Return what a recipe achieves as a dictionary of plain values; the module says what each key holds."""
    head = {"schema": PERFORMANCE_SCHEMA, "problem": _problem(problem)}
    return _plain({**head, **_performance(performance), "cautions": cautions(problem, performance)})


def as_json(table: Any) -> str:
    """Return indented JSON text with a final line end; refuses numbers JSON does not have.

    Characters that do not show (control, direction) are escaped, so that the text is safe to print as well.
    """
    text = json.dumps(table, indent=2, ensure_ascii=False, allow_nan=False)
    return _BEYOND_ASCII.sub(_escaped, text).replace("\x7f", "\\u007f") + "\n"


def _escaped(found: re.Match[str]) -> str:
    return "".join(c if c.isprintable() else json.dumps(c)[1:-1] for c in found.group())


def _problem(problem: Problem) -> dict[str, Any]:
    return {"title": problem.spec.title, "file": problem.where, "required_cnr": problem.spec.required_cnr}


def _settings(design: Design) -> dict[str, Any]:
    names = ("camera", "channel", "gain_db", "filter", "f_number", "exposure_us", "drive_ma", "emitters")
    found = {name: getattr(design, name) for name in names}
    if design.shots:
        found["shots"] = [_fields(shot, "exposure_us drive_ma") for shot in design.shots]
    return found


def _performance(performance: Performance) -> dict[str, Any]:
    total = sum(sum(pair) for pair in performance.noise.values())
    return {
        "settings": _settings(performance.design),
        **({"weights": dict(performance.weights)} if performance.weights else {}),
        "cnr": performance.cnr,
        "sign": performance.sign,
        "signal_e": performance.signal_e,
        "error_rate": performance.error_rate,
        "feasible": performance.feasible,
        "violated": [limit.shortfall() for limit in performance.violated],
        "duty": performance.duty,
        "pairs": [_fields(pair, "target background signal_e cnr") for pair in performance.pairs],
        "surfaces": [
            _fields(s, "id role led_e ambient_e dark_e total_e grey_dn saturation_share") for s in performance.surfaces
        ],
        "noise": [
            {"term": term, "target_e2": a, "background_e2": b, "share": (a + b) / total if total > 0 else None}
            for term, (a, b) in performance.noise.items()
        ],
        "limits": [_fields(limit, "name unit value bound share floor met") for limit in performance.limits],
        "leds": [_fields(led, "id drive_ma emitters electrical_w optical_w junction_c") for led in performance.leds],
    }


def _fields(record: Any, names: str) -> dict[str, Any]:
    return {name: getattr(record, name) for name in names.split()}


def _plain(value: Any) -> Any:
    """Turn array scalars, tuples and mappings into what JSON has; numbers that are not finite into None."""
    if hasattr(value, "items"):
        return {str(key): _plain(inner) for key, inner in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(inner) for inner in value]
    if hasattr(value, "item"):
        value = value.item()
    return None if isinstance(value, float) and not math.isfinite(value) else value
