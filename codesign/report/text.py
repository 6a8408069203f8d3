"""Results as a narrow plain-text recipe: what to set, what you get, what limits it, how sure it is."""

from __future__ import annotations

import math
from collections.abc import Iterable
from typing import TYPE_CHECKING

from codesign.design import Design, LedState, LimitUse, Performance
from codesign.least_cost import LIMIT_NAMES
from codesign.problem import Problem
from codesign.report.cautions import cautions
from codesign.report.layout import NARROWEST, barred, bullet, heading, labelled, number, percent, table
from codesign.report.output import plain

if TYPE_CHECKING:
    from codesign.least_cost import LeastCost
    from codesign.solve import Solution
    from codesign.verify import Verdict

CNR_DEFINITION = "|target mean - background mean| / √(mean of their variances)"

#: From this share on a limit counts as reached. [1]
REACHED = 0.999
#: What the mark of a limit at the optimum means.
BINDS = "binds: loosening this limit can raise the CNR"
#: Limits met that are used less are counted in one line; the JSON result lists all. [1]
HARDLY_USED = 0.01
#: Units as set in text; error messages and JSON keep to ASCII.
UNITS = {"us": "µs", "e-": "e⁻", "e-^2": "e⁻²", "deg C": "°C", "W/m2": "W/m²"}
#: What can be made least, in words.
QUANTITY_NAMES = {"price": "price", "heat": "rig heat", "exposure": "exposure", "leds": "number of LED channels"}
#: Parts left out that are listed; the JSON result lists all.
LISTED = 6


def solution_text(
    solution: Solution, width: int = 80, verdict: Verdict | None = None, least: LeastCost | None = None
) -> str:
    """Return a solution as plain text.

    Parameters
    ----------
    solution : Solution
    width : int
        Page width, at least 60. [characters]
    verdict : Verdict, optional
        What `codesign.verify` returned, where it was run.
    least : LeastCost, optional
        What was made least, where the solution belongs to that.

    Returns
    -------
    str
        Lines no wider than ``width``, with a few characters beyond ASCII (µ, °, bars).
    """
    width = max(width, NARROWEST)
    problem, recipe = solution.problem, solution.recipe
    blocks = [
        [*_title(problem, width), *_stopped(solution, width)],
        [] if least is None else _least(least, width),
        _settings(problem, recipe, width),
        _results(problem, recipe, width),
        _limits(recipe, width, solution.binding, least),
        _noise(recipe, width),
        _proof(solution, width, verdict),
        _runners_up(solution, width),
        _left_out(problem, width),
        _cautions(problem, recipe, width),
    ]
    return _joined(blocks)


def performance_text(problem: Problem, performance: Performance, width: int = 80) -> str:
    """Return what a recipe achieves as plain text; limits that are missed come first.

    Parameters
    ----------
    problem : Problem
    performance : Performance
    width : int
        Page width, at least 60. [characters]
    """
    width = max(width, NARROWEST)
    blocks = [
        _title(problem, width),
        _verdict(performance, width),
        _settings(problem, performance, width),
        _results(problem, performance, width),
        _limits(performance, width),
        _noise(performance, width),
        _cautions(problem, performance, width),
    ]
    return _joined(blocks)


def _joined(blocks: Iterable[list[str]]) -> str:
    return "\n\n".join("\n".join(block) for block in blocks if block) + "\n"


def _title(problem: Problem, width: int) -> list[str]:
    return [*labelled("title", plain(problem.spec.title), width), *labelled("problem", plain(problem.where), width)]


def _stopped(solution: Solution, width: int) -> list[str]:
    if solution.status != "stopped":
        return []
    said = f"before the gap asked for: {percent(solution.certificate.gap)} is proven; more time narrows it"
    return labelled("stopped", said, width)


def _least(least: LeastCost, width: int) -> list[str]:
    unit = f" {UNITS.get(least.unit, least.unit)}".rstrip()
    value, bound = f"{least.value:.6g}{unit}", f"{least.bound:.6g}{unit}"
    short = "" if least.status == "proven" else ", stopped before the gap asked for"
    none = "there is no less" if least.value == 0 or least.quantity == "leds" else f"none is proven{short}"
    return [
        heading(f"least {QUANTITY_NAMES[least.quantity]}", width),
        *labelled("least", f"{value} reaches CNR {least.required_cnr:g}", width),
        *labelled("bound", f"with {bound} or less no recipe does (proven{short})" if least.bound > 0 else none, width),
        *labelled("below", "the recipe of most CNR with about that much, which is among its limits (marked *)", width),
    ]


def _verdict(performance: Performance, width: int) -> list[str]:
    if performance.feasible:
        return [heading("verdict", width), *labelled("all limits", "are met", width)]
    missed = performance.violated
    lines = [heading("verdict", width)]
    lines += labelled("NOT MET", f"{len(missed)} of {len(performance.limits)} limits:", width)
    return lines + [line for limit in missed for line in bullet(limit.shortfall(), width)]


def _settings(problem: Problem, performance: Performance, width: int) -> list[str]:
    design = performance.design
    lines = [heading("what to set", width)]
    camera = f"{design.camera}, channel {plain(design.channel)}, gain {design.gain_db:g} dB"
    for label, text in (
        ("camera", camera),
        ("filter", design.filter),
        ("f-number", f"{design.f_number:g}"),
        ("exposure", f"{exposure_words(design)}, {light_words(problem, performance)}"),
        *([("weights", _weights(performance))] if performance.weights else []),
    ):
        lines += labelled(label, text, width)
    if not performance.leds:
        return lines + labelled("LEDs", "all off", width)
    rows = [
        (s.id, currents_words(design, s), f"× {s.emitters}", f"junction {s.junction_c:.1f} °C")
        for s in performance.leds
    ]
    return lines + table(("LED", "current", "emitters", "predicted"), rows, width)


def exposure_words(design: Design) -> str:
    """Say the exposure, or those of all shots."""
    if not design.shots:
        return f"{design.exposure_us:.10g} µs"
    return f"{len(design.shots)} shots of " + ", ".join(f"{shot.exposure_us:.10g}" for shot in design.shots) + " µs"


def currents_words(design: Design, state: LedState) -> str:
    """Current of an LED, shot after shot."""
    if not design.shots:
        return f"{state.drive_ma:.10g} mA"
    return ", ".join(f"{shot.drive_ma.get(state.id, 0.0):.10g}" for shot in design.shots) + " mA"


def _weights(performance: Performance) -> str:
    """How the readings are added up before the threshold."""
    return ", ".join(f"{plain(name)} {weight:+.4f}" for name, weight in performance.weights.items())


def light_words(problem: Problem, performance: Performance) -> str:
    """Say when the LEDs are on."""
    if not performance.leds:
        return "no LED on"
    if not problem.strobe:
        return "LEDs on continuously"
    if performance.duty > 1:
        return "LEDs never off: exposure beyond the frame"
    return f"LEDs on {percent(performance.duty)} of the time at {problem.spec.timing.frame_rate_hz:g} Hz"


def _results(problem: Problem, performance: Performance, width: int) -> list[str]:
    lines = [heading("what you get", width)]
    sign = f"target {performance.sign} than background" if performance.cnr > 0 else "no usable contrast"
    lines += labelled("CNR", f"{number(performance.cnr)} ({sign})", width)
    lines += labelled("", f"= {CNR_DEFINITION}", width)
    lines += _pairs(performance, width)
    required = problem.spec.required_cnr
    if required is not None:
        lines += labelled("required", f"CNR {required:g}: {_compared(performance.cnr, required)}", width)
    if any(limit.name.startswith("well, ") and not limit.met for limit in performance.limits):
        lines += labelled("", "as if nothing were clipped: a surface does not fit the well", width)
    rate = performance.error_rate
    text = f"{rate_words(rate)} missed, as many false alarms, threshold midway"
    lines += labelled("errors", text, width)
    rows = [(r.id, r.role, f"{r.grey_dn:.1f}", percent(r.saturation_share)) for r in performance.surfaces]
    return [*lines, *table(("surface", "role", "grey value [DN]", "of saturation"), rows, width, left=(0, 1))]


def _pairs(performance: Performance, width: int) -> list[str]:
    if len(performance.pairs) < 2:
        return []
    lines = labelled("", "of the worst pair:", width)
    rows = [(p.target, p.background, number(p.cnr)) for p in sorted(performance.pairs, key=lambda p: p.cnr)]
    return lines + table(("target", "background", "CNR"), rows, width, left=(0, 1))


def _compared(cnr: float, required: float) -> str:
    return f"met, {cnr / required:.2f} times" if cnr >= required else f"NOT met, {percent(1 - cnr / required)} short"


def rate_words(rate: float) -> str:
    """Say how often a decision is wrong."""
    if rate < 1e-12:
        return "fewer than one in 10^12"
    return percent(rate) if rate >= 0.01 else f"1 in {number(1 / rate, 3)}"


def _limits(
    performance: Performance, width: int, binding: tuple[str, ...] | None = None, least: LeastCost | None = None
) -> list[str]:
    """All limits, the most used first; ``binding`` are those the optimum touches before rounding.

    The limit that a search for the ``least`` adds to those of the problem is marked.
    """
    ordered = sorted(performance.limits, key=lambda limit: -limit.share)
    shown = [limit for limit in ordered if limit.share >= HARDLY_USED or not limit.met or _bound(limit, binding)]
    if len(ordered) - len(shown) < 2:  # a line that counts one is no shorter
        shown = ordered
    added = "" if least is None else LIMIT_NAMES[least.quantity]
    rows = [_limit_row(limit, binding, added) for limit in shown]
    lines = [heading("what limits it", width)]
    lines += barred(("  limit", "value", "allowed", "used"), rows, [limit.share for limit in shown], width)
    if len(shown) < len(ordered):
        lines.append(f"   and {len(ordered) - len(shown)} more below {percent(HARDLY_USED)} (--json lists all)")
    if any(_bound(limit, binding) and limit.met for limit in ordered):
        word = f"reached: used to {percent(REACHED)} or more" if binding is None else BINDS
        lines.append(f" ► {word}")
    if any(limit.name == added for limit in ordered):
        lines.append(f" * the limit that --least {least.quantity} tightens to find the least that is enough")
    return lines if performance.feasible else [*lines, " ! exceeded"]


def _bound(limit: LimitUse, binding: tuple[str, ...] | None) -> bool:
    return limit.share >= REACHED if binding is None else limit.name in binding


def _limit_row(limit: LimitUse, binding: tuple[str, ...] | None, added: str = "") -> tuple[str, str, str, str]:
    mark = "!" if not limit.met else "►" if _bound(limit, binding) else " "
    sign = "≥" if limit.floor else "≤"
    allowed = f"{sign} {number(limit.bound)} {UNITS.get(limit.unit, limit.unit)}"
    name = f"{limit.name} *" if limit.name == added else limit.name
    return f"{mark} {name}", number(limit.value), allowed, percent(limit.share, least=0.001)


def _noise(performance: Performance, width: int) -> list[str]:
    total = sum(sum(pair) for pair in performance.noise.values())
    if not total > 0:
        return []
    ordered = sorted(performance.noise.items(), key=lambda item: -sum(item[1]))
    rows = [
        (name, number(math.sqrt(a), 3), number(math.sqrt(b), 3), percent((a + b) / total, least=0.001))
        for name, (a, b) in ordered
        if a + b > 0
    ]
    shares = [sum(pair) / total for _, pair in ordered if sum(pair) > 0]
    note = " σ: standard deviation in electrons"
    table = barred(("term", "σ target", "σ backgr.", "variance"), rows, shares, width)
    return [heading("noise budget", width), *table, note]


def _proof(solution: Solution, width: int, verdict: Verdict | None) -> list[str]:
    proof = solution.certificate
    lines = [heading("how sure it is", width)]
    rows = (
        ("bound", f"no setting of the candidates has a CNR above {number(proof.bound, 6)} (proven)"),
        ("optimum", f"{number(proof.value, 6)} before rounding, gap {percent(proof.gap, least=1e-6)}"),
        ("recipe", f"{number(solution.recipe.cnr, 6)} in settable steps, {_loss(solution.rounding_loss)} the bound"),
        (
            "searched",
            f"{proof.configurations} configurations of parts, gain, f-number, pulse rating and sign, all bounded, "
            f"in {solution.seconds:.1f} s",
        ),
        (
            "junctions",
            f"temperatures assumed and reached agree within {number(max(proof.junction_residual_k, 1e-3), 2)} K, "
            f"the CNR within {percent(max(proof.cnr_residual, 1e-6))}",
        ),
    )
    for label, text in rows:
        lines += labelled(label, text, width)
    if verdict is not None:
        text = f"again, from the problem up, without a solver: {verdict.configurations} configurations bounded, passed"
        lines += labelled("verified", text, width)
    return lines


def _loss(loss: float) -> str:
    return f"{percent(loss, least=1e-6)} below" if loss > 0 else "at"


def _runners_up(solution: Solution, width: int) -> list[str]:
    if not solution.alternatives:
        return []
    best, found = solution.certificate.value, sorted(solution.alternatives, key=lambda a: -a.cnr)
    parts = [(a.design.camera, a.design.filter) for a in found]
    values = [(number(a.cnr), f"{100 * (a.cnr / best - 1):+.1f} %") for a in found]
    settings = [(f"{a.design.f_number:g}", f"{number(a.design.exposure_us)} µs") for a in found]
    # A gain that is the same everywhere need not be told.
    gains = [(f"{a.design.gain_db:g} dB",) for a in found]
    same = {gain for (gain,) in gains} == {f"{solution.optimum.design.gain_db:g} dB"}
    columns = [parts, values, *([] if same else [gains]), settings]
    rows = [[cell for cells in row for cell in cells] for row in zip(*columns, strict=True)]
    header = ("camera", "filter", "CNR", "change", *(() if same else ("gain",)), "f-number", "exposure")
    return [heading("runners-up with other parts, before rounding", width), *table(header, rows, width, left=(0, 1))]


def _left_out(problem: Problem, width: int) -> list[str]:
    names = problem.left_out
    if not names:
        return []
    lines = [heading("candidates left out", width)]
    for text in names[:LISTED]:
        lines += bullet(plain(text), width)
    more = len(names) - LISTED
    return lines + (bullet(f"and {more} more (--json lists all)", width) if more > 0 else [])


def _cautions(problem: Problem, performance: Performance, width: int) -> list[str]:
    found = cautions(problem, performance)
    return [heading("cautions", width), *(line for text in found for line in bullet(text, width))] if found else []
