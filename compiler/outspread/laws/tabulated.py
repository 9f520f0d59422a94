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
from outspread.numerics.panels import PanelFunction, expand, panels_over

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
    ):
        self._evaluate, self._mass, self._centre = evaluate, mass, centre
        low, high = support
        self.knots = np.array(sorted({k for k in (*knots, low, high) if np.isfinite(k)}))
        # the middle is no knot: no panel may be graded towards it
        below = panels_over([k for k in knots if k < centre], low, centre, centre, scale, (True, False))
        above = panels_over([k for k in knots if k > centre], centre, high, centre, scale, (False, True))
        self._below = expand(lambda y: evaluate("cdf", y), below, relative)
        self._above = expand(lambda y: evaluate("ccdf", y), above, relative)
        start = [*self._below.panels, *self._above.panels]
        self._density = expand(lambda y: evaluate("pdf", y), start, relative, self._room)

    def _room(self, y: Array) -> Array:
        """What a panel of the density may be off by in mass: nothing to be seen in the nearer tail."""
        tail = np.where(y < self._centre, self._below(y).value, self._above(y).value)
        return 1e-14 * tail + 1e-300

    def __call__(self, kind: str, y: Array) -> Estimates:
        if kind == "pdf":
            return self._at_knots(self._density(y), y)
        own, other = (self._below, self._above) if kind == "cdf" else (self._above, self._below)
        near = y <= self._centre if kind == "cdf" else y >= self._centre
        value, error = np.empty(y.size), np.empty(y.size)
        for part, function in ((near, own), (~near, other)):
            if part.any():
                found = function(y[part])
                value[part], error[part] = found.value, found.error
        value[~near] = self._mass - value[~near]
        error[~near] += 2.3e-16 * self._mass
        return Estimates(value, error)

    def _at_knots(self, found: Estimates, y: Array) -> Estimates:
        """A density may jump or have a pole at a knot, which a series beside it cannot say."""
        at: npt.NDArray[np.bool_] = np.isin(y, self.knots)
        if at.any():
            exact = self._evaluate("pdf", y[at])
            found.value[at], found.error[at] = exact.value, exact.error
        return found

    def functions(self) -> tuple[PanelFunction, PanelFunction, PanelFunction]:
        """cdf below the middle, ccdf above it, density."""
        return self._below, self._above, self._density
