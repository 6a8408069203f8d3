"""The report as one HTML file: it needs no network, no other file, and lets nothing run but its own scripts."""

from __future__ import annotations

import datetime
from collections.abc import Callable, Iterator, Mapping, Sequence
from functools import cache
from importlib import resources
from pathlib import Path
from typing import TYPE_CHECKING, Any

import codesign
from codesign.design import Performance
from codesign.problem import Problem
from codesign.report import output
from codesign.report.house import css_properties
from codesign.report.output import write_file
from codesign.report.page import sections_basis, sections_proof, sections_result, sections_safety, sections_study
from codesign.report.page.content import Section, Subject
from codesign.report.page.glance import glance
from codesign.report.page.html import (
    Html,
    content_hash,
    css_string,
    data_block,
    element,
    name,
    paragraph,
    trusted,
)
from codesign.report.page.sections_reproduce import reproduce

if TYPE_CHECKING:
    from codesign.least_cost import LeastCost
    from codesign.report.page.live import LiveFragment
    from codesign.solve import Solution
    from codesign.study.plain_light import PlainLight
    from codesign.study.sensitivity import Sensitivities
    from codesign.study.trade import Trade
    from codesign.verify import Verdict

#: In the order in which people ask; the live page follows those marked by its place.
BEFORE_LIVE: tuple[Callable[[Subject], Section | None], ...] = (
    sections_result.recipe,
    sections_result.result,
    sections_result.limits,
    sections_proof.proof,
    sections_result.noise,
    sections_result.story,
)
AFTER_LIVE: tuple[Callable[[Subject], Section | None], ...] = (
    sections_study.sensitivities,
    sections_study.trade,
    sections_proof.alternatives,
    sections_basis.assumptions,
    sections_basis.parts,
    sections_safety.safety,
    sections_safety.radiation,
    reproduce,
)
#: Titles longer than this are cut where they run along the head of every printed page. [characters]
LONGEST_RUNNING_TITLE = 80


def report_html(
    solution: Solution,
    *,
    verdict: Verdict | None = None,
    sensitivities: Sensitivities | None = None,
    trade: Sequence[Trade] = (),
    cost: LeastCost | None = None,
    plain: PlainLight | None = None,
    notes: Mapping[str, str] | None = None,
    command: str = "",
    source: str = "",
    made: str | None = None,
) -> str:
    """Return the report of a solution as one HTML file.

    Parameters
    ----------
    solution : Solution
    verdict : Verdict, optional
        What `codesign.verify` returned, where it was run.
    sensitivities : Sensitivities, optional
        Of `codesign.sensitivities`.
    trade : sequence of Trade
        Trade-off curves of `codesign.study.trade`.
    cost : LeastCost, optional
        Where the solution is that of `codesign.least_cost`.
    plain : PlainLight, optional
        Of `codesign.study.plain_light`, to compare with.
    notes : mapping, optional
        Why a part ("sensitivities", "trade-off heat") is not there.
    command : str
        Command line that makes the report again.
    source : str
        Text of the problem file; read again by default.
    made : str, optional
        Date, today by default.

    Returns
    -------
    str
        A whole page without references to anything outside it.

    Examples
    --------
    >>> from codesign import load_problem, solve
    >>> report_html(solve(load_problem("yellow-stain")))[:15]
    '<!DOCTYPE html>'
    """
    return page(
        Subject(
            problem=solution.problem,
            performance=solution.recipe,
            solution=solution,
            verdict=verdict,
            sensitivities=sensitivities,
            trade=tuple(trade),
            cost=cost,
            plain=plain,
            notes=dict(notes or {}),
            command=command,
            source=source,
            made=_today() if made is None else made,
        )
    )


def check_html(
    problem: Problem, performance: Performance, *, command: str = "", source: str = "", made: str | None = None
) -> str:
    """Return the report of a recipe that somebody typed as one HTML file; parameters as in `report_html`."""
    made = _today() if made is None else made
    return page(Subject(problem=problem, performance=performance, notes={}, command=command, source=source, made=made))


def write_report(path: str | Path, solution: Solution, **parts: Any) -> None:
    """Write the report of a solution to a file, whole or not at all; ``parts`` are those of `report_html`."""
    write_file(path, report_html(solution, **parts))


def _today() -> str:
    return datetime.date.today().isoformat()


# --- the page --------------------------------------------------------------------------------------------------


def page(subject: Subject) -> str:
    """Put the page together."""
    live = _live(subject)
    sections = list(_sections(subject, live))
    styles = [css_properties() + _asset("report.css") + _running_title(subject), *([live.css] if live else [])]
    scripts = list(live.scripts) if live else []
    head = element(
        "head",
        element("meta", charset="utf-8"),
        element("meta", http_equiv="Content-Security-Policy", content=trusted(policy(styles, scripts))),
        element("meta", name="viewport", content="width=device-width, initial-scale=1"),
        element("meta", name="referrer", content="no-referrer"),
        element("meta", name="color-scheme", content="light dark"),
        element("title", f"{subject.problem.spec.title}: light recipe"),
        (trusted(f"<style>{style}</style>") for style in styles),
    )
    body = element(
        "body",
        element("a", "Skip to the recipe", href="#recipe", class_="skip"),
        _header(subject),
        element(
            "main",
            glance(subject),
            _contents(sections),
            element("div", (_framed(section) for section in sections), class_="sections"),
        ),
        _footer(),
        data_block("live-data", live.data) if live and live.data else None,
        (trusted(f"<script>{script}</script>") for script in scripts),
    )
    return f"<!DOCTYPE html>\n{element('html', head, body, lang='en')}\n"


def policy(styles: list[str], scripts: list[str]) -> str:
    """Return a content security policy under which only these styles and scripts work, and nothing is fetched."""
    allowed = "".join(
        f"; {kind}-src {' '.join(map(content_hash, texts))}"
        for kind, texts in (("style", styles), ("script", scripts))
        if texts
    )
    return f"default-src 'none'{allowed}; img-src data:; base-uri 'none'; form-action 'none'"


def _sections(subject: Subject, live: LiveFragment | None) -> Iterator[Section]:
    yield from filter(None, (make(subject) for make in BEFORE_LIVE))
    if live is not None:
        yield Section(id="live", title="Try it", short="Try it", body=trusted(live.html), screen_only=True)
    yield from filter(None, (make(subject) for make in AFTER_LIVE))


def _framed(section: Section) -> Html:
    if section.screen_only:  # brings its own heading
        return element("div", section.body, class_="screen-only")
    heading = element("h2", section.title, id=f"{section.id}-title")
    return element("section", heading, section.body, id=section.id, aria_labelledby=f"{section.id}-title")


def _header(subject: Subject) -> Html:
    kind = "Light recipe" if subject.solution is not None else "Light recipe, as typed"
    about = (name(subject.problem.where), f", {subject.made}" if subject.made else None)
    return element(
        "header",
        paragraph(kind, element("span", about, class_="about"), class_="kind"),
        element("h1", name(subject.problem.spec.title)),
    )


def _contents(sections: list[Section]) -> Html:
    links = (element("li", element("a", section.short, href=f"#{section.id}")) for section in sections)
    return element("nav", element("ol", links), aria_label="Contents")


def _footer() -> Html:
    return element(
        "footer",
        paragraph(
            f"Made by codesign {codesign.__version__}. Predictions of a model; they rest on what the section "
            "Assumptions lists. Local codes and licensed practice decide what is safe."
        ),
    )


def _live(subject: Subject) -> LiveFragment | None:
    if subject.solution is None:
        return None
    from codesign.report.page.live import live_fragment

    return live_fragment(subject.solution)


def _running_title(subject: Subject) -> str:
    """Head and foot of printed pages; the title is the only text somebody typed in any style."""
    title = output.plain(subject.problem.spec.title)
    short = title if len(title) <= LONGEST_RUNNING_TITLE else title[: LONGEST_RUNNING_TITLE - 1] + "…"
    return f"@page{{@top-left{{content:{css_string(short)}}}}}"


@cache
def _asset(file: str) -> str:
    return resources.files("codesign.report.page").joinpath("assets", file).read_text(encoding="utf-8")
