"""Quantiles of a derived law: Newton's method between nodes, kept in a bracket, and the error of the result.

It asks the law for nothing but its cdf, ccdf and pdf with their errors, its nodes and its atoms.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from outspread.laws.law import Array
from outspread.numerics.roots import bracketed_root

if TYPE_CHECKING:
    from outspread.laws.derived import DerivedLaw


class QuantileSolver:
    """`table`: ascending points with cdf and ccdf there, the ends of the support among them."""

    def __init__(self, law: DerivedLaw, table: tuple[Array, Array, Array]):
        self._law, self._table = law, table
        self._atoms, self._support = law.atoms(), law.support()

    def solve(self, p: Array, upper: bool) -> tuple[Array, Array]:
        """Newton's method between nodes, kept in a bracket; what it does not settle is bisected."""
        other = p > 0.5
        target = np.where(other, 1 - p, p)
        from_below = other == upper  # whether the cdf (not the ccdf) is small at the target
        y, left, right = self._start(target, from_below)
        width = right - left
        jump = self._jumps(target, from_below)
        at_jump = ~np.isnan(jump)
        y[at_jump], width[at_jump] = jump[at_jump], 0.0
        open_ = np.flatnonzero(~at_jump)
        for _ in range(14):
            gap, density, doubt = self._gap(y[open_], target[open_], from_below[open_])
            left[open_] = np.where(gap < 0, y[open_], left[open_])
            right[open_] = np.where(gap >= 0, y[open_], right[open_])
            with np.errstate(all="ignore"):
                # Newton's step for the logarithm of the probability, which is nearly straight in the tails
                side = np.where(from_below[open_], 1.0, -1.0)
                ratio = side * gap / target[open_]
                step = -side * np.log1p(ratio) * (1 + ratio) * target[open_] / density
                small = np.abs(step) <= np.maximum(4e-16 * np.abs(y[open_]), 0.05 * doubt / density)
            settled = (small & np.isfinite(step)) | (left[open_] == right[open_])
            width[open_[settled]] = np.abs(step[settled])
            moved = y[open_] + step
            inside = (moved > left[open_]) & (moved < right[open_])
            y[open_] = np.where(
                settled, y[open_], np.where(inside, moved, 0.5 * (left[open_] + right[open_]))
            )
            open_ = open_[~settled]
            if not open_.size:
                break
        if open_.size:
            y[open_], width[open_] = bracketed_root(
                lambda x, i: self._gap(x, target[open_[i]], from_below[open_[i]])[0],
                left[open_],
                right[open_],
            )
            lost = open_[np.isnan(y[open_])]
            y[lost], width[lost] = right[lost], 0.0
        return y, self._quantile_error(y, width, target, from_below)

    def _gap(self, y: Array, target: Array, from_below: npt.NDArray[np.bool_]) -> tuple[Array, Array, Array]:
        """cdf - p (or p' - ccdf), rising with y; the density; the error of the probability."""
        value, doubt = np.empty(y.size), np.empty(y.size)
        for flag, kind in ((True, "cdf"), (False, "ccdf")):
            part = from_below == flag
            if part.any():
                estimate = self._law.estimate(kind, y[part])
                value[part] = (estimate.value - target[part]) * (1 if flag else -1)
                doubt[part] = estimate.error
        density = self._law.pdf(y) if self._law.continuous_mass > 0 else np.zeros_like(y)
        return value, density, doubt

    def _start(self, target: Array, from_below: npt.NDArray[np.bool_]) -> tuple[Array, Array, Array]:
        """A first guess and the nodes around it: cdf(left) < p <= cdf(right)."""
        points, below, above = self._table
        below, above = np.maximum.accumulate(below), np.maximum.accumulate(above[::-1])[::-1]
        right = np.where(
            from_below,
            np.searchsorted(below, target, side="left"),
            points.size - np.searchsorted(above[::-1], target, side="right"),
        )
        right = np.clip(right, 1, points.size - 1)
        left = right - 1
        with np.errstate(all="ignore"):
            tail = (
                np.where(from_below, below[left], above[left]),
                np.where(from_below, below[right], above[right]),
            )
            one, two = (np.log(np.maximum(t, 1e-305)) for t in tail)
            share = (np.log(target) - one) / (two - one)
        share = np.where(np.isfinite(share), np.clip(share, 0.02, 0.98), 0.5)
        return points[left] + share * (points[right] - points[left]), points[left], points[right]

    def _jumps(self, target: Array, from_below: npt.NDArray[np.bool_]) -> Array:
        """The atom at which the cdf jumps over the level, or NaN."""
        atoms = self._atoms
        found = np.full(target.size, np.nan)
        if not atoms.values.size:
            return found
        below, above = self._law.cdf(atoms.values), self._law.ccdf(atoms.values)
        for flag in (True, False):
            part = np.flatnonzero(from_below == flag)
            level = target[part]
            if flag:  # first atom with cdf >= p, if the cdf before it is below p
                index = np.searchsorted(np.maximum.accumulate(below), level, side="left")
            else:  # first atom with ccdf <= q
                falling = np.maximum.accumulate(above[::-1])
                index = atoms.values.size - np.searchsorted(falling, level, side="right")
            inside = index < atoms.values.size
            index = np.minimum(index, atoms.values.size - 1)
            before = below[index] - atoms.masses[index] if flag else above[index] + atoms.masses[index]
            jumped = inside & ((before < level) if flag else (before > level))
            found[part[jumped]] = atoms.values[index[jumped]]
        return found

    def _quantile_error(
        self, y: Array, width: Array, target: Array, from_below: npt.NDArray[np.bool_]
    ) -> Array:
        estimate = [self._law.estimate(kind, y) for kind in ("cdf", "ccdf")]
        doubt = np.where(from_below, estimate[0].error, estimate[1].error)
        density = self._law.pdf(y) if self._law.continuous_mass > 0 else np.zeros_like(y)
        with np.errstate(all="ignore"):
            step = 1.5 * doubt / density + width + 4e-16 * np.abs(y)
        if self._atoms.values.size:
            at_atom = np.isin(y, self._atoms.values)
            step[at_atom] = 0.0
        return self._widened(y, step, target, from_below)

    def _widened(self, y: Array, step: Array, target: Array, from_below: npt.NDArray[np.bool_]) -> Array:
        """Widen the step until the cdf, its error included, is surely below and above the target."""
        scale = max(float(self._law.nodes[-1] - self._law.nodes[0]), 1e-300)
        step = np.where(np.isfinite(step), step, 1e-12 * scale)
        open_ = np.flatnonzero(step > 0)
        for _ in range(40):
            if not open_.size:
                break
            sure = np.ones(open_.size, bool)
            for side in (-1.0, 1.0):
                at = y[open_] + side * step[open_]
                below, above = self._law.estimate("cdf", at), self._law.estimate("ccdf", at)
                small = np.where(from_below[open_], below.value, above.value)
                doubt = np.where(from_below[open_], below.error, above.error)
                rising = np.where(from_below[open_], side, -side)
                passed = (small - target[open_]) * rising >= doubt
                outside = (at <= self._support[0]) | (at >= self._support[1])
                sure &= passed | outside
            open_ = open_[~sure]
            step[open_] *= 2
        return step
