"""How to get the same result again: program, command, problem file, and the result as data."""

from __future__ import annotations

import json
import platform
import tomllib
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path

import codesign
from codesign.errors import CodesignError
from codesign.problem import Problem
from codesign.problem.schema import ProblemSpec
from codesign.report.machine import as_json, performance_dict, solution_dict
from codesign.report.output import plain
from codesign.report.page.content import Section, Subject
from codesign.report.page.html import Content, Html, download, element, joined, lines, name, paragraph, settings

#: Libraries whose versions can move the last digits.
LIBRARIES = ("numpy", "scipy", "clarabel")
#: Longest problem file shown. [characters]
LONGEST_FILE = 100_000


def reproduce(subject: Subject) -> Section:
    """Program version, command line, problem file and result."""
    rows: list[tuple[Content, Content]] = [("program", f"codesign {codesign.__version__}"), ("with", _libraries())]
    if subject.made:
        rows.append(("made", subject.made))
    if subject.command:
        rows.append(("command", element("code", plain(subject.command))))
    rows.append(("problem", name(subject.problem.where)))
    body = (
        settings(rows, class_="pairs wide"),
        paragraph(
            "The same program on the same files gives the same recipe and the same proof; times differ, and the last "
            "digits may differ between machines. Curves and catalogues that the problem file names are files of their "
            "own and are not carried in this report."
        ),
        _problem_file(subject),
        _result(subject),
    )
    return Section(id="reproduce", title="To reproduce", short="Reproduce", body=joined(body))


def _libraries() -> str:
    found = [f"Python {platform.python_version()}"]
    for library in LIBRARIES:
        try:
            found.append(f"{library} {version(library)}")
        except PackageNotFoundError:  # pragma: no cover - a bundle may come without the records
            continue
    return ", ".join(found)


def _problem_file(subject: Subject) -> Html:
    text, kind = problem_text(subject)
    shown = text if len(text) <= LONGEST_FILE else text[:LONGEST_FILE] + "\n[cut here]"
    file = "problem.toml" if kind == "toml" else "problem.json"
    title = "Problem file" if kind == "toml" else "Problem as it was solved (not from a file)"
    return element(
        "details",
        element("summary", title),
        paragraph(download("Save the problem", text, file), class_="actions"),
        element("pre", lines(shown), class_="file"),
    )


def problem_text(subject: Subject) -> tuple[str, str]:
    """Return the problem and its kind: ``toml``, its file, or ``json`` where there is no file that says the same."""
    text = subject.source or _file_text(subject.problem)
    if text and _says(text, subject.problem.spec):
        return text, "toml"
    return as_json(subject.problem.spec.model_dump(mode="json", exclude_unset=True)), "json"


def _file_text(problem: Problem) -> str:
    try:
        return (Path(problem.folder) / problem.where).read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError, ValueError):
        return ""


def _says(text: str, spec: ProblemSpec) -> bool:
    """Whether a text is the file of this problem: what-ifs change a problem after it was read."""
    try:
        return ProblemSpec.model_validate(tomllib.loads(text.removeprefix("\ufeff"))) == spec
    except (tomllib.TOMLDecodeError, ValueError, CodesignError):
        return False


def _result(subject: Subject) -> Html | None:
    if subject.solution is not None:
        table = solution_dict(subject.solution, subject.verdict)
    else:
        table = performance_dict(subject.problem, subject.performance)
    text = json.dumps(table, indent=1, ensure_ascii=True, allow_nan=False)
    link = download("Save the result as JSON", text, "result.json", "application/json")
    if link is None:
        return paragraph("The result as data is too large to be carried here: --json prints it.")
    return paragraph(link, class_="actions")
