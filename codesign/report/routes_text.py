"""Routes to a CNR as plain text and as a dictionary for JSON.

``routes_dict`` (schema ``codesign.routes/1``; conventions as in `codesign.report.machine`)

======================== ===========================================================================================
problem                  {"title", "file", "required_cnr"}
wanted_cnr, met          CNR asked for, and whether the optimum reaches it as it is
cnr, cnr_bound           of the optimum as it is, before rounding to steps
levers                   [route], least change first: {"levers": [name], "factor": least factor found or None,
                         "not_enough": largest factor proven not to be enough, "not_enough_cnr_bound": there (where
                         "factor" is None the most that is to be had), "cnr", "cnr_bound": at "factor", "before",
                         "after": {what: value}, "certain": whether more of it provably never hurts, "settings": the
                         recipe at "factor"}
pair                     None where none needs noticeably less than one lever, or the route of two levers changed by the
                         smallest common factor
pair_floor               factor at which no other pair reaches it; None where no two do however far
not_levers               {lever: why the problem has none}
ideal                    [{"kind", "wavelength_nm", "width_nm": None where none helps, "cnr", "cnr_bound", "gain",
                         "scan": [[wavelength_nm, cnr]], "like": LED whose current and heat it shares}]
ceilings                 [{"camera", "gain_db", "well_e", "shot_only", "shot_only_nm", "one_wavelength",
                         "one_wavelength_nm", "any_light"}], what no rig passes; see `codesign.study.ceiling`
resolves                 number of certified re-solves
======================== ===========================================================================================
"""

from __future__ import annotations

from dataclasses import asdict
from typing import Any

from codesign.report.layout import NARROWEST, bullet, heading, labelled, number, table
from codesign.report.output import plain
from codesign.study.fields import field_label
from codesign.study.ideal import IdealPart
from codesign.study.routes import Route, Routes

ROUTES_SCHEMA = "codesign.routes/1"
#: How some field names are written.
WORDS = {"exposure max": "longest exposure", "max blur": "longest blur", "prnu": "PRNU"}
#: Units as set in text.
UNITS_IN_TEXT = {"1/m2": "1/m²", "W/m2": "W/m²"}
_SETTINGS = ("camera", "channel", "gain_db", "filter", "f_number", "exposure_us", "drive_ma")


def routes_text(found: Routes, width: int = 80) -> str:
    """Return routes as plain text.

    Parameters
    ----------
    found : Routes
    width : int
        Page width, at least 60. [characters]
    """
    width = max(width, NARROWEST)
    blocks = [_stand(found, width), _single(found, width), _pair(found, width), _ideal(found, width)]
    blocks += [_ceilings(found, width), _without(found, width)]
    return "\n\n".join("\n".join(line.rstrip() for line in block) for block in blocks if block) + "\n"


def routes_dict(found: Routes) -> dict[str, Any]:
    """Return routes as a dictionary of plain values; the module says what each key holds."""
    spec = found.problem.spec
    return {
        "schema": ROUTES_SCHEMA,
        "problem": {"title": spec.title, "file": found.problem.where, "required_cnr": spec.required_cnr},
        "wanted_cnr": found.required_cnr,
        "met": found.met,
        "cnr": found.start.cnr,
        "cnr_bound": found.start.bound,
        "levers": [_route(route) for route in found.singles],
        "pair": None if found.pair is None else _route(found.pair),
        "pair_floor": found.pair_floor,
        "not_levers": dict(found.without),
        "ideal": [_part(part) for part in (found.led, *found.filters) if part is not None],
        "ceilings": [asdict(ceiling) for ceiling in found.ceilings],
        "resolves": found.resolves,
    }


def _route(route: Route) -> dict[str, Any]:
    design = route.design
    return {
        "levers": list(route.levers),
        "factor": route.factor,
        "not_enough": route.short_factor,
        "not_enough_cnr_bound": route.short_bound,
        "cnr": route.cnr,
        "cnr_bound": route.bound,
        "before": {key: float(value) for key, value in route.before.items()},
        "after": {key: float(value) for key, value in route.after.items()},
        "certain": route.monotone,
        "settings": None if design is None else {name: getattr(design, name) for name in _SETTINGS},
    }


def _part(part: IdealPart) -> dict[str, Any]:
    return {**asdict(part), "scan": [list(point) for point in part.scan]}


def _stand(found: Routes, width: int) -> list[str]:
    lines = [heading(plain(found.problem.spec.title), width)]
    lines += labelled("as it is", f"CNR {number(found.start.cnr)}; {_limits(found)}", width)
    share = found.required_cnr / found.start.cnr
    how = "met" if found.met else f"missed, {share:.3g} times what there is"
    lines += labelled("wanted", f"CNR {found.required_cnr:g}: {how}", width)
    if found.ceiling is not None:
        beyond = found.required_cnr > found.ceiling
        more = "; only what changes well, averaging, PRNU or surfaces can reach the CNR wanted" if beyond else ""
        text = f"CNR {number(found.ceiling)} is the most any light can show with these cameras and surfaces{more}"
        lines += labelled("ceiling", text, width)
    return lines


def _limits(found: Routes) -> str:
    names = found.start.binding
    return f"held by {'; '.join(names)}" if names else "no limit is reached"


def _single(found: Routes, width: int) -> list[str]:
    if not found.singles:
        return [heading("one lever alone", width), *bullet("nothing has to change: the CNR wanted is reached", width)]
    lines = [heading("one lever alone: least change that is enough", width)]
    enough = [route for route in found.singles if route.factor is not None]
    short = [route for route in found.singles if route.factor is None]
    if enough:
        rows = [(r.levers[0], _moves(r), _times(r.factor), f"{r.cnr:.4g}") for r in enough]
        lines += table(("lever", "what changes", "factor", "CNR"), rows, width, left=(0, 1), flow=1)
    if short:
        lines += ["", " not reachable by this lever alone:"] if enough else [" not reachable by any lever alone:"]
        rows = [(r.levers[0], _ends(r), _times(r.short_factor), f"at most {r.short_bound:.4g}") for r in short]
        lines += table(("lever", "as far as it goes", "factor", "CNR"), rows, width, left=(0, 1), flow=1)
    lines += ["", *bullet("factors are proven from both sides: 1 % less of ln(factor) is not enough", width)]
    loose = [r.levers[0] for r in found.singles if not r.monotone]
    if loose:
        lines += bullet(f"more is taken as never worse, without proof, of {', '.join(loose)}", width)
    return lines


def _pair(found: Routes, width: int) -> list[str]:
    if found.met:
        return []
    lines = [heading("two levers by one factor", width)]
    if found.pair is None:
        none = found.pair_floor is None
        text = "no two levers reach the CNR wanted" if none else "no two need noticeably less than the first one alone"
        return [*lines, *bullet(text, width)]
    pair = found.pair
    for number_, text in enumerate(_changes(pair)):
        lines += labelled("" if number_ else "change", text, width)
    text = f"{' and '.join(pair.levers)}, each by {_times(pair.factor)}: CNR {pair.cnr:.4g}"
    lines += labelled("that is", text, width)
    lines += labelled("proven", f"no other pair is enough at {_times(found.pair_floor)}", width)
    return lines


def _ideal(found: Routes, width: int) -> list[str]:
    lines = [heading("a part that does not exist yet", width)]
    for part in (found.led, *found.filters):
        if part is None:
            continue
        if part.wavelength_nm is None or part.gain <= 1e-4 * part.cnr:
            lines += labelled(part.kind, "none would help noticeably", width)
            continue
        wide = f", {part.width_nm:.3g} nm wide" if part.width_nm else ""
        like = f", current and heat as {part.like}" if part.like else ""
        text = f"at {part.wavelength_nm:.0f} nm{wide}: CNR {part.cnr:.4g}, {part.gain:.3g} more{like}"
        lines += labelled(part.kind, text, width)
    return lines


def _ceilings(found: Routes, width: int) -> list[str]:
    if not found.ceilings:
        return []
    rows = [
        (
            c.camera,
            f"{c.well_e:.0f}",
            f"{c.shot_only:.4g} ({c.shot_only_nm:.0f} nm)",
            f"{c.one_wavelength:.4g} ({c.one_wavelength_nm:.0f} nm)",
            f"{c.any_light:.4g}",
        )
        for c in found.ceilings
    ]
    header = ("camera", "well, e⁻", "shot noise only", "+ PRNU, clutter", "any light")
    lines = [heading("what no rig can pass", width), *table(header, rows, width)]
    return [*lines, *bullet("light of one wavelength fills the well; last column: proven for all mixtures", width)]


def _without(found: Routes, width: int) -> list[str]:
    if not found.without or found.met:
        return []
    lines = [heading("no levers here", width)]
    for name, reason in found.without.items():
        lines += bullet(f"{name}: {reason}", width)
    return lines


def _times(factor: float) -> str:
    return f"{factor:.4g} ×" if factor < 1000 else f"{factor:.0f} ×"


def _moves(route: Route) -> str:
    return "; ".join(_changes(route))


def _ends(route: Route) -> str:
    return "; ".join(_changes(route)) or "no effect"


def _changes(route: Route) -> list[str]:
    """What a route changes: each quantity, from which to which value, with its unit."""
    told = [
        _change(key, route.before[key], value)
        for key, value in route.after.items()
        if key in route.before and route.before[key] != value
    ]
    both = [text for text in told if text.replace(", fewest", ", most") in told and ", fewest" in text]
    # Where the fewest and the most are the same, one line tells both.
    same = {text: text.replace(", fewest", "") for text in both}
    return [same.get(text, text) for text in told if text not in {one.replace(", fewest", ", most") for one in both}]


def _change(key: str, before: float, after: float) -> str:
    owner, _, name = key.rpartition(" ")
    if "_" in name or "." in name:  # a field of a part, or of the problem file
        key = f"{owner} {field_label(name)}".strip()
    label, _, unit = key.partition(" [")
    for field, words in WORDS.items():
        label = label.replace(field, words) if label.endswith(field) else label
    unit = unit.rstrip("]")
    return f"{label} {_value(before)} → {_value(after)} {UNITS_IN_TEXT.get(unit, unit)}".strip()


def _value(value: float) -> str:
    """A value in three digits, whole from a thousand on."""
    return f"{value:.0f}" if 1000 <= abs(value) < 1e9 else f"{value:.3g}"
