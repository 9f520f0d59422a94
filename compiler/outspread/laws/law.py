"""What every distribution of one real quantity answers, whether it was given or derived.

Concrete laws: one family a class or table entry in `laws/families*`, and `laws/derived.py` for the
results of routes. Arrays in, arrays of the same shape out; scalars give 0-d results as numpy does.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]

NO_PARAMETERS: Mapping[str, Any] = MappingProxyType({})


@dataclass(frozen=True)
class Atoms:
    """Points that carry probability: `values` ascending, `masses` > 0, `errors` >= |true - stated mass|.

    For a discrete law on infinitely many points: all points whose tail probability exceeds 1e-300.
    """

    values: Array
    masses: Array
    errors: Array

    @staticmethod
    def none() -> Atoms:
        empty = np.zeros(0)
        return Atoms(empty, empty, empty)


@dataclass(frozen=True)
class Estimates:
    """Values with bounds on their absolute errors, arrays of one shape. `rounding`, where known: the part of
    the error that is a rounding of the argument in its last places."""

    value: Array
    error: Array
    rounding: Array | None = None


class Law(ABC):
    """Distribution of a real quantity: a density part (weight `continuous_mass`) and atoms.

    cdf(x) = P(X <= x), ccdf(x) = P(X > x): each accurate relative to itself, in its own tail.
    pdf(x) is the density of the continuous part (its integral is `continuous_mass`, atoms apart).
    icdf(p) = inf{x: cdf(x) >= p}; iccdf(q) = inf{x: ccdf(x) <= q}.
    """

    #: bound on the relative error of cdf, ccdf and pdf wherever they exceed 1e-290
    relative_error: float = 1e-13

    #: bound on the absolute error of cdf and ccdf where they are smaller than the relative one can tell
    floor: float = 0.0

    #: what the law is called in text ("Normal distribution"); "" where it has no name
    name: str = ""
    #: key of the family in the registry and its canonical parameters; "" and empty for any other law
    family: str = ""
    parameters: Mapping[str, Any] = NO_PARAMETERS
    #: E|X|^k is finite for every k below this and for none from it on
    moment_order: float = float("inf")

    @abstractmethod
    def support(self) -> tuple[float, float]:
        """Smallest closed interval that holds all the probability (may be infinite)."""

    @abstractmethod
    def pdf(self, x: npt.ArrayLike) -> Array: ...

    @abstractmethod
    def cdf(self, x: npt.ArrayLike) -> Array: ...

    @abstractmethod
    def ccdf(self, x: npt.ArrayLike) -> Array: ...

    @abstractmethod
    def icdf(self, p: npt.ArrayLike) -> Array: ...

    @abstractmethod
    def iccdf(self, q: npt.ArrayLike) -> Array: ...

    def atoms(self) -> Atoms:
        return Atoms.none()

    @property
    def continuous_mass(self) -> float:
        """Probability of the continuous part: 1 for a continuous law, 0 for a discrete one."""
        return 1.0

    def breaks(self) -> tuple[float, ...]:
        """Interior points (ends of the support apart) where the density has a kink, a jump or a pole."""
        return ()

    def singular_ends(self) -> tuple[bool, bool]:
        """Whether the density is unbounded at the lower and at the upper end of the support."""
        return (False, False)

    def moment_exists(self, order: float) -> bool:
        """Whether the absolute moment E|X|^order is finite."""
        return order <= 0 or order < self.moment_order

    def tail_orders(self) -> tuple[float, float]:
        """`moment_order` of the lower and of the upper tail alone: infinite at a finite end."""
        low, high = self.support()
        infinite = float("inf")
        return (
            self.moment_order if low == -infinite else infinite,
            self.moment_order if high == infinite else infinite,
        )

    def between(self, lower: npt.ArrayLike, upper: npt.ArrayLike) -> Array:
        """P(lower < X <= upper), accurate relative to itself except for cancellation within one tail;
        0 where upper <= lower."""
        lower, upper = np.broadcast_arrays(np.asarray(lower, float), np.asarray(upper, float))
        below, above = self.cdf(lower), self.ccdf(upper)
        left = self.cdf(upper) - below
        right = self.ccdf(lower) - above
        both = np.where(above < 0.5, 1 - below - above, left)
        return np.where(upper > lower, np.maximum(np.where(below < 0.5, both, right), 0.0), 0.0)

    def continuous_between(self, lower: Array, upper: Array) -> Estimates:
        """P(lower < X <= upper) of the continuous part, arrays of one shape. The error is what comes on
        top of `relative_error` and `floor`, which hold for every probability that a tail tells alone."""
        mass = self.between(lower, upper)
        atoms = self.atoms()
        if atoms.values.size:
            before = np.concatenate([[0.0], np.cumsum(atoms.masses)])
            first, last = (np.searchsorted(atoms.values, end, side="right") for end in (lower, upper))
            mass = np.maximum(mass - (before[last] - before[first]), 0.0)
        return Estimates(mass, np.zeros_like(mass))

    def surely_meets(self, lower: float, upper: float) -> bool:
        """Whether an elementary bound shows that P(lower < X < upper) is above 0.1, without working it out.

        False where it does not, or where no such bound is at hand.
        """
        return False

    # Moments: nan = does not exist, inf = diverges.
    @abstractmethod
    def mean(self) -> float: ...

    @abstractmethod
    def variance(self) -> float: ...

    def standard_deviation(self) -> float:
        return float(np.sqrt(self.variance()))

    @abstractmethod
    def skewness(self) -> float: ...

    @abstractmethod
    def kurtosis(self) -> float:
        """Fourth standardised moment (normal: 3)."""
