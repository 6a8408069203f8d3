"""Stopping early keeps the best so far, with the gap that is proven."""

import numpy as np
import pytest

from codesign import load_problem, solve, verify
from codesign.solve_rounds import Clock, search_rounds


def test_time_limit_keeps_a_feasible_recipe_and_an_honest_gap(solved):
    full = solved("bruise")
    solution = solve(load_problem("bruise"), time_limit=0.0)
    assert solution.recipe.feasible
    assert solution.alternatives == ()
    assert solution.certificate.bound >= full.certificate.value * (1 - 1e-3)
    assert (solution.status == "stopped") == (solution.certificate.gap > 1e-3)
    verify(solution)


def test_interrupt_keeps_the_best_so_far():
    calls = []

    def progress(value, bound):
        calls.append(value)
        if value > 0:
            raise KeyboardInterrupt

    search = search_rounds(load_problem("bruise"), 1e-3, progress=progress, clock=Clock())
    assert search.stopped
    assert search.walk.found[search.best].value > 0
    assert np.isfinite(search.gap)


def test_interrupt_before_anything_is_known_goes_through():
    def progress(value, bound):
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        search_rounds(load_problem("bruise"), 1e-3, progress=progress)
