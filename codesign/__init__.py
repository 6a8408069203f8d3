"""Certified choice of LEDs, drive currents, filter, camera and exposure for hard-to-see defects."""

from __future__ import annotations

import sys
from importlib import import_module
from types import ModuleType
from typing import Any

__version__ = "0.1.0"

#: Public names and the module each comes from; imported on first use, so that `cnr --help` stays quick.
_PUBLIC = {
    "Design": "codesign.design",
    "Performance": "codesign.design",
    "Problem": "codesign.problem",
    "Solution": "codesign.solve",
    "build_problem": "codesign.problem",
    "errors": "codesign",
    "evaluate": "codesign.design",
    "least_cost": "codesign.least_cost",
    "load_catalog": "codesign.catalog",
    "load_family": "codesign.family",
    "load_problem": "codesign.problem",
    "load_recipe": "codesign.report.recipe_file",
    "report_html": "codesign.report.page.document",
    "sensitivities": "codesign.study.sensitivity",
    "solution_dict": "codesign.report.machine",
    "solution_text": "codesign.report.text",
    "solve": "codesign.solve",
    "solve_family": "codesign.family.solve",
    "verify": "codesign.verify",
    "write_report": "codesign.report.page.document",
}

__all__ = sorted(_PUBLIC)


def __getattr__(name: str) -> Any:
    if name not in _PUBLIC:
        raise AttributeError(f"module 'codesign' has no attribute {name!r}")
    if name == "errors":
        return import_module("codesign.errors")
    return getattr(import_module(_PUBLIC[name]), name)


def __dir__() -> list[str]:
    return __all__


class _Facade(ModuleType):
    """Keeps `codesign.solve` and `codesign.verify` the functions, although modules of the same names are imported."""

    def __setattr__(self, name: str, value: Any) -> None:
        if isinstance(value, ModuleType) and _PUBLIC.get(name) == value.__name__:
            value = getattr(value, name)
        super().__setattr__(name, value)


sys.modules[__name__].__class__ = _Facade
