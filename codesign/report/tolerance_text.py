"""Tolerances and robust recipes as plain text."""

from __future__ import annotations

import math

from codesign.design import Design
from codesign.problem import Problem
from codesign.report.layout import NARROWEST, barred, bullet, heading, labelled, number, percent, table
from codesign.report.output import plain
from codesign.study.draws import SWITCH, Spread
from codesign.study.robust import Robust
from codesign.study.robust_settings import Trial
from codesign.study.tolerance import QUANTILES, Rate, Tolerance

#: Causes and limits listed.
LISTED = 6
#: Causes said to be the main ones.
MAIN = 3
#: Share of rigs within all limits below which a robust recipe is advised. [1]
LOW_YIELD = 0.9


def tolerance_text(found: Tolerance, width: int = 80) -> str:
    """Return a tolerance study as plain text, no wider than ``width``, at least 60 characters."""
    width = max(width, NARROWEST)
    blocks = [
        _title(found.problem, width),
        _yield(found, width),
        _quantiles(found, width),
        _missed(found, width),
        _causes(found, width),
        _spreads(found.spreads, width),
    ]
    return "\n\n".join("\n".join(block) for block in blocks if block) + "\n"


def robust_text(found: Robust, width: int = 80) -> str:
    """Return a robust recipe next to the nominal one as plain text."""
    width = max(width, NARROWEST)
    blocks = [_title(found.problem, width), _compared(found, width), _settings(found, width), _proof(found, width)]
    return "\n\n".join("\n".join(block) for block in blocks) + "\n"


def _title(problem: Problem, width: int) -> list[str]:
    return [*labelled("title", plain(problem.spec.title), width), *labelled("problem", plain(problem.where), width)]


def _yield(found: Tolerance, width: int) -> list[str]:
    lines = [heading("yield", width)]
    exposure = "exposure set anew on each rig" if found.retuned else "recipe held fixed"
    lines += labelled("rigs", f"{found.draws} drawn with seed {found.seed}, {exposure}", width)
    if found.passed is not None and found.reached is not None:
        lines += labelled("yield", f"{_rate(found.passed)} reach CNR {found.required:g} within all limits", width)
        lines += labelled("CNR alone", f"{_rate(found.reached)} reach it, whatever their limits", width)
    else:
        lines += labelled("yield", "none stated: give --required or required_cnr", width)
    lines += labelled("limits", f"{_rate(found.within)} keep all limits", width)
    return lines + labelled("", "in brackets: 95 % confidence (Clopper-Pearson)", width)


def _rate(rate: Rate) -> str:
    return f"{100 * rate.share:.2f} % ({100 * rate.low:.2f} to {100 * rate.high:.2f})"


def _quantiles(found: Tolerance, width: int) -> list[str]:
    lines = [heading("CNR over rigs", width)]
    lines += labelled("nominal", number(found.nominal.cnr), width)
    rows = [[f"{100 * q:g} %" for q in QUANTILES], [number(found.quantile(q)) for q in QUANTILES]]
    return lines + table(("below", *rows[0]), [("CNR", *rows[1])], width)


def _missed(found: Tolerance, width: int) -> list[str]:
    if not found.missed:
        return []
    rows = [(name, f"{100 * share:.2f} %") for name, share in list(found.missed.items())[:LISTED]]
    lines = [heading("limits that rigs miss", width), *table(("limit", "of rigs"), rows, width)]
    more = len(found.missed) - LISTED
    lines += bullet(f"and {more} more (--json lists all)", width) if more > 0 else []
    advice = "a recipe at its limits misses them on about half the rigs; 'cnr robust' finds one that keeps a distance"
    return lines + (bullet(advice, width) if found.within.share < LOW_YIELD else [])


def _causes(found: Tolerance, width: int) -> list[str]:
    if not found.causes:
        return []
    shown = found.causes[:LISTED]
    rows = [
        (c.cause, percent(max(c.first_order, 0.0)), f"{percent(c.total)} ± {_half(c.total_interval)}") for c in shown
    ]
    drawn = barred(("cause", "alone", "with others"), rows, [c.total for c in shown], width)
    main = "; ".join(c.cause for c in shown[:MAIN])
    lines = [heading("what makes the CNR vary", width), *drawn]
    return lines + labelled("main causes", main, width) + labelled("", "shares of the variance (Sobol' indices)", width)


def _half(interval: tuple[float, float]) -> str:
    return f"{50 * (interval[1] - interval[0]):.1f}"


def _spreads(spreads: tuple[Spread, ...], width: int) -> list[str]:
    """One line for each quantity, with the number of parts."""
    lines, grouped = [heading("what was varied", width)], {}
    for spread in spreads:
        key = (spread.quantity, spread.shape, spread.size, spread.middle, spread.shared)
        grouped.setdefault(key, []).append(spread)
    rows = []
    for (quantity, *_, shared), same in grouped.items():
        correlation = f"{shared:g}" if len(same) > 1 else ""
        rows.append((quantity, _size(same[0]), correlation))
    note = labelled("", "usual values are common practice, no source: state your own under [tolerance]", width)
    return lines + table(("quantity", "spread", "correlation"), rows, width, left=(0, 1)) + note


def _size(spread: Spread) -> str:
    if spread.quantity == SWITCH:
        return f"off in {percent(spread.size)}"
    scale, unit = (100, "%") if spread.unit == "1" else (1, spread.unit)
    middle = f"{scale * spread.middle:+.4g} " if spread.middle else ""
    if spread.shape == "uniform":
        return f"{middle}± {scale * spread.size:.4g} {unit}, uniform"
    return f"{middle}σ {scale * spread.size:.4g} {unit}"


def _compared(found: Robust, width: int) -> list[str]:
    """The three recipes side by side."""
    what = "worst case" if not found.quantile else f"{100 * (1 - found.quantile):g} % exceed"
    lines = [heading("robust recipe", width)]
    lines += labelled("scenarios", f"{found.scenarios} drawn with seed {found.seed}", width)
    trials = [("nominal", found.nominal), ("nominal, less light", found.cautious), ("robust", found.robust)]
    rows = [_row(name, trial, found.quantile, found.scenarios) for name, trial in trials if trial is not None]
    lines += table(("recipe", "CNR as stated", what, "limits missed in"), rows, width)
    if found.cautious is not None:
        text = "nominal, less light: the nominal recipe dimmed until it keeps the limits; no search"
        lines += labelled("", text, width)
    price = percent(max(found.price, 0.0))
    lines += labelled("price", f"{price} of the nominal CNR is given up for it", width)
    return lines + labelled("", "a scenario in which a limit is missed counts as CNR 0", width)


def _row(name: str, trial: Trial, quantile: float, scenarios: int) -> tuple[str, str, str, str]:
    missed = int(trial.missed.sum())
    return name, number(trial.performance.cnr), number(trial.level(quantile)), f"{missed} of {scenarios}"


def _settings(found: Robust, width: int) -> list[str]:
    return [
        *[heading("what to set", width)],
        *_setting("robust", found.robust.design, width),
        *_setting("nominal", found.nominal.design, width),
    ]


def _setting(label: str, design: Design, width: int) -> list[str]:
    drives = ", ".join(f"{led} {ma:.10g} mA" for led, ma in design.drive_ma.items()) or "all LEDs off"
    text = (
        f"{design.camera}, channel {plain(design.channel)}, gain {design.gain_db:g} dB, filter {design.filter}, "
        f"f/{design.f_number:g}, {design.exposure_us:.10g} µs; {drives}"
    )
    return labelled(label, text, width)


def _proof(found: Robust, width: int) -> list[str]:
    lines = [heading("how sure it is", width)]
    what = "in the worst scenario" if not found.quantile else f"in all but {percent(found.quantile)} of the scenarios"
    lines += labelled("bound", f"no recipe that keeps all limits exceeds CNR {number(found.bound, 5)} {what}", width)
    gap = percent(found.gap) if math.isfinite(found.gap) else "none"
    lines += labelled("gap", f"{gap}, by {found.bound_by}, rounding to setting steps included", width)
    text = f"assumed and reached agree within {number(max(found.junction_residual_k, 1e-3), 2)} K in every scenario"
    return lines + labelled("junctions", text, width)
