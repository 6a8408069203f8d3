"""A family as plain text: how many variants are served, the worst of them, and the rigs that recur."""

from __future__ import annotations

import itertools
from collections import Counter
from collections.abc import Iterable, Sequence

import numpy as np

from codesign.family.batch import Entry, OwnRigs
from codesign.family.outcome import Outcome
from codesign.report.layout import NARROWEST, bar, bullet, counted, heading, labelled, number, percent, table
from codesign.report.output import plain

#: Variants shown, those worst off first; the table for the line controller has all.
MOST_ROWS = 16
#: Parts named of a kind, and failures explained.
MOST_PARTS, MOST_FAILURES = 6, 20
#: What the mark beside a CNR needed says.
MISSED = "! the recipe misses the CNR needed"
#: Classes of the distribution, about.
CLASSES = 8


def own_rigs_text(found: OwnRigs, width: int = 80) -> str:
    """Return the own best rig of each variant as plain text.

    Parameters
    ----------
    found : OwnRigs
    width : int
        Page width, at least 60. [characters]
    """
    width = max(width, NARROWEST)
    lines = [heading(plain(found.title), width), *_summary(found, width)]
    if found.solved:
        lines += ["", *_distribution(found.solved, width), "", *_worst(found.solved, width)]
        lines += ["", *_recurring([entry.outcome for entry in found.solved], width), "", *_sure(found, width)]
    lines += failures(found.failed, width)
    return "\n".join(line.rstrip() for line in lines) + "\n"


def failures(entries: Sequence[Entry], width: int) -> list[str]:
    """Variants without a recipe, and why."""
    if not entries:
        return []
    lines = ["", heading(f"{counted(len(entries), 'variant')} without a recipe", width)]
    for entry in entries[:MOST_FAILURES]:
        reason = plain(entry.outcome.reason)
        # Messages that name the row name the variant too.
        named = reason if entry.outcome.reason.startswith(entry.variant.where) else f"{plain(entry.name)}: {reason}"
        lines += bullet(named, width)
    if len(entries) > MOST_FAILURES:
        lines += bullet(f"and {len(entries) - MOST_FAILURES} others; --json and --csv list all", width)
    return lines


def cnr_words(value: float, digits: int = 4) -> str:
    """A CNR with trailing zeros, so that columns line up."""
    return f"{value:#.{digits}g}" if 1e-3 <= value < 1e3 else number(value, digits)


def need_sentence(entries: Sequence[Entry]) -> str:
    """How many variants reach the CNR they need; empty where none states one."""
    judged = [entry for entry in entries if entry.met is not None]
    if not judged:
        return ""
    needs = sorted({entry.required_cnr for entry in judged})
    span = f"CNR {needs[0]:g}" + (f" to {needs[-1]:g}" if len(needs) > 1 else "")
    return f"{sum(entry.met for entry in judged)} of {len(judged)} variants reach the CNR they need ({span})"


def by_need(entry: Entry) -> float:
    """What orders variants from the worst off: CNR as a multiple of what is needed, else the CNR."""
    return entry.outcome.cnr / (entry.required_cnr or 1.0)


def _summary(found: OwnRigs, width: int) -> list[str]:
    impossible = sum(entry.outcome.status == "impossible" for entry in found.entries)
    bad = len(found.failed) - impossible
    parts = [f"{len(found.entries)}, each with the rig best for it: {len(found.solved)} solved"]
    parts += [f"{impossible} whose limits cannot be met"] if impossible else []
    parts += [f"{bad} that failed"] if bad else []
    lines = labelled("variants", ", ".join(parts), width)
    need = need_sentence(found.solved)
    return lines + (labelled("required", need, width) if need else [])


def _distribution(entries: Sequence[Entry], width: int) -> list[str]:
    values = np.array([entry.outcome.cnr for entry in entries])
    worst, best = (pick(entries, key=lambda e: e.outcome.cnr) for pick in (min, max))
    lines = [heading("CNR of the recipes", width)]
    text = f"from {cnr_words(values.min())} ({plain(worst.name)}) to {cnr_words(values.max())} ({plain(best.name)})"
    if len(entries) > 2:
        text += f"; half of them above {cnr_words(float(np.median(values)))}"
    lines += labelled("range", text, width)
    edges = _edges(values)
    if len(entries) < CLASSES or len(edges) < 3:
        return lines
    counts, _ = np.histogram(values, edges)
    names = [f"{low:g} to {high:g}" for low, high in itertools.pairwise(edges)]
    size = max(map(len, names))
    for name, count in zip(names, counts, strict=True):
        filled = bar(1.0, round((width - size - 10) * count / counts.max())) if count else ""
        lines.append(f" {name:>{size}}  {count:>4}  {filled}")
    return lines


def _edges(values: np.ndarray) -> np.ndarray:
    """Class limits at round numbers."""
    span = max(values.max() - values.min(), 1e-9 * values.max())
    least = span / (1.6 * CLASSES)
    unit = 10.0 ** np.floor(np.log10(least))
    step = unit * next(multiple for multiple in (1, 2, 5, 10) if unit * multiple >= least)
    first, last = np.floor(values.min() / step), np.floor(values.max() / step) + 1
    return np.round(np.arange(first, last + 1) * step, 10)


def _worst(entries: Sequence[Entry], width: int) -> list[str]:
    ordered = sorted(entries, key=by_need)
    need = any(entry.required_cnr is not None for entry in entries)
    rows = [
        (plain(entry.name), cnr_words(entry.outcome.cnr), *((_needed(entry),) if need else ()), *_rig(entry.outcome))
        for entry in ordered[:MOST_ROWS]
    ]
    header = ("variant", "CNR", *(("needs",) if need else ()), "camera", "filter", "LEDs")
    lines = [heading("worst off first", width), *table(header, rows, width, left=(0, *range(2 + need, 5 + need)))]
    lines += bullet(MISSED, width) if any(entry.met is False for entry in ordered[:MOST_ROWS]) else []
    left = len(entries) - MOST_ROWS
    return lines + (bullet(f"{counted(left, 'other')} not shown; --csv and --json have all", width) if left > 0 else [])


def _needed(entry: Entry) -> str:
    if entry.required_cnr is None:
        return ""
    return f"{entry.required_cnr:g}" + ("" if entry.met else " !")


def _rig(outcome: Outcome) -> tuple[str, str, str]:
    """Camera, filter and LEDs of an outcome in words."""
    channel = "" if outcome.channel == "mono" else f" ({outcome.channel})"
    leds = f"{len(outcome.leds)}: {', '.join(outcome.leds)}" if outcome.leds else "none lit"
    return plain(outcome.camera + channel), outcome.filter, leds


def _recurring(outcomes: Sequence[Outcome], width: int) -> list[str]:
    """Which camera, filter and LEDs serve how many variants."""
    lines = [heading("parts that recur, with the number of variants they serve", width)]
    lines += labelled("camera", _counted(outcome.camera for outcome in outcomes), width)
    lines += labelled("filter", _counted(outcome.filter for outcome in outcomes), width)
    lines += labelled("LEDs", _counted(led for outcome in outcomes for led in outcome.leds), width)
    rigs = Counter((outcome.camera, outcome.filter, tuple(sorted(outcome.leds))) for outcome in outcomes)
    (camera, part, leds), most = rigs.most_common(1)[0]
    text = f"{counted(len(rigs), 'combination')} of camera, filter and LEDs"
    if len(rigs) > 1 and most > 1:
        text += f"; the most frequent serves {most}: {camera}, filter {part}, {' + '.join(leds) or 'no LED'}"
    return lines + labelled("whole rigs", text, width)


def _counted(names: Iterable[str]) -> str:
    counts = Counter(names).most_common()
    shown = ", ".join(f"{plain(name)} {count}" for name, count in counts[:MOST_PARTS])
    more = len(counts) - MOST_PARTS
    return shown + (f" and {counted(more, 'other')}" if more > 0 else "")


def _sure(found: OwnRigs, width: int) -> list[str]:
    proven = [entry.outcome for entry in found.solved if entry.outcome.proven]
    gap = max((outcome.gap for outcome in proven), default=0.0)
    loss = max(1 - entry.outcome.cnr / entry.outcome.bound for entry in found.solved)
    lines = [heading("how sure this is", width)]
    lines += bullet(
        f"each of {len(proven)} optima is proven on its own: no configuration of its candidates has a CNR more than "
        f"{percent(gap, 1e-6)} above it; recipes in whole setting steps are at most {percent(loss, 1e-6)} below the "
        "bound",
        width,
    )
    stopped = len(found.solved) - len(proven)
    if stopped:
        lines += bullet(
            f"for {counted(stopped, 'variant')} the search stopped at a time limit before the gap asked for", width
        )
    return lines
