"""Figures of what-ifs: a line over one axis, a map with contours over two.

Plain style, legible in black and white and for colour-blind readers: configurations differ by marker and letter, never
by colour alone; the map's colours run evenly in lightness.
"""

from __future__ import annotations

import warnings
from io import BytesIO
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from codesign.errors import ProblemError
from codesign.report.layout import cut
from codesign.report.output import plain
from codesign.report.study_text import configuration_letters, configuration_words, shown_value
from codesign.study.fields import Axis
from codesign.study.vary import Variation

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

#: File formats by ending.
FORMATS = ("svg", "png", "pdf")
#: One marker per configuration, in turn.
MARKERS = "osD^vP*X<>hp"
STYLE = {
    "font.family": "DejaVu Sans", "font.size": 9, "axes.spines.top": False, "axes.spines.right": False,
    "axes.linewidth": 0.8, "axes.titlesize": 10, "axes.titlelocation": "left", "legend.frameon": False,
    "legend.fontsize": 8, "svg.hashsalt": "codesign", "svg.fonttype": "none", "savefig.dpi": 200,
    "text.parse_math": False,
}  # fmt: skip
INK, PALE = "#1a1a1a", "#8c8c8c"
#: Longest title. [characters]
TITLE = 64
#: Configurations listed beside a figure.
LISTED = 10


def variation_figure(found: Variation, form: str = "svg") -> bytes:
    """Draw a what-if over one or two axes.

    Parameters
    ----------
    found : Variation
    form : {"svg", "png", "pdf"}

    Returns
    -------
    bytes
        Content of the file; the same for the same result.
    """
    if not found.axes:
        raise ProblemError("a figure needs an axis; give --sweep")
    import matplotlib as mpl
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    with mpl.rc_context(STYLE), warnings.catch_warnings():
        # A problem may be named in any script; what the font lacks is a box in print and right in SVG text.
        warnings.filterwarnings("ignore", message=r"Glyph .* missing from font", category=UserWarning)
        figure = Figure(figsize=(6.4, 4.4), layout="constrained")
        FigureCanvasAgg(figure)  # draws without a display
        axes = figure.add_subplot()
        (_draw_map if len(found.axes) == 2 else _draw_line)(figure, axes, found)
        axes.set_title(cut(plain(found.title), TITLE), color=INK)
        content = BytesIO()
        metadata = {"svg": {"Date": None}, "pdf": {"CreationDate": None}}.get(form)
        figure.savefig(content, format=form, metadata=metadata)
    return content.getvalue()


def figure_format(path: str | Path) -> str:
    """File format by the ending of a path. Raises ProblemError for one that is not known."""
    form = Path(path).suffix.lower().removeprefix(".")
    if form not in FORMATS:
        raise ProblemError(f"{path}: ending must be one of .{', .'.join(FORMATS)}")
    return form


def _coordinates(axis: Axis) -> np.ndarray:
    """Numbers where they are numbers, else 0, 1, 2 ..."""
    return np.array(axis.values, dtype=float) if axis.numeric else np.arange(len(axis.values), dtype=float)


def _dress(axes: Axes, axis: Axis, which: str) -> None:
    """Label, ticks and spacing of one axis."""
    getattr(axes, f"set_{which}label")(axis.label)
    if not axis.numeric:
        names = [_short(shown_value(value)) for value in axis.values]
        getattr(axes, f"set_{which}ticks")(_coordinates(axis), names, rotation=20 if which == "x" else 0)
    elif axis.log:
        from matplotlib.ticker import LogLocator, NullFormatter, StrMethodFormatter

        getattr(axes, f"set_{which}scale")("log")
        scale = getattr(axes, f"{which}axis")
        scale.set_major_locator(LogLocator(subs=(1, 2, 5)))
        scale.set_major_formatter(StrMethodFormatter("{x:g}"))
        scale.set_minor_formatter(NullFormatter())


def _short(text: str) -> str:
    return text if len(text) <= 18 else text[:17] + "…"


def _draw_line(figure: Figure, axes: Axes, found: Variation) -> None:
    axis = found.axes[0]
    x, cnr = _coordinates(axis), np.array([point.cnr for point in found.points])
    letters = configuration_letters(found.points)
    style = "-" if axis.numeric else "none"
    axes.plot(x, cnr, color=INK, linewidth=1.2, linestyle=style, zorder=2)
    for index, (configuration, letter) in enumerate(letters.items()):
        own = [k for k, p in enumerate(found.points) if p.possible and p.configuration == configuration]
        words = configuration_words(found.points[own[0]])
        axes.plot(
            x[own], cnr[own], linestyle="none", marker=MARKERS[index % len(MARKERS)], color=INK, markersize=5,
            markerfacecolor="white" if index % 2 else INK, zorder=3,
            label=f"{letter}  {words}" if index < LISTED else None,
        )  # fmt: skip
    _mark_changes(axes, found, x, letters)
    if found.required_cnr is not None:
        axes.axhline(found.required_cnr, color=PALE, linewidth=1, linestyle=(0, (5, 3)), zorder=1)
        axes.annotate(
            f"required CNR {found.required_cnr:g}", (1, found.required_cnr), xycoords=("axes fraction", "data"),
            xytext=(-2, 3), textcoords="offset points", ha="right", color=INK, fontsize=8,
        )  # fmt: skip
    lost = [k for k, point in enumerate(found.points) if not point.possible]
    top = np.nanmax(cnr) if np.isfinite(cnr).any() else 1.0
    axes.set_ylim(0, 1.12 * max(top, found.required_cnr or 0.0))
    if lost:
        axes.plot(
            x[lost], np.zeros(len(lost)), linestyle="none", marker="x", color=INK, markersize=6, clip_on=False,
            label="limits cannot be met",
        )  # fmt: skip
    axes.set_ylabel("CNR")
    _dress(axes, axis, "x")
    _legend(figure, len(letters))


def _mark_changes(axes: Axes, found: Variation, x: np.ndarray, letters: dict[tuple[str, ...], str]) -> None:
    """A thin line where the configuration changes, and the letter of each stretch above it."""
    points = found.points
    starts = [k for k in range(len(points)) if k == 0 or points[k].configuration != points[k - 1].configuration]
    log = found.axes[0].log
    for k in starts:
        if k:
            middle = np.sqrt(x[k - 1] * x[k]) if log else (x[k - 1] + x[k]) / 2
            axes.axvline(middle, color=PALE, linewidth=0.7, linestyle=":", zorder=0)
        end = next((n for n in starts if n > k), len(points)) - 1
        if points[k].possible:
            where = np.sqrt(x[k] * x[end]) if log else (x[k] + x[end]) / 2
            axes.annotate(
                letters[points[k].configuration], (where, 0.97), xycoords=("data", "axes fraction"), ha="center",
                va="top", color=INK, fontsize=9, fontweight="bold",
            )  # fmt: skip


def _legend(figure: Figure, count: int) -> None:
    handles = figure.axes[0].get_legend_handles_labels()
    if handles[0]:
        figure.legend(*handles, loc="outside lower left", title=None, handletextpad=0.4)
    if count > LISTED:
        figure.supxlabel(f"and {count - LISTED} further configurations, see the table", fontsize=8)


def _draw_map(figure: Figure, axes: Axes, found: Variation) -> None:
    down, across = found.axes
    y, x = _coordinates(down), _coordinates(across)
    shape = len(y), len(x)
    cnr = np.array([point.cnr for point in found.points]).reshape(shape)
    letters = configuration_letters(found.points)
    order = {configuration: index for index, configuration in enumerate(letters)}
    kind = np.array([order.get(point.configuration, -1) for point in found.points]).reshape(shape)
    axes.set_facecolor("white")
    edges_x, edges_y = _edges(x, across.log), _edges(y, down.log)
    image = axes.pcolormesh(edges_x, edges_y, np.ma.masked_invalid(cnr), cmap="cividis", rasterized=True)
    figure.colorbar(image, ax=axes, label="CNR", pad=0.02)
    _hatch_lost(axes, edges_x, edges_y, np.isnan(cnr))
    _dress(axes, across, "x")
    _dress(axes, down, "y")
    axes.set_xlim(edges_x[0], edges_x[-1])
    axes.set_ylim(edges_y[0], edges_y[-1])
    taken = _contours(axes, x, y, cnr, found.required_cnr)
    _borders(axes, edges_x, edges_y, kind)
    _letters(axes, _middles(edges_x, across.log), _middles(edges_y, down.log), kind, list(letters.values()), taken)
    _list_configurations(figure, found, letters, bool(np.isnan(cnr).any()))


def _edges(centres: np.ndarray, log: bool) -> np.ndarray:
    """Edges of cells around their centres."""
    if len(centres) == 1:
        return np.array([centres[0] - 0.5, centres[0] + 0.5])
    c = np.log(centres) if log else centres
    inner = (c[1:] + c[:-1]) / 2
    # Half cells at the border: nothing is drawn beyond the points swept, where a field may have no meaning.
    edges = np.concatenate([[c[0]], inner, [c[-1]]])
    return np.exp(edges) if log else edges


def _middles(edges: np.ndarray, log: bool) -> np.ndarray:
    """Middles of cells between their edges."""
    return np.sqrt(edges[1:] * edges[:-1]) if log else (edges[1:] + edges[:-1]) / 2


def _hatch_lost(axes: Axes, edges_x: np.ndarray, edges_y: np.ndarray, lost: np.ndarray) -> None:
    from matplotlib.patches import Rectangle

    for i, j in zip(*np.nonzero(lost), strict=True):
        width, height = edges_x[j + 1] - edges_x[j], edges_y[i + 1] - edges_y[i]
        axes.add_patch(
            Rectangle(
                (edges_x[j], edges_y[i]), width, height, facecolor="white", edgecolor=PALE, hatch="///", linewidth=0
            )
        )


def _contours(axes: Axes, x: np.ndarray, y: np.ndarray, cnr: np.ndarray, required: float | None) -> np.ndarray:
    """Labelled contours, the required CNR thick; returns where the labels stand. (k, 2)"""
    finite = cnr[np.isfinite(cnr)]
    taken: list[tuple[float, float]] = []
    if min(cnr.shape) < 2 or finite.size < 4 or np.ptp(finite) <= 1e-3 * finite.max():
        return np.zeros((0, 2))
    from matplotlib.ticker import MaxNLocator

    low, high, margin = finite.min(), finite.max(), 0.02 * np.ptp(finite)
    levels = [v for v in MaxNLocator(7).tick_values(low, high) if low + margin < v < high - margin]
    shown = np.ma.masked_invalid(cnr)
    if levels:
        taken += _labelled(axes.contour(x, y, shown, levels, colors="white", linewidths=0.9), axes)
    if required is not None and low < required < high:
        thick = axes.contour(x, y, shown, [required], colors="white", linewidths=2.4)
        taken += _labelled(thick, axes, f"required {required:g}")
    return np.array(taken).reshape(-1, 2)


def _labelled(contours: Any, axes: Axes, text: str | None = None) -> list[tuple[float, float]]:
    from matplotlib.patheffects import withStroke

    formats = {level: text or f"{level:g}" for level in contours.levels}
    contours.set_path_effects([withStroke(linewidth=1.8 if text is None else 3.6, foreground=INK)])
    labels = axes.clabel(contours, fmt=formats, fontsize=8, colors="white")
    for label in labels:
        label.set_path_effects([withStroke(linewidth=2, foreground=INK)])
    return [label.get_position() for label in labels]


def _borders(axes: Axes, edges_x: np.ndarray, edges_y: np.ndarray, kind: np.ndarray) -> None:
    """Dashed lines between cells of different configurations."""
    style = {"color": INK, "linewidth": 1.0, "linestyle": (0, (2, 1.5))}
    for i, j in zip(*np.nonzero(kind[:, 1:] != kind[:, :-1]), strict=True):
        axes.plot([edges_x[j + 1]] * 2, edges_y[i : i + 2], **style)
    for i, j in zip(*np.nonzero(kind[1:] != kind[:-1]), strict=True):
        axes.plot(edges_x[j : j + 2], [edges_y[i + 1]] * 2, **style)


def _letters(axes: Axes, x: np.ndarray, y: np.ndarray, kind: np.ndarray, names: list[str], taken: np.ndarray) -> None:
    """The letter of each configuration inside its area, clear of the labels of contours."""
    from matplotlib.patheffects import withStroke

    turn = axes.transAxes.inverted()
    labels = turn.transform(axes.transData.transform(taken)) if len(taken) else np.zeros((0, 2))
    for index, name in enumerate(names):
        rows, columns = np.nonzero(kind == index)
        where = np.stack([x[columns], y[rows]], axis=1)
        place = turn.transform(axes.transData.transform(where))
        off_centre = np.hypot(*(place - place.mean(axis=0)).T)
        near = np.hypot(*(place[:, None] - labels[None]).transpose(2, 0, 1)).min(axis=1, initial=1.0)
        middle = int(np.argmin(off_centre + 10 * np.maximum(0.09 - near, 0.0)))
        axes.annotate(
            name, where[middle], ha="center", va="center", fontsize=10, fontweight="bold", color=INK,
            path_effects=[withStroke(linewidth=2.5, foreground="white")],
        )  # fmt: skip


def _list_configurations(figure: Figure, found: Variation, letters: dict[tuple[str, ...], str], lost: bool) -> None:
    first = {p.configuration: p for p in reversed(found.points) if p.possible}
    lines = [f"{letter}  {configuration_words(first[each])}" for each, letter in list(letters.items())[:LISTED]]
    if len(letters) > LISTED:
        lines.append(f"and {len(letters) - LISTED} further configurations, see the table")
    if lost:
        lines.append("hatched: limits cannot be met")
    figure.supxlabel("\n".join(lines), fontsize=8, x=0.02, ha="left", multialignment="left")
