"""The family file as people type it: a base problem, a table of variants, spectra, and what a shared rig is for."""

from __future__ import annotations

from typing import Any, Literal, Self

from pydantic import Field, model_validator

from codesign.catalog.common import Record

Goal = Literal["worst", "count", "cost"]


class SpectraFile(Record):
    """A wide table of reflectance: ``wavelength_nm``, then ``<surface id>`` or ``<surface id>.<sample>`` columns."""

    file: str = Field(min_length=1, description="CSV with wavelength_nm and a column per surface or sample of one")
    unit: Literal["percent", "fraction"] = Field(description="unit of the curves")
    source: str = Field(default="", description="who measured it, with what; the file's name by default")
    invented: bool = Field(default=False, description="true for made-up spectra")
    hold_edges_nm: float = Field(
        default=0.0,
        ge=0,
        le=200,
        description="how far beyond the measured ends reflectance may be taken as constant [nm]",
    )
    specular_reflectance: float = Field(
        default=0.0, ge=0, le=1, description="mirror-like share of these surfaces, 0 to 1; divide percent by 100"
    )


class SharedRig(Record):
    """What camera, filter and LED channels in common are chosen for."""

    max_led_channels: int | None = Field(default=None, ge=1, description="LED types of the shared rig at most")
    goal: Goal = Field(
        default="worst",
        description="'worst': greatest CNR of the worst variant; 'count': most variants at required_cnr; "
        "'cost': lowest price at which all are",
    )
    required_cnr: float | None = Field(
        default=None, gt=0, description="CNR that counts as enough; required_cnr of the problem by default"
    )


class FamilySpec(Record):
    """A whole family file."""

    title: str = Field(min_length=1, description="one line")
    notes: str = Field(default="", description="anything worth remembering")
    base: str | None = Field(default=None, description="base problem: a file relative to this one, or a demo's name")
    problem: dict[str, Any] | None = Field(
        default=None, description="the base problem itself, as a problem file has it, instead of base"
    )
    variants: str = Field(
        min_length=1,
        description="CSV with the column variant and fields of the problem, or a folder of problem files",
    )
    spectra: tuple[SpectraFile, ...] = Field(default=(), description="measured surfaces, for all variants")
    shared: SharedRig = Field(default=SharedRig(), description="what the rig in common is for")

    @model_validator(mode="after")
    def _check(self) -> Self:
        if self.base is not None and self.problem is not None:
            raise ValueError("base and [problem] are both given, must be only one of the two")
        return self


def json_schema() -> dict[str, Any]:
    """JSON Schema of the family file."""
    return {**FamilySpec.model_json_schema(), "$schema": "https://json-schema.org/draft/2020-12/schema"}
