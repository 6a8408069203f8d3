"""Results of studies as they show themselves in a notebook; `codesign.report.notebook` finds them in `STUDIES`."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from typing import TYPE_CHECKING, Any

from codesign.report.layout import counted, cut, duration, number, percent
from codesign.report.notebook_html import bar, note, pairs, strong, table
from codesign.report.page.html import Content, name
from codesign.report.text import UNITS

# A result that is shown has its own module loaded; the others are not worth waiting for.
if TYPE_CHECKING:
    from codesign.family.batch import OwnRigs
    from codesign.report.notebook import View
    from codesign.study.calibrate import Calibration
    from codesign.study.radiation import Screening
    from codesign.study.robust import Robust
    from codesign.study.routes import Routes
    from codesign.study.sensitivity import Sensitivities
    from codesign.study.tolerance import Rate, Tolerance
    from codesign.study.trade import Trade
    from codesign.study.vary import Variation
    from codesign.study.worth import Worths

#: Rows of what matters most.
MOST = 8
#: Longest text in a cell. [columns]
LONGEST = 70


def _view(kind: str, title: str, summary: str, blocks: Callable[[], list[Content]]) -> View:
    from codesign.report.notebook import View

    return View(kind=kind, title=title, summary=summary, blocks=blocks)


def variation_view(found: Variation) -> View:
    """A row for every point."""
    cnr = [point.cnr for point in found.points if point.possible]
    axes = " and ".join(axis.key for axis in found.axes) or ", ".join(found.settings) or "nothing"
    span = f"CNR {number(min(cnr))}" if cnr else "limits cannot be met"
    span += f" to {number(max(cnr))}" if len(cnr) > 1 else ""
    lost = len(found.points) - len(cnr)
    summary = f"{counted(len(found.points), 'point')} over {axes}: {span}" + (f", {lost} impossible" if lost else "")

    def blocks() -> list[Content]:
        from codesign.report.study_text import configuration_letters, configuration_words, shown_value

        letters = configuration_letters(found.points)
        header = [*(axis.label for axis in found.axes), "CNR", "bound", "use", "limits reached"]
        rows = [
            [
                *(shown_value(value) for value in point.values),
                number(point.cnr) if point.possible else "none",
                number(point.bound, 5) if point.possible else "",
                letters.get(point.configuration, ""),
                cut("; ".join(point.binding if point.possible else point.limits) or point.reason, LONGEST),
            ]
            for point in found.points
        ]
        first = len(found.axes)
        used = {p.configuration: configuration_words(p) for p in reversed(found.points) if p.possible}
        names: list[tuple[Content, Content]] = [(letter, used[each]) for each, letter in letters.items()]
        start = f"as it is: CNR {number(found.base.cnr)}" if found.base.possible else f"as it is: {found.base.reason}"
        rows = rows if found.axes else [["then", *row] for row in rows]
        header = header if found.axes else ["", *header]
        numbers = (*range(first), max(first, 1), max(first, 1) + 1)
        return [note(start), table(header, rows, numbers=numbers), pairs(names) if names else None]

    return _view("Variation", found.title, summary, blocks)


def worths_view(found: Worths) -> View:
    """What each part is worth."""
    tried = f", {counted(found.tried, 'further part')} tried" if found.tried else ""
    summary = f"{counted(len(found.parts), 'part')} in use at CNR {number(found.cnr)}{tried}"

    def blocks() -> list[Content]:
        rows = [
            (
                (f"{part.kind} ", name(part.id)),
                role,
                number(part.cnr) if math.isfinite(part.cnr) else "none",
                number(part.change, 3) if math.isfinite(part.change) else "all",
                cut(", ".join(part.substitute) or part.reason, LONGEST),
            )
            for role, listed in (("in use", found.parts), ("to add", found.additions))
            for part in listed
        ]
        return [table(("part", "", "CNR then", "lost or gained", "instead"), rows, numbers=(2, 3))]

    return _view("Worths", found.title, summary, blocks)


def sensitivities_view(found: Sensitivities) -> View:
    """Shadow prices and the quantities that matter most."""
    summary = f"CNR {number(found.cnr)}; {counted(len(found.binding), 'limit')} reached"

    def blocks() -> list[Content]:
        from codesign.report.sensitivity_text import bound_gain, slope, tolerance, weight

        priced = [x for x in found.limits if x.binds and x.price is not None]
        gains = [bound_gain(x.price * 0.01 * x.bound / found.cnr) for x in priced]
        prices = [
            (name(x.name), number(x.bound), UNITS.get(x.unit, x.unit), number(x.price, 3), gain)
            for x, gain in zip(priced, gains, strict=True)
        ]
        rows = [
            (x.parameter, name(x.part or ""), tolerance(x), slope(x.retuned, x.unit), slope(x.fixed, x.unit))
            for x in sorted(found.parameters, key=weight, reverse=True)[:MOST]
        ]
        return [
            table(("limit that binds", "bound", "unit", "CNR per unit", "bound +1 %"), prices, numbers=(1, 3, 4)),
            table(("quantity", "part", "tolerance", "re-tuned", "fixed"), rows, numbers=(2, 3, 4)),
            note("re-tuned, fixed: change of CNR in % per % (or per nm, degree, kelvin) of the quantity"),
        ]

    return _view("Sensitivities", found.problem.spec.title, summary, blocks)


def tolerance_view(found: Tolerance) -> View:
    """Yield, spread and causes."""
    reached = f"{_rate(found.passed)} of rigs reach CNR {found.required:g} within limits" if found.passed else None
    within = f"{_rate(found.within)} keep all limits"
    summary = f"{reached}; {within}" if reached else f"{within}, {found.draws} rigs drawn"

    def blocks() -> list[Content]:
        from codesign.study.tolerance import QUANTILES

        levels = [(f"{100 * q:g} % of rigs below", number(found.quantile(q))) for q in QUANTILES]
        causes = [(c.cause, percent(c.total), bar(c.total)) for c in found.causes[:MOST]]
        missed = [(name(limit), percent(share)) for limit, share in list(found.missed.items())[:MOST]]
        return [
            note(f"{found.draws} rigs drawn with seed {found.seed}; nominal CNR {number(found.nominal.cnr)}"),
            table(("CNR", ""), levels, numbers=(1,)),
            table(("what makes it vary", "of the variance", ""), causes, numbers=(1,)),
            table(("limit missed", "of rigs"), missed, numbers=(1,)),
        ]

    return _view("Tolerance", found.problem.spec.title, summary, blocks)


def _rate(rate: Rate) -> str:
    return f"{100 * rate.share:.2f} % ({100 * rate.low:.2f} to {100 * rate.high:.2f})"


def robust_view(found: Robust) -> View:
    """The recipes side by side, and the robust one to dial in."""
    what = "worst case" if not found.quantile else f"{100 * (1 - found.quantile):g} % exceed"
    summary = f"{what} CNR {number(found.value)} over {found.scenarios} scenarios, none above {number(found.bound, 5)}"

    def blocks() -> list[Content]:
        from codesign.report.notebook import settings

        trials = (("nominal", found.nominal), ("nominal, less light", found.cautious), ("robust", found.robust))
        rows = [
            (
                kind,
                number(trial.performance.cnr),
                number(trial.level(found.quantile)),
                f"{int(trial.missed.sum())} of {found.scenarios}",
            )
            for kind, trial in trials
            if trial is not None
        ]
        header = ("recipe", "CNR as stated", what, "limits missed in")
        return [table(header, rows, numbers=(1, 2, 3)), settings(found.robust.performance)]

    return _view("Robust", found.problem.spec.title, summary, blocks)


def routes_view(found: Routes) -> View:
    """The least change of each lever."""
    ceiling = f"; no light exceeds {number(found.ceiling)}" if found.ceiling is not None else ""
    state = "met as it is" if found.met else f"{found.required_cnr / found.start.cnr:.3g} times what there is"
    summary = f"CNR {number(found.start.cnr)}, wanted {found.required_cnr:g}: {state}{ceiling}"

    def blocks() -> list[Content]:
        rows = [
            (r.levers[0], number(r.factor), number(r.cnr))
            if r.factor is not None
            else (r.levers[0], "not enough", f"at most {number(r.short_bound)}")
            for r in found.singles
        ]
        pair = found.pair
        both = (
            pair and f"two levers: {' and '.join(pair.levers)}, each by {number(pair.factor)}: CNR {number(pair.cnr)}"
        )
        return [table(("lever", "factor needed", "CNR"), rows, numbers=(1, 2)), note(both) if both else None]

    return _view("Routes", found.problem.spec.title, summary, blocks)


def calibration_view(found: Calibration) -> View:
    """Factors with their uncertainty, and what does not fit."""
    told = [f for f in found.factors if f.determined]
    suspects = counted(len(found.suspects), "suspect") if found.suspects else "no suspects"
    summary = f"delivery of {len(told)} of {len(found.factors)} LEDs determined; {suspects}"

    def blocks() -> list[Content]:
        half = {f.name: number(f.interval[1] - f.value, 2) for f in told}
        rows = [
            (name(f.name), number(f.value), f"± {half[f.name]}", number(found.delivery_per_m2[f.name])) for f in told
        ]
        fit = f"chi-square {number(found.chi_square)} for {found.degrees_of_freedom} degrees of freedom"
        return [
            table(("LED", "factor", "95 %", "delivery [1/m²]"), rows, numbers=(1, 2, 3)),
            note(fit),
            *(note(strong(suspect.kind), ": ", suspect.text) for suspect in found.suspects),
        ]

    return _view("Calibration", found.problem.spec.title, summary, blocks)


def screening_view(found: Screening) -> View:
    """Hazards against published limits; a warning aid."""
    said = [f"{hazard} after {duration(seconds)}" for hazard, seconds in found.reached.items()]
    words = "reaches the published limit of " + ", of ".join(said) if said else "no published limit reached within 8 h"
    summary = f"{words}, seen from {found.distance_mm:g} mm"

    def blocks() -> list[Content]:
        from codesign.report.radiation_text import DEFERENCE, DISCLAIMER, radiation_rows

        rows = [
            (row["quantity"], (row["value"], " ", row["unit"]), row["share"], row["time"])
            for row in radiation_rows(found)
        ]
        header = ("weighted for", "value", "of the limit for long exposures", "published limit")
        return [table(header, rows, numbers=(1, 2)), note(DISCLAIMER), note(DEFERENCE)]

    return _view("Screening", "Radiation screening, a warning aid and never a classification", summary, blocks)


def trade_view(found: Trade) -> View:
    """The frontier, and the least that is enough."""
    label, unit = found.quantity.label, UNITS.get(found.quantity.unit, found.quantity.unit)
    possible = found.possible
    if not possible:
        return _view("Trade", found.title, f"CNR against {label}: limits cannot be met", lambda: [])
    span = f"CNR {number(possible[0].optimum.cnr)} to {number(possible[-1].optimum.cnr)}"
    enough = found.enough or found.most
    least = f"; CNR {number(enough.cnr)} takes {number(enough.value)} {unit}".rstrip() if enough.reached else ""
    summary = f"{span} against {label}, {counted(len(possible), 'point')} certified{least}"

    def blocks() -> list[Content]:
        from codesign.report.study_text import configuration_words

        rows = [
            (
                number(point.used),
                number(point.optimum.cnr),
                number(point.optimum.bound, 5),
                number(point.recipe_cnr),
                cut(configuration_words(point.optimum), LONGEST),
            )
            for point in possible
        ]
        head = f"{label} [{unit}]" if unit else label
        return [table((head, "CNR", "bound", "in settable steps", "with"), rows, numbers=(0, 1, 2, 3))]

    return _view("Trade", found.title, summary, blocks)


def own_rigs_view(found: OwnRigs) -> View:
    """A row for every variant, the hardest first."""
    solved = sorted(found.solved, key=lambda entry: entry.outcome.cnr)
    span = f", CNR {number(solved[0].outcome.cnr)} to {number(solved[-1].outcome.cnr)}" if solved else ""
    short = sum(entry.met is False for entry in found.entries)
    missed = f", {short} below the CNR required" if short else ""
    lost = f", {len(found.failed)} without a recipe" if found.failed else ""
    summary = f"{counted(len(found.entries), 'variant')}{span}{missed}{lost}"

    def blocks() -> list[Content]:
        rows = [
            (
                name(entry.name),
                number(entry.outcome.cnr),
                number(entry.outcome.bound, 5),
                (name(entry.outcome.camera), ", ", name(entry.outcome.filter)),
                f"{number(entry.outcome.exposure_us)} µs",
            )
            for entry in solved
        ]
        reasons = [(name(entry.name), cut(entry.outcome.reason, LONGEST)) for entry in found.failed]
        header = ("variant, hardest first", "CNR", "bound", "camera, filter", "exposure")
        return [table(header, rows, numbers=(1, 2, 4)), table(("no recipe for", "why"), reasons)]

    return _view("OwnRigs", found.title, summary, blocks)


#: Views by class and the module it is in; a new kind of study has its entry here.
STUDIES: Mapping[str, Callable[[Any], View]] = {
    "codesign.study.vary.Variation": variation_view,
    "codesign.study.worth.Worths": worths_view,
    "codesign.study.sensitivity.Sensitivities": sensitivities_view,
    "codesign.study.tolerance.Tolerance": tolerance_view,
    "codesign.study.robust.Robust": robust_view,
    "codesign.study.routes.Routes": routes_view,
    "codesign.study.calibrate.Calibration": calibration_view,
    "codesign.study.radiation.Screening": screening_view,
    "codesign.study.trade.Trade": trade_view,
    "codesign.family.batch.OwnRigs": own_rigs_view,
}
