"""Probability levels of points, kept as the pair (u, 1 - u) so that neither end of (0, 1) loses digits.

It knows nothing of copulas; `copula` and its families work on these pairs throughout.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from outspread.laws.law import Array

#: levels below this are taken for it: an event of this probability is the largest error so made
SMALLEST = 1e-300
LARGEST_SCORE = 37.0  # the normal score of SMALLEST, rounded down


@dataclass(frozen=True)
class Levels:
    """u = `lower` and 1 - u = `upper`, arrays of one shape; the first axis of joint levels is the input."""

    lower: Array
    upper: Array

    @staticmethod
    def pair(lower: npt.ArrayLike, upper: npt.ArrayLike) -> Levels:
        """Levels from both probabilities, each accurate relative to itself; 0 is taken for 1e-300."""
        low, high = np.broadcast_arrays(np.asarray(lower, float), np.asarray(upper, float))
        return Levels(np.clip(low, SMALLEST, 1.0), np.clip(high, SMALLEST, 1.0))

    @staticmethod
    def of(u: npt.ArrayLike) -> Levels:
        """Levels from u alone: near 1 no more is known of 1 - u than u itself tells."""
        values = np.asarray(u, float)
        return Levels.pair(values, 1.0 - values)

    @staticmethod
    def from_log_odds(odds: Array) -> Levels:
        """Levels with log(u / (1 - u)) = odds."""
        tail = np.exp(-np.abs(odds))
        small, large = tail / (1.0 + tail), 1.0 / (1.0 + tail)
        return Levels.pair(np.where(odds < 0, small, large), np.where(odds < 0, large, small))

    @staticmethod
    def from_log(log_lower: Array) -> Levels:
        """Levels with log u = log_lower."""
        return Levels.pair(np.exp(log_lower), -np.expm1(log_lower))

    @staticmethod
    def from_scores(scores: Array) -> Levels:
        """Levels whose standard normal quantile is `scores`."""
        from outspread.laws.functions.normal import normal_cdf

        return Levels.pair(normal_cdf(scores), normal_cdf(-scores))

    @staticmethod
    def stack(parts: list[Levels]) -> Levels:
        """Joint levels from those of each input."""
        return Levels(np.stack([part.lower for part in parts]), np.stack([part.upper for part in parts]))

    def __getitem__(self, which: int | slice) -> Levels:
        return Levels(self.lower[which], self.upper[which])

    def swapped(self) -> Levels:
        """The levels of the complement: u and 1 - u exchanged."""
        return Levels(self.upper, self.lower)

    def log_lower(self) -> Array:
        """log u, relative to itself also where u is nearly 1."""
        return np.asarray(
            np.where(self.upper < 0.5, np.log1p(-np.minimum(self.upper, 0.5)), np.log(self.lower))
        )

    def log_odds(self) -> Array:
        """log(u / (1 - u)), relative to itself also near u = 1/2."""
        middle = np.abs(self.lower - self.upper) < 0.5
        difference = np.where(middle, (self.lower - self.upper) / self.upper, 0.0)
        return np.asarray(np.where(middle, np.log1p(difference), np.log(self.lower) - np.log(self.upper)))

    def scores(self) -> Array:
        """The standard normal quantiles."""
        from outspread.laws.functions.normal import normal_icdf

        tail = normal_icdf(np.minimum(np.minimum(self.lower, self.upper), 0.5))
        return np.asarray(np.where(self.lower <= self.upper, tail, -tail))
