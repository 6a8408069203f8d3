"""Shared by all tests: each demo problem is solved at most once per run."""

from collections.abc import Callable
from functools import cache

import pytest

from codesign import load_problem, solve
from codesign.solve import Solution


@pytest.fixture(scope="session")
def solved() -> Callable[[str], Solution]:
    """Solution of a demo problem by its name, solved when first asked for."""
    return cache(lambda name: solve(load_problem(name)))
