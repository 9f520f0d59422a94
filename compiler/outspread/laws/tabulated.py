"""The continuous part of a derived law kept on panels: cdf below the middle, ccdf above it, the density.

Built once from a route's `evaluate`; from then on every value costs a polynomial, with the error of the
values it was built from and that of the series added. What it holds in a panel is audited: the integral of
the density over it must be the change of the cdf.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
import numpy.typing as npt

from outspread.laws.law import Array, Estimates
from outspread.numerics.panels import LEAST, PanelFunction, expand, panels_over

_POORER = 10.0  # than in the body
_AFAR = 1e-40  # tail probability beyond which values are asked of the route, one by one
FADING = 1e-100  # probabilities below this are kept, but not promised to be exact relative to themselves

Evaluate = Callable[[str, Array], Estimates]


class Tabulated:
    """`evaluate(kind, y)` from panels. `knots`: values at which the law may not be smooth; `centre` and
    `scale`: a middle and a width of it; `mass`: probability of the continuous part."""

    def __init__(
        self,
        evaluate: Evaluate,
        support: tuple[float, float],
        knots: Sequence[float],
        centre: float,
        scale: float,
        mass: float,
        relative: float = 1e-13,
        density: bool = True,
        inherited: float = 0.0,
        least: float = LEAST,
    ):
        self._evaluate, self._mass, self._centre, self._inherited = evaluate, mass, centre, inherited
        self._fading, self._trusted = max(FADING, 1e5 * least), 1e-10 * least
        low, high = support
        self.knots = np.array(sorted({k for k in (*knots, low, high) if np.isfinite(k)}))
        # the middle is no knot: no panel may be graded towards it
        below = panels_over([k for k in knots if k < centre], low, centre, centre, scale, (True, False))
        above = panels_over([k for k in knots if k > centre], centre, high, centre, scale, (False, True))
        afar = _AFAR if density else 0.0  # a next step asks for more values there than panels cost
        self._below = expand(lambda y: self._own("cdf", y), below, relative, None, least, afar)
        self._above = expand(lambda y: self._own("ccdf", y), above, relative, None, least, afar)
        self._density: PanelFunction | None = None
        if density:
            (low_start, low_out), (high_start, high_out) = self._below.parted(), self._above.parted()
            self._density = expand(
                lambda y: self._own("pdf", y), [*low_start, *high_start], relative, self._room, least,
                left_out=[*low_out, *high_out],
            )  # fmt: skip

    def _own(self, kind: str, y: Array) -> Estimates:
        """Values with the error of their own computation alone: what is inherited is no noise."""
        found = self._evaluate(kind, y)
        error = np.maximum(found.error - self._inherited * found.value, 0.0)
        return Estimates(found.value, error, found.rounding)

    def _room(self, y: Array) -> Array:
        """What a panel of the density may be off by in mass: nothing to be seen in the nearer tail."""
        tail = np.where(y < self._centre, self._below(y).value, self._above(y).value)
        return np.maximum(1e-14 * tail, self._trusted)

    def __call__(self, kind: str, y: Array) -> Estimates:
        found = self._kept(kind, y)
        return Estimates(found.value, found.error + self._inherited * found.value)

    def _slope(self, y: Array) -> Estimates:
        """The density as the slope of the cdf or of the ccdf, whichever is small."""
        value, error = np.zeros(y.size), np.zeros(y.size)
        near = y < self._centre
        for part, function, sign in ((near, self._below, 1.0), (~near, self._above, -1.0)):
            if part.any():
                found = function.slope(y[part])
                value[part], error[part] = np.maximum(sign * found.value, 0.0), found.error
        return Estimates(value, error)

    def _kept(self, kind: str, y: Array) -> Estimates:
        if kind == "pdf":
            if self._density is None:
                return self._slope(y)
            return self._asked("pdf", y, self._density.afar(y), self._at_knots(self._density(y), y))
        own, other = (self._below, self._above) if kind == "cdf" else (self._above, self._below)
        near = y <= self._centre if kind == "cdf" else y >= self._centre
        value, error = np.empty(y.size), np.empty(y.size)
        for part, function in ((near, own), (~near, other)):
            if part.any():
                found = function(y[part])
                which = kind if function is own else "ccdf" if kind == "cdf" else "cdf"
                found = self._asked(which, y[part], function.afar(y[part]), found)
                value[part], error[part] = found.value, found.error
        value[~near] = self._mass - value[~near]
        error[~near] += 2.3e-16 * self._mass
        return Estimates(value, error)

    def _asked(self, kind: str, y: Array, where: npt.NDArray[np.bool_], found: Estimates) -> Estimates:
        """The values found, with those at `where` from the route itself."""
        if where.any():
            exact = self._own(kind, y[where])
            found.value[where], found.error[where] = exact.value, exact.error
        return found

    def _at_knots(self, found: Estimates, y: Array) -> Estimates:
        """A density may jump or have a pole at a knot, which a series beside it cannot say."""
        at: npt.NDArray[np.bool_] = np.isin(y, self.knots)
        if at.any():
            exact = self._evaluate("pdf", y[at])
            found.value[at], found.error[at] = exact.value, exact.error
        return found

    def bounds(self) -> tuple[float, float]:
        """(relative error, absolute error beside it) of cdf below and ccdf above the middle, for a next step,
        which takes account of roundings itself. Panels with hardly any digits count absolutely."""
        relative, absolute = 0.0, 0.0
        for function in (self._below, self._above):
            shares, sizes = function.firm.T
            body = float(np.max(shares[function.peaks > 1e-3], initial=0.0))
            poor = (shares > _POORER * body) | (function.peaks < self._fading)
            poor &= function.peaks > 0  # where all is 0, what lies nearer to the middle bounds it
            relative = max(relative, float(np.max(shares[~poor], initial=0.0)))
            absolute = max(absolute, float(np.max(sizes[poor], initial=0.0)))
        return relative + self._inherited, absolute + self._fading
