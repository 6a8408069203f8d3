"""The frontier walk of many programs side by side: rough multipliers, tight bounds.

Each round touches the noise frontier of every program still open at one more slope, chosen where its own bound
peaks, with the batched interior point. It is `codesign.search.frontier` in array form, for bounds only.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from codesign.certificate import Line, Proof, curves, envelope, signal_ceiling
from codesign.program import Array, Program, contrast_to_noise, variance
from codesign.search.interior import relax

#: Multipliers good to some 1e-5 are enough here.
ROUGH = {"iterations": 16, "tolerance": 1e-6, "exact": False, "columns": 24}
#: First slope in units of U/Γ²: drops most programs of catalogues of 40,000 configurations.
FIRST_SLOPE = 1.7
#: Relative distance of bound and value of a relaxation that is near enough for ordering the next rung.
SETTLED = 2e-3


@dataclass(slots=True)
class Tightening:
    """Bounds of P programs and what they were made from.

    ``lines`` hold the multipliers, ``touch`` the (signal, signal-dependent variance) at which each line touched,
    ``own`` the CNR the points reached, ``lit`` (P, L) the LEDs lit in them.
    """

    program: Program
    ceiling: Line
    top: Array
    own: Array
    lines: list[Line]
    touch: list[tuple[Array, Array]]
    lit: np.ndarray
    bound: Array
    peak: Array

    @classmethod
    def start(cls, program: Program, target: float) -> Tightening:
        """Signal ceiling and first line of every program.

        With a CNR Γ already reached, the slope lies between the chord of the level curve ``v²/Γ²`` up to the ceiling U
        and its tangent there, U/Γ² and 2 U/Γ²: such a line drops most programs at once.
        """
        highest = relax(program, None, **ROUGH)
        own = np.maximum(contrast_to_noise(program, highest.point), max(1e-3 * target, 1e-12))
        top = np.maximum(signal_ceiling(program, highest.line), 0.0)
        state = cls(
            program=program, ceiling=highest.line, top=top, own=own, lines=[], touch=[],
            lit=np.zeros((program.size, program.heat_cap.size), dtype=bool),
            bound=np.full(program.size, np.inf), peak=top,
        )  # fmt: skip
        state.add(np.maximum(top, 1e-300) * (2 / own**2 if target <= 0 else FIRST_SLOPE / np.maximum(own, target) ** 2))
        # The same multipliers once more, with the parabola reaching up to the ceiling.
        state.lines.append(replace(state.lines[0], anchor=np.maximum(top, 1e-300)))
        state.touch.append(state.touch[0])
        state.update()
        return state

    @classmethod
    def resume(cls, program: Program, proof: Proof, target: float) -> Tightening:
        """Go on from multipliers of programs much like these; nothing is taken for granted but that they are finite."""
        lines = list(proof.lines)
        found, top = curves(program, proof.lines), np.maximum(signal_ceiling(program, proof.ceiling), 0.0)
        touch: list[tuple[Array, Array]] = []
        for k, line in enumerate(lines):  # where a line touched is its anchor; a line repeated touched where it did
            again = line.theta == lines[k - 1].theta if k else np.zeros(program.size, dtype=bool)
            own = line.anchor, found.theta[:, k] * line.anchor + found.alpha[:, k]
            touch.append(
                tuple(np.where(again, last, now) for last, now in zip(touch[-1] if k else own, own, strict=True))
            )
        state = cls(
            program=program, ceiling=proof.ceiling, top=top, own=np.full(program.size, max(1e-3 * target, 1e-12)),
            lines=lines, touch=touch, lit=np.zeros((program.size, program.heat_cap.size), dtype=bool),
            bound=np.full(program.size, np.inf), peak=top,
        )  # fmt: skip
        state.bound, state.peak = envelope(program.floor, top, found)
        return state

    def add(self, theta: Array) -> None:
        """Touch every program's frontier at its slope ``theta`` (P,)."""
        program = self.program
        found = relax(program, theta, **ROUGH)
        self.lines.append(found.line)
        signal = np.einsum("pn,pn->p", program.signal, found.point)
        self.touch.append((signal, variance(program, found.point) - program.floor))
        self.own = np.maximum(self.own, contrast_to_noise(program, found.point))
        share = np.abs(program.signal * found.point)[:, :-1]
        bright = share > 1e-2 * share.max(axis=1, keepdims=True, initial=1e-300)
        np.logical_or.at(self.lit, (slice(None), program.led), bright)

    def update(self) -> None:
        """Work out the bounds anew and where they peak."""
        self.bound, self.peak = envelope(self.program.floor, self.top, curves(self.program, tuple(self.lines)))

    def round(self, target: float) -> None:
        """Add one line where each program's bound peaks."""
        self.add(self.next_slopes(target))
        self.update()

    def settled(self, target: float) -> np.ndarray:
        """Where further lines cannot matter: a point of the relaxation itself beats the target, near its bound."""
        return (self.own > target) & (self.bound <= self.own * (1 + SETTLED))

    def next_slopes(self, target: float) -> Array:
        """As `_Walk.next_slope` of the frontier, for all programs: chord of the level curve, or of the frontier."""
        signal = np.stack([v for v, _ in self.touch], axis=1)
        spread = np.stack([h for _, h in self.touch], axis=1)
        theta = np.stack([line.theta for line in self.lines], axis=1)
        v = self.peak[:, None]
        low = np.where(signal <= v * (1 - 1e-9), signal, -1.0)
        high = np.where(signal > v * (1 + 1e-9), signal, np.inf)
        a, b, row = np.argmax(low, axis=1), np.argmin(high, axis=1), np.arange(len(v))
        has_low, has_high = low[row, a] >= 0, np.isfinite(high[row, b])
        v_low, h_low = np.where(has_low, signal[row, a], 0.0), np.where(has_low, spread[row, a], 0.0)
        flattest = np.where(has_low, theta[row, a], 0.0)
        v_high = np.where(has_high, signal[row, b], np.maximum(self.top, self.peak))
        steepest = np.where(has_high, theta[row, b], np.inf)
        level = (v_low + v_high) / np.maximum(self.own, target) ** 2
        with np.errstate(over="ignore"):  # clipped below
            chord = (spread[row, b] - h_low) / np.maximum(v_high - v_low, 1e-300)
        inside = (level > flattest) & (level < steepest)
        between = np.where(inside, level, np.clip(chord, flattest, steepest))
        return np.maximum(np.where(has_high, between, np.maximum(level, 2 * flattest)), 1e-300)

    def proof(self) -> Proof:
        """Multipliers behind the bounds."""
        return Proof(ceiling=self.ceiling, lines=tuple(self.lines))

    def take(self, index: np.ndarray) -> Tightening:
        """Go on with some of the programs."""
        return Tightening(
            program=self.program.take(index), ceiling=self.ceiling.take(index), top=self.top[index],
            own=self.own[index], lines=[line.take(index) for line in self.lines],
            touch=[(v[index], h[index]) for v, h in self.touch], lit=self.lit[index],
            bound=self.bound[index], peak=self.peak[index],
        )  # fmt: skip
