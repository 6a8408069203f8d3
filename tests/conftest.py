"""Shared by all tests: each demo problem is solved at most once per run."""

from collections.abc import Callable, Iterator
from functools import cache

import pytest
from browser import Browser

from codesign import load_problem, solve
from codesign.solve import Solution

#: Demo problems whose report pages are made with figures, which take seconds each.
DRAWN = ("yellow-stain", "fast-web")


@pytest.fixture(scope="session")
def solved() -> Callable[[str], Solution]:
    """Solution of a demo problem by its name, solved when first asked for."""
    return cache(lambda name: solve(load_problem(name)))


@pytest.fixture(scope="session")
def reported(solved) -> Callable[[str], str]:
    """Report page of a demo problem by its name, made when first asked for; those in ``DRAWN`` with figures."""

    def made(name: str) -> str:
        from codesign import sensitivities, verify
        from codesign.report.page import figures
        from codesign.report.page.document import report_html
        from codesign.study.plain_light import plain_light

        solution = solved(name)
        parts = {"verdict": verify(solution), "sensitivities": sensitivities(solution, changes=False)}
        command = f"cnr solve {name} --report {name}.html"
        with pytest.MonkeyPatch.context() as patch:
            if name not in DRAWN:
                patch.setattr(figures, "DRAWN", {})
            else:
                parts["plain"] = plain_light(solution.problem)
            return report_html(solution, **parts, command=command, made="2026-01-02")

    return cache(made)


@pytest.fixture(scope="session")
def browser(tmp_path_factory) -> Iterator[Browser]:
    """A headless browser, started when first asked for; the test is skipped where there is none."""
    found = Browser(tmp_path_factory.mktemp("browser"))
    yield found
    found.close()
