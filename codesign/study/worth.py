"""What each part is worth: the CNR lost if it were not in stock, and what would take its place.

Each absence is a problem of its own, re-solved and certified. Parts of another catalogue are tried one by one the
other way round: the CNR gained if they were in stock too.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from codesign.catalog import Catalog
from codesign.display import Displayed
from codesign.errors import InfeasibleError, ProblemError
from codesign.problem import Problem
from codesign.problem.choices import JOINT, FilterChoices
from codesign.study.common import Resolved, resolve, without_part
from codesign.study.fields import varied
from codesign.study.stock import KINDS, PartName, extended

if TYPE_CHECKING:
    import pandas as pd


#: Relative gain below which a part does not count as helping: what settings are worked out to.
LEAST_GAIN = 2e-5


@dataclass(frozen=True, slots=True, kw_only=True)
class PartWorth:
    """What the optimum loses without a part it uses (or gains with one it could not use).

    Attributes
    ----------
    kind, id : str
    cnr : float
        Certified optimum without the part (or with it), NaN where there is none.
    bound : float
        No configuration then has more.
    change : float
        CNR lost (or gained), never below 0.
    certain : bool
        Whether the change is larger than what the proofs leave open.
    substitute : tuple of str
        Parts that come in for it (or that it replaces), as "kind id".
    reason : str
        Why nothing is possible without it; empty otherwise.
    """

    kind: str
    id: str
    cnr: float = float("nan")
    bound: float = float("nan")
    change: float = float("nan")
    certain: bool = True
    substitute: tuple[str, ...] = ()
    reason: str = ""


@dataclass(frozen=True, slots=True, kw_only=True, repr=False)
class Worths(Displayed):
    """Worth of each part in use, dearest loss first, and of parts that could be added, greatest gain first.

    ``cnr`` and ``bound`` are those of the problem as it is; ``tried`` counts the parts that were tried as additions.
    """

    title: str
    where: str
    cnr: float
    bound: float
    parts: tuple[PartWorth, ...]
    additions: tuple[PartWorth, ...] = ()
    tried: int = 0

    def table(self) -> pd.DataFrame:
        """One row per part; ``cnr_lost`` for parts in use, ``cnr_gained`` for additions."""
        import pandas as pd

        rows = [
            {
                "kind": part.kind,
                "id": part.id,
                "role": role,
                "cnr": part.cnr,
                "cnr_bound": part.bound,
                key: part.change,
                "certain": part.certain,
                "substitute": "; ".join(part.substitute),
                "reason": part.reason,
            }
            for role, key, listed in (("in use", "cnr_lost", self.parts), ("to add", "cnr_gained", self.additions))
            for part in listed
        ]
        columns = [
            "kind",
            "id",
            "role",
            "cnr",
            "cnr_bound",
            "cnr_lost",
            "cnr_gained",
            "certain",
            "substitute",
            "reason",
        ]
        return pd.DataFrame(rows, columns=columns)


def worth(
    problem: Problem,
    *,
    others: Catalog | None = None,
    near: Resolved | None = None,
    gap: float | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> Worths:
    """Find what each part of the optimum is worth.

    Parameters
    ----------
    problem : Problem
    others : Catalog, optional
        Parts to try as additions, each alone; those that are candidates already, or must not be used, are passed over.
    near : Resolved, optional
        The problem's own result, where it is known.
    gap : float, optional
        Relative gap to prove, the problem's own by default. [1]
    progress : callable, optional
        Called with (parts tried, parts in all).

    Returns
    -------
    Worths

    Raises
    ------
    InfeasibleError
        When the problem itself has no solution.

    Examples
    --------
    >>> from codesign import load_problem
    >>> worth(load_problem("yellow-stain")).parts[0].id
    'mono-5mp'
    """
    whole = resolve(problem, near, gap=gap)
    used = list(parts_in_use(whole))
    new = [] if others is None else list(_new_parts(problem, others))
    found = []
    for kind, name in used:
        found.append(_without(whole, kind, name, gap))
        if progress is not None:
            progress(len(found), len(used) + len(new))
    additions = []
    if new:
        additions = list(_additions(whole, others, new, gap, len(used), progress))
    return Worths(
        title=problem.spec.title,
        where=problem.where,
        cnr=whole.cnr,
        bound=whole.bound,
        parts=tuple(sorted(found, key=lambda part: -part.change if not part.reason else -float("inf"))),
        additions=tuple(sorted(additions, key=lambda part: -part.change)),
        tried=len(new),
    )


def parts_in_use(result: Resolved) -> Iterator[PartName]:
    """Kind and id of every part the optimum uses."""
    design = result.optimum.design
    yield "camera", design.camera
    for name in design.filter.split(JOINT):
        if result.problem.catalog.filters.get(name) is not None:
            yield "filter", name
    for led in result.drive_ma:
        yield "led", led


def _without(whole: Resolved, kind: str, name: str, gap: float | None) -> PartWorth:
    """Re-solve with one part out of stock."""
    problem = whole.problem
    if name in problem.spec.build.must_have:
        return PartWorth(kind=kind, id=name, reason="build.must_have asks for it")
    try:
        rest = resolve(without_part(problem, kind, name), whole, gap=gap)
    except InfeasibleError as error:
        reason = str(error).removeprefix(f"{problem.where}: ")
        return PartWorth(kind=kind, id=name, cnr=0.0, bound=0.0, change=whole.cnr, reason=reason)
    return PartWorth(
        kind=kind,
        id=name,
        cnr=rest.cnr,
        bound=rest.bound,
        change=max(whole.cnr - rest.cnr, 0.0),
        certain=rest.bound < whole.cnr,
        substitute=_newcomers(whole, rest),
    )


def _newcomers(old: Resolved, new: Resolved) -> tuple[str, ...]:
    """Parts in use in the new optimum that the old one did without."""
    before = set(parts_in_use(old))
    found = [f"{kind} {name}" for kind, name in parts_in_use(new) if (kind, name) not in before]
    if new.optimum.design.filter == "none" != old.optimum.design.filter:
        found.append("no filter")
    return tuple(found)


def _new_parts(problem: Problem, others: Catalog) -> Iterator[PartName]:
    """Parts of a catalogue that are no candidates yet."""
    known = {
        "led": {channel.id for channel in problem.channels},
        "filter": {part.id for part in FilterChoices.of(problem.filters).base},
        "camera": {camera.id for camera in problem.cameras},
    }
    for kind in KINDS:
        for name in others.parts(kind):
            if name not in known[kind] and name not in problem.spec.build.must_not:
                yield kind, name


def _additions(whole, others, new, gap, done, progress) -> Iterator[PartWorth]:
    """Parts that raise the CNR when each alone is added."""
    for count, (kind, name) in enumerate(new, start=done + 1):
        try:
            more = resolve(with_part(whole.problem, others, kind, name), whole, gap=gap)
        except (InfeasibleError, ProblemError):
            more = None  # does not fit this problem, e.g. light where the surfaces are not known
        if progress is not None:
            progress(count, done + len(new))
        if more is None or more.cnr <= whole.cnr * (1 + LEAST_GAIN):
            continue
        yield PartWorth(
            kind=kind,
            id=name,
            cnr=more.cnr,
            bound=more.bound,
            change=more.cnr - whole.cnr,
            certain=more.cnr > whole.bound,
            substitute=tuple(
                f"{gone_kind} {gone}"
                for gone_kind, gone in parts_in_use(whole)
                if (gone_kind, gone) not in set(parts_in_use(more))
            ),
        )


def with_part(problem: Problem, others: Catalog, kind: str, name: str) -> Problem:
    """Return a problem with one part of another catalogue among its candidates, and whatever a stack needs."""
    names = [name, *(getattr(others.part(kind, name), "parts", None) or ())]
    own = problem.catalog.parts(kind)
    taken = {each: others.part(kind, each) for each in names if each not in own}
    stock = replace(problem.catalog, **{f"{kind}s": {**own, **taken}})
    key = KINDS[kind]
    choice = extended(getattr(problem.spec.candidates, key), [name])
    return varied(problem, {f"candidates.{key}": choice}, catalog=stock)
