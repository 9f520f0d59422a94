"""The Clayton copula: strong dependence among small values.

C(u) = (Σ u_i^{-θ} - n + 1)^{-1/θ} (Clayton 1978, Biometrika 65, 141–151; Cook and Johnson 1981, Journal of
the Royal Statistical Society B 43, 210–218, for n inputs). Its conditionals invert in closed form.
"""

from __future__ import annotations

import numpy as np

from outspread.errors import LawError
from outspread.laws.dependence.archimedean import ArchimedeanCopula
from outspread.laws.dependence.levels import Levels
from outspread.laws.law import Array


class ClaytonCopula(ArchimedeanCopula):
    """Clayton copula of `size` inputs with `parameter` θ > 0. Raises LawError for any other θ.

    The state is log(1 + t), t the sum of u^{-θ} - 1.
    """

    family = "clayton"

    def __init__(self, size: int, parameter: float):
        if not 0 < parameter < np.inf:
            raise LawError(f"the Clayton parameter is {parameter:g}; write a number above 0", "clayton")
        super().__init__(size, parameter)

    def _state(self, levels: Levels) -> Array:
        powers = -self.parameter * levels.log_lower()
        largest = powers.max(axis=0)
        # Σ (e^a - 1) = e^M (Σ e^{a-M} - k e^{-M}), each bracket without loss on its side of M = 1
        with np.errstate(all="ignore"):
            small = np.log1p(np.sum(np.expm1(np.minimum(powers, 1.0)), axis=0))
            spread = np.sum(np.exp(powers - largest), axis=0) - (len(powers) - 1.0) * np.exp(-largest)
            return np.asarray(np.where(largest < 1.0, small, largest + np.log(spread)))

    def _log_added(self, state: Array, at: Levels) -> Array:
        """log of log(1 + s / (1 + t)), s the new term."""
        power = -self.parameter * at.log_lower()
        log_share = power + np.log(-np.expm1(-power)) - state
        return np.asarray(np.logaddexp(0.0, log_share))

    def _log_ratio(self, order: int, state: Array, at: Levels) -> Array:
        return np.asarray(-(1.0 / self.parameter + order) * self._log_added(state, at))

    def _log_derivative(self, order: int, state: Array) -> Array:
        steps = np.sum(np.log1p(self.parameter * np.arange(order)))
        return np.asarray(steps - (1.0 / self.parameter + order) * state)

    def _log_slope(self, at: Levels) -> Array:
        return np.asarray(-(1.0 + self.parameter) * at.log_lower())

    def conditional_inverse(self, given: Levels, at: Levels) -> Levels:
        order = len(given.lower)
        if order == 0:
            return at
        grown = -at.log_lower() / (1.0 / self.parameter + order)
        with np.errstate(divide="ignore"):
            log_added = self._state(given) + grown + np.log(-np.expm1(-grown))
        return Levels.from_log(-np.logaddexp(0.0, log_added) / self.parameter)
