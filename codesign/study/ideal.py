"""Parts that would be worth having: an ideal LED or filter added to the candidates, wavelength by wavelength.

Every point of a scan is a certified re-solve with that part among the candidates; filters of one family compete in one
re-solve, whose winner is proven best among them.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from codesign.catalog import Filter, Led
from codesign.errors import InfeasibleError
from codesign.problem import LedChannel, Problem
from codesign.problem.choices import FilterChoices
from codesign.problem.surroundings import lens_transmittance
from codesign.spectra import wavelength_grid
from codesign.study.common import Resolved, resolve

#: Width of the ideal LED and of the edges of ideal filters. [nm]
LED_FWHM_NM, EDGE_NM = 12.0, 3.0
#: Points of the first scan, and of the one around its best.
COARSE_POINTS, FINE_POINTS = 17, 4
#: Widths of ideal bands. [nm]
BAND_WIDTHS_NM = (12.0, 25.0, 50.0, 100.0)
#: Optical density outside the pass band of an ideal filter.
BLOCKING_OD = 6.0
#: Response relative to the largest below which nothing is looked for.
HARDLY_SEEN = 0.01
#: How far from its peak an ideal LED still shines, in widths.
_REACH = 2.0
NAME = "ideal"


@dataclass(frozen=True, slots=True, kw_only=True)
class IdealPart:
    """The best ideal part of a family.

    Attributes
    ----------
    kind : str
        "LED", "long-pass", "short-pass" or "band-pass".
    wavelength_nm : float or None
        Peak, edge or centre; None where none gains anything. [nm]
    width_nm : float or None
        Full width at half maximum. [nm]
    cnr, bound : float
        Optimum with the part among the candidates, and its proven bound.
    gain : float
        CNR gained over the same search without the part.
    scan : tuple of (float, float)
        Wavelength [nm] and CNR of each re-solve.
    like : str
        The LED whose electrical data the ideal one shares.
    """

    kind: str
    wavelength_nm: float | None
    width_nm: float | None
    cnr: float
    bound: float
    gain: float
    scan: tuple[tuple[float, float], ...] = ()
    like: str = ""


def ideal_led(problem: Problem, near: Resolved) -> IdealPart:
    """Find where a narrow LED with the typical flux of the candidates would help most.

    It has the median flux of the candidates and is otherwise like the candidate closest to that, but for a narrow
    spectrum that does not move or fade with temperature.

    Parameters
    ----------
    problem : Problem
    near : Resolved
        Its optimum.
    """
    wide = widened(problem)
    base = near if wide is problem else resolve(wide, near)
    template, flux_w = _typical(problem)
    lo, hi = _seen(wide)
    lo, hi = lo + _REACH * LED_FWHM_NM, hi - _REACH * LED_FWHM_NM
    scan: dict[float, Resolved] = {}
    step = (hi - lo) / (COARSE_POINTS - 1)
    points: Iterable[float] = np.linspace(lo, hi, COARSE_POINTS)
    for _ in range(2):
        last = base
        for nm in points:
            if nm not in scan:
                last = scan[float(nm)] = resolve(_with_led(wide, _narrow(template, flux_w, float(nm))), last)
        best = max(scan, key=lambda nm: scan[nm].cnr)
        step /= FINE_POINTS - 1
        around = np.arange(-FINE_POINTS + 2, FINE_POINTS - 1) * step
        points = [nm for nm in best + around if lo <= nm <= hi]
    found = scan[best]
    gains = found.cnr > base.cnr * (1 + 1e-6)
    return IdealPart(
        kind="LED",
        wavelength_nm=best if gains else None,
        width_nm=LED_FWHM_NM if gains else None,
        cnr=found.cnr if gains else base.cnr,
        bound=found.bound,
        gain=max(found.cnr - base.cnr, 0.0),
        scan=tuple((nm, scan[nm].cnr) for nm in sorted(scan)),
        like=template.id,
    )


def ideal_filters(problem: Problem, near: Resolved) -> tuple[IdealPart, ...]:
    """Find the ideal edge or band that would help most: one entry per family, best first.

    Parameters
    ----------
    problem : Problem
    near : Resolved
        Its optimum.
    """
    lo, hi = float(problem.grid[0]), float(problem.grid[-1])
    step = max((hi - lo) / 40, EDGE_NM)
    found = [
        _best_filter(problem, near, kind, np.arange(lo + step, hi, step), widths, step)
        for kind, widths in (("long-pass", (0.0,)), ("short-pass", (0.0,)), ("band-pass", BAND_WIDTHS_NM))
    ]
    return tuple(sorted(found, key=lambda part: -part.gain))


def widened(problem: Problem) -> Problem:
    """Return the problem over all wavelengths its surfaces, cameras and filters are known at.

    Without ambient light a problem's grid ends where its LEDs do, which a new LED need not.
    """
    spec = problem.spec
    if spec.scene.ambient or spec.grid.from_nm is not None or spec.grid.to_nm is not None:
        return problem
    known = [surface.range() for surface in problem.surfaces]
    known += [camera.response_range(name) for camera in problem.cameras for name in camera.channel_names]
    known += [part.range(problem.catalog) for part in FilterChoices.of(problem.filters).base]
    ranges = [each for each in known if each is not None]
    grid = wavelength_grid(max(r[0] for r in ranges), min(r[1] for r in ranges), spec.grid.step_nm)
    if grid[0] >= problem.grid[0] and grid[-1] <= problem.grid[-1]:
        return problem
    try:
        lens = lens_transmittance(spec, problem.folder, problem.where, grid)
    except ValueError:  # the lens is not known further out
        return problem
    return replace(problem, grid=grid, ambient=np.zeros(grid.size), lens=lens)


def _seen(problem: Problem) -> tuple[float, float]:
    """Wavelengths of the grid at which some candidate camera sees more than hardly anything. [nm]"""
    response = sum(
        camera.quantum_efficiency(name, problem.grid) for camera in problem.cameras for name in camera.channel_names
    )
    seen = problem.grid[response > HARDLY_SEEN * response.max()]
    return float(seen[0]), float(seen[-1])


def with_filters(problem: Problem, new: Sequence[Filter]) -> Problem:
    """Return the problem with more filters to choose from, each alone."""
    choices = FilterChoices.of(problem.filters)
    own = np.arange(len(new)) + len(choices.base)
    members = np.concatenate([choices.members, np.stack([own, np.full_like(own, -1)], axis=1)])
    return replace(problem, filters=FilterChoices((*choices.base, *new), members))


def _typical(problem: Problem) -> tuple[Led, float]:
    """The candidate LED of most usual flux, and the median flux. [W]"""
    flux = np.array([channel.led.flux_w() for channel in problem.channels])
    median = float(np.median(flux))
    # Among equals one whose data sheet puts in enough power to make that light.
    order = np.argsort(np.abs(np.log(flux / median)), kind="stable")
    return problem.channels[int(order[0])].led, median


def _narrow(template: Led, flux_w: float, peak_nm: float) -> Led:
    return template.replaced(
        id=f"{NAME}-led",
        description="",
        source="ideal part, does not exist",
        peak_nm=peak_nm,
        fwhm_nm=LED_FWHM_NM,
        curve=None,
        column=None,
        radiant_flux_w=min(flux_w, 0.9 * template.forward_voltage_v * template.rated_current_ma * 1e-3),
        radiant_flux_mw=None,
        luminous_flux_lm=None,
        flux_temperature_coefficient_per_k=None,
        peak_shift_nm_per_k=None,
    )


def _with_led(problem: Problem, led: Led) -> Problem:
    """One more channel, mounted as the one of the most usual flux is."""
    template = problem.channel(_typical(problem)[0].id)
    channel: LedChannel = replace(template, led=led, peak_shift_nm=0.0)
    return replace(problem, channels=(*problem.channels, channel))


def _best_filter(
    problem: Problem, near: Resolved, kind: str, at_nm: np.ndarray, widths_nm: Sequence[float], step: float
) -> IdealPart:
    """The best of a family, first over all wavelengths, then more finely around it."""
    best, part = near, None
    for _ in range(2):
        new = [made for nm in at_nm for width in widths_nm if (made := _filter(kind, float(nm), width)) is not None]
        try:
            found = resolve(with_filters(problem, new), best)
        except InfeasibleError:  # cannot be: the old filters are still there
            break
        chosen = next((each for each in new if each.id == found.optimum.design.filter), None)
        if chosen is None or found.cnr <= best.cnr:
            break
        best, part = found, chosen
        middle = chosen.center_nm if kind == "band-pass" else chosen.cut_nm
        at_nm = np.linspace(middle - step, middle + step, 9)
        if kind == "band-pass":
            widths_nm = [chosen.fwhm_nm * factor for factor in (0.71, 0.84, 1.0, 1.19, 1.41)]
    middle = None if part is None else part.center_nm if kind == "band-pass" else part.cut_nm
    return IdealPart(
        kind=kind,
        wavelength_nm=middle,
        width_nm=None if part is None else part.fwhm_nm,
        cnr=best.cnr,
        bound=best.bound,
        gain=best.cnr - near.cnr,
    )


def _filter(kind: str, nm: float, width_nm: float) -> Filter | None:
    edge = {"edge_width_nm": EDGE_NM, "peak_transmittance": 1.0, "blocking_od": BLOCKING_OD}
    name = f"{NAME}-{kind}-{nm:.1f}-{width_nm:.1f}".replace(".", "-")
    common = {"id": name, "source": "ideal part, does not exist", **edge}
    if kind == "band-pass":
        return (
            None if width_nm >= nm else Filter(kind="bandpass", center_nm=nm, fwhm_nm=max(width_nm, EDGE_NM), **common)
        )
    return Filter(kind="longpass" if kind == "long-pass" else "shortpass", cut_nm=nm, **common)
