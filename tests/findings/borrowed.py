"""scipy's distributions as laws, for tests that need a law whose figures are known elsewhere."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

from outspread.laws.law import Array, Atoms, Law


class Borrowed(Law):
    """A frozen scipy distribution, continuous, or discrete with `atoms` given."""

    def __init__(
        self,
        frozen: Any,
        breaks: tuple[float, ...] = (),
        singular: tuple[bool, bool] = (False, False),
        atoms: tuple[float, ...] = (),
        relative_error: float = 1e-13,
    ):
        self.frozen, self._breaks, self._singular = frozen, breaks, singular
        self.relative_error = relative_error
        self._atoms = np.asarray(atoms, float)

    def support(self) -> tuple[float, float]:
        low, high = self.frozen.support()
        return float(low), float(high)

    def pdf(self, x: npt.ArrayLike) -> Array:
        return np.asarray(self.frozen.pdf(x))

    def cdf(self, x: npt.ArrayLike) -> Array:
        return np.asarray(self.frozen.cdf(x))

    def ccdf(self, x: npt.ArrayLike) -> Array:
        return np.asarray(self.frozen.sf(x))

    def icdf(self, p: npt.ArrayLike) -> Array:
        return np.asarray(self.frozen.ppf(p), float)

    def iccdf(self, q: npt.ArrayLike) -> Array:
        return np.asarray(self.frozen.isf(q), float)

    def atoms(self) -> Atoms:
        masses = self.frozen.pmf(self._atoms) if self._atoms.size else self._atoms
        return Atoms(self._atoms, masses, 1e-15 * masses)

    @property
    def continuous_mass(self) -> float:
        return 0.0 if self._atoms.size else 1.0

    def breaks(self) -> tuple[float, ...]:
        return self._breaks

    def singular_ends(self) -> tuple[bool, bool]:
        return self._singular

    def mean(self) -> float:
        return float(self.frozen.mean())

    def variance(self) -> float:
        return float(self.frozen.var())

    def skewness(self) -> float:
        return float(self.frozen.stats("s"))

    def kurtosis(self) -> float:
        return float(self.frozen.stats("k")) + 3.0
