"""The Frank copula: the same dependence among small and among large values, none in the far tails.

C(u) = -log(1 + Π (e^{-θ u_i} - 1) / (e^{-θ} - 1)^{n-1}) / θ (Frank 1979, Aequationes Mathematicae 19,
194–226). Derivatives of the generator are polylogarithms of whole negative order, whose Eulerian numbers
are all positive. A pair with θ < 0 is a pair with -θ whose second level is turned round.
"""

from __future__ import annotations

import numpy as np

from outspread.errors import LawError
from outspread.laws.dependence.archimedean import ArchimedeanCopula, log_shrinkage
from outspread.laws.dependence.levels import Levels
from outspread.laws.law import Array


class FrankCopula(ArchimedeanCopula):
    """Frank copula of `size` inputs with `parameter` θ: not 0 for a pair, above 0 for more inputs.

    Raises LawError for any other θ. The state is the pair log y, log(1 - y) with y = (1 - e^{-θ}) e^{-t},
    stacked in front.
    """

    family = "frank"

    def __init__(self, size: int, parameter: float):
        if parameter == 0 or not abs(parameter) < np.inf:
            raise LawError(f"the Frank parameter is {parameter:g}; write a number other than 0", "frank")
        if parameter < 0 and size > 2:
            raise LawError(
                f"the Frank parameter is {parameter:g} for {size} inputs; write a number above 0", "frank"
            )
        super().__init__(size, parameter)
        self._theta = abs(self.parameter)
        self._log_scale = float(np.log(-np.expm1(-self._theta)))
        self._log_eulerian = _eulerian(size)

    def _turned(self, at: Levels) -> Levels:
        return at.swapped() if self.parameter < 0 else at

    def conditional(self, given: Levels, at: Levels) -> Levels:
        if not len(given.lower):
            return at
        return self._turned(super().conditional(given, self._turned(at)))

    def conditional_log_density(self, given: Levels, at: Levels) -> Array:
        return super().conditional_log_density(given, self._turned(at))

    def _log_factor(self, at: Levels) -> tuple[Array, Array]:
        """log x and log(1 - x) with x = (1 - e^{-θu}) / (1 - e^{-θ})."""
        theta = self._theta
        log_rest = -theta * at.lower + np.log(-np.expm1(-theta * at.upper)) - self._log_scale
        direct = np.log(-np.expm1(-theta * at.lower)) - self._log_scale
        near = log_rest < -0.7
        return np.where(near, np.log1p(-np.exp(np.where(near, log_rest, -1.0))), direct), log_rest

    def _state(self, levels: Levels) -> Array:
        log_x, log_rest = self._log_factor(levels)
        log_y = self._log_scale + log_x[0]
        log_other = -self._theta * levels.lower[0]
        for k in range(1, len(log_x)):
            log_other = log_other + np.logaddexp(0.0, log_y + log_rest[k] - log_other)
            log_y = log_y + log_x[k]
        return np.stack([log_y, log_other])

    def _log_ratio(self, order: int, state: Array, at: Levels) -> Array:
        log_y, log_other = state
        log_x, log_rest = self._log_factor(at)
        opened = np.logaddexp(0.0, log_y + log_rest - log_other)
        row = self._log_eulerian[order - 1]
        power = np.arange(len(row))
        weights = row.reshape(-1, *([1] * np.ndim(log_y))) + np.multiply.outer(power, log_y)
        shrunk = log_shrinkage(weights, power.astype(float), log_x)
        return np.asarray(log_x + shrunk - order * opened)

    def _log_derivative(self, order: int, state: Array) -> Array:
        log_y, log_other = state
        row = self._log_eulerian[order - 1]
        weights = row.reshape(-1, *([1] * np.ndim(log_y))) + np.multiply.outer(np.arange(len(row)), log_y)
        return np.asarray(log_y + np.log(np.sum(np.exp(weights), axis=0)) - order * log_other)

    def _log_slope(self, at: Levels) -> Array:
        theta = self._theta
        return np.asarray(np.log(theta) - theta * at.lower - np.log(-np.expm1(-theta * at.lower)))

    def conditional_inverse(self, given: Levels, at: Levels) -> Levels:
        order = len(given.lower)
        if order == 0:
            return at
        if order > 1:
            return super().conditional_inverse(given, at)
        turned = self._turned(at)
        log_y, log_other = self._state(given)
        whole = np.logaddexp(log_other, np.log(turned.lower) + log_y)
        log_x = np.log(turned.lower) - whole
        log_rest = np.log(turned.upper) + log_other - whole
        return self._turned(self._back(log_x, log_rest))

    def _back(self, log_x: Array, log_rest: Array) -> Levels:
        """The level whose factor is x, from log x and log(1 - x)."""
        theta = self._theta
        share = np.exp(self._log_scale + log_x)  # 1 - e^{-θu}
        outer = np.logaddexp(0.0, self._log_scale + log_rest + theta)  # θ(1 - u)
        with np.errstate(divide="ignore"):
            direct = -np.log1p(-np.minimum(share, 0.5))
        inner = np.where(share < 0.5, direct, -np.logaddexp(-theta, self._log_scale + log_rest))
        near = outer < 0.5 * theta
        lower = np.where(near, 1.0 - outer / theta, inner / theta)
        return Levels.pair(lower, np.where(near, outer / theta, 1.0 - inner / theta))


def _eulerian(size: int) -> tuple[Array, ...]:
    """log of the Eulerian numbers: row q is the polynomial E_q of Li_{-q}(y) = y E_q(y) / (1 - y)^(q + 1)."""
    rows = [np.ones(1)]
    for q in range(1, size):
        old = rows[-1]
        new = np.zeros(q)
        for j in range(q):
            new[j] = (j + 1.0) * (old[j] if j < len(old) else 0.0)
            new[j] += (q - j) * (old[j - 1] if 0 < j <= len(old) else 0.0)
        rows.append(new)
    return tuple(np.log(row) for row in rows)
