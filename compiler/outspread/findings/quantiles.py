"""Both ends of the interval that leaves a given probability below it, for scanning over that probability.

Exact where quantiles are cheap; for a law whose values are costly, interpolated between the points that
grade it. What is found by scanning is polished with the law itself by `polishing`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from outspread.evidence.stating import Graded, StatesErrors, grid_points, stated
from outspread.laws.law import Array, Law

MARKS_AT_MOST = 2000


@dataclass(frozen=True)
class Quantiles:
    """Ends of intervals of `probability`; `doubt` is how far their lengths may be wrong, relatively;
    `marks` are the atoms and breaks of the law."""

    law: Law
    probability: float
    marks: Array
    doubt: float = 1e-9

    def lower(self, a: Array) -> Array:
        """Quantile at `a`, from the nearer tail; the lower end of the support at 0."""
        a = np.asarray(a, float)
        return np.where(a <= 0.0, self.law.support()[0], self._quantile(a, 1.0 - a))

    def upper(self, a: Array) -> Array:
        """Quantile at `a` + probability; the upper end of the support where nothing is left above."""
        left = np.maximum(1.0 - self.probability - np.asarray(a, float), 0.0)
        return np.where(left <= 0.0, self.law.support()[1], self._quantile(1.0 - left, left))

    def length(self, a: Array) -> Array:
        return self.upper(a) - self.lower(a)

    def _quantile(self, below: Array, above: Array) -> Array:
        with np.errstate(all="ignore"):
            value = np.asarray(self.law.icdf(np.minimum(below, 0.5)), float)
            if bool(np.any(below > 0.5)):
                value = np.where(below > 0.5, self.law.iccdf(np.minimum(above, 0.5)), value)
        return value


@dataclass(frozen=True)
class SketchedQuantiles(Quantiles):
    """The same by cubic interpolation of the quantile function between known points."""

    sketch: tuple[Array, Array, Array, Array] = (np.zeros(0),) * 4  # points, cdf, ccdf, density

    def _quantile(self, below: Array, above: Array) -> Array:
        x, cdf, ccdf, density = self.sketch
        value = _hermite(np.minimum(below, 0.5), cdf, x, density)
        upper = _hermite(np.minimum(above, 0.5), ccdf[::-1], x[::-1], -density[::-1])
        return np.where(below > 0.5, upper, value)


def _hermite(p: Array, knots: Array, x: Array, density: Array) -> Array:
    """x at probability p, with slopes 1/density where the cell stays monotone, else by a straight line."""
    distinct = np.concatenate([[True], np.diff(knots) > 0.0])
    knots, x, density = knots[distinct], x[distinct], density[distinct]
    i = np.clip(np.searchsorted(knots, p, side="right") - 1, 0, knots.size - 2)
    width, rise = knots[i + 1] - knots[i], x[i + 1] - x[i]
    with np.errstate(all="ignore"):
        s = np.clip((p - knots[i]) / width, 0.0, 1.0)
        slopes = [width / density[i + k] / rise for k in (0, 1)]
        tame = (slopes[0] > 0) & (slopes[0] < 3) & (slopes[1] > 0) & (slopes[1] < 3)
        cubic = s * s * (3 - 2 * s) + slopes[0] * s * (1 - s) ** 2 - slopes[1] * s * s * (1 - s)
    return np.asarray(x[i] + rise * np.where(tame, cubic, s))


def quantiles_for(law: Law, probability: float) -> Quantiles:
    """Exact quantiles for a cheap law, sketched ones for a law that computes its values with errors."""
    atoms = law.atoms().values
    marks = np.unique(np.concatenate([atoms[:MARKS_AT_MOST], np.asarray(law.breaks(), float)]))
    if not (isinstance(law, StatesErrors) and isinstance(law, Graded)):
        return Quantiles(law, probability, marks)
    points = grid_points(law)
    ends = np.asarray([end for end in law.support() if np.isfinite(end)], float)
    points = np.unique(np.concatenate([points, ends]))
    columns = [np.asarray(stated(law, kind, points).value, float) for kind in ("cdf", "ccdf", "pdf")]
    # an atom is a vertical step: its point counts twice, before and after
    mass = np.zeros(points.size)
    if atoms.size:
        place = np.minimum(np.searchsorted(atoms, points), atoms.size - 1)
        mass = np.where(atoms[place] == points, law.atoms().masses[place], 0.0)
    stepped = mass > 0.0
    twice = np.repeat(np.arange(points.size), np.where(stepped, 2, 1))
    first = np.concatenate([[False], twice[1:] == twice[:-1]])
    before = np.where(stepped[twice] & ~first, mass[twice], 0.0)
    sketch = (
        points[twice],
        columns[0][twice] - before,
        columns[1][twice] + before,
        columns[2][twice],
    )
    return SketchedQuantiles(law, probability, marks, 1e-3, sketch)
