"""What Archimedean copulas have in common: C(u) = ψ(ψ⁻¹(u_1) + … + ψ⁻¹(u_n)), exchangeable.

A conditional distribution is a ratio of two derivatives of ψ (Nelsen 2006, An Introduction to Copulas,
section 4.6; Hofert, Mächler and McNeil 2012, Journal of Multivariate Analysis 110, 133–150, for the
derivatives). A family gives that ratio as a logarithm which is relative to itself also where it nears 1,
so that the conditional and its complement both keep their digits. The families are `clayton`, `gumbel` and
`frank`.
"""

from __future__ import annotations

from abc import abstractmethod
from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from outspread.laws.dependence.copula import Copula
from outspread.laws.dependence.levels import Levels
from outspread.laws.law import Array
from outspread.numerics.roots import bracketed_root

_WIDEST = 690.0  # log-odds of the smallest level


class ArchimedeanCopula(Copula):
    """An Archimedean copula of `size` inputs with one `parameter`.

    `_state` condenses what is given into one array (…) or a few rows (rows, …), in logarithms.
    """

    def __init__(self, size: int, parameter: float):
        self.size, self.parameter = size, float(parameter)

    @abstractmethod
    def _state(self, levels: Levels) -> Array:
        """The sum of the generators' values of levels (k, …) with k >= 1, in the family's own form."""

    @abstractmethod
    def _log_ratio(self, order: int, state: Array, at: Levels) -> Array:
        """log of ψ^(order)(t + ψ⁻¹(at)) / ψ^(order)(t), order >= 1."""

    @abstractmethod
    def _log_derivative(self, order: int, state: Array) -> Array:
        """log |ψ^(order)(t)|, order >= 1, up to a factor that `_log_slope` makes up for."""

    @abstractmethod
    def _log_slope(self, at: Levels) -> Array:
        """log of |dψ⁻¹/du|, with the factor that `_log_derivative` leaves out."""

    def conditional(self, given: Levels, at: Levels) -> Levels:
        order = len(given.lower)
        return at if order == 0 else Levels.from_log(self._log_ratio(order, self._state(given), at))

    def conditional_log_density(self, given: Levels, at: Levels) -> Array:
        order = len(given.lower)
        if order == 0:
            return np.zeros(np.shape(at.lower))
        state, whole = self._state(given), self._state(joined(given, at))
        difference = self._log_derivative(order + 1, whole) - self._log_derivative(order, state)
        return np.asarray(difference + self._log_slope(at))

    def conditional_inverse(self, given: Levels, at: Levels) -> Levels:
        """By bracketing in log-odds; families with a closed form for pairs override it."""
        order = len(given.lower)
        if order == 0:
            return at
        shape = np.shape(at.lower)
        own = self._state(given)
        lead = own.shape[: own.ndim - given.lower.ndim + 1]  # a state may hold several rows
        state = np.broadcast_to(own, (*lead, *shape)).reshape(*lead, -1)
        target = np.broadcast_to(at.log_odds(), shape).ravel()

        def excess(odds: Array, index: npt.NDArray[np.int64]) -> Array:
            log_ratio = self._log_ratio(order, state[..., index], Levels.from_log_odds(odds))
            return np.asarray(Levels.from_log(log_ratio).log_odds() - target[index])

        low, high = np.full(target.size, -_WIDEST), np.full(target.size, _WIDEST)
        root, _ = bracketed_root(excess, low, high)
        missed = np.isnan(root)  # beyond the smallest level
        if missed.any():
            below = excess(low[missed], np.flatnonzero(missed)) > 0
            root[missed] = np.where(below, -_WIDEST, _WIDEST)
        return Levels.from_log_odds(root.reshape(shape))

    def margin(self, order: Sequence[int]) -> Copula:
        return type(self)(len(order), self.parameter)


def joined(given: Levels, at: Levels) -> Levels:
    """The levels given and one more as joint levels (k + 1, …)."""
    shape = np.broadcast_shapes(given.lower.shape[1:], np.shape(at.lower))
    return Levels(
        *(
            np.concatenate([np.broadcast_to(a, (len(a), *shape)), np.broadcast_to(b, (1, *shape))])
            for a, b in ((given.lower, at.lower), (given.upper, at.upper))
        )
    )


def log_shrinkage(log_weights: Array, exponents: Array, step: Array) -> Array:
    """log of Σ w_j exp(x_j s) / Σ w_j with all x_j s <= 0, relative to itself also where it nears 0.

    `log_weights` has shape (terms, …), `exponents` (terms,), `step` (…).
    """
    with np.errstate(all="ignore"):
        weights = np.exp(log_weights - log_weights.max(axis=0))
        weights = weights / weights.sum(axis=0)
        moved = exponents.reshape(-1, *([1] * np.ndim(step))) * step
        lost = np.sum(weights * -np.expm1(moved), axis=0)
        kept = np.sum(weights * np.exp(moved), axis=0)
        return np.asarray(np.where(lost < 0.5, np.log1p(-np.minimum(lost, 0.5)), np.log(kept)))
