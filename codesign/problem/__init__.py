"""The problem file: schema, loading, and the resolved problem."""

from codesign.problem.files import DemoProblem, demo_problems, problem_path, read_toml
from codesign.problem.load import build_problem, load_problem, solver_settings
from codesign.problem.model import LedChannel, Problem
from codesign.problem.schema import ProblemSpec, json_schema

__all__ = [
    "DemoProblem",
    "LedChannel",
    "Problem",
    "ProblemSpec",
    "build_problem",
    "demo_problems",
    "json_schema",
    "load_problem",
    "problem_path",
    "read_toml",
    "solver_settings",
]
