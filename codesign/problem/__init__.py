"""The problem file: schema, loading, and the resolved problem."""

from codesign.problem.load import build_problem, load_problem, problem_path, read_toml
from codesign.problem.model import LedChannel, Problem
from codesign.problem.schema import ProblemSpec, json_schema

__all__ = [
    "LedChannel",
    "Problem",
    "ProblemSpec",
    "build_problem",
    "json_schema",
    "load_problem",
    "problem_path",
    "read_toml",
]
