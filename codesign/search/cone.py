"""The convex programs behind several pairs: one step towards a better worst CNR, or one relaxation over a cell.

For a level Γ, affine noise parts ``e_k(y) = a_k + b_k s_k·y`` and units n_k:

    maximise τ   subject to   d_k·y/Γ − τ n_k ≥ ‖(e_k(y), R_k y)‖ for every pair k, the limits, low_k ≤ s_k·y ≤ high_k.

With chords for ``e_k`` it is a relaxation (τ < 0 proves that no recipe of the cell reaches Γ), with tangents a
restriction (τ > 0 improves on Γ). Second-order cones go straight to the interior-point library. Nothing here needs
trust: `codesign.certificate_pairs` judges the multipliers.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import clarabel
import numpy as np

from codesign.certificate_pairs import Leaf
from codesign.program import Array, Program, row_scale, variance
from codesign.search.relaxation import Columns, feasible, solver_settings

#: Rounds of bringing in columns for one cone program.
LARGEST_NUMBER_OF_PRICINGS = 20


@dataclass(frozen=True, slots=True)
class Step:
    """Solution of one cone program: τ, a feasible point (n+1,) and the multipliers, their level still open."""

    gain: float
    point: Array
    leaf: Leaf


class ConeProgram:
    """Cone programs of one configuration's pairs over a growing set of columns; the limits are put in unit scale once.

    ``tolerance`` is how much τ may lose by the columns left out; the bound accounts for them in any case.
    """

    def __init__(self, programs: Sequence[Program], columns: np.ndarray, tolerance: float) -> None:
        self.programs = programs
        self.columns, self.tolerance = columns, tolerance
        first = programs[0]
        self.column = np.append(first.width, 1.0) * first.time_high[0]
        self.size = row_scale(first)[0]
        self.shot = np.stack([p.shot[0] * self.column for p in programs])
        self.signal = np.stack([p.signal[0] * self.column for p in programs])
        self._turn_noise()
        self.shot_unit = np.maximum(self.shot.max(axis=1), 1e-300)
        self.heat_leds = np.unique(first.led[np.isfinite(first.heat_cap[first.led])])
        self._limits = self._common_limits()

    def _turn_noise(self) -> None:
        """Turn each pair's noise rows so that a few hold most of it; the others come in when they matter."""
        first = self.programs[0]
        load = np.max(first.rows[0] * self.column / self.size[:, None], axis=0, initial=1.0)
        self.noise, self.turn, self.rank = [], [], []
        for program in self.programs:
            rows = program.noise_rows[0] * self.column
            turn, strength, _ = np.linalg.svd(rows / load, full_matrices=False)
            self.noise.append(turn.T @ rows)
            self.turn.append(turn)
            self.rank.append(int(np.sum(strength > 0.05 * strength.max(initial=0.0))))

    def _raise_ranks(self, point: Array, pairs: Sequence[int]) -> bool:
        """Bring in noise rows of which more than the tolerance is missing at a point; say whether there were any."""
        raised, u = False, point / self.column
        for k in pairs:
            left = self.noise[k][self.rank[k] :] @ u
            if left @ left > self.tolerance * float(variance(self.programs[k], point[None])[0]):
                self.rank[k] += int(np.argmax(np.cumsum(left**2) > 0.9 * (left @ left))) + 1
                raised = True
        return raised

    def _common_limits(self) -> tuple[Array, Array]:
        """Rows of the limits and boxes over (u, τ), and their right-hand sides."""
        first = self.programs[0]
        n, m, heated = first.segments, self.size.size, self.heat_leds.size
        matrix = np.zeros((m + heated + 2 * n + 2, n + 2))
        right = np.zeros(matrix.shape[0])
        matrix[:m, : n + 1] = first.rows[0] * self.column / self.size[:, None]
        right[:m] = first.bounds[0] / self.size
        own = first.led == self.heat_leds[:, None]
        caps = first.heat_cap[self.heat_leds]
        matrix[m : m + heated, :n] = np.where(own, first.heat * self.column[:-1], 0.0) / caps[:, None]
        right[m : m + heated] = 1.0
        at, index = m + heated, np.arange(n)
        matrix[at + index, index], matrix[at + index, n] = 1.0, -1.0
        matrix[at + n + index, index] = -1.0
        matrix[-2:, n] = 1.0, -1.0
        right[-2:] = 1.0, -first.time_low[0] / first.time_high[0]
        return matrix, right

    def solve(self, level: float, lines: Array, units: Array, pairs: Sequence[int], low: Array, high: Array) -> Step:
        """Solve at ``level`` for some pairs. ``lines`` (K, 2) holds a_k, b_k; ``units`` n_k, ``low``, ``high`` (K,)."""
        for _ in range(LARGEST_NUMBER_OF_PRICINGS):
            step = self._solve(level, lines, units, pairs, low, high)
            gain = self._gain_outside(step.leaf, level, lines) / level
            if gain.sum() <= self.tolerance:
                if self._raise_ranks(step.point, pairs):
                    continue
                break
            led = self.programs[0].led
            by_led = np.bincount(led, gain, minlength=led.max() + 1)
            chosen = by_led >= max(0.2 * by_led.max(), 1e-300)
            self.columns = np.union1d(self.columns, np.flatnonzero(chosen[led]))
        return step

    def _gain_outside(self, leaf: Leaf, level: float, lines: Array) -> Array:
        """What each column left out could add to the Lagrangian, at most. (n,)"""
        first = self.programs[0]
        cost = leaf.limit @ first.rows[0]
        cost[:-1] += leaf.heat[first.led] * first.heat
        for k in np.flatnonzero((leaf.weight > 0) | (leaf.above > 0) | (leaf.below > 0)):
            p = self.programs[k]
            shot = leaf.above[k] - leaf.below[k] + level * leaf.weight[k] * leaf.share[k] * lines[k, 1]
            cost = cost + shot * p.shot[0] - leaf.weight[k] * p.signal[0]
            cost = cost + level * leaf.weight[k] * (leaf.noise[k] @ p.noise_rows[0])
        gain = np.maximum(-cost[:-1], 0.0) * self.column[:-1]
        gain[self.columns] = 0.0
        return gain

    def _solve(self, level: float, lines: Array, units: Array, pairs: Sequence[int], low: Array, high: Array) -> Step:
        keep = np.append(self.columns, self.column.size - 1)
        limits, right = self._limits
        n = self.column.size - 1
        # Limits, then the boxes of the columns kept, then those of the exposure.
        boxes = limits.shape[0] - 2 * n - 2
        rows = np.concatenate([np.arange(boxes), boxes + self.columns, boxes + n + self.columns, [-2, -1]])
        matrix, right = limits[rows][:, np.append(keep, -1)], right[rows]
        sides, ends = self._sides(low, high)
        blocks, rights, cones = [matrix], [right], [clarabel.NonnegativeConeT(right.size + len(sides))]
        for pair, sign, bound in sides:
            blocks.append(np.append(sign * self.shot[pair, keep] / ends[pair], 0.0)[None])
            rights.append(np.array([sign * bound / ends[pair]]))
        for k in pairs:
            offset, slope = lines[k]
            rank = self.rank[k]
            cone = np.zeros((2 + rank, matrix.shape[1]))
            cone[0, :-1], cone[0, -1] = -self.signal[k, keep] / (level * units[k]), 1.0
            cone[1, :-1] = -slope * self.shot[k, keep] / units[k]
            cone[2:, :-1] = -self.noise[k][:rank, keep] / units[k]
            blocks.append(cone)
            rights.append(np.concatenate([[0.0, offset / units[k]], np.zeros(rank)]))
            cones.append(clarabel.SecondOrderConeT(len(cone)))
        cost = np.append(np.zeros(keep.size), -1.0)
        nothing, whole = Columns(np.zeros((cost.size, cost.size))), Columns(np.concatenate(blocks))
        found = clarabel.DefaultSolver(
            nothing, cost, whole, np.concatenate(rights), cones, solver_settings(1e-8)
        ).solve()
        leaf = self._leaf(np.nan_to_num(np.asarray(found.z)), right.size, level, units, pairs, sides, ends)
        y, u = np.zeros(self.column.size), np.nan_to_num(np.asarray(found.x))
        y[keep] = u[:-1] * self.column[keep]
        return Step(float(u[-1]), feasible(self.programs[0], y[None])[0], leaf)

    def _sides(self, low: Array, high: Array) -> tuple[list[tuple[int, float, float]], Array]:
        """Rows ``sign·s_k·y ≤ sign·bound`` of a cell, and what each pair's rows are divided by."""
        sides = [(k, 1.0, high[k]) for k in np.flatnonzero(np.isfinite(high))]
        sides += [(k, -1.0, low[k]) for k in np.flatnonzero(low > 0)]
        return sides, np.where(np.isfinite(high), np.maximum(high, 1e-300), np.maximum(low, self.shot_unit))

    def _leaf(self, duals: Array, at: int, level: float, units: Array, pairs, sides, ends: Array) -> Leaf:
        """Multipliers in SI units."""
        first, count = self.programs[0], len(self.programs)
        m, heated = self.size.size, self.heat_leds.size
        heat = np.zeros(first.heat_cap.size)
        heat[self.heat_leds] = np.maximum(duals[m : m + heated], 0.0) * level / first.heat_cap[self.heat_leds]
        below, above, weight, share = (np.zeros(count) for _ in range(4))
        for (pair, sign, _), dual in zip(sides, duals[at : at + len(sides)], strict=True):
            (above if sign > 0 else below)[pair] = max(dual, 0.0) * level / ends[pair]
        at += len(sides)
        noise = [np.zeros(len(turn)) for turn in self.turn]
        for k in pairs:
            part = duals[at : at + 2 + self.rank[k]]
            at += part.size
            weight[k] = max(part[0], 0.0) / units[k]
            if weight[k] > 0:
                share[k] = -part[1] / part[0]
                noise[k] = -self.turn[k][:, : self.rank[k]] @ part[2:] / part[0]
        return Leaf(
            level=0.0,
            weight=weight,
            share=share,
            noise=tuple(noise),
            limit=np.maximum(duals[:m], 0.0) * level / self.size,
            heat=heat,
            below=below,
            above=above,
        )
