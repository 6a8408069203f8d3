"""Shared by all tests: each demo problem is solved at most once per run."""

from collections.abc import Callable, Iterator
from functools import cache

import pytest
from browser import Browser

from codesign import load_problem, solve
from codesign.solve import Solution


@pytest.fixture(scope="session")
def solved() -> Callable[[str], Solution]:
    """Solution of a demo problem by its name, solved when first asked for."""
    return cache(lambda name: solve(load_problem(name)))


@pytest.fixture(scope="session")
def browser(tmp_path_factory) -> Iterator[Browser]:
    """A headless browser, started when first asked for; the test is skipped where there is none."""
    found = Browser(tmp_path_factory.mktemp("browser"))
    yield found
    found.close()
