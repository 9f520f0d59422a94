"""Laws whose four moments are computed together, once, when the first of them is asked for.

How they are computed is for each law: by `quantile_moments`, by quadrature over a density, from parts.
"""

from __future__ import annotations

from abc import abstractmethod
from functools import cached_property

from outspread.laws.families.shapes import Moments
from outspread.laws.law import Law


class ComputedMoments(Law):
    """Answers mean, variance, skewness and kurtosis from `compute_moments`."""

    @abstractmethod
    def compute_moments(self) -> Moments:
        """The four; nan where one does not exist, inf where it diverges."""

    @cached_property
    def _moments(self) -> Moments:
        return self.compute_moments()

    def mean(self) -> float:
        return self._moments[0]

    def variance(self) -> float:
        return self._moments[1]

    def skewness(self) -> float:
        return self._moments[2]

    def kurtosis(self) -> float:
        return self._moments[3]
