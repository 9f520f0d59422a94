"""A law cut to an interval: what lies outside is taken away, what is left is scaled to probability 1."""

from __future__ import annotations

from functools import cached_property

import numpy as np
import numpy.typing as npt

from outspread.errors import LawError
from outspread.laws.compound.moments import central_moments
from outspread.laws.computed_moments import ComputedMoments
from outspread.laws.families.lattice import PointLaw
from outspread.laws.families.shapes import INF, NAN, Moments
from outspread.laws.law import Array, Atoms, Law


def truncate(base: Law, lower: float | None, upper: float | None) -> Law:
    """`base` given lower <= X <= upper; a limit that is None or beyond the support does not cut.

    Raises LawError where the limits are not in order or leave (almost) no probability.
    """
    low, high = base.support()
    least = low if lower is None else max(low, lower)
    most = high if upper is None else min(high, upper)
    if least == low and most == high:
        return base
    if lower is not None and upper is not None and not lower < upper:
        message = f"upper is {upper:g} and lower is {lower:g}, and upper above lower would be right"
        raise LawError(message, "upper")
    if not base.surely_meets(least, most) and not _mass(base, least, most) > 1e-280:
        blamed = "upper" if lower is None or most < lower else "lower"
        raise LawError(
            f"the limits leave probability {_mass(base, least, most):g}, and limits that meet the"
            f" distribution (from {low:g} to {high:g}) would be right",
            blamed,
        )
    if base.continuous_mass == 0:
        atoms = base.atoms()
        kept = (atoms.values >= least) & (atoms.values <= most)
        law: Law = PointLaw(atoms.values[kept], atoms.masses[kept] / np.sum(atoms.masses[kept]))
        law.relative_error = 2 * base.relative_error + 1e-14
    else:
        law = TruncatedLaw(base, least, most)
    law.name = f"Truncated {base.name[0].lower()}{base.name[1:]}" if base.name else ""
    return law


def _mass(base: Law, lower: float, upper: float) -> float:
    """P(lower <= X <= upper)."""
    return float(base.between(np.nextafter(lower, -INF), upper)) if lower <= upper else 0.0


class TruncatedLaw(ComputedMoments):
    """`base` between `lower` and `upper` (infinite: not cut), divided by its probability `mass` there."""

    def __init__(self, base: Law, lower: float, upper: float):
        self.base, self.lower, self.upper = base, lower, upper
        #: the point up to which probability is taken away: an atom on the limit itself stays
        self._smooth = base.atoms().values.size == 0
        self._open_lower = lower if self._smooth else float(np.nextafter(lower, -INF))
        self.relative_error = 3 * base.relative_error + 1e-14
        # a tail that is cut has all moments
        first, last = base.tail_orders()
        self.moment_order = min(INF if np.isfinite(lower) else first, INF if np.isfinite(upper) else last)

    @cached_property
    def mass(self) -> float:
        return _mass(self.base, self.lower, self.upper)

    def support(self) -> tuple[float, float]:
        return (self.lower, self.upper)

    def pdf(self, x: npt.ArrayLike) -> Array:
        x = np.asarray(x, float)
        inside = (x >= self.lower) & (x <= self.upper)
        return np.asarray(np.where(inside | np.isnan(x), self.base.pdf(x) / self.mass, 0.0))

    def cdf(self, x: npt.ArrayLike) -> Array:
        x = np.asarray(x, float)
        value = self.base.between(self._open_lower, np.minimum(x, self.upper)) / self.mass
        value = np.where(x >= self.upper, 1.0, np.where(x < self.lower, 0.0, value))
        return np.asarray(np.where(np.isnan(x), NAN, np.minimum(value, 1.0)))

    def ccdf(self, x: npt.ArrayLike) -> Array:
        x = np.asarray(x, float)
        value = self.base.between(np.maximum(x, self._open_lower), self.upper) / self.mass
        value = np.where(x >= self.upper, 0.0, np.where(x < self.lower, 1.0, value))
        return np.asarray(np.where(np.isnan(x), NAN, np.minimum(value, 1.0)))

    def icdf(self, p: npt.ArrayLike) -> Array:
        return self._quantile(np.asarray(p, float), False)

    def iccdf(self, q: npt.ArrayLike) -> Array:
        return self._quantile(np.asarray(q, float), True)

    def _quantile(self, p: Array, upper: bool) -> Array:
        """Through the base's quantile of the probability in its smaller tail, then polished."""
        shape = p.shape
        p = np.atleast_1d(np.where((p >= 0) & (p <= 1), p, NAN))
        below, above = (1 - p, p) if upper else (p, 1 - p)
        before = self.base.cdf(self._open_lower)
        after = self.base.ccdf(self.upper)
        left, right = before + below * self.mass, after + above * self.mass
        with np.errstate(all="ignore"):
            x = np.full(p.shape, NAN)
            near = left < right
            x[near] = self.base.icdf(np.clip(left[near], 0.0, 1.0))
            far = right <= left
            x[far] = self.base.iccdf(np.clip(right[far], 0.0, 1.0))
            x = np.clip(x, self.lower, self.upper)
            if self._smooth:
                x = self._polish(x, p, upper)
        ends = (self.upper, self.lower) if upper else (self.lower, self.upper)
        x = np.where(p == 0, ends[0], np.where(p == 1, ends[1], x))
        return np.asarray(np.where(np.isnan(p), NAN, x).reshape(shape))

    def _polish(self, x: Array, p: Array, upper: bool) -> Array:
        """Newton's method: near a cut the base's own quantile has lost the distance to the cut."""
        small = p <= 0.5
        tail = np.where(small, p, 1 - p)
        pending = np.flatnonzero(~np.isnan(x))
        for _ in range(4):
            at, goal = x[pending], tail[pending]
            error = np.empty(pending.size)
            from_above = small[pending] == upper
            error[from_above] = goal[from_above] - self.ccdf(at[from_above])
            error[~from_above] = self.cdf(at[~from_above]) - goal[~from_above]
            new = at - error / self.pdf(at)
            # only where the tail is far from its goal, and the step stays inside
            use = np.isfinite(new) & (new >= self.lower) & (new <= self.upper)
            use &= np.abs(error) > 2 * self.relative_error * goal
            if not np.any(use):
                break
            pending = pending[use]
            x[pending] = new[use]
        return x

    def between(self, lower: npt.ArrayLike, upper: npt.ArrayLike) -> Array:
        low = np.maximum(np.asarray(lower, float), self._open_lower)
        high = np.minimum(np.asarray(upper, float), self.upper)
        return np.asarray(np.minimum(self.base.between(low, high) / self.mass, 1.0))

    def atoms(self) -> Atoms:
        atoms = self.base.atoms()
        kept = (atoms.values >= self.lower) & (atoms.values <= self.upper)
        return Atoms(atoms.values[kept], atoms.masses[kept] / self.mass, atoms.errors[kept] * 3 / self.mass)

    @property
    def continuous_mass(self) -> float:
        return 1.0 if self._smooth else float(1 - np.sum(self.atoms().masses))

    def breaks(self) -> tuple[float, ...]:
        return tuple(point for point in self.base.breaks() if self.lower < point < self.upper)

    def singular_ends(self) -> tuple[bool, bool]:
        low, high = self.base.support()
        first, last = self.base.singular_ends()
        return (first and self.lower == low, last and self.upper == high)

    def compute_moments(self) -> Moments:
        return central_moments(self)
