"""Recipes as small TOML files: written by `cnr solve --recipe`, read by `cnr check`."""

from __future__ import annotations

import json
from pathlib import Path
from typing import TYPE_CHECKING, Any

from pydantic import Field, ValidationError

from codesign.catalog.common import Record, explain
from codesign.design import Design
from codesign.errors import ProblemError
from codesign.problem import read_toml
from codesign.report.output import plain, write_file

if TYPE_CHECKING:
    from codesign.solve import Solution


class Recipe(Record):
    """What a recipe file holds: everything that is set by hand."""

    camera: str = Field(min_length=1, description="id of the camera")
    channel: str = Field(min_length=1, description="camera channel, 'mono' for a monochrome camera")
    gain_db: float = Field(ge=-40, le=80, description="gain of the camera [dB]")
    filter: str = Field(min_length=1, description="id of the filter, 'none' for no filter")
    f_number: float = Field(ge=0.5, le=64, description="f-number of the lens")
    exposure_us: float = Field(gt=0, description="exposure [us]")
    drive_ma: dict[str, float] = Field(description="current of each LED by id [mA]; LEDs left out are off")
    emitters: dict[str, int] = Field(
        default={}, description="number of emitters of an LED by id, where build.emitters = 'free'"
    )


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
    names = ("camera", "channel", "gain_db", "filter", "f_number", "exposure_us")
    settings = [f"{name} = {_value(getattr(design, name))}" for name in names]
    drives = [f"{led} = {_value(ma)}" for led, ma in design.drive_ma.items()]
    emitters = [f"{led} = {count}" for led, count in design.emitters.items()]
    counts = ["", "[emitters]", *emitters] if emitters else []
    return "\n".join([*head, *settings, "", "[drive_ma]", *drives, *counts, ""])


def _value(value: str | float) -> str:
    # A TOML basic string is a JSON string, but for the delete character.
    if isinstance(value, str):
        return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")
    return repr(float(value))


def write_recipe(solution: Solution, path: str | Path) -> None:
    """Write a solution's recipe to a file, headed by what it is for."""
    problem, recipe = solution.problem, solution.recipe
    comment = f"Recipe for {plain(problem.spec.title)} ({plain(problem.where)}), predicted CNR {recipe.cnr:.6g}"
    write_file(path, recipe_toml(recipe.design, comment))


def recipe_schema() -> dict[str, Any]:
    """JSON Schema of the recipe file."""
    return {**Recipe.model_json_schema(), "$schema": "https://json-schema.org/draft/2020-12/schema"}


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
    negative = next((led for led, ma in recipe.drive_ma.items() if ma < 0), None)
    if negative is not None:
        ma = recipe.drive_ma[negative]
        raise ProblemError(f"{path.name}: drive_ma.{negative} is {ma:g}, must be >= 0; 0 is off")
    return Design(**{name: getattr(recipe, name) for name in Recipe.model_fields}, where=path.name)
