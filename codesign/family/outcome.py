"""What is kept of one variant: its recipe with proof, or why there is none."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import asdict, dataclass, field
from typing import Any, Literal, Self

from codesign.design import Performance, SurfaceReading
from codesign.solve import Solution

#: "solved"; "impossible": the limits cannot be met; "bad": its data or its run failed.
Status = Literal["solved", "impossible", "bad"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Reading:
    """What the camera reads on one surface with the recipe."""

    surface: str
    role: str
    grey_dn: float
    saturation_share: float

    @classmethod
    def of(cls, reading: SurfaceReading) -> Self:
        """Of a reading of the forward model."""
        return cls(
            surface=reading.id,
            role=reading.role,
            grey_dn=float(reading.grey_dn),
            saturation_share=float(reading.saturation_share),
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class Outcome:
    """Result of one variant in plain values.

    Attributes
    ----------
    status : str
        "solved", "impossible" (limits in conflict) or "bad" (wrong data, or a run that failed).
    reason : str
        Why there is no recipe; empty where there is one.
    limits : tuple of str
        Limits in conflict.
    cnr : float
        Of the recipe, in whole setting steps.
    best_cnr : float
        Of the optimum, before rounding.
    bound : float or None
        No configuration has a CNR above it.
    proven : bool
        Whether the gap asked for is proven; a time limit may end the search before.
    camera, channel, gain_db, filter, f_number, exposure_us, drive_ma, emitters, shots, weights
        The recipe, as of `codesign.Design`.
    sign : str
        Whether the target is "brighter" or "darker".
    error_rate : float
        Share of misses, equal to that of false alarms, threshold midway.
    readings : tuple of Reading
        Grey values of all surfaces.
    binding : tuple of str
        Limits the optimum touches.
    """

    status: Status
    reason: str = ""
    limits: tuple[str, ...] = ()
    cnr: float | None = None
    best_cnr: float | None = None
    bound: float | None = None
    proven: bool = False
    camera: str = ""
    channel: str = ""
    gain_db: float | None = None
    filter: str = ""
    f_number: float | None = None
    exposure_us: float | None = None
    drive_ma: Mapping[str, float] = field(default_factory=dict)
    emitters: Mapping[str, int] = field(default_factory=dict)
    shots: tuple[Mapping[str, Any], ...] = ()
    weights: Mapping[str, float] = field(default_factory=dict)
    sign: str = ""
    error_rate: float | None = None
    readings: tuple[Reading, ...] = ()
    binding: tuple[str, ...] = ()

    @property
    def solved(self) -> bool:
        """Whether there is a recipe."""
        return self.status == "solved"

    @property
    def gap(self) -> float | None:
        """Relative gap proven of the optimum; None without a bound of its own. [1]"""
        return None if self.bound is None else self.bound / self.best_cnr - 1

    @property
    def leds(self) -> tuple[str, ...]:
        """LEDs that are lit, in any shot."""
        drives = [shot["drive_ma"] for shot in self.shots] or [self.drive_ma]
        return tuple(dict.fromkeys(led for drive in drives for led, ma in drive.items() if ma > 0))

    def text(self) -> str:
        """Return it as JSON with all digits, the same text for the same content."""
        return json.dumps(asdict(self), sort_keys=True, ensure_ascii=False, allow_nan=False, separators=(",", ":"))

    @classmethod
    def from_text(cls, text: str) -> Self:
        """Read what `text` wrote. Raises ValueError when it is something else."""
        try:
            table = json.loads(text)
            table["readings"] = tuple(Reading(**reading) for reading in table["readings"])
            return cls(**{key: tuple(value) if isinstance(value, list) else value for key, value in table.items()})
        except (TypeError, KeyError, AttributeError) as error:
            raise ValueError(f"not the outcome of a variant: {error}") from None


def outcome_of(solution: Solution, gap: float) -> Outcome:
    """Return what is kept of a solution found to a relative gap."""
    certificate, best = solution.certificate, float(solution.optimum.cnr)
    return outcome_with(
        solution.recipe,
        best_cnr=best,
        bound=max(float(certificate.bound), best),
        proven=solution.status == "proven" and certificate.gap <= gap,
        binding=solution.binding,
    )


def outcome_with(
    recipe: Performance, *, best_cnr: float, bound: float | None, proven: bool, binding: tuple[str, ...]
) -> Outcome:
    """Return the outcome that holds a recipe; ``bound`` is None where the proof is not one of this variant alone."""
    design = recipe.design
    return Outcome(
        status="solved",
        cnr=float(recipe.cnr),
        best_cnr=best_cnr,
        bound=bound,
        proven=proven,
        camera=design.camera,
        channel=design.channel,
        gain_db=float(design.gain_db),
        filter=design.filter,
        f_number=float(design.f_number),
        exposure_us=float(design.exposure_us),
        drive_ma=_numbers(design.drive_ma),
        emitters={led: int(design.emitters[led]) for led in sorted(design.emitters)},
        shots=tuple(
            {"exposure_us": float(shot.exposure_us), "drive_ma": _numbers(shot.drive_ma)} for shot in design.shots
        ),
        weights=_numbers(recipe.weights),
        sign=recipe.sign,
        error_rate=float(recipe.error_rate),
        readings=tuple(Reading.of(reading) for reading in recipe.surfaces),
        binding=binding,
    )


def _numbers(values: Mapping[str, float]) -> dict[str, float]:
    # In the order in which their text has them, so that it makes no difference whether it was read back.
    return {name: float(values[name]) for name in sorted(values)}
