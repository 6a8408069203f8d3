"""The problem file as people type it: one record per section, units in the key names, unknown keys refused."""

from __future__ import annotations

from typing import Annotated, Any, Literal, Self

from pydantic import Field, model_validator

from codesign.catalog.common import ABSOLUTE_ZERO_C, Record
from codesign.problem.tolerances import Tolerance

Choice = str | tuple[str, ...]


def _require_one(record: Record, first: str, second: str) -> None:
    """Raise ValueError unless exactly one of two fields is given."""
    a, b = getattr(record, first), getattr(record, second)
    if a is None and b is None:
        raise ValueError(f"{first} and {second} are both missing, must be one of the two")
    if a is not None and b is not None:
        raise ValueError(f"{first} is {a!r} and {second} is {b!r}, must be only one of the two")


class Ambient(Record):
    """One ambient light, stated by its spectrum and what a meter shows at the object."""

    illuminant: str | None = Field(default=None, description="'D65', 'A', 'E', 'fluorescent' or 'planck-<kelvin>'")
    curve: str | None = Field(default=None, description="CSV with wavelength_nm and the relative spectrum")
    illuminance_lx: float | None = Field(default=None, ge=0, description="at the object [lx]")
    irradiance_w_per_m2: float | None = Field(
        default=None, ge=0, description="at the object, over the wavelengths of the problem [W/m2]"
    )

    @model_validator(mode="after")
    def _check(self) -> Self:
        _require_one(self, "illuminant", "curve")
        _require_one(self, "illuminance_lx", "irradiance_w_per_m2")
        return self


class Scene(Record):
    """What is looked at and what else shines on it."""

    target: str | Annotated[tuple[str, ...], Field(min_length=1)] = Field(
        description="id of the defect surface; several: the worst pair counts"
    )
    background: str | Annotated[tuple[str, ...], Field(min_length=1)] = Field(
        description="id of the good surface; several: the worst pair counts"
    )
    guards: tuple[str, ...] = Field(default=(), description="ids of further surfaces that must not saturate")
    ambient: tuple[Ambient, ...] = Field(default=(), description="lights that are not part of the rig")


class Candidates(Record):
    """Parts that may be used: 'all', one id, a list of ids and patterns, or a selection expression."""

    leds: Choice = Field(default="all", description="LEDs to choose from")
    filters: Choice = Field(default="all", description="filters to choose from")
    cameras: Choice = Field(default="all", description="cameras to choose from")
    no_filter: bool = Field(default=True, description="whether leaving the filter out is a choice too")
    filter_pairs: bool | str = Field(
        default=False,
        description="whether any two of the filters, stacked, are a choice too; an expression: of those it selects",
    )
    channels: Choice = Field(default="all", description="camera channels to choose from, e.g. ['mono', 'red']")
    gains_db: tuple[float, ...] | None = Field(
        default=None, min_length=1, description="gains to choose from [dB]; all the camera has by default"
    )


class Optics(Record):
    """Lens and filter position."""

    f_numbers: tuple[float, ...] = Field(min_length=1, description="f-numbers to choose from")
    magnification: float = Field(ge=0, le=10, description="image size divided by object size")
    lens_transmittance: float = Field(default=0.9, gt=0, le=1, description="fraction, 0 to 1; divide percent by 100")
    lens_curve: str | None = Field(
        default=None, description="CSV with wavelength_nm and lens transmittance, as a further factor"
    )
    lens_unit: Literal["percent", "fraction"] | None = Field(default=None, description="unit of lens_curve")
    filter_position: Literal["front", "sensor"] = Field(
        default="front",
        description="'front' of the lens (field angle) or at the 'sensor' (cone of the f-number)",
    )
    field_angle_deg: float = Field(
        default=0.0, ge=0, lt=80, description="tilt of the chief ray through the filter [deg]"
    )
    required_depth_mm: float | None = Field(
        default=None, gt=0, description="depth that must stay sharp to one pixel [mm]"
    )

    @model_validator(mode="after")
    def _check(self) -> Self:
        bad = [n for n in self.f_numbers if not 0.5 <= n <= 64]
        if bad:
            raise ValueError(f"f_numbers holds {bad[0]:g}, must be 0.5 to 64")
        if (self.lens_curve is None) != (self.lens_unit is None):
            raise ValueError("lens_curve and lens_unit go together; state 'percent' or 'fraction'")
        if self.required_depth_mm is not None and self.magnification == 0:
            raise ValueError("required_depth_mm needs a magnification above 0")
        return self


class LedInRig(Record):
    """What is special about one LED type in this rig."""

    emitters: int | None = Field(default=None, ge=1, le=100000, description="number of emitters in the channel")
    delivery_per_m2: float | None = Field(default=None, gt=0, description="irradiance per watt emitted [1/m2]")
    measured_irradiance_w_per_m2: float | None = Field(
        default=None, gt=0, description="measured at the object with all emitters at rated current [W/m2]"
    )
    specular_weight: float | None = Field(default=None, ge=0, le=1000, description="see [lighting] specular_weight")
    max_current_ma: float | None = Field(default=None, gt=0, description="driver limit of this channel [mA]")

    @model_validator(mode="after")
    def _check(self) -> Self:
        if self.delivery_per_m2 is not None and self.measured_irradiance_w_per_m2 is not None:
            raise ValueError("give delivery_per_m2 or measured_irradiance_w_per_m2, not both")
        return self


class Lighting(Record):
    """The rig: how emitters are driven, cooled and aimed."""

    mode: Literal["continuous", "strobe"] = Field(description="'continuous' or 'strobe' (on during the exposure only)")
    emitters_per_channel: int = Field(
        default=1, ge=1, le=100000, description="emitters of one type, all at the same current"
    )
    distance_mm: float | None = Field(default=None, gt=0, description="emitters to object [mm]")
    incidence_deg: float = Field(default=0.0, ge=0, lt=90, description="angle of the light on the object [deg]")
    delivery_per_m2: float | None = Field(
        default=None,
        gt=0,
        description="irradiance at the object per watt emitted [1/m2], instead of distance_mm",
    )
    specular_weight: float = Field(
        default=0.0,
        ge=0,
        le=1000,
        description="share of a mirror-like reflection that enters the lens, against a white diffuser; 0 = dark field",
    )
    board_k_per_w: float = Field(default=0.0, ge=0, description="solder point to air, per emitter [K/W]")
    drive_step_ma: float = Field(default=1.0, gt=0, description="step of the current setting [mA]")
    driver_max_ma: float | None = Field(default=None, gt=0, description="largest current of any channel [mA]")
    led: dict[str, LedInRig] = Field(default={}, description="exceptions by LED id")

    @model_validator(mode="after")
    def _check(self) -> Self:
        _require_one(self, "distance_mm", "delivery_per_m2")
        return self


class Motion(Record):
    """How the object moves."""

    speed_mm_per_s: float = Field(ge=0, description="speed across the sensor rows, at the object [mm/s]")
    max_blur_px: float = Field(gt=0, description="largest motion blur [pixel]")


class Timing(Record):
    """When and how long is exposed."""

    frame_rate_hz: float | None = Field(default=None, gt=0, description="frames per second [Hz]; a must for strobe")
    exposure_min_us: float | None = Field(default=None, gt=0, description="shortest exposure wanted [us]")
    exposure_max_us: float | None = Field(default=None, gt=0, description="longest exposure wanted [us]")


class Temperature(Record):
    """Temperatures around the rig."""

    air_c: float = Field(gt=ABSOLUTE_ZERO_C, le=150, description="air at the light [deg C]")
    sensor_c: float = Field(gt=ABSOLUTE_ZERO_C, le=150, description="sensor die, in use [deg C]")


class Limits(Record):
    """What must not be exceeded."""

    well_headroom: float = Field(
        default=0.9, gt=0, le=1, description="share of saturation each guarded surface may fill"
    )
    dark_well_share: float | None = Field(
        default=None,
        gt=0,
        le=1,
        description="dark signal at most this share of saturation; percent: divide by 100",
    )
    dark_noise_share: float | None = Field(
        default=None,
        gt=0,
        description="dark shot-noise variance at most this multiple of the read-noise variance",
    )
    junction_max_c: float | None = Field(
        default=None, gt=ABSOLUTE_ZERO_C, description="cap on all LED junctions [deg C]"
    )
    rig_heat_w: float | None = Field(default=None, gt=0, description="mean heat of all LEDs [W]")
    supply_w: float | None = Field(default=None, gt=0, description="mean electrical power of all LEDs [W]")
    supply_peak_w: float | None = Field(default=None, gt=0, description="electrical power while on [W]")
    actinic_w_per_m2: float | None = Field(
        default=None, gt=0, description="actinic ultraviolet 200 mm from the bare emitters, weighted, mean [W/m2]"
    )
    ultraviolet_a_w_per_m2: float | None = Field(
        default=None, gt=0, description="ultraviolet A 200 mm from the bare emitters, mean [W/m2]"
    )
    blue_light_w_per_m2: float | None = Field(
        default=None, gt=0, description="blue light 200 mm from the bare emitters, weighted, mean [W/m2]"
    )
    infrared_w_per_m2: float | None = Field(
        default=None, gt=0, description="infrared 200 mm from the bare emitters, 780-3000 nm, mean [W/m2]"
    )


class Build(Record):
    """What may be built: how many parts, and at what price."""

    max_led_channels: int | None = Field(default=None, ge=1, description="LED types in use at most")
    board_slots: int | None = Field(default=None, ge=1, description="emitters on the board at most")
    price_budget: float | None = Field(
        default=None, gt=0, description="camera, filters and emitters together at most, in the catalogue's currency"
    )
    emitters: Literal["fixed", "free"] = Field(
        default="fixed",
        description="'fixed': a channel in use has all its emitters; 'free': 1 to that many, chosen for the best CNR",
    )
    must_have: tuple[str, ...] = Field(
        default=(), description="ids of parts that are bought in any case; an LED need not be lit"
    )
    must_not: tuple[str, ...] = Field(default=(), description="ids of parts that must not be used")

    @property
    def limited(self) -> bool:
        """Whether any limit couples the choice of LEDs."""
        return any(bound is not None for bound in (self.max_led_channels, self.board_slots, self.price_budget))

    @model_validator(mode="after")
    def _check(self) -> Self:
        both = [name for name in self.must_have if name in self.must_not]
        if both:
            raise ValueError(f"must_have and must_not both name {both[0]!r}; remove one")
        return self


class Averaging(Record):
    """What the detection averages before it decides."""

    pixels: int = Field(default=1, ge=1, description="independent pixels averaged")
    frames: int = Field(default=1, ge=1, description="frames averaged; fixed pattern stays")


class Detection(Record):
    """What one decision rests on: one reading, or several combined by the best linear weights."""

    combine_channels: bool = Field(
        default=False, description="whether all channels of a colour camera are read together, with the best weights"
    )
    shots: int = Field(
        default=1,
        ge=1,
        le=3,
        description="exposures one after another in a frame, each with its own currents; the same pixels",
    )


class Grid(Record):
    """Wavelengths of all integrals."""

    step_nm: float = Field(default=1.0, ge=0.05, le=20, description="step [nm]")
    from_nm: float | None = Field(default=None, gt=0, description="start, where the surfaces begin by default [nm]")
    to_nm: float | None = Field(default=None, gt=0, description="end, where the surfaces end by default [nm]")


class Solver(Record):
    """How hard to look."""

    gap: float = Field(default=1e-3, ge=1e-8, le=0.5, description="relative gap to prove")
    alternatives: int = Field(default=4, ge=0, le=50, description="certified runners-up with other parts")


class ProblemSpec(Record):
    """A whole problem file."""

    title: str = Field(min_length=1, description="one line")
    notes: str = Field(default="", description="anything worth remembering")
    catalog: str = Field(default="demo", description="catalogue folder, relative to this file, or 'demo'")
    required_cnr: float | None = Field(default=None, gt=0, description="CNR that detection needs")
    scene: Scene
    candidates: Candidates = Candidates()
    optics: Optics
    lighting: Lighting
    motion: Motion | None = None
    timing: Timing = Timing()
    temperature: Temperature
    limits: Limits = Limits()
    build: Build = Build()
    averaging: Averaging = Averaging()
    detection: Detection = Detection()
    grid: Grid = Grid()
    solver: Solver = Solver()
    tolerance: Tolerance = Tolerance()
    led: tuple[dict[str, Any], ...] = Field(default=(), description="own LEDs, each under [[led]]")
    filter: tuple[dict[str, Any], ...] = Field(default=(), description="own filters, each under [[filter]]")
    camera: tuple[dict[str, Any], ...] = Field(default=(), description="own cameras, each under [[camera]]")
    surface: tuple[dict[str, Any], ...] = Field(default=(), description="own surfaces, each under [[surface]]")

    @model_validator(mode="after")
    def _check(self) -> Self:
        timing, lighting = self.timing, self.lighting
        self._check_detection()
        if lighting.mode == "strobe" and timing.frame_rate_hz is None:
            raise ValueError("timing.frame_rate_hz is missing; strobed light needs the frame rate for its duty")
        low, high = timing.exposure_min_us, timing.exposure_max_us
        if low is not None and high is not None and low > high:
            raise ValueError(f"timing.exposure_min_us is {low:g}, must be <= exposure_max_us {high:g}")
        if self.grid.from_nm is not None and self.grid.to_nm is not None and self.grid.from_nm >= self.grid.to_nm:
            raise ValueError(f"grid.from_nm is {self.grid.from_nm:g}, must be below to_nm {self.grid.to_nm:g}")
        return self

    def _check_detection(self) -> None:
        detection, scene = self.detection, self.scene
        if not detection.combine_channels and detection.shots == 1:
            return
        if detection.combine_channels and detection.shots > 1:
            raise ValueError("detection.combine_channels and detection.shots > 1 do not go together; choose one")
        if not all(isinstance(names, str) or len(names) == 1 for names in (scene.target, scene.background)):
            raise ValueError("detection combines readings of one target and one background; name one of each in scene")
        if detection.shots > 1 and self.lighting.mode != "strobe":
            raise ValueError("detection.shots > 1 needs lighting.mode = 'strobe'; each shot has its own light")


def json_schema() -> dict[str, Any]:
    """JSON Schema of the problem file, with the parts that may be written inline."""
    from codesign.catalog import Camera, Filter, Led, Surface

    schema = ProblemSpec.model_json_schema()
    schema["$schema"] = "https://json-schema.org/draft/2020-12/schema"
    definitions = schema.setdefault("$defs", {})
    for name, model in (("led", Led), ("filter", Filter), ("camera", Camera), ("surface", Surface)):
        part = model.model_json_schema(ref_template="#/$defs/{model}")
        definitions.update(part.pop("$defs", {}))
        definitions[model.__name__] = part
        schema["properties"][name]["items"] = {"$ref": f"#/$defs/{model.__name__}"}
    return schema
