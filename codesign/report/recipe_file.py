"""Recipes as small TOML files: written by `cnr solve --recipe`, read by `cnr check`."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Any, Self

from pydantic import Field, ValidationError, model_validator

from codesign.catalog.common import Record, explain
from codesign.design import Design, Shot
from codesign.errors import ProblemError
from codesign.problem import read_toml
from codesign.report.output import plain, write_file

if TYPE_CHECKING:
    from codesign.solve import Solution


class ShotRecipe(Record):
    """One of several exposures of a frame."""

    exposure_us: float = Field(gt=0, description="exposure [us]")
    drive_ma: dict[str, float] = Field(description="current of each LED by id [mA]; LEDs left out are off")


class Recipe(Record):
    """What a recipe file holds: everything that is set by hand."""

    camera: str = Field(min_length=1, description="id of the camera")
    channel: str = Field(min_length=1, description="camera channel, 'mono' for a monochrome camera")
    gain_db: float = Field(ge=-40, le=80, description="gain of the camera [dB]")
    filter: str = Field(min_length=1, description="id of the filter, 'none' for no filter")
    f_number: float = Field(ge=0.5, le=64, description="f-number of the lens")
    exposure_us: float | None = Field(default=None, gt=0, description="exposure [us]; not with [[shot]] tables")
    drive_ma: dict[str, float] | None = Field(
        default=None, description="current of each LED by id [mA]; LEDs left out are off; not with [[shot]] tables"
    )
    emitters: dict[str, int] = Field(
        default={}, description="number of emitters of an LED by id, where build.emitters = 'free'"
    )
    shot: tuple[ShotRecipe, ...] = Field(
        default=(), max_length=3, description="shots of one frame, in place of exposure_us and drive_ma"
    )
    weights: dict[str, float] = Field(
        default={}, description="weight of each channel, or of 'shot 1' .., where several are combined; best if absent"
    )

    @model_validator(mode="after")
    def _check(self) -> Self:
        for name in ("exposure_us", "drive_ma"):
            given = getattr(self, name) is not None
            if given and self.shot:
                raise ValueError(f"{name} and [[shot]] tables do not go together; give it in each [[shot]]")
            if not given and not self.shot:
                raise ValueError(f"{name} is missing")
        return self


def recipe_toml(design: Design, comment: str = "") -> str:
    """Return a design as the text of a recipe file; numbers keep all their digits.

    Parameters
    ----------
    design : Design
    comment : str
        Lines put above the recipe, without the ``#``.

    Examples
    --------
    >>> from codesign import Design
    >>> print(recipe_toml(Design(camera="mono-5mp", channel="mono", gain_db=0.0, filter="none", f_number=4.0,
    ...                          exposure_us=500.0, drive_ma={"red-625-a": 350.0})))
    camera = "mono-5mp"
    channel = "mono"
    gain_db = 0.0
    filter = "none"
    f_number = 4.0
    exposure_us = 500.0
    <BLANKLINE>
    [drive_ma]
    red-625-a = 350.0
    <BLANKLINE>
    """
    head = [f"# {line}".rstrip() for line in comment.splitlines()]
    names = ("camera", "channel", "gain_db", "filter", "f_number", *(() if design.shots else ("exposure_us",)))
    settings = [f"{name} = {_value(getattr(design, name))}" for name in names]
    drives = [] if design.shots else ["", *_section("[drive_ma]", design.drive_ma)]
    emitters = [f"{led} = {count}" for led, count in design.emitters.items()]
    counts = ["", "[emitters]", *emitters] if emitters else []
    weights = {json.dumps(name): value for name, value in design.weights.items()}
    weighted = ["", *_section("[weights]", weights)] if weights else []
    shots = []
    for shot in design.shots:
        exposure = f"exposure_us = {_value(shot.exposure_us)}"
        shots += ["", "[[shot]]", exposure, *_section("[shot.drive_ma]", shot.drive_ma)]
    return "\n".join([*head, *settings, *drives, *counts, *weighted, *shots, ""])


def _section(title: str, values: Mapping[str, float]) -> list[str]:
    return [title, *(f"{name} = {_value(value)}" for name, value in values.items())]


def _value(value: str | float) -> str:
    # A TOML basic string is a JSON string, but for the delete character.
    if isinstance(value, str):
        return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")
    return repr(float(value))


def write_recipe(solution: Solution, path: str | Path) -> None:
    """Write a solution's recipe to a file, headed by what it is for."""
    problem, recipe = solution.problem, solution.recipe
    comment = f"Recipe for {plain(problem.spec.title)} ({plain(problem.where)}), predicted CNR {recipe.cnr:.6g}"
    write_file(path, recipe_toml(replace(recipe.design, weights=recipe.weights), comment))


def recipe_schema() -> dict[str, Any]:
    """JSON Schema of the recipe file."""
    either = {"oneOf": [{"required": ["exposure_us", "drive_ma"]}, {"required": ["shot"]}]}
    return {**Recipe.model_json_schema(), **either, "$schema": "https://json-schema.org/draft/2020-12/schema"}


def load_recipe(path: str | Path) -> Design:
    """Read a recipe file. Whether its parts exist is for `codesign.evaluate` to say.

    Raises
    ------
    ProblemError
        One line: file, key, value, what is allowed.
    """
    path = Path(path)
    table = read_toml(path, advice="'cnr solve PROBLEM --recipe FILE' writes one")
    try:
        recipe = Recipe.model_validate(table)
    except ValidationError as error:
        raise ProblemError(explain(error, path.name, Recipe)) from None
    for drives in (recipe.drive_ma or {}, *(shot.drive_ma for shot in recipe.shot)):
        negative = next((led for led, ma in drives.items() if ma < 0), None)
        if negative is not None:
            ma = drives[negative]
            raise ProblemError(f"{path.name}: drive_ma.{negative} is {ma:g}, must be >= 0; 0 is off")
    shots = tuple(Shot(exposure_us=shot.exposure_us, drive_ma=shot.drive_ma) for shot in recipe.shot)
    plain_names = ("camera", "channel", "gain_db", "filter", "f_number", "emitters", "weights")
    return Design(
        **{name: getattr(recipe, name) for name in plain_names},
        exposure_us=sum(shot.exposure_us for shot in shots) if shots else recipe.exposure_us,
        drive_ma=recipe.drive_ma or {},
        shots=shots,
        where=path.name,
    )
