"""What if: a problem with fields set or swept over one or two axes, every point re-solved and certified.

The points are walked in snake order, each started from its neighbour's result. The order is cut into a fixed number
of chains, whatever the number of processes, so that results do not depend on how many of these there are.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

from codesign.display import Displayed
from codesign.errors import CatalogError, InfeasibleError, ProblemError
from codesign.problem import Problem
from codesign.study.common import Resolved, resolve
from codesign.study.fields import Axis, varied
from codesign.study.processes import in_processes

if TYPE_CHECKING:
    import pandas as pd

#: Points of a study at most.
LARGEST_STUDY = 10000
#: Chains the points are cut into, and the least number of points for which it is done.
CHAINS, LEAST_TO_CUT = 2, 8


@dataclass(frozen=True, slots=True, kw_only=True)
class Point:
    """One re-solved problem: the values on the axes and what is best there, before rounding to setting steps.

    ``problem_with`` (empty where there is a result) says why there is none, ``limits`` which limits are in conflict.
    """

    values: tuple[Any, ...]
    cnr: float = float("nan")
    bound: float = float("nan")
    camera: str = ""
    channel: str = ""
    gain_db: float = float("nan")
    filter: str = ""
    f_number: float = float("nan")
    exposure_us: float = float("nan")
    drive_ma: Mapping[str, float] = field(default_factory=dict)
    binding: tuple[str, ...] = ()
    reason: str = ""
    limits: tuple[str, ...] = ()

    @property
    def possible(self) -> bool:
        """Whether the limits can be met."""
        return not self.reason

    @property
    def leds(self) -> tuple[str, ...]:
        """LEDs that are lit."""
        return tuple(self.drive_ma)

    @property
    def configuration(self) -> tuple[str, ...]:
        """What would have to be bought or switched: camera, channel, filter, LEDs."""
        return (self.camera, self.channel, self.filter, *sorted(self.leds))


@dataclass(frozen=True, slots=True, kw_only=True, repr=False)
class Variation(Displayed):
    """Points of a what-if in row-major order of the axes, and the problem as it is.

    Attributes
    ----------
    title, where : str
        Of the problem.
    required_cnr : float or None
    settings : mapping
        Fields set at all points.
    axes : tuple of Axis
        None, one or two.
    base : Point
        The problem unchanged.
    points : tuple of Point
    gap : float
        Relative gap proven at each point. [1]
    """

    title: str
    where: str
    required_cnr: float | None
    settings: Mapping[str, Any]
    axes: tuple[Axis, ...]
    base: Point
    points: tuple[Point, ...]
    gap: float

    def table(self) -> pd.DataFrame:
        """One row per point, units in the column names; a conflict of limits is named in ``reason``."""
        import pandas as pd

        rows = [
            {
                **{axis.key: _plain(value) for axis, value in zip(self.axes, point.values, strict=True)},
                "cnr": point.cnr,
                "cnr_bound": point.bound,
                "camera": point.camera,
                "channel": point.channel,
                "gain_db": point.gain_db,
                "filter": point.filter,
                "f_number": point.f_number,
                "exposure_us": point.exposure_us,
                "drive_ma": "; ".join(f"{led} {ma:.6g}" for led, ma in point.drive_ma.items()),
                "binding": "; ".join(point.binding),
                "reason": point.reason,
            }
            for point in self.points
        ]
        return pd.DataFrame(rows)


def vary(
    problem: Problem,
    settings: Mapping[str, Any] | None = None,
    axes: Sequence[Axis] = (),
    *,
    base: Problem | None = None,
    gap: float | None = None,
    workers: int = 1,
    progress: Callable[[int, int], None] | None = None,
) -> Variation:
    """Re-solve a problem with fields set, or swept over one or two axes.

    Parameters
    ----------
    problem : Problem
        As loaded or built from a table.
    settings : mapping, optional
        Dotted field name to value, at all points; see `codesign.study.fields`.
    axes : sequence of Axis
        At most two; `codesign.study.fields.parse_axis` reads them from text.
    base : Problem, optional
        What "as it is" means; ``problem`` by default.
    gap : float, optional
        Relative gap to prove, the problem's own by default. [1]
    workers : int
        Processes. Results do not depend on it.
    progress : callable, optional
        Called with (points done, points in all).

    Returns
    -------
    Variation

    Raises
    ------
    ProblemError, CatalogError
        When a field or a value on its own cannot be used. Limits in conflict are no error but a point without result.

    Examples
    --------
    >>> from codesign import load_problem
    >>> found = vary(load_problem("yellow-stain"), axes=[Axis("averaging.frames", (1, 4))])
    >>> found.points[1].cnr > found.points[0].cnr
    True
    """
    settings, axes = dict(settings or {}), tuple(axes)
    _check(problem, settings, axes)
    gap = problem.spec.solver.gap if gap is None else gap
    base_point, start = _solve(problem if base is None else base, (), None, gap)
    grid = snake(axes)
    chains = _cut(grid)
    jobs = [(problem, settings, axes, chain, start, gap) for chain in chains]
    total = len(grid)
    if workers > 1 and len(jobs) > 1:
        # The chains are nearly equally long and go side by side, so one tells how far all are.
        solved = in_processes(_chain, jobs, workers, _tick(progress, total, len(jobs)))
    else:
        tick = _tick(progress, total)
        solved = [_chain(*job, tick) for job in jobs]
    found = {place: point for chain in solved for place, point in chain}
    return Variation(
        title=problem.spec.title,
        where=problem.where,
        required_cnr=problem.spec.required_cnr,
        settings=settings,
        axes=axes,
        base=base_point,
        points=tuple(found[place] for place in sorted(found)),
        gap=gap,
    )


def _tick(progress: Callable[[int, int], None] | None, total: int, chains: int = 1) -> Callable[[], None] | None:
    """What to call after each point, ``chains`` of them being solved side by side."""
    done = itertools.count(chains, chains)
    return None if progress is None else lambda: progress(min(next(done), total), total)


def snake(axes: Sequence[Axis]) -> list[tuple[int, ...]]:
    """Places of all points, each a neighbour of the one before."""
    if not axes:
        return [()]
    if len(axes) == 1:
        return [(i,) for i in range(len(axes[0].values))]
    rows, columns = (range(len(axis.values)) for axis in axes)
    return [(i, j) for i in rows for j in (columns if i % 2 == 0 else reversed(columns))]


def _check(problem: Problem, settings: Mapping[str, Any], axes: tuple[Axis, ...]) -> None:
    """Every value on its own must make a problem; combinations that do not are named as points."""
    if len(axes) > 2:
        raise ProblemError(f"{len(axes)} axes, must be two at most")
    keys = [*settings, *(axis.key for axis in axes)]
    repeated = [key for key in keys if keys.count(key) > 1]
    if repeated:
        raise ProblemError(f"{repeated[0]}: is given twice; set or sweep it once")
    count = len(snake(axes))
    if count > LARGEST_STUDY:
        raise ProblemError(f"{count} points, must be {LARGEST_STUDY} at most; take fewer values")
    if settings:
        varied(problem, settings)
    for axis in axes:
        for value in axis.values:
            varied(problem, {**settings, axis.key: value})


def _cut(grid: list[tuple[int, ...]]) -> list[list[tuple[int, ...]]]:
    """Cut the snake into chains of nearly equal length, of whole rows where there are enough."""
    if len(grid) < LEAST_TO_CUT:
        return [grid]
    size = -(-len(grid) // CHAINS)
    return [grid[start : start + size] for start in range(0, len(grid), size)]


def _chain(
    problem: Problem,
    settings: Mapping[str, Any],
    axes: tuple[Axis, ...],
    places: list[tuple[int, ...]],
    start: Resolved | None,
    gap: float,
    tick: Callable[[], None] | None = None,
) -> list[tuple[tuple[int, ...], Point]]:
    """Solve the points of one chain, each from the one before.

    The matrix library keeps to one thread: its threads wait actively, which costs more than they bring on small arrays
    and takes the core from the other chain.
    """
    from threadpoolctl import threadpool_limits

    with threadpool_limits(limits=1, user_api="blas"):
        return _walked(problem, settings, axes, places, start, gap, tick)


def _walked(problem, settings, axes, places, start, gap, tick) -> list[tuple[tuple[int, ...], Point]]:
    found, near = [], start
    for place in places:
        values = tuple(axis.values[k] for axis, k in zip(axes, place, strict=True))
        changes = {**settings, **{axis.key: value for axis, value in zip(axes, values, strict=True)}}
        try:
            point, solved = _solve(varied(problem, changes), values, near, gap)
        except (ProblemError, CatalogError) as error:  # a combination; each value on its own was checked
            point, solved = Point(values=values, reason=_without_file(str(error), problem)), None
        near = solved or near
        found.append((place, point))
        if tick is not None:
            tick()
    return found


def _solve(
    problem: Problem, values: tuple[Any, ...], near: Resolved | None, gap: float
) -> tuple[Point, Resolved | None]:
    """Point of one problem, and where the next may start from."""
    try:
        found = resolve(problem, near, gap=gap)
    except InfeasibleError as error:
        return Point(values=values, reason=_without_file(str(error), problem), limits=error.limits), None
    return point_of(found, values), found


def point_of(found: Resolved, values: tuple[Any, ...]) -> Point:
    """Point of a re-solved problem at the values given."""
    design = found.optimum.design
    return Point(
        values=values,
        cnr=found.cnr,
        bound=max(found.bound, found.cnr),
        camera=design.camera,
        channel=design.channel,
        gain_db=design.gain_db,
        filter=design.filter,
        f_number=design.f_number,
        exposure_us=design.exposure_us,
        drive_ma=found.drive_ma,
        binding=found.binding,
    )


def _without_file(text: str, problem: Problem) -> str:
    return text.removeprefix(f"{problem.where}: ")


def _plain(value: Any) -> Any:
    """A value that fits a table cell."""
    return value if isinstance(value, int | float | str) else "none" if value is None else str(value)
