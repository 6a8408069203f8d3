"""Read a problem file and look everything up, or say in one line what is wrong."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

import numpy as np
from pydantic import ValidationError

from codesign.catalog import Catalog, Filter, Surface, load_catalog, parse_parts, select
from codesign.catalog.common import explain
from codesign.errors import CatalogError, CoverageError, ProblemError, nearest
from codesign.physics.light import delivery_from_beam
from codesign.problem.files import missing_advice, problem_path, read_toml
from codesign.problem.model import Array, LedChannel, Problem
from codesign.problem.purchase import Purchase
from codesign.problem.schema import Choice, ProblemSpec, Solver
from codesign.problem.surroundings import ambient_irradiance, lens_transmittance
from codesign.spectra import wavelength_grid

NO_FILTER = Filter(id="none", kind="none", source="no filter")

#: Where the reach of a camera is looked for. [nm]
_WIDE_GRID = np.arange(250.0, 2501.0, 2.0)

#: Reflectance curves of target and background closer than this everywhere are the same curve.
SAME_REFLECTANCE = 1e-9


def load_problem(source: str | Path) -> Problem:
    """Load a problem file, or an embedded demo problem by its bare name.

    Parameters
    ----------
    source : path
        TOML file; its paths are relative to its folder.

    Returns
    -------
    Problem

    Raises
    ------
    ProblemError, CatalogError, CoverageError
        One line: file, key, value, what is allowed, what to try.

    Examples
    --------
    >>> load_problem("yellow-stain").spec.title
    'Yellow stain on white cloth'
    """
    path = problem_path(source)
    table = read_toml(path, missing_advice(path))
    return build_problem(table, folder=path.parent, where=path.name)


def build_problem(
    table: dict[str, Any], *, folder: str | Path = ".", where: str = "problem", catalog: Catalog | None = None
) -> Problem:
    """Build a problem from a table as a problem file gives it.

    ``catalog`` replaces the one the table names. Raises as `load_problem`.
    """
    try:
        spec = ProblemSpec.model_validate(table)
    except ValidationError as error:
        raise ProblemError(explain(error, where, ProblemSpec)) from None
    folder = Path(folder)
    if catalog is None:
        catalog = _catalog(spec.catalog, folder, where)
    inline = {kind: list(getattr(spec, kind)) for kind in ("led", "filter", "camera", "surface")}
    catalog = catalog.with_parts(parse_parts(inline, folder, where))
    return _Resolver(spec, folder, where, catalog).problem()


def _catalog(name: str, folder: Path, where: str) -> Catalog:
    try:
        return load_catalog(name if name == "demo" else folder / name)
    except CatalogError as error:
        raise CatalogError(f"{where}: catalog is {name!r}: {error}") from None


def solver_settings(problem: Problem, **changes: float | None) -> Solver:
    """Return the problem's solver settings with some replaced; None keeps one. Raises ProblemError when not allowed."""
    wanted = {key: value for key, value in changes.items() if value is not None}
    try:
        return Solver.model_validate({**problem.spec.solver.model_dump(), **wanted})
    except ValidationError as error:
        raise ProblemError(explain(error, "option", Solver)) from None


class _Resolver:
    """Looks up parts and checks that they fit together."""

    def __init__(self, spec: ProblemSpec, folder: Path, where: str, catalog: Catalog) -> None:
        self.spec, self.folder, self.where, self.catalog = spec, folder, where, catalog
        self.left_out: list[str] = []
        self.purchase = Purchase(spec, where, catalog)

    def problem(self) -> Problem:
        self.purchase.check_names()
        scene = self.spec.scene
        targets, backgrounds = (self._surfaces(key, getattr(scene, key)) for key in ("target", "background"))
        guards = tuple(self._surface("guards", name) for name in scene.guards)
        surfaces = (*targets, *backgrounds, *guards)
        lo, hi = self._range(surfaces)
        channels = self._channels(lo, hi)
        grid = self._grid(channels, lo, hi)
        for target in targets:
            for background in backgrounds:
                self._require_contrast(target, background, grid)
        return Problem(
            spec=self.spec,
            where=self.where,
            folder=self.folder,
            catalog=self.catalog,
            targets=targets,
            backgrounds=backgrounds,
            guards=guards,
            channels=channels,
            filters=self._filters(grid),
            cameras=self._cameras(grid),
            grid=grid,
            ambient=ambient_irradiance(self.spec, self.folder, self.where, grid),
            lens=lens_transmittance(self.spec, self.folder, self.where, grid),
            left_out=tuple(self.left_out),
        )

    def _error(self, text: str) -> ProblemError:
        return ProblemError(f"{self.where}: {text}")

    def _surface(self, key: str, name: str) -> Surface:
        if name not in self.catalog.surfaces:
            raise self._error(f"scene.{key} is {name!r}, no such surface; {nearest(name, self.catalog.surfaces)}")
        return self.catalog.surfaces[name]

    def _surfaces(self, key: str, names: str | tuple[str, ...]) -> tuple[Surface, ...]:
        names = (names,) if isinstance(names, str) else names
        repeated = [name for name in names if names.count(name) > 1]
        if repeated:
            raise self._error(f"scene.{key} names {repeated[0]!r} twice; remove one")
        return tuple(self._surface(key, name) for name in names)

    def _range(self, surfaces: tuple[Surface, ...]) -> tuple[float, float]:
        """Wavelengths at which all surfaces are known. [nm]"""
        ranges = [surface.range() for surface in surfaces]
        lo, hi = max(r[0] for r in ranges), min(r[1] for r in ranges)
        if lo >= hi:
            listed = "; ".join(f"{s.id} {r[0]:g}-{r[1]:g} nm" for s, r in zip(surfaces, ranges, strict=True))
            raise CoverageError(
                f"{self.where}: scene: the surfaces share no wavelengths ({listed}); measure them over one range"
            )
        grid = self.spec.grid
        for key, value in (("from_nm", grid.from_nm), ("to_nm", grid.to_nm)):
            if value is not None and not lo <= value <= hi:
                raise CoverageError(
                    f"{self.where}: grid.{key} is {value:g}, must be {lo:g} to {hi:g} nm where all surfaces are known"
                )
        return grid.from_nm or lo, grid.to_nm or hi

    def _choose(self, kind: str, choice: Choice, fits: Callable[[Any], str | None]) -> tuple[Any, ...]:
        """Select parts and keep those that fit; a part asked for by its id must fit."""
        pool = self.catalog.parts(kind)
        if isinstance(choice, str) and choice.endswith(".csv"):
            raise self._error(
                f"candidates.{kind}s is {choice!r}, must be an expression or ids, not a file; "
                "give the folder as catalog"
            )
        if not pool:
            raise self._error(
                f"candidates.{kind}s: the catalogue {self.catalog.name!r} has no {kind}s; add [[{kind}]] tables"
            )
        chosen, named = [], {choice} if isinstance(choice, str) else set(choice)
        for part in self._selected(kind, choice):
            if self.purchase.refuses(part):
                continue
            misfit = self.purchase.unpriced(part) or fits(part)
            if misfit is None:
                chosen.append(part)
            elif part.id in named:
                raise CoverageError(
                    f"{self.where}: candidates.{kind}s: {kind} {part.id!r} {misfit}; leave it out or measure further"
                )
            else:
                self.left_out.append(f"{kind} {part.id}: {misfit}")
        return tuple(chosen)

    def _channels(self, lo: float, hi: float) -> tuple[LedChannel, ...]:
        seen = self._seen()

        def fits(led) -> str | None:
            low, high = led.support()
            # Light that no candidate camera sees needs no reflectance.
            if max(low, seen[0]) >= lo and min(high, seen[1]) <= hi:
                return None
            return f"shines at {low:.0f}-{high:.0f} nm, the surfaces are known at {lo:.0f}-{hi:.0f} nm"

        lighting = self.spec.lighting
        leds = self._choose("led", self.spec.candidates.leds, fits)
        unknown = [name for name in lighting.led if name not in self.catalog.leds]
        if unknown:
            raise self._error(f"lighting.led.{unknown[0]}: no such LED; {nearest(unknown[0], self.catalog.leds)}")
        if not leds:
            raise CoverageError(f"{self.where}: candidates.leds: no LED fits; {self._why_none()}")
        self.purchase.require("led", leds)
        return tuple(self._channel(led) for led in leds)

    def _seen(self) -> tuple[float, float]:
        """Wavelengths any candidate camera responds to. [nm]"""
        ends = []
        for camera in self._selected("camera", self.spec.candidates.cameras):
            for name in camera.channel_names:
                known = camera.response_range(name)
                if known is None:
                    response = camera.quantum_efficiency(name, _WIDE_GRID)
                    known = tuple(_WIDE_GRID[np.flatnonzero(response)[[0, -1]]]) if response.any() else (0.0, 0.0)
                ends.append(known)
        return min(e[0] for e in ends), max(e[1] for e in ends)

    def _selected(self, kind: str, choice: Choice) -> tuple[Any, ...]:
        try:
            return select(self.catalog.parts(kind), choice if isinstance(choice, str) else list(choice))
        except CatalogError as error:
            raise CatalogError(f"{self.where}: candidates.{kind}s: {error}") from None

    def _channel(self, led) -> LedChannel:
        lighting = self.spec.lighting
        own = lighting.led.get(led.id)
        emitters = (own and own.emitters) or lighting.emitters_per_channel
        if own and own.measured_irradiance_w_per_m2:
            delivery = own.measured_irradiance_w_per_m2 / led.flux_w()
        elif own and own.delivery_per_m2:
            delivery = own.delivery_per_m2 * emitters
        elif lighting.delivery_per_m2 is not None:
            delivery = lighting.delivery_per_m2 * emitters
        else:
            delivery = delivery_from_beam(led.beam_half_angle_deg, lighting.distance_mm * 1e-3) * emitters
            delivery *= float(np.cos(np.radians(lighting.incidence_deg)))
        weight = own.specular_weight if own and own.specular_weight is not None else lighting.specular_weight
        caps = [lighting.driver_max_ma, own.max_current_ma if own else None]
        return LedChannel(
            led=led,
            emitters=emitters,
            delivery=delivery,
            specular_weight=weight,
            driver_max_ma=min((c for c in caps if c is not None), default=np.inf),
        )

    def _grid(self, channels: tuple[LedChannel, ...], lo: float, hi: float) -> Array:
        """Where the surfaces are known; without ambient light nothing happens outside the LEDs' spectra."""
        spec = self.spec.grid
        if not self.spec.scene.ambient and spec.from_nm is None and spec.to_nm is None:
            supports = [channel.led.support() for channel in channels]
            lo = max(lo, min(s[0] for s in supports) - 30.0)
            hi = min(hi, max(s[1] for s in supports) + 30.0)
        return wavelength_grid(lo, hi, spec.step_nm)

    def _require_contrast(self, target: Surface, background: Surface, grid: Array) -> None:
        if target.id == background.id:
            raise self._error(f"scene.target and scene.background are both {target.id!r}; name two different surfaces")
        same = np.max(np.abs(target.mean(grid) - background.mean(grid))) < SAME_REFLECTANCE
        specular = target.specular_reflectance == background.specular_reflectance
        if same and specular:
            raise self._error(
                f"scene: target {target.id!r} equals background {background.id!r} at all wavelengths; "
                "no light can show a difference"
            )

    def _filters(self, grid: Array) -> Sequence[Filter]:
        candidates = self.spec.candidates
        if candidates.filters == () and not candidates.no_filter:
            raise self._error("candidates.filters is [] and no_filter is false, which leaves no choice; name a filter")
        if candidates.filters in ("none", ()):
            return self.purchase.filters((NO_FILTER,))
        chosen = self._choose("filter", candidates.filters, lambda part: _misfit(part.range(self.catalog), grid))
        add_none = candidates.no_filter and all(part.kind != "none" for part in chosen)
        if not chosen and not add_none:
            raise CoverageError(f"{self.where}: candidates.filters: no filter fits; {self._why_none()}")
        return self.purchase.filters((NO_FILTER, *chosen) if add_none else chosen)

    def _cameras(self, grid: Array) -> tuple:
        def fits(camera) -> str | None:
            misfits = [_misfit(camera.response_range(name), grid) for name in camera.channel_names]
            return next((m for m in misfits if m is not None), None)

        chosen = self._choose("camera", self.spec.candidates.cameras, fits)
        if not chosen:
            raise CoverageError(f"{self.where}: candidates.cameras: no camera fits; {self._why_none()}")
        self._require_known("channels", [name for camera in chosen for name in camera.channel_names])
        self._require_known("gains_db", [gain.gain_db for camera in chosen for gain in camera.gain_settings()])
        return self.purchase.cameras(chosen)

    def _require_known(self, key: str, offered: list[Any]) -> None:
        """Each channel and gain asked for must be one that some candidate camera has."""
        wanted = getattr(self.spec.candidates, key)
        for value in () if wanted in (None, "all") else (wanted,) if isinstance(wanted, str) else wanted:
            if value not in offered:
                advice = nearest(str(value), [str(each) for each in offered])
                raise self._error(f"candidates.{key}: no candidate camera offers {value!r}; {advice}")

    def _why_none(self) -> str:
        return self.left_out[-1] if self.left_out else "build.must_not names them all"


def _misfit(covered: tuple[float, float] | None, grid: Array) -> str | None:
    if covered is None or (covered[0] <= grid[0] and covered[1] >= grid[-1]):
        return None
    return f"is known at {covered[0]:.0f}-{covered[1]:.0f} nm, the problem needs {grid[0]:.0f}-{grid[-1]:.0f} nm"
