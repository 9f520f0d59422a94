"""The Gumbel copula: strong dependence among large values; it is an extreme-value copula.

C(u) = exp(-(Σ (-log u_i)^θ)^{1/θ}) (Gumbel 1960, Publications de l'Institut de Statistique de l'Université
de Paris 9, 171–173). Derivatives of the generator by a recursion with positive terms only.
"""

from __future__ import annotations

import numpy as np

from outspread.errors import LawError
from outspread.laws.dependence.archimedean import ArchimedeanCopula, log_shrinkage
from outspread.laws.dependence.levels import Levels
from outspread.laws.law import Array


class GumbelCopula(ArchimedeanCopula):
    """Gumbel copula of `size` inputs with `parameter` θ >= 1. Raises LawError for any other θ.

    The state is log t, t the sum of (-log u)^θ.
    """

    family = "gumbel"

    def __init__(self, size: int, parameter: float):
        if not 1 <= parameter < np.inf:
            raise LawError(f"the Gumbel parameter is {parameter:g}; write a number of at least 1", "gumbel")
        super().__init__(size, parameter)
        self._log_rows = _polynomials(1.0 / self.parameter, size)

    def _log_terms(self, levels: Levels) -> Array:
        """log of (-log u)^θ."""
        return np.asarray(self.parameter * np.log(-levels.log_lower()))

    def _state(self, levels: Levels) -> Array:
        terms = self._log_terms(levels)
        largest = terms.max(axis=0)
        return np.asarray(largest + np.log(np.sum(np.exp(terms - largest), axis=0)))

    def _log_weights(self, order: int, state: Array) -> Array:
        """log of the terms a_j x^j of the polynomial in x = t^(1/θ), shape (order, …)."""
        power = np.arange(1, order + 1).reshape(-1, *([1] * np.ndim(state)))
        return np.asarray(self._log_rows[order].reshape(power.shape) + power * state / self.parameter)

    def _log_ratio(self, order: int, state: Array, at: Levels) -> Array:
        beyond = self._log_terms(at) - state
        stretch = np.logaddexp(0.0, beyond)  # log of (t + s) / t
        alpha = 1.0 / self.parameter
        exponents: Array = alpha * np.arange(1.0, order + 1.0) - order
        shrunk = log_shrinkage(self._log_weights(order, state), exponents, stretch)
        # (t + s)^α - t^α: from the new term itself where that is the larger by far
        x = np.exp(alpha * state)
        near = alpha * stretch < 0.5
        with np.errstate(over="ignore"):
            grown = -at.log_lower() * np.exp(alpha * np.logaddexp(0.0, -beyond)) - x
            added = np.where(near, x * np.expm1(np.where(near, alpha * stretch, 0.0)), grown)
        return np.asarray(shrunk - added)

    def _log_derivative(self, order: int, state: Array) -> Array:
        weights = self._log_weights(order, state)
        largest = weights.max(axis=0)
        polynomial = largest + np.log(np.sum(np.exp(weights - largest), axis=0))
        return np.asarray(polynomial - np.exp(state / self.parameter) - order * state)

    def _log_slope(self, at: Levels) -> Array:
        log_u = at.log_lower()
        theta = self.parameter
        return np.asarray(np.log(theta) + (theta - 1.0) * np.log(-log_u) - log_u)

    def conditional_inverse(self, given: Levels, at: Levels) -> Levels:
        if len(given.lower) != 1:
            return super().conditional_inverse(given, at)
        x = -given.log_lower()[0]
        grown = _added(x, -at.log_lower(), self.parameter)
        stretch = self.parameter * np.log1p(grown / x)
        # log s = log t + log(e^stretch - 1)
        with np.errstate(divide="ignore"):
            log_added = self.parameter * np.log(x) + stretch + np.log(-np.expm1(-stretch))
        return Levels.from_log(-np.exp(log_added / self.parameter))


def _polynomials(alpha: float, size: int) -> tuple[Array, ...]:
    """log of the coefficients a_1 … a_k of (-1)^k ψ^(k)(t) = ψ(t) t^{-k} Σ a_j t^{αj}, for k = 0 … size.

    From k to k + 1: a_j becomes α a_{j-1} + (k - αj) a_j.
    """
    rows = [np.ones(1)]
    for k in range(size):
        old = rows[-1]
        power = np.arange(k + 1)
        new = np.zeros(k + 2)
        new[1:] += alpha * old
        new[: k + 1] += (k - alpha * power) * old
        rows.append(new)
    with np.errstate(divide="ignore"):
        return tuple(np.log(row[1:]) for row in rows)


def _added(x: Array, surprise: Array, theta: float) -> Array:
    """d >= 0 with d + (θ - 1) log(1 + d / x) = surprise: Newton, which rises to the root of a concave
    function from its left."""
    surprise, x = np.broadcast_arrays(surprise, x)
    d = surprise / (1.0 + (theta - 1.0) / x)
    for _ in range(60):
        excess = surprise - d - (theta - 1.0) * np.log1p(d / x)
        step = excess / (1.0 + (theta - 1.0) / (x + d))
        d = np.maximum(d + step, 0.0)
        if np.all(np.abs(step) <= 2e-16 * d):
            break
    return np.asarray(d)
