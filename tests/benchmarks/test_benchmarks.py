"""Each benchmark runs at a tiny size in the default tests; the full table only when asked for."""

import pytest
from bench_registry import REGISTRY, Figure
from run import line, print_table


@pytest.mark.parametrize("name", sorted(REGISTRY))
def test_benchmark_runs_at_tiny_size(name, tmp_path):
    found = REGISTRY[name].run(tmp_path, tiny=True)
    assert found and all(figure.met is not False for figure in found)


def test_a_missed_bar_is_said():
    figure = Figure(what="solve", value=7.0, unit="s", at_most=5.0)
    assert figure.met is False
    assert "<= 5" in line("name", figure) and "NOT MET" in line("name", figure)
    assert Figure(what="ratio", value=7.0, unit="x", at_least=5.0).met is True


@pytest.mark.benchmark
def test_full_table_meets_its_bars():
    missed = [figure.what for figure in print_table(REGISTRY.values()) if figure.met is False]
    assert not missed
