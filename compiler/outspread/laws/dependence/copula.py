"""What every copula answers: density, conditional distributions, the Rosenblatt transform and its inverse.

The families are in `elliptical` and `archimedean`; how strong a dependence is, is `strength`'s.

Rosenblatt transform: w_k = C(u_k | u_1 … u_{k-1}) turns dependent levels into independent ones
(Rosenblatt 1952, Annals of Mathematical Statistics 23, 470–472).
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Callable, Sequence

import numpy as np

from outspread.laws.dependence.levels import Levels
from outspread.laws.law import Array
from outspread.numerics.quadrature import Index


class Copula(ABC):
    """Joint distribution of `size` uniform levels.

    Joint levels have the shape (size, …), those given to a conditional (k, …) with 0 <= k < size: the first
    k inputs; `at` has the shape (…) and belongs to input k. Every method takes and gives arrays.
    """

    family: str = ""
    size: int

    @abstractmethod
    def conditional(self, given: Levels, at: Levels) -> Levels:
        """C(u_k | u_0 … u_{k-1}) and its complement, each relative to itself."""

    @abstractmethod
    def conditional_inverse(self, given: Levels, at: Levels) -> Levels:
        """The levels u_k whose conditional probability given u_0 … u_{k-1} is `at`."""

    @abstractmethod
    def conditional_log_density(self, given: Levels, at: Levels) -> Array:
        """Logarithm of the derivative of C(u_k | u_0 … u_{k-1}) with respect to u_k."""

    @abstractmethod
    def margin(self, order: Sequence[int]) -> Copula:
        """The copula of the inputs `order` (two or more positions), in that order."""

    def following_score(self, scores: Array) -> Callable[[Array, Index], Array]:
        """For integrals over a pair: the second normal score, given the first scores (N,).

        The result takes normal scores of the conditional level and which first score each belongs to.
        """
        first = Levels.from_scores(scores)

        def following(conditional: Array, owner: Index) -> Array:
            given = Levels(first.lower[None, owner], first.upper[None, owner])
            return self.conditional_inverse(given, Levels.from_scores(conditional)).scores()

        return following

    def log_density(self, levels: Levels) -> Array:
        """Logarithm of the copula density c(u), shape (…)."""
        parts = [self.conditional_log_density(levels[:k], levels[k]) for k in range(1, self.size)]
        return np.asarray(np.sum(parts, axis=0))

    def density(self, levels: Levels) -> Array:
        """Copula density c(u), shape (…)."""
        return np.asarray(np.exp(self.log_density(levels)))

    def rosenblatt(self, levels: Levels) -> Levels:
        """Independent levels w of shape (size, …) from dependent ones u."""
        return Levels.stack([self.conditional(levels[:k], levels[k]) for k in range(self.size)])

    def inverse_rosenblatt(self, independent: Levels) -> Levels:
        """Dependent levels u of shape (size, …) from independent ones w."""
        lower, upper = np.empty_like(independent.lower), np.empty_like(independent.upper)
        for k in range(self.size):
            found = self.conditional_inverse(Levels(lower[:k], upper[:k]), independent[k])
            lower[k], upper[k] = found.lower, found.upper
        return Levels(lower, upper)


class IndependenceCopula(Copula):
    """The product copula: the limit of every family here as its dependence fades."""

    family = "independence"

    def __init__(self, size: int):
        self.size = size

    def conditional(self, given: Levels, at: Levels) -> Levels:
        return at

    def conditional_inverse(self, given: Levels, at: Levels) -> Levels:
        return at

    def conditional_log_density(self, given: Levels, at: Levels) -> Array:
        return np.zeros(np.shape(at.lower))

    def margin(self, order: Sequence[int]) -> Copula:
        return IndependenceCopula(len(order))
