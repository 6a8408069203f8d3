"""One data-sheet quantity of a problem changed a little, as tolerances, sensitivities and what-ifs need it.

Each entry of `NUDGES` says what changes, in which unit and by how much pieces commonly differ from their data sheet.
A nudged problem is a new `Problem`; nothing else in it is touched, limits included.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import Any, Literal

from pydantic import ValidationError

from codesign.catalog import Camera, Filter, Led, Surface
from codesign.catalog.common import explain
from codesign.errors import ProblemError, nearest
from codesign.problem.choices import JOINT, FilterChoices
from codesign.problem.model import LedChannel, Problem

Owner = Literal["led", "filter", "camera", "surface"]
#: A new problem from (problem, amount, part or None for all).
Change = Callable[[Problem, float, str | None], Problem]

COMMON_PRACTICE = "common practice, no source"

#: Kinds of filter that have a wavelength to shift; a stack has its parts'.
_WITH_WAVELENGTH = ("curve", "bandpass", "longpass", "shortpass", "glass")


@dataclass(frozen=True, slots=True, kw_only=True)
class Parameter:
    """A quantity with a data-sheet tolerance.

    Attributes
    ----------
    name : str
    unit : str
        Unit of an amount; "1" for a relative change, where 0.05 is 5 % more.
    sigma : float
        Usual standard deviation between pieces, or of the surroundings, in ``unit``.
    owner : str or None
        Kind of part it belongs to; None for the rig and its surroundings.
    change : callable
        How a problem changes.
    source : str
        Where ``sigma`` comes from.
    """

    name: str
    unit: str
    sigma: float
    owner: Owner | None
    change: Change
    source: str = COMMON_PRACTICE

    @property
    def relative(self) -> bool:
        """Whether amounts are relative changes."""
        return self.unit == "1"


def nudged(problem: Problem, name: str, amount: float, part: str | None = None) -> Problem:
    """Return the problem with one data-sheet quantity changed.

    Parameters
    ----------
    problem : Problem
    name : str
        Key of `NUDGES`.
    amount : float
        Change, in the parameter's unit; a relative one of 0.05 means 5 % more.
    part : str, optional
        Id of the one LED, filter (of a pair ``a + b``: both), camera or surface meant; all by default.

    Returns
    -------
    Problem
        The same one for an amount of 0.

    Raises
    ------
    ProblemError, CatalogError
        When name or part are not known, or the changed value is none a data sheet could state.
    """
    parameter = _parameter(name)
    if part is not None:
        _require_part(problem, parameter, part)
    if amount == 0:
        return problem
    if parameter.relative and not amount > -1:
        raise ProblemError(f"{problem.where}: a relative change of {name} by {amount:g} leaves nothing, must be > -1")
    return parameter.change(problem, amount, part)


def parts_of(problem: Problem, name: str) -> tuple[str, ...]:
    """Ids of the parts of a problem that a parameter can be nudged for one by one."""
    owner = _parameter(name).owner
    if owner == "led":
        return tuple(channel.id for channel in problem.channels)
    if owner == "filter":
        return tuple(part.id for part in FilterChoices.of(problem.filters).base)
    if owner == "camera":
        return tuple(camera.id for camera in problem.cameras)
    return tuple(surface.id for surface in problem.surfaces) if owner == "surface" else ()


def _parameter(name: str) -> Parameter:
    if name not in NUDGES:
        raise ProblemError(f"no parameter {name!r} has a tolerance; {nearest(name, NUDGES)}")
    return NUDGES[name]


def _require_part(problem: Problem, parameter: Parameter, part: str) -> None:
    known = parts_of(problem, parameter.name)
    if not known:
        raise ProblemError(f"{problem.where}: {parameter.name} belongs to no part, {part!r} is given; leave it out")
    for name in part.split(JOINT) if parameter.owner == "filter" else (part,):
        if name not in known:
            raise ProblemError(f"{problem.where}: no {parameter.owner} {name!r}; {nearest(name, known)}")


def _meant(part: str | None, name: str) -> bool:
    return part is None or name == part


# --- LEDs ------------------------------------------------------------------------------------------------------


def _channels(problem: Problem, part: str | None, change: Callable[[LedChannel], LedChannel]) -> Problem:
    channels = tuple(change(c) if _meant(part, c.id) else c for c in problem.channels)
    return replace(problem, channels=channels)


def _led(change: Callable[[Led, float], Mapping[str, Any]]) -> Change:
    """A change of LED data-sheet values."""

    def changed(problem: Problem, amount: float, part: str | None) -> Problem:
        return _channels(problem, part, lambda c: replace(c, led=c.led.replaced(**change(c.led, amount))))

    return changed


def _flux(led: Led, amount: float) -> Mapping[str, Any]:
    stated = ("radiant_flux_mw", "radiant_flux_w", "luminous_flux_lm")
    return {name: getattr(led, name) * (1 + amount) for name in stated if getattr(led, name) is not None}


def _voltage(led: Led, amount: float) -> Mapping[str, Any]:
    """The rated voltage, and with it those of the droop curve."""
    changes: dict[str, Any] = {"forward_voltage_v": led.forward_voltage_v * (1 + amount)}
    if led.flux_curve is not None:
        changes["flux_curve"] = [[*row[:2], *(volts * (1 + amount) for volts in row[2:])] for row in led.flux_curve]
    return changes


def _thermal(led: Led, amount: float) -> Mapping[str, Any]:
    return {"thermal_resistance_k_per_w": led.thermal_resistance_k_per_w * (1 + amount)}


def _peak(problem: Problem, amount: float, part: str | None) -> Problem:
    return _channels(problem, part, lambda c: replace(c, peak_shift_nm=c.peak_shift_nm + amount))


def _delivery(problem: Problem, amount: float, part: str | None) -> Problem:
    return _channels(problem, part, lambda c: replace(c, delivery=c.delivery * (1 + amount)))


# --- filters ---------------------------------------------------------------------------------------------------


def _centre(problem: Problem, amount: float, part: str | None) -> Problem:
    """Shift filters, wherever they are used: alone, in a pair, or in a stack looked up in the catalogue."""
    choices = FilterChoices.of(problem.filters)
    wanted = [piece for piece in choices.base if part is None or piece.id in part.split(JOINT)]
    new: dict[str, Filter] = {}
    while wanted:
        piece = wanted.pop()
        wanted += [problem.catalog.part("filter", name) for name in piece.parts or () if name not in new]
        if piece.kind in _WITH_WAVELENGTH:
            new[piece.id] = piece.replaced(shift_nm=(piece.shift_nm or 0.0) + amount)
    base = tuple(new.get(piece.id, piece) for piece in choices.base)
    listed = problem.catalog.filters
    catalog = replace(problem.catalog, filters={**listed, **{k: v for k, v in new.items() if k in listed}})
    filters = FilterChoices(base, choices.members) if isinstance(problem.filters, FilterChoices) else base
    return replace(problem, filters=filters, catalog=catalog)


# --- cameras ---------------------------------------------------------------------------------------------------


def _camera(change: Callable[[Camera, float], Mapping[str, Any]]) -> Change:
    """A change of camera data-sheet values."""

    def changed(problem: Problem, amount: float, part: str | None) -> Problem:
        cameras = tuple(c.replaced(**change(c, amount)) if _meant(part, c.id) else c for c in problem.cameras)
        return replace(problem, cameras=cameras)

    return changed


def _scaled(*names: str) -> Change:
    """A relative change of camera values, also where single gains state their own."""

    def change(camera: Camera, amount: float) -> Mapping[str, Any]:
        stated = {name: getattr(camera, name) for name in names}
        changes: dict[str, Any] = {name: value * (1 + amount) for name, value in stated.items() if value is not None}
        gains = [gain.model_dump(exclude_none=True) for gain in camera.gains]
        if any(name in gain for gain in gains for name in names):
            changes["gains"] = [
                {name: value * (1 + amount) if name in names else value for name, value in gain.items()}
                for gain in gains
            ]
        return changes

    return _camera(change)


# --- surfaces --------------------------------------------------------------------------------------------------


def _surfaces(chosen: Callable[[Problem, str | None], set[str]]) -> Change:
    """A relative change of the reflectance of some surfaces, in every role they have; gloss stays."""

    def changed(problem: Problem, amount: float, part: str | None) -> Problem:
        names = chosen(problem, part)

        def new(surfaces: tuple[Surface, ...]) -> tuple[Surface, ...]:
            return tuple(
                s.replaced(reflectance_factor=s.reflectance_factor * (1 + amount)) if s.id in names else s
                for s in surfaces
            )

        return replace(
            problem,
            targets=new(problem.targets),
            backgrounds=new(problem.backgrounds),
            guards=new(problem.guards),
        )

    return changed


def _ids(surfaces: tuple[Surface, ...], part: str | None) -> set[str]:
    return {surface.id for surface in surfaces if _meant(part, surface.id)}


# --- rig and surroundings --------------------------------------------------------------------------------------


def _moved(section: str, key: str) -> Change:
    """Add to a value of the problem file."""

    def changed(problem: Problem, amount: float, part: str | None) -> Problem:
        record = getattr(problem.spec, section)
        record = record.model_copy(update={key: getattr(record, key) + amount})
        return replace(problem, spec=_checked(problem, problem.spec.model_copy(update={section: record}), section))

    return changed


def _checked(problem: Problem, spec, section: str):
    """Refuse temperatures and angles no rig can have; the sign of an angle does not matter."""
    record = getattr(spec, section)
    values = record.model_dump()
    if "field_angle_deg" in values:
        values["field_angle_deg"] = abs(values["field_angle_deg"])
    try:
        type(record).model_validate(values)
    except ValidationError as error:
        raise ProblemError(explain(error, f"{problem.where}: {section}", type(record))) from None
    return spec


def _light(name: str) -> Change:
    """A relative change of a curve of the problem."""
    return lambda problem, amount, part: replace(problem, **{name: getattr(problem, name) * (1 + amount)})


def _board(problem: Problem, amount: float, part: str | None) -> Problem:
    return _moved("lighting", "board_k_per_w")(problem, problem.spec.lighting.board_k_per_w * amount, part)


_ALL = (
    Parameter(name="quantum efficiency", unit="1", sigma=0.05, owner="camera", change=_scaled("response_factor")),
    Parameter(name="LED flux", unit="1", sigma=0.10, owner="led", change=_led(_flux)),
    Parameter(name="LED peak", unit="nm", sigma=3.0, owner="led", change=_peak),
    Parameter(name="filter centre", unit="nm", sigma=2.0, owner="filter", change=_centre),
    Parameter(name="filter tilt", unit="deg", sigma=1.0, owner=None, change=_moved("optics", "field_angle_deg")),
    Parameter(name="read noise", unit="1", sigma=0.10, owner="camera", change=_scaled("read_noise_e")),
    Parameter(
        name="dark current",
        unit="1",
        sigma=0.30,
        owner="camera",
        change=_scaled("dark_current_e_per_s", "dark_current_na_per_cm2"),
    ),
    Parameter(name="air temperature", unit="K", sigma=5.0, owner=None, change=_moved("temperature", "air_c")),
    Parameter(name="sensor temperature", unit="K", sigma=5.0, owner=None, change=_moved("temperature", "sensor_c")),
    Parameter(
        name="reflectance",
        unit="1",
        sigma=0.02,
        owner="surface",
        change=_surfaces(lambda problem, part: _ids(problem.surfaces, part)),
    ),
    Parameter(
        name="target reflectance",
        unit="1",
        sigma=0.02,
        owner="surface",
        change=_surfaces(lambda problem, part: _ids(problem.targets, part)),
    ),
    Parameter(
        name="background reflectance",
        unit="1",
        sigma=0.02,
        owner="surface",
        change=_surfaces(lambda problem, part: _ids(problem.backgrounds, part)),
    ),
    Parameter(name="lens transmittance", unit="1", sigma=0.03, owner=None, change=_light("lens")),
    Parameter(name="ambient light", unit="1", sigma=0.20, owner=None, change=_light("ambient")),
    Parameter(name="PRNU", unit="1", sigma=0.20, owner="camera", change=_scaled("prnu_percent")),
    Parameter(name="dark fixed pattern", unit="1", sigma=0.20, owner="camera", change=_scaled("dsnu_e")),
    Parameter(name="full well", unit="1", sigma=0.05, owner="camera", change=_scaled("full_well_e")),
    Parameter(name="conversion gain", unit="1", sigma=0.03, owner="camera", change=_scaled("conversion_gain_dn_per_e")),
    Parameter(name="delivery", unit="1", sigma=0.10, owner="led", change=_delivery),
    Parameter(name="thermal resistance", unit="1", sigma=0.15, owner="led", change=_led(_thermal)),
    Parameter(name="board thermal resistance", unit="1", sigma=0.15, owner=None, change=_board),
    Parameter(name="forward voltage", unit="1", sigma=0.05, owner="led", change=_led(_voltage)),
)

#: Every quantity that can be nudged, by name.
NUDGES: Mapping[str, Parameter] = {parameter.name: parameter for parameter in _ALL}
