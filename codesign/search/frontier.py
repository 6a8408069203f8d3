"""The certified optimum of one configuration, by walking its noise frontier.

``H(v)``, the least signal-dependent variance at signal ``v``, is convex. One convex program at slope θ touches it
at one point: a feasible recipe (so a CNR that is reached) and a line below it (so a bound that is proven). The
largest value of ``v²/(c + lines)`` says where the next line is worth most; the walk ends when bound and best
recipe agree to the gap asked for. Unlike branching on boxes, no line is ever thrown away.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from codesign.certificate import Curves, Line, Proof, bound, curves, envelope, no_exposure, signal_ceiling
from codesign.program import Array, Program, contrast_to_noise, variance
from codesign.search.bounds import no_prices
from codesign.search.relaxation import ConvexSlice

#: A frontier walk needs 3 to 8 lines; this stops a stalled one, whose honest gap is then reported.
LARGEST_NUMBER_OF_LINES = 60
#: Rounds of bringing in columns for one convex program.
LARGEST_NUMBER_OF_PRICINGS = 20
#: Share by which a signal ceiling may be too high.
LOOSE_CEILING = 0.1
#: LEDs to start with by each of three scores.
COLUMNS_BY_EACH_SCORE = 3


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


@dataclass(frozen=True, slots=True)
class Hint:
    """Where to start: multipliers of a signal ceiling, LEDs worth having and a likely CNR; all only suggestions."""

    ceiling: Line
    leds: np.ndarray
    promise: float


class _Walk:
    """Lines and touching points collected so far, over a growing set of columns."""

    def __init__(self, program: Program, tolerance: float, hint: Hint | None) -> None:
        self.program = program
        self.tolerance = tolerance
        self.columns = promising_columns(program) if hint is None else np.flatnonzero(np.isin(program.led, hint.leds))
        self.slice = ConvexSlice(program, self.columns)
        self.lines: list[Line] = []
        self.curves: Curves | None = None
        self.touch: list[tuple[float, float]] = []  # (signal, signal-dependent variance)
        self.best = -np.inf
        self.point = np.append(np.zeros(program.segments), program.time_low)
        self.offer(self.point)
        self.ceiling = self.priced(None) if hint is None else hint.ceiling
        self.touch.clear()  # neither of the two points is on the frontier
        self.limit = float(signal_ceiling(program, self.ceiling)[0])

    def offer(self, y: Array) -> None:
        """Take a feasible point: keep it if it is the best, and remember where it touches the frontier."""
        value = float(contrast_to_noise(self.program, y[None])[0])
        spread = float(variance(self.program, y[None])[0] - self.program.floor[0])
        self.touch.append((float(self.program.signal[0] @ y), spread))
        if value > self.best:
            self.best, self.point = value, y

    def priced(self, theta: float | None, slack: float | None = None) -> Line:
        """Solve at slope ``theta``, bringing in columns until none left out could matter.

        ``slack`` is the share by which those left out may matter in sum.
        """
        if slack is None:  # a loose ceiling costs little: lines and parabolas bend the bound down well before it
            slack = LOOSE_CEILING if theta is None else self.tolerance
        for _ in range(LARGEST_NUMBER_OF_PRICINGS):
            line, y = self.slice.solve(theta)
            gain = self._gain_outside(line, theta)
            spread = (
                abs(float(self.program.signal[0] @ y)) if theta is None else float(variance(self.program, y[None])[0])
            )
            if gain.sum() <= slack * spread:
                break
            led = self.program.led
            by_led = np.bincount(led, gain, minlength=self.program.heat_cap.size)
            chosen = by_led >= max(0.2 * by_led.max(), 1e-300)
            self.columns = np.union1d(self.columns, np.flatnonzero(chosen[led]))
            self.slice = ConvexSlice(self.program, self.columns)
        self.offer(y)
        return line

    def _gain_outside(self, line: Line, theta: float | None) -> Array:
        """What each column left out could lower the line by, at most. (n,)"""
        program = self.program
        cost = -program.signal[0] if theta is None else program.shot[0] - theta * program.signal[0]
        if theta is not None:
            cost = cost + 2 * line.noise[0] @ program.noise_rows[0]
        cost = (cost + line.limit[0] @ program.rows[0])[:-1]
        gain = np.maximum(-cost, 0.0) * program.width * program.time_high[0]
        gain[self.columns] = 0.0
        return gain

    def add(self, theta: float) -> None:
        """Touch the frontier at slope ``theta``."""
        self.lines.append(self.priced(theta))
        own = curves(self.program, tuple(self.lines[-1:]))
        self.curves = own if self.curves is None else self.curves.joined(own)

    def hopeless(self) -> bool:
        """Whether no recipe has any signal of the wanted sign: then an exact ceiling is the whole proof."""
        if self.best > 0:
            return False
        touched = len(self.touch)
        exact = self.priced(None, slack=0.0)
        del self.touch[touched:]
        # Without light of the wanted sign no price at all is exactly right.
        for ceiling in (exact, no_prices(self.program)):
            limit = float(signal_ceiling(self.program, ceiling)[0])
            if limit < self.limit:
                self.ceiling, self.limit = ceiling, limit
        return self.best <= 0

    def peak(self) -> tuple[float, float]:
        """Present bound and the signal at which it is reached."""
        value, v = envelope(self.program.floor, np.array([self.limit]), self.curves)
        return float(value[0]), float(v[0])

    def next_slope(self, v: float) -> float | None:
        """Slope that tests the stretch around ``v`` between the nearest points already touched; None: no such slope.

        Best is the slope of the chord of the level curve ``v²/CNR²`` over the stretch, as long as it lies between the
        slopes that touched its ends; the chord of the frontier itself always does.
        """
        touch = sorted(zip(self.touch, (float(line.theta[0]) for line in self.lines), strict=True))
        below, flattest = max((p for p in touch if p[0][0] <= v * (1 - 1e-9)), default=((0.0, 0.0), 0.0))
        above, steepest = min((p for p in touch if p[0][0] > v * (1 + 1e-9)), default=(None, np.inf))
        if above is None:
            level = (below[0] + max(self.limit, v)) / max(self.best, 1e-300) ** 2
            return max(level, 2.0 * max(flattest, 1e-300))
        slope = (below[0] + above[0]) / max(self.best, 1e-300) ** 2
        # Slopes may differ by many powers of ten: an end is left by a share of the smaller one.
        margin = 1e-6 * min(steepest - flattest, flattest)
        if not flattest + margin < slope < steepest - margin:
            slope = (above[1] - below[1]) / (above[0] - below[0])
        return slope if flattest + margin < slope < steepest - margin else None


def promising_columns(program: Program) -> np.ndarray:
    """Segments of the LEDs worth starting with: most signal, and least noise per signal."""
    signal = np.maximum(program.signal[0, :-1], 0.0)
    reach = signal * program.width
    leds = program.heat_cap.size
    light = np.bincount(program.led, reach, minlength=leds)
    square = np.einsum("rn,rn->n", program.noise_rows[0][:, :-1], program.noise_rows[0][:, :-1])
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        clean = np.where(reach > 1e-6 * max(reach.max(initial=0.0), 1e-300), signal**2 / (square + 1e-300), 0.0)
        shot = np.where(reach > 1e-6 * max(reach.max(initial=0.0), 1e-300), signal / program.shot[0, :-1], 0.0)
    chosen = np.zeros(leds, dtype=bool)
    for score in (light, _best_of(program.led, clean, leds), _best_of(program.led, shot, leds)):
        chosen[np.argsort(-score)[:COLUMNS_BY_EACH_SCORE]] = True
    return np.flatnonzero(chosen[program.led])


def _best_of(led: np.ndarray, score: Array, leds: int) -> Array:
    best = np.zeros(leds)
    np.maximum.at(best, led, np.nan_to_num(score))
    return best


def certify(program: Program, gap: float = 1e-3, target: float = 0.0, hint: Hint | None = None) -> Certified:
    """Best recipe of one program with a bound at most ``gap`` above it, or above ``target`` if that is larger.

    Parameters
    ----------
    program : Program
        Exactly one program (P = 1).
    gap : float
        Relative gap to prove. [1]
    target : float
        CNR already reached elsewhere: the walk stops early once this program cannot beat it.
    hint : Hint, optional
        Where to start, from a cheaper bound.
    """
    if no_exposure(program)[0]:
        dark = np.append(np.zeros(program.segments), program.time_low)
        return Certified(point=dark, value=0.0, bound=0.0, proof=Proof(ceiling=no_prices(program), lines=()))
    walk = _Walk(program, 0.05 * gap, hint)
    if walk.limit <= 0:
        proof = Proof(ceiling=walk.ceiling, lines=())
        return Certified(point=walk.point, value=walk.best, bound=0.0, proof=proof)
    likely = max(walk.best, hint.promise if hint is not None else 0.0, 1e-3 * target, 1e-12)
    walk.add(2 * walk.limit / likely**2)
    proven = None
    for _ in range(0 if walk.hopeless() else LARGEST_NUMBER_OF_LINES):
        proven, v = walk.peak()
        if proven <= max(walk.best, target) * (1 + gap):
            break
        slope = walk.next_slope(v)
        if slope is None:
            break
        walk.add(slope)
        proven = None
    proof = Proof(ceiling=walk.ceiling, lines=tuple(walk.lines))
    if proven is None:
        proven = float(bound(program, proof)[0])
    return Certified(point=walk.point, value=walk.best, bound=proven, proof=proof)
