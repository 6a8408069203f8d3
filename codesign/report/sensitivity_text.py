"""Sensitivities as plain text and as a dictionary for JSON.

``sensitivity_dict`` (schema ``codesign.sensitivity/1``)

======================== ===========================================================================================
schema                   "codesign.sensitivity/1"
problem                  {"title": text, "file": text}
cnr                      of the optimum the sensitivities belong to, before rounding
configuration            text: its camera, channel, gain, filter and f-number
binding                  [what determines the optimum: limits at their bounds, LEDs lit, pairs that count]
limits                   [{"name", "unit", "bound", "share": of the bound used, "binds", "price_cnr_per_unit": None
                         where the limit moves in whole steps only or cannot move}]
parameters               [{"parameter", "part": id or None, "unit": "1" for relative changes, "tolerance": standard
                         deviation in that unit, "retuned_per_unit", "fixed_per_unit": relative change of CNR,
                         "low", "high": the quantity moved by its whole tolerance down or up (below), or None}]
======================== ===========================================================================================

Each of low and high is {"amount", "cnr_retuned": proven over all configurations, None where the limits cannot be met,
"cnr_fixed": of the unchanged recipe, "starts", "stops": [what begins or ends to bind], "at": about the amount from
which on, or None, "other": configuration that wins instead, or None, "missed": [limits the unchanged recipe then
misses], "note": text}.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import asdict
from typing import Any

from codesign.report.layout import NARROWEST, bullet, heading, labelled, number, table
from codesign.report.output import plain
from codesign.study.sensitivity import Elasticity, Sensitivities, Shifted

SENSITIVITY_SCHEMA = "codesign.sensitivity/1"

#: From this page width on the table has room for the ends of the tolerances. [characters]
WIDE = 78
#: Changes of CNR below this are summed up in one line. [1]
NEGLIGIBLE = 1e-4


def sensitivity_dict(found: Sensitivities) -> dict[str, Any]:
    """Return sensitivities as plain values; keys are described in the module's docstring."""
    parameters = []
    for x in found.parameters:
        row = asdict(x)
        row["retuned_per_unit"], row["fixed_per_unit"] = _finite(row.pop("retuned")), _finite(row.pop("fixed"))
        parameters.append(row)
    limits = []
    for limit in found.limits:
        row = asdict(limit)
        row["price_cnr_per_unit"] = _finite(row.pop("price"))
        row["share"] = _finite(row["share"])
        limits.append(row)
    return {
        "schema": SENSITIVITY_SCHEMA,
        "problem": {"title": found.problem.spec.title, "file": found.problem.where},
        "cnr": found.cnr,
        "configuration": found.configuration,
        "binding": list(found.binding),
        "limits": limits,
        "parameters": parameters,
    }


def _finite(value: float | None) -> float | None:
    return None if value is None or not math.isfinite(value) else float(value)


def sensitivity_text(found: Sensitivities, width: int = 80) -> str:
    """Return sensitivities as plain text.

    Parameters
    ----------
    found : Sensitivities
    width : int
        Page width, at least 60. [characters]
    """
    width = max(width, NARROWEST)
    title = labelled("title", plain(found.problem.spec.title), width)
    title += labelled("optimum", f"CNR {number(found.cnr)}, {plain(found.configuration)}", width)
    blocks = [title, _prices(found, width), _elasticities(found, width), _changes(found, width), _missed(found, width)]
    return "\n\n".join("\n".join(block) for block in blocks if block) + "\n"


def _prices(found: Sensitivities, width: int) -> list[str]:
    rows, whole = [], []
    for limit in found.limits:
        if limit.price is None:
            whole += [limit.name] if limit.binds else []
        elif limit.binds:
            share = limit.price * 0.01 * limit.bound / found.cnr
            rows.append((limit.name, number(limit.bound), limit.unit, number(limit.price, 3), bound_gain(share)))
    lines = [heading("shadow prices", width)]
    if rows:
        lines += table(("limit at its bound", "bound", "unit", "CNR per unit", "bound +1 %"), rows, width, left=(0, 2))
    else:
        lines += bullet("no limit with a price binds", width)
    for name in whole:
        lines += bullet(f"{name} binds too; it moves in whole steps and has no price", width)
    return lines


def _elasticities(found: Sensitivities, width: int) -> list[str]:
    weighty = [x for x in found.parameters if weight(x) >= NEGLIGIBLE]
    small = list(dict.fromkeys(x.parameter for x in found.parameters if weight(x) < NEGLIGIBLE))
    rows = [
        (
            x.parameter if x.part is None else f"{x.parameter}, {x.part}",
            tolerance(x),
            slope(x.retuned, x.unit),
            slope(x.fixed, x.unit),
            worst_end(x, found.cnr, "cnr_retuned"),
            worst_end(x, found.cnr, "cnr_fixed"),
        )
        for x in sorted(weighty, key=weight, reverse=True)
    ]
    lines = [heading("tolerances", width)]
    header = ("quantity", "tolerance", "re-tuned", "fixed", "worst re-t.", "worst fixed")
    columns = len(header) if width >= WIDE else len(header) - 2
    lines += table(header[:columns], [row[:columns] for row in rows], width) if rows else []
    lines += bullet("re-tuned, fixed: change of CNR in % per % (or per nm, deg, K) of the quantity", width)
    if small:
        lines += bullet(f"below {100 * NEGLIGIBLE:g} % of CNR each within tolerance: {', '.join(small)}", width)
    return lines


def weight(x: Elasticity) -> float:
    """Largest relative change of CNR within the tolerance, in either column."""
    slopes = [abs(s) * x.tolerance for s in (x.retuned, x.fixed) if math.isfinite(s)]
    return max(slopes, default=0.0)


def tolerance(x: Elasticity) -> str:
    """Standard deviation of a quantity with its unit."""
    return f"±{100 * x.tolerance:g} %" if x.unit == "1" else f"±{x.tolerance:g} {x.unit}"


def slope(value: float, unit: str) -> str:
    """Change of CNR in % per % (or per nm, degree, kelvin)."""
    scale = 1.0 if unit == "1" else 100.0
    return "one-sided" if not math.isfinite(value) else f"{scale * value:+.3f}"


def bound_gain(share: float) -> str:
    """Change of CNR for a bound one per cent further out."""
    return "one-sided" if not math.isfinite(share) else f"{100 * share:+.3g} %"


def worst_end(x: Elasticity, cnr: float, key: str) -> str:
    """The lower CNR of the two ends, against the optimum."""
    ends = [getattr(end, key) for end in (x.low, x.high) if end is not None]
    if not ends:
        return ""
    return "infeasible" if None in ends else f"{100 * (min(ends) / cnr - 1):+.2f} %"


def _ends(found: Sensitivities) -> Iterator[tuple[Elasticity, Shifted]]:
    for x in found.parameters:
        for end in (x.low, x.high):
            if end is not None:
                yield x, end


def amount_text(x: Elasticity, amount: float) -> str:
    """How far a quantity is moved."""
    return f"{100 * amount:+.3g} %" if x.unit == "1" else f"{amount:+.3g} {x.unit}"


def changes(found: Sensitivities) -> list[str]:
    """What binds elsewhere within the tolerances, one sentence for each event; a derivative holds only up to there.

    A sentence names what happens, then every quantity that brings it about and from which amount on. Events brought
    about by the same quantities share a sentence; another configuration that wins comes first.
    """
    causes: dict[str, list[str]] = {}
    for x, end in _ends(found):
        at = f"from {amount_text(x, end.at)}" if end.at is not None else f"at {amount_text(x, end.amount)}"
        for event in _events(end):
            causes.setdefault(event, []).append(f"{_owner(x)} {at}")
    together: dict[tuple[str, ...], list[str]] = {}
    for event, why in causes.items():
        together.setdefault(tuple(why), []).append(event)
    told = [f"{' and '.join(events)}: {'; '.join(why)}" for why, events in together.items()]
    return sorted(told, key=lambda text: " wins" not in text)


def _events(end: Shifted) -> list[str]:
    """What happens towards one end of a tolerance."""
    said = [f"{end.other} wins"] if end.other else []
    said += [plain(end.note)] if end.cnr_retuned is None or end.note else []
    said += [name if name.endswith(" lit") else f"{name} starts to bind" for name in end.starts]
    dark = [f"{name.removesuffix(' lit')} dark" for name in end.stops if name.endswith(" lit")]
    return said + dark + [f"{name} stops binding" for name in end.stops if not name.endswith(" lit")]


def _owner(x: Elasticity) -> str:
    """A quantity and the part it belongs to."""
    return x.parameter if x.part is None else f"{x.parameter} ({x.part})"


def missed(found: Sensitivities) -> dict[str, list[str]]:
    """Limits the recipe misses when a quantity strays and nothing is re-tuned, and the quantities, by limit."""
    by_limit: dict[str, list[str]] = {}
    for x, end in _ends(found):
        for name in end.missed:
            by_limit.setdefault(name, []).append(f"{_owner(x)} {amount_text(x, end.amount)}")
    return by_limit


def _changes(found: Sensitivities, width: int) -> list[str]:
    lines = [line for text in changes(found) for line in bullet(text, width)]
    return [heading("changes within the tolerances", width), *lines] if lines else []


def _missed(found: Sensitivities, width: int) -> list[str]:
    lines = [line for name, why in missed(found).items() for line in bullet(f"{name}: {'; '.join(why)}", width)]
    return [heading("limits the recipe misses if held fixed", width), *lines] if lines else []
