"""The empirical law of a sample: every value equally likely."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from outspread.errors import LawError
from outspread.laws.families.lattice import PointLaw


def sample_law(values: Sequence[float]) -> PointLaw:
    """Atoms of mass 1/n at the values, equal ones put together. Raises LawError for an empty sample."""
    points = np.asarray(values, float)
    if points.size == 0 or not np.all(np.isfinite(points)):
        raise LawError("the sample is empty or holds something that is not a finite number", "values")
    distinct, counts = np.unique(points, return_counts=True)
    law = PointLaw(distinct, counts / points.size)
    law.name = "Empirical distribution of the sample"
    return law
