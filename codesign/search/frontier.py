"""The certified optimum of one configuration, by walking its noise frontier.

``H(v)``, the least signal-dependent variance at signal ``v``, is convex. One convex program at slope θ touches it
at one point: a feasible recipe (so a CNR that is reached) and a line below it (so a bound that is proven). The
largest value of ``v²/(c + lines)`` says where the next line is worth most; the walk ends when bound and best
recipe agree to the gap asked for. Unlike branching on boxes, no line is ever thrown away.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from codesign.certificate import Line, Proof, bound, envelope, intercept, signal_ceiling
from codesign.program import Array, Program, contrast_to_noise, variance
from codesign.search.relaxation import ConvexSlice

#: A frontier walk needs 3 to 8 lines; this stops a stalled one, whose honest gap is then reported.
LARGEST_NUMBER_OF_LINES = 60


@dataclass(frozen=True, slots=True, kw_only=True)
class Certified:
    """Best point of one program, its CNR, the proven bound and the multipliers that prove it."""

    point: Array
    value: float
    bound: float
    proof: Proof

    @property
    def gap(self) -> float:
        """Relative distance of the bound above the value."""
        return self.bound / self.value - 1.0 if self.value > 0 else (0.0 if self.bound <= 0 else np.inf)


class _Walk:
    """Lines and touching points collected so far."""

    def __init__(self, program: Program) -> None:
        self.program = program
        self.slice = ConvexSlice(program)
        self.lines: list[Line] = []
        self.alphas: list[float] = []
        self.touch: list[tuple[float, float]] = []  # (signal, signal-dependent variance)
        self.best = -np.inf
        self.point = np.append(np.zeros(program.segments), program.time_low)
        self.offer(self.point)
        ceiling, top = self.slice.solve(None)
        self.ceiling = ceiling
        self.limit = float(signal_ceiling(program, ceiling)[0])
        self.offer(top)

    def offer(self, y: Array) -> None:
        """Take a feasible point: keep it if it is the best, and remember where it touches the frontier."""
        value = float(contrast_to_noise(self.program, y[None])[0])
        spread = float(variance(self.program, y[None])[0] - self.program.floor[0])
        self.touch.append((float(self.program.signal[0] @ y), spread))
        if value > self.best:
            self.best, self.point = value, y

    def add(self, theta: float) -> None:
        """Touch the frontier at slope ``theta``."""
        line, y = self.slice.solve(theta)
        self.lines.append(line)
        self.alphas.append(float(intercept(self.program, line)[0]))
        self.offer(y)

    def peak(self) -> tuple[float, float]:
        """Present bound and the signal at which it is reached."""
        theta = np.array([[line.theta[0] for line in self.lines]])
        value, v = envelope(self.program.floor, np.array([self.limit]), theta, np.array([self.alphas]))
        return float(value[0]), float(v[0])

    def next_slope(self, v: float) -> float:
        """Slope that tests the stretch around ``v`` between the nearest points already touched."""
        floor = float(self.program.floor[0])
        below = max((p for p in self.touch if p[0] <= v), default=(0.0, 0.0))
        above = min((p for p in self.touch if p[0] > v), default=None)
        thetas = sorted(float(line.theta[0]) for line in self.lines)
        lines = np.array([a + t * v for a, t in zip(self.alphas, [float(x.theta[0]) for x in self.lines], strict=True)])
        active = float(self.lines[int(np.argmax(lines))].theta[0]) if lines.size and lines.max() > 0 else 0.0
        low = max((t for t in thetas if t <= active * (1 - 1e-12)), default=0.0)
        high = min((t for t in thetas if t >= active * (1 + 1e-12)), default=np.inf)
        target = max(self.best, 1e-300) ** 2
        end = above if above is not None else (max(self.limit, v), None)
        slope = (below[0] + end[0]) / target
        if not low < slope < high or any(abs(slope - t) <= 1e-9 * t for t in thetas):
            if above is not None and above[0] > below[0]:
                slope = (above[1] - below[1]) / (above[0] - below[0])
            else:
                slope = 2.0 * max(thetas[-1], (floor + below[1]) / max(v, 1e-300))
        return slope


def certify(program: Program, gap: float = 1e-3, target: float = 0.0) -> Certified:
    """Best recipe of one program with a bound at most ``gap`` above it, or above ``target`` if that is larger.

    Parameters
    ----------
    program : Program
        Exactly one program (P = 1).
    gap : float
        Relative gap to prove. [1]
    target : float
        CNR already reached elsewhere: the walk stops early once this program cannot beat it.
    """
    walk = _Walk(program)
    if walk.limit <= 0:
        proof = Proof(ceiling=walk.ceiling, lines=())
        return Certified(point=walk.point, value=walk.best, bound=0.0, proof=proof)
    first = max(walk.best, target * 1e-3, 1e-300) ** 2
    for theta in (2 * walk.limit / first, walk.limit / first):
        walk.add(theta)
    for _ in range(LARGEST_NUMBER_OF_LINES):
        value, v = walk.peak()
        if value <= max(walk.best, target) * (1 + gap):
            break
        slope = walk.next_slope(v)
        if any(abs(slope - float(x.theta[0])) <= 1e-10 * slope for x in walk.lines):
            break
        walk.add(slope)
    proof = Proof(ceiling=walk.ceiling, lines=tuple(walk.lines))
    return Certified(point=walk.point, value=walk.best, bound=float(bound(program, proof)[0]), proof=proof)
