"""How sure the result is, and what else comes close."""

from __future__ import annotations

from codesign.report.layout import number, percent
from codesign.report.page.content import Section, Subject, quantity, state
from codesign.report.page.html import (
    Content,
    Html,
    element,
    joined,
    listed,
    name,
    paragraph,
    settings,
    table,
)

#: What no proof can say.
NOT_SAID = (
    "Spectra, data-sheet values and rig are taken as stated. A wrong one gives a right answer to another question.",
    "Light on paths the problem does not mention (reflections of the housing, fluorescence, stray light in the lens) "
    "is not in it.",
    "Parts stray from their data sheets: the section on sensitivities says which of them matter; cnr tolerance works "
    "out the share of rigs that hold up.",
)


def proof(subject: Subject) -> Section:
    """What is proven, in words and numbers."""
    body = _of_a_search(subject) if subject.solution is not None else _of_a_typed_recipe(subject)
    body = [*body, element("h3", "What this does not say"), listed(NOT_SAID)]
    return Section(id="proof", title="How sure it is", short="How sure", body=joined(body))


def _of_a_typed_recipe(subject: Subject) -> list[Html]:
    return [
        paragraph(
            "The figures are those of the same forward model that a search is checked against: light of each LED at "
            "the junction temperature it comes to, surfaces, filter, lens, sensor, noise term by term. The recipe was "
            "taken as typed; nothing was searched, so better ones may exist."
        )
    ]


def _of_a_search(subject: Subject) -> list[Html]:
    solution = subject.solution
    assert solution is not None
    certificate, loss = solution.certificate, solution.rounding_loss
    below = f"{percent(loss, least=1e-6)} below it" if loss > 0 else "at it"
    stopped = solution.status != "proven"
    rows: list[tuple[Content, Content]] = [
        ("bound", f"no setting of the candidates has a CNR above {number(certificate.bound, 6)}"),
        ("recipe", f"CNR {number(solution.recipe.cnr, 6)} in settable steps, {below}"),
        (
            "before rounding",
            f"CNR {number(certificate.value, 6)}; bound and value are {percent(certificate.gap, least=1e-6)} apart",
        ),
        (
            "searched",
            f"{certificate.configurations} configurations in {solution.seconds:.1f} s; {certificate.certified} of them "
            f"worked through in full, {certificate.refined} tightened with multipliers, the others closed by a formula",
        ),
        (
            "junctions",
            "temperatures assumed in the proof and reached by the recipe agree within "
            f"{number(max(certificate.junction_residual_k, 1e-3), 2)} K, which moves the CNR by "
            f"{percent(max(certificate.cnr_residual, 1e-6))}",
        ),
        (
            "two ways",
            "the optimiser's arrays and the forward model, which integrate the light in two ways, agree within "
            f"{max(certificate.forward_residual, 1e-15):.0e} of the CNR",
        ),
    ]
    return [
        *_of_least_cost(subject),
        *([_stopped(certificate.gap)] if stopped else []),
        paragraph(
            "A configuration is one choice of camera, channel, gain, filter, f-number, pulse rating and sign of the "
            "contrast; in each, all currents and exposures within the limits are allowed at once. For every "
            "configuration an upper bound on the CNR was worked out from multipliers that anybody can put into the "
            "same inequality and add up again: no solver has to be trusted, only arithmetic. None of the bounds is "
            "above the figure below; what the recipe lacks of it stands beside it."
        ),
        settings(rows, class_="pairs wide"),
        _checked(subject),
    ]


def _stopped(gap: float) -> Html:
    return paragraph(
        state("Stopped early", "near"),
        f": the search ended before the gap asked for was reached. What is proven is a gap of {percent(gap)}; a better "
        "recipe within it may exist.",
    )


def _checked(subject: Subject) -> Html:
    verdict = subject.verdict
    if verdict is None:
        return paragraph("The proof was not worked out a second time for this report: --verify does.", class_="more")
    return paragraph(
        state("Checked", "met"),
        f": for this report the bounds of all {verdict.configurations} configurations were worked out again from the "
        f"problem up, {verdict.by_kept_multipliers} of them from the multipliers kept and the others in closed form. "
        f"The largest is {number(verdict.largest_bound, 7)}. The recipe was put through the forward model again: it "
        "keeps all limits and has the CNR stated.",
    )


def _of_least_cost(subject: Subject) -> list[Html]:
    cost = subject.cost
    if cost is None:
        return []
    return [
        paragraph(
            f"Asked for: the least {cost.quantity} that reaches CNR {cost.required_cnr:g}. Found: ",
            element("strong", quantity(cost.value, cost.unit, 6)),
            f"; proven that none does with {quantity(cost.bound, cost.unit, 6)} or less ({cost.status}). The recipe is "
            f"the one of most CNR at about that {cost.quantity}, which is then among the limits, and the proof below "
            "is of that.",
        )
    ]


def alternatives(subject: Subject) -> Section | None:
    """Certified runners-up with other parts."""
    solution = subject.solution
    if solution is None or not solution.alternatives:
        return None
    best = solution.certificate.value
    rows = [
        (
            (name(a.design.camera), ", ", name(a.design.filter)),
            number(a.cnr),
            f"{100 * (a.cnr / best - 1):+.1f} %",
            f"{a.design.gain_db:g} dB, f/{a.design.f_number:g}",
            f"{number(a.design.exposure_us)} µs",
            _lit(a.design.drive_ma),
        )
        for a in sorted(solution.alternatives, key=lambda a: -a.cnr)
    ]
    header = ("camera, filter", "CNR", "change", "gain, f-number", "exposure", "LEDs lit")
    body = (
        paragraph(
            "The best that other cameras or filters of the candidates can do, each with its own best currents and "
            "exposure, before rounding to setting steps. Worth a look where a part is hard to get or dear."
        ),
        table(
            "Runners-up with other parts",
            header,
            rows,
            numbers=(1, 2, 4),
            wide=True,
        ),
    )
    return Section(id="alternatives", title="Alternatives", short="Alternatives", body=joined(body))


def _lit(drive_ma) -> Content:
    lit = [(name(led), f" {number(ma)} mA") for led, ma in drive_ma.items() if ma > 0]
    return [piece for k, pair in enumerate(lit) for piece in ((", ",) if k else ()) + pair]
